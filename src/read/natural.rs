//! Order of names in which numbers count as numbers: `step_9` before `step_10`.

use std::cmp::Ordering;

/// Compares two names.
pub(super) fn compare(a: &str, b: &str) -> Ordering {
    let (mut x, mut y) = (a.as_bytes(), b.as_bytes());
    loop {
        match (x.first(), y.first()) {
            (Some(p), Some(q)) if p.is_ascii_digit() && q.is_ascii_digit() => {
                let (m, n) = (digits(x), digits(y));
                let order = significant(&x[..m]).len().cmp(&significant(&y[..n]).len());
                let order = order.then_with(|| significant(&x[..m]).cmp(significant(&y[..n])));
                if order != Ordering::Equal {
                    return order;
                }
                (x, y) = (&x[m..], &y[n..]);
            }
            (Some(p), Some(q)) if p == q => (x, y) = (&x[1..], &y[1..]),
            // Names that differ by zeros alone still have an order.
            (None, None) => return a.cmp(b),
            (p, q) => return p.cmp(&q),
        }
    }
}

fn digits(text: &[u8]) -> usize {
    text.iter().take_while(|b| b.is_ascii_digit()).count()
}

fn significant(digits: &[u8]) -> &[u8] {
    &digits[digits.iter().take_while(|&&b| b == b'0').count()..]
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn numbers_count_as_numbers() {
        let mut names = ["s10", "s9", "s009", "s", "s9b", "t1", "s1_10", "s1_9", "s18446744073709551616", "s0"];
        names.sort_by(|a, b| compare(a, b));
        assert_eq!(names, ["s", "s0", "s1_9", "s1_10", "s009", "s9", "s9b", "s10", "s18446744073709551616", "t1"]);
    }
}
