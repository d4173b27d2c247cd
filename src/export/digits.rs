//! Numbers as text: the shortest that reads back as the same number, and lists of counts.

/// Appends the shortest text that reads back as the same number; of two that are equally near, the one farther from 0, as the
/// standard library does.
pub fn push_number(out: &mut String, v: f64) {
    let magnitude = v.abs();
    let plain = magnitude == 0.0 || (1e-4..1e15).contains(&magnitude);
    if may_be_halfway(magnitude) {
        return push_standard(out, v, plain);
    }
    let mut buffer = zmij::Buffer::new();
    let text = buffer.format(v);
    // The two ways of writing, plain and with a power of ten, part at other magnitudes there, and whole numbers end in .0.
    match (plain, text.split_once("e+")) {
        (true, None) if !text.contains('e') => out.push_str(text.strip_suffix(".0").unwrap_or(text)),
        (false, None) if text.contains('e') => out.push_str(text),
        (false, Some((digits, power))) => {
            out.push_str(digits);
            out.push('e');
            out.push_str(power);
        }
        _ => push_standard(out, v, plain),
    }
}

fn push_standard(out: &mut String, v: f64, plain: bool) {
    if plain {
        push(out, format_args!("{v}"));
    } else {
        push(out, format_args!("{v:e}"));
    }
}

/// Whether a number may lie exactly between two texts of 16 or 17 digits: it has one digit more itself, and that is a 5. With `f`
/// bits behind the point it has as many decimals, the last of them a 5.
fn may_be_halfway(magnitude: f64) -> bool {
    /// From here on numbers need not have bits behind the point.
    const LARGE: f64 = 1e15;
    if magnitude == 0.0 || magnitude >= LARGE || !magnitude.is_normal() {
        return magnitude != 0.0;
    }
    let bits = magnitude.to_bits();
    let power = i64::from((bits >> 52) as u32) - 1023;
    let decimals = 52 - power - i64::from((bits & ((1 << 52) - 1) | 1 << 52).trailing_zeros());
    // Decimal power of the leading digit, or one less.
    let leading = (power * 30103).div_euclid(100_000);
    (15..=17).contains(&(leading + decimals))
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

    /// 94.208...125 has 17 digits, and the two of 16 beside it are equally near.
    #[test]
    fn halfway_numbers_are_as_the_standard_library_writes_them() {
        assert_eq!(text(f64::from(94.209015f32)), "94.20901489257813");
        assert_eq!(text(f64::from(157.19229f32)), "157.19229125976563");
        let mut state = 1u64;
        for _ in 0..1_000_000 {
            // A linear congruential generator (Knuth's MMIX constants, value from memory).
            state = state.wrapping_mul(6_364_136_223_846_793_005).wrapping_add(1_442_695_040_888_963_407);
            // Single precision about 1, and numbers with few bits of any magnitude that a catalogue has.
            let single = f64::from(f32::from_bits(0x3000_0000 + (state >> 32) as u32 % 0x2000_0000));
            let few = (state >> 20) as f64 * 2f64.powi((state % 90) as i32 - 80);
            assert_eq!((text(single), text(few)), (standard(single), standard(few)));
        }
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
            for v in [f64::from_bits(bits), f64::from(float), 2f64.powi(power), near.exp2(), near.round().exp2() * 3.0, 10f64.powf(near), f64::from_bits(bits >> 2 | 0x3000 << 48) ] {
                if v.is_finite() {
                    prop_assert_eq!(text(v), standard(v));
                }
            }
        }
    }
}
