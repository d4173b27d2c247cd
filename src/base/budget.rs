//! The memory a run may use: what is large is reserved before it is allocated, and refused with figures where it does not fit.

use std::sync::atomic::{AtomicU64, Ordering};

use crate::base::error::{Error, Result};

/// A limit in bytes, and how much of it is taken.
#[derive(Debug)]
pub struct Budget {
    limit: AtomicU64,
    taken: AtomicU64,
}

/// Bytes taken from a [`Budget`], given back when dropped.
#[derive(Debug)]
pub struct Reserved<'a> {
    budget: &'a Budget,
    bytes: u64,
}

impl Budget {
    /// Nothing is taken yet.
    pub fn new(limit: u64) -> Budget {
        Budget { limit: AtomicU64::new(limit), taken: AtomicU64::new(0) }
    }

    /// The limit in bytes.
    pub fn limit(&self) -> u64 {
        self.limit.load(Ordering::Relaxed)
    }

    /// Raises the limit by what was taken elsewhere and is free again.
    pub fn grow(&self, bytes: u64) {
        self.limit.fetch_add(bytes, Ordering::Relaxed);
    }

    /// Bytes that are not taken.
    pub fn left(&self) -> u64 {
        self.limit().saturating_sub(self.taken.load(Ordering::Relaxed))
    }

    /// Takes bytes where so many are left.
    pub fn offer(&self, bytes: u64) -> Option<Reserved<'_>> {
        let fits = |taken: u64| taken.checked_add(bytes).filter(|&sum| sum <= self.limit());
        self.taken.fetch_update(Ordering::Relaxed, Ordering::Relaxed, fits).ok().map(|_| Reserved { budget: self, bytes })
    }

    /// Takes bytes for what cannot be done without.
    ///
    /// # Errors
    /// `Limit` with the figures where they are not left; `what` says what they are for, `hint` what to change besides the limit.
    pub fn reserve(&self, bytes: u64, what: &str, hint: &str) -> Result<Reserved<'_>> {
        self.offer(bytes).ok_or_else(|| {
            let need = self.taken.load(Ordering::Relaxed).saturating_add(bytes);
            let more = rounded_up(need.saturating_sub(self.limit()));
            let or = if hint.is_empty() { "" } else { ", or " };
            Error::limit("cannot go on within the memory budget")
                .item(what)
                .expected(format!("at most {}", size(self.limit())))
                .found(format!("a need of {}", size(need)))
                .hint(format!("give {more} more with --memory{or}{hint}"))
        })
    }
}

impl Reserved<'_> {
    /// How many.
    pub fn bytes(&self) -> u64 {
        self.bytes
    }
}

impl Drop for Reserved<'_> {
    fn drop(&mut self) {
        self.budget.taken.fetch_sub(self.bytes, Ordering::Relaxed);
    }
}

/// A number of bytes for reading.
pub fn size(bytes: u64) -> String {
    const UNITS: [&str; 5] = ["KiB", "MiB", "GiB", "TiB", "PiB"];
    if bytes < 1024 {
        return format!("{bytes} B");
    }
    let mut value = bytes as f64 / 1024.0;
    let mut unit = 0;
    while value >= 1024.0 && unit + 1 < UNITS.len() {
        value /= 1024.0;
        unit += 1;
    }
    format!("{value:.1} {}", UNITS[unit])
}

/// The same in whole MiB or GiB that are not less, as the option takes it.
pub fn rounded_up(bytes: u64) -> String {
    let mib = bytes.div_ceil(1 << 20).max(1);
    if mib >= 10 << 10 { format!("{}GiB", mib.div_ceil(1 << 10)) } else { format!("{mib}MiB") }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn what_is_taken_comes_back() {
        let b = Budget::new(100);
        let first = b.offer(60).expect("fits");
        assert!(b.offer(41).is_none());
        assert_eq!((first.bytes(), b.left()), (60, 40));
        let e = b.reserve(50, "patches", "a smaller --max-object-cells").expect_err("too much");
        let told = e.to_string();
        assert!(told.contains("at most 100 B") && told.contains("a need of 110 B") && told.contains("1MiB more with --memory"), "{told}");
        drop(first);
        assert_eq!(b.left(), 100);
    }

    #[test]
    fn sizes_are_rounded_up_for_the_option() {
        assert_eq!(
            (rounded_up(1).as_str(), rounded_up(200 << 20).as_str(), rounded_up((12 << 30) + 1).as_str()),
            ("1MiB", "200MiB", "13GiB")
        );
        assert_eq!(size(1536), "1.5 KiB");
    }
}
