//! Sums that do not depend on the order of addition, row sums in a fixed order, cosine histograms, quantile histograms.

use std::collections::BTreeMap;

use crate::base::real::Real;

/// Bins of a cosine histogram over [-1, 1].
pub const COSINE_BINS: usize = 20;

/// A power-of-two scale that turns values of magnitude at most `bound` into 62-bit integers.
///
/// Integer sums are exact, so a sum over an object is the same for any order of its cells: any number of
/// threads, any block thickness, any number of processes. Values keep their full double precision down to 2^-9 of the
/// bound; smaller ones are rounded to bound * 2^-62.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Scale {
    up: f64,
    down: f64,
}

impl Scale {
    /// A scale for values of magnitude at most `bound` (with a factor 4 to spare); 1 where the bound is 0.
    pub fn for_bound(bound: f64) -> Scale {
        let exponent = match libm::frexp(bound) {
            _ if !(bound > 0.0 && bound.is_finite()) => 0,
            (0.5, e) => e - 1,
            (_, e) => e,
        };
        let e = (60 - exponent).clamp(-1000, 1000);
        Scale { up: 2f64.powi(e), down: 2f64.powi(-e) }
    }

    /// The scaled value, truncated towards zero.
    #[inline(always)]
    pub fn fix(self, v: f64) -> i128 {
        ((v * self.up) as i64) as i128
    }

    /// Back to a number.
    pub fn value(self, sum: i128) -> f64 {
        sum as f64 * self.down
    }
}

/// Sum of a row in f64, in a fixed order that vectorises.
#[multiversion::multiversion(targets("x86_64+avx2"))]
pub fn row_sum<T: Real>(row: &[T]) -> f64 {
    let mut lanes = [0.0f64; 8];
    let (chunks, rest) = row.as_chunks::<8>();
    for c in chunks {
        for k in 0..8 {
            lanes[k] += c[k].wide();
        }
    }
    for (k, v) in rest.iter().enumerate() {
        lanes[k] += v.wide();
    }
    folded(lanes)
}

/// Sum of squares of a row in f64, fixed order.
#[multiversion::multiversion(targets("x86_64+avx2"))]
pub fn row_square_sum<T: Real>(row: &[T]) -> f64 {
    let mut lanes = [0.0f64; 8];
    let (chunks, rest) = row.as_chunks::<8>();
    for c in chunks {
        for k in 0..8 {
            let v = c[k].wide();
            lanes[k] += v * v;
        }
    }
    for (k, v) in rest.iter().enumerate() {
        lanes[k] += v.wide() * v.wide();
    }
    folded(lanes)
}

fn folded(lanes: [f64; 8]) -> f64 {
    ((lanes[0] + lanes[4]) + (lanes[2] + lanes[6])) + ((lanes[1] + lanes[5]) + (lanes[3] + lanes[7]))
}

/// Sum over a row of value times weight, in f64 and in order.
pub fn weighted_sum<T: Real>(row: &[T], weights: &[f64]) -> f64 {
    row.iter().zip(weights).map(|(v, w)| v.wide() * w).sum()
}

/// Sum over a row of squared value times weight.
pub fn weighted_square_sum<T: Real>(row: &[T], weights: &[f64]) -> f64 {
    row.iter().zip(weights).map(|(v, w)| v.wide() * v.wide() * w).sum()
}

/// Sum, sum of squares and extremes of a row.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct RowStats {
    /// Sum, in f64.
    pub sum: f64,
    /// Sum of squares, in f64.
    pub square_sum: f64,
    /// Smallest value.
    pub min: f64,
    /// Largest value.
    pub max: f64,
}

/// All of [`RowStats`] in one sweep, in a fixed order. Values that are not finite make the sum not finite.
///
/// # Panics
/// When the row is empty.
#[multiversion::multiversion(targets("x86_64+avx2"))]
pub fn row_stats<T: Real>(row: &[T]) -> RowStats {
    RowStats {
        sum: row_sum(row),
        square_sum: row_square_sum(row),
        min: extreme(row, |v, kept| v < kept),
        max: extreme(row, |v, kept| v > kept),
    }
}

/// Largest value of a row.
///
/// # Panics
/// When the row is empty.
#[multiversion::multiversion(targets("x86_64+avx2"))]
pub fn row_max<T: Real>(row: &[T]) -> f64 {
    extreme(row, |v, kept| v > kept)
}

/// The value no other one `beats`. Lanes, because a single running extreme is a chain of dependent steps.
#[inline(always)]
fn extreme<T: Real>(row: &[T], beats: impl Fn(T, T) -> bool) -> f64 {
    let mut lanes = [row[0]; 16];
    let (chunks, rest) = row.as_chunks::<16>();
    for c in chunks {
        for k in 0..16 {
            if beats(c[k], lanes[k]) {
                lanes[k] = c[k];
            }
        }
    }
    let kept = rest.iter().chain(&lanes).fold(row[0], |kept, &v| if beats(v, kept) { v } else { kept });
    kept.wide()
}

/// Scale of the exact cosine sums: a row of up to 2^14 cells fits 64 bits.
const COSINE_SCALE: f64 = (1u64 << 48) as f64;

/// Cosine statistics of a set of cells; counts and sums are exact integers, independent of the order of cells.
#[derive(Debug, Clone, PartialEq, Eq, Default)]
pub struct Cosine {
    /// Cells where both vectors are non-zero.
    pub defined: u64,
    sum: i128,
    abs_sum: i128,
    /// Sums of the weights of all and of the aligned cells, where cells have weights.
    weights: Option<Box<[i128; 2]>>,
    /// Cells with |cos| > 0.9.
    pub aligned: u64,
    /// Cells a bin: 20 equal bins over [-1, 1].
    pub bins: [u64; COSINE_BINS],
}

impl Cosine {
    /// Adds the cosines of consecutive cells; NaN marks a cell where the cosine is undefined.
    pub fn add<T: Real>(&mut self, row: &[T]) {
        // Slot 20 takes undefined cells; four tables keep successive increments independent.
        let mut counts = [[0u32; SLOTS]; 4];
        let mut slots = [0u64; CHUNK];
        for part in row.chunks(CHUNK) {
            let slots = &mut slots[..part.len()];
            let (sum, abs_sum, aligned) = digest(part, slots);
            self.sum += i128::from(sum);
            self.abs_sum += i128::from(abs_sum);
            self.aligned += u64::from(aligned);
            let (quads, rest) = slots.as_chunks::<4>();
            for quad in quads {
                for k in 0..4 {
                    counts[k][quad[k] as usize % SLOTS] += 1;
                }
            }
            for s in rest {
                counts[0][*s as usize % SLOTS] += 1;
            }
        }
        for b in 0..COSINE_BINS {
            let n: u64 = counts.iter().map(|s| u64::from(s[b])).sum();
            self.bins[b] += n;
            self.defined += n;
        }
    }

    /// As [`Cosine::add`] for a handful of cells, without its tables.
    pub fn add_few<T: Real>(&mut self, row: &[T]) {
        for &c in row {
            let slot = slot(c) as usize;
            if slot < COSINE_BINS {
                self.bins[slot] += 1;
                self.defined += 1;
                let sum = fixed(c.wide());
                self.sum += i128::from(sum);
                self.abs_sum += i128::from(sum.abs());
                self.aligned += u64::from(c.abs().wide() > 0.9);
            }
        }
    }

    /// As [`Cosine::add_few`] for cells of unequal volume: means are over volume, bins count cells. Weights lie between 0 and 1.
    pub fn add_weighted<T: Real>(&mut self, row: &[T], weights: &[f64]) {
        for (&c, &w) in row.iter().zip(weights) {
            let slot = slot(c) as usize;
            if slot < COSINE_BINS {
                self.bins[slot] += 1;
                self.defined += 1;
                let (sum, weight) = (i128::from(fixed(c.wide() * w)), i128::from(fixed(w)));
                self.sum += sum;
                self.abs_sum += sum.abs();
                let weights = self.weights.get_or_insert_default();
                weights[0] += weight;
                if c.abs().wide() > 0.9 {
                    self.aligned += 1;
                    weights[1] += weight;
                }
            }
        }
    }

    /// Adds the statistics of other cells.
    pub fn merge(&mut self, other: &Cosine) {
        if let Some(theirs) = &other.weights {
            let ours = self.weights.get_or_insert_default();
            (ours[0], ours[1]) = (ours[0] + theirs[0], ours[1] + theirs[1]);
        }
        self.defined += other.defined;
        self.sum += other.sum;
        self.abs_sum += other.abs_sum;
        self.aligned += other.aligned;
        for (a, b) in self.bins.iter_mut().zip(&other.bins) {
            *a += b;
        }
    }

    /// The cells of `self` that are not among `part`, a subset of them.
    #[must_use]
    pub fn without(&self, part: &Cosine) -> Cosine {
        Cosine {
            defined: self.defined - part.defined,
            sum: self.sum - part.sum,
            abs_sum: self.abs_sum - part.abs_sum,
            weights: self.weights.as_ref().map(|w| {
                let part = part.weights.as_deref().copied().unwrap_or_default();
                Box::new([w[0] - part[0], w[1] - part[1]])
            }),
            aligned: self.aligned - part.aligned,
            bins: std::array::from_fn(|b| self.bins[b] - part.bins[b]),
        }
    }

    /// Mean cosine; `None` without a defined cell.
    pub fn mean(&self) -> Option<f64> {
        (self.defined > 0).then(|| self.sum as f64 / COSINE_SCALE / self.total())
    }

    /// Mean magnitude of the cosine.
    pub fn abs_mean(&self) -> Option<f64> {
        (self.defined > 0).then(|| self.abs_sum as f64 / COSINE_SCALE / self.total())
    }

    /// Share of the defined cells (of their volume, where it differs) with |cos| > 0.9.
    pub fn aligned_share(&self) -> Option<f64> {
        let aligned = self.weights.as_ref().map_or(self.aligned as f64, |w| w[1] as f64 / COSINE_SCALE);
        (self.defined > 0).then(|| aligned / self.total())
    }

    /// Number, or weight, of the cells.
    fn total(&self) -> f64 {
        self.weights.as_ref().map_or(self.defined as f64, |w| w[0] as f64 / COSINE_SCALE)
    }
}

/// Cells a cosine sum goes through at a time: their 64-bit partial sums cannot overflow.
const CHUNK: usize = 256;
/// Room for 20 bins and the undefined cells, a power of two.
const SLOTS: usize = 32;
/// Added to a number of magnitude below 2^51, it leaves the nearest integer in the low bits of the sum.
const INTEGER: f64 = 6_755_399_441_055_744.0;

/// A cosine as an integer of scale [`COSINE_SCALE`], 0 where undefined. Arithmetic that vectorises, unlike a cast.
#[inline(always)]
fn fixed(c: f64) -> i64 {
    let c = if c.is_nan() { 0.0 } else { c };
    (c * COSINE_SCALE + INTEGER).to_bits() as i64 - INTEGER.to_bits() as i64
}

/// Bin of a cosine, 20 where it is undefined. Round-off beyond +-1 stays in the outer bins; the inner edges are exact to 1e-8.
#[inline(always)]
fn slot<T: Real>(c: T) -> u64 {
    let w = ((c + T::of(1.0)) * T::of(10.0)).wide();
    let w = if w > 19.5 { 19.5 } else { w };
    let w = if w < 0.0 { 0.0 } else { w };
    let w = if w.is_nan() { 20.5 } else { w };
    // Rounds to the nearest integer after half is taken off: the floor.
    (w - 0.499_999_9 + INTEGER).to_bits() & (SLOTS as u64 - 1)
}

/// Sum, sum of magnitudes and aligned cells of at most [`CHUNK`] cosines, and the slot of each.
#[multiversion::multiversion(targets("x86_64+avx2"))]
fn digest<T: Real>(part: &[T], slots: &mut [u64]) -> (i64, i64, u32) {
    for (s, &c) in slots.iter_mut().zip(part) {
        *s = slot(c);
    }
    let (mut sum, mut abs_sum, mut aligned) = (0i64, 0i64, 0u32);
    for &c in part {
        sum += fixed(c.wide());
    }
    for &c in part {
        abs_sum += fixed(c.abs().wide());
    }
    for &c in part {
        aligned += u32::from(c.abs().wide() > 0.9);
    }
    (sum, abs_sum, aligned)
}

/// Bits of the mantissa a [`Quantiles`] bin keeps: bins are 2^-12 of the value wide.
const MANTISSA_BITS: u32 = 12;
/// Bins of one sign and power of two.
const PAGE: usize = 1 << MANTISSA_BITS;

/// Counts of values in bins of constant relative width, for levels by volume fraction in one pass.
///
/// Every sign and power of two has its own bins, made when the first value falls into it; a level read from them is off by at most
/// one bin, a relative 2^-12 = 2.5e-4, and is the same for any order of the values.
#[derive(Debug, Clone, PartialEq, Eq, Default)]
pub struct Quantiles {
    /// By the sign and exponent of the value, ascending.
    pages: BTreeMap<u16, Box<[u64; PAGE]>>,
}

impl Quantiles {
    /// Order-preserving page and bin of a value.
    #[inline(always)]
    fn place(v: f64) -> (u16, usize) {
        // -0 belongs with 0.
        let bits = (v + 0.0).to_bits();
        let ordered = if bits >> 63 == 1 { !bits } else { bits | 1 << 63 };
        ((ordered >> 52) as u16, (ordered >> (52 - MANTISSA_BITS)) as usize % PAGE)
    }

    /// Lower edge of a bin; that of the bin after a page's last begins the next page.
    fn edge(page: u16, bin: usize) -> f64 {
        let ordered = (u64::from(page) << 52) + ((bin as u64) << (52 - MANTISSA_BITS));
        let bits = if ordered >> 63 == 1 { ordered & !(1 << 63) } else { !ordered };
        f64::from_bits(bits)
    }

    fn count(&mut self, v: f64, weight: u64) {
        let (page, bin) = Self::place(v);
        self.pages.entry(page).or_insert_with(|| Box::new([0; PAGE]))[bin] += weight;
    }

    /// Counts the values of a row.
    pub fn add<T: Real>(&mut self, row: &[T]) {
        // Neighbours mostly share their page, which is looked up only when it changes.
        let mut rest = row;
        while let Some(first) = rest.first() {
            let (page, _) = Self::place(first.wide());
            let bins = self.pages.entry(page).or_insert_with(|| Box::new([0; PAGE]));
            let mut taken = 0;
            for v in rest {
                let (own, bin) = Self::place(v.wide());
                if own != page {
                    break;
                }
                bins[bin] += 1;
                taken += 1;
            }
            rest = &rest[taken..];
        }
    }

    /// Counts the values of a row of cells of unequal volume; weights lie between 0 and 1 and are kept to 2^-24.
    pub fn add_weighted<T: Real>(&mut self, row: &[T], weights: &[f64]) {
        for (v, w) in row.iter().zip(weights) {
            self.count(v.wide(), (w * f64::from(1 << 24)).round() as u64);
        }
    }

    /// Adds other counts.
    pub fn merge(&mut self, other: &Quantiles) {
        for (page, theirs) in &other.pages {
            let ours = self.pages.entry(*page).or_insert_with(|| Box::new([0; PAGE]));
            for (a, b) in ours.iter_mut().zip(theirs.iter()) {
                *a += b;
            }
        }
    }

    /// The level above which the given fraction of all values lies, linear within a bin.
    ///
    /// # Panics
    /// When nothing was counted.
    pub fn level_above(&self, fraction: f64) -> f64 {
        let bins = || self.pages.iter().flat_map(|(page, bins)| bins.iter().enumerate().map(|(b, n)| (*page, b, *n)));
        let total: u64 = bins().map(|(_, _, n)| n).sum();
        assert!(total > 0, "expected at least one value, got none");
        let wanted = fraction * total as f64;
        // From below: what lies above is the rest.
        let (mut above, mut level) = (total, f64::NAN);
        for (page, bin, here) in bins().filter(|(_, _, n)| *n > 0) {
            above -= here;
            if (above as f64) < wanted {
                let (low, high) = (Self::edge(page, bin), Self::edge(page, bin + 1));
                let share = ((wanted - above as f64) / here as f64).clamp(0.0, 1.0);
                return high - share * (high - low);
            }
            level = Self::edge(page, bin);
        }
        level
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn exact_sums_ignore_the_order() {
        let s = Scale::for_bound(3.0);
        let v: Vec<f64> = (0..1000).map(|i| (f64::from(i) * 0.37).sin() * 3.0 / f64::from(1 + i % 17)).collect();
        let forward: i128 = v.iter().map(|&x| s.fix(x)).sum();
        let backward: i128 = v.iter().rev().map(|&x| s.fix(x)).sum();
        assert_eq!(forward, backward);
        let plain: f64 = v.iter().sum();
        assert!((s.value(forward) - plain).abs() < 1e-11);
    }

    #[test]
    fn cosine_counts_edges_and_undefined_cells() {
        let mut c = Cosine::default();
        c.add(&[-1.0f32, 1.0, 1.000_000_1, -1.000_000_1, 0.0, f32::NAN, 0.95, -0.25]);
        assert_eq!(c.defined, 7);
        assert_eq!(c.bins[0], 2);
        assert_eq!(c.bins[19], 3);
        assert_eq!(c.bins[10], 1);
        assert_eq!(c.bins[7], 1);
        assert_eq!(c.aligned, 5);
        let mut part = Cosine::default();
        part.add(&[0.0f32, f32::NAN]);
        assert_eq!(c.without(&part).defined, 6);
        let mut one = Cosine::default();
        one.add(&[1.0f64; 5]);
        assert_eq!(one.mean(), Some(1.0));
        assert_eq!(Cosine::default().mean(), None);
    }

    #[test]
    fn quantiles_of_a_ramp_with_both_signs() {
        let v: Vec<f64> = (0..10_000).map(|i| f64::from(i) / 5000.0 - 1.0).collect();
        let mut q = Quantiles::default();
        q.add(&v);
        for fraction in [0.01, 0.1, 0.3, 0.7, 0.95] {
            let exact = 1.0 - 2.0 * fraction;
            assert!((q.level_above(fraction) - exact).abs() < 4e-4, "{fraction}: {}", q.level_above(fraction));
        }
        // Far outside the range of single precision.
        for scale in [1e-200, 1e200] {
            let mut far = Quantiles::default();
            far.add(&v.iter().map(|x| x * scale).collect::<Vec<f64>>());
            assert!((far.level_above(0.3) / scale - 0.4).abs() < 4e-4, "{}", far.level_above(0.3));
        }
        let mut zeros = Quantiles::default();
        zeros.add(&[0.0f32, -0.0, 0.0]);
        assert!(zeros.level_above(0.5).abs() < 1e-300);
    }
}
