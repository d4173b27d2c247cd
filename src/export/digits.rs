//! Numbers as text: the shortest that reads back as the same number, and lists of counts.

/// Appends the shortest text that reads back as the same number.
pub fn push_number(out: &mut String, v: f64) {
    let magnitude = v.abs();
    let plain = magnitude == 0.0 || (1e-4..1e15).contains(&magnitude);
    let mut buffer = zmij::Buffer::new();
    let text = buffer.format(v);
    // The two ways of writing, plain and with a power of ten, part at other magnitudes there, and whole numbers end in .0.
    match (plain, text.contains('e')) {
        (true, false) => out.push_str(text.strip_suffix(".0").unwrap_or(text)),
        (false, true) => out.push_str(text),
        (true, true) => push(out, format_args!("{v}")),
        (false, false) => push(out, format_args!("{v:e}")),
    }
}

/// Appends a whole number.
pub fn push_integer(out: &mut String, v: i64) {
    if v < 0 {
        out.push('-');
    }
    push_count(out, v.unsigned_abs());
}

/// Appends counts separated by spaces.
pub fn push_counts(out: &mut String, counts: impl Iterator<Item = u64>) {
    for (i, n) in counts.enumerate() {
        if i > 0 {
            out.push(' ');
        }
        push_count(out, n);
    }
}

fn push_count(out: &mut String, n: u64) {
    if n < 10 {
        return out.push(char::from(b'0' + n as u8));
    }
    push(out, format_args!("{n}"));
}

fn push(out: &mut String, text: std::fmt::Arguments<'_>) {
    // Writing into a String cannot fail.
    let _ = std::fmt::Write::write_fmt(out, text);
}

#[cfg(test)]
mod tests {
    use super::*;
    use proptest::prelude::*;

    fn text(v: f64) -> String {
        let mut out = String::new();
        push_number(&mut out, v);
        out
    }

    /// What the standard library writes, which is held to be the shortest.
    fn standard(v: f64) -> String {
        let magnitude = v.abs();
        if magnitude == 0.0 || (1e-4..1e15).contains(&magnitude) { format!("{v}") } else { format!("{v:e}") }
    }

    #[test]
    fn numbers_read_back_exactly() {
        for v in [0.1, -0.0, 1.0 / 3.0, 1e-300, 6.02e23, -12345.678, 2.5e-5] {
            assert_eq!(text(v).parse::<f64>().unwrap(), v);
            assert_eq!(text(v).parse::<f64>().unwrap().to_bits(), v.to_bits());
        }
    }

    #[test]
    fn the_ways_of_writing_part_where_they_should() {
        for (v, expected) in [
            (0.0, "0"),
            (-0.0, "-0"),
            (1.0, "1"),
            (-1e-4, "-0.0001"),
            (9.999999999999999e-5, "9.999999999999999e-5"),
            (1.5e-7, "1.5e-7"),
            (123456789012345.0, "123456789012345"),
            (1e15, "1e15"),
            (1234567890123456.0, "1.234567890123456e15"),
            (1e16, "1e16"),
            (5e-324, "5e-324"),
            (f64::MAX, "1.7976931348623157e308"),
        ] {
            assert_eq!(text(v), expected);
        }
    }

    #[test]
    fn whole_numbers_and_counts() {
        let mut out = String::new();
        push_integer(&mut out, i64::MIN);
        out.push(' ');
        push_counts(&mut out, [0, 9, 10, u64::MAX].into_iter());
        assert_eq!(out, "-9223372036854775808 0 9 10 18446744073709551615");
    }

    proptest! {
        #![proptest_config(ProptestConfig::with_cases(4096))]
        #[test]
        fn as_the_standard_library_writes_them(bits in any::<u64>(), float in any::<f32>(), power in -1074i32..1024, near in -30.0f64..30.0) {
            for v in [f64::from_bits(bits), f64::from(float), 2f64.powi(power), near.exp2(), near.round().exp2() * 3.0, 10f64.powf(near)] {
                if v.is_finite() {
                    prop_assert_eq!(text(v), standard(v));
                }
            }
        }
    }
}
