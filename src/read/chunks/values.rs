//! Values of a decoded chunk: byte order undone, bytes brought together, f32 widened where asked for.

use crate::base::real::Real;
use crate::read::header::Precision;

/// The bytes of a chunk, or of a part of it.
#[derive(Clone, Copy)]
pub(super) struct Values<'a> {
    /// The bytes.
    pub bytes: &'a [u8],
    /// First bytes of all values, then all second bytes, and so on; else value by value.
    pub planes: bool,
    /// Width of a value.
    pub precision: Precision,
    /// Most significant byte first.
    pub big: bool,
}

impl Values<'_> {
    /// Takes every `stride`-th value from `first` on.
    ///
    /// # Panics
    /// When bytes in planes are asked for with a stride, or f64 for f32.
    pub fn take<T: Real>(&self, first: usize, stride: usize, to: &mut [T]) {
        assert!(!self.planes || stride == 1, "stride of bytes in planes");
        match (self.precision, size_of::<T>()) {
            (Precision::F32, 4) => self.narrow(first, stride, bytemuck::cast_slice_mut(to), |bits: u32| bits),
            (Precision::F32, _) => self.narrow(first, stride, to, |bits| T::of(f64::from(f32::from_bits(bits)))),
            (Precision::F64, 8) => self.wide(first, stride, bytemuck::cast_slice_mut(to)),
            (Precision::F64, _) => panic!("values are never narrowed"),
        }
    }

    fn narrow<U>(&self, first: usize, stride: usize, to: &mut [U], of: impl Fn(u32) -> U) {
        if !self.planes {
            return self.in_sequence(first, stride, to, |b| of(if self.big { u32::from_be_bytes(*b) } else { u32::from_le_bytes(*b) }));
        }
        // Slices of one length, so that the loop is free of checks and becomes one over vectors.
        let n = to.len();
        let [a, b, c, d] = self.rows(first, n);
        let (a, b, c, d) = (&a[..n], &b[..n], &c[..n], &d[..n]);
        for i in 0..n {
            to[i] = of(u32::from(a[i]) | u32::from(b[i]) << 8 | u32::from(c[i]) << 16 | u32::from(d[i]) << 24);
        }
    }

    fn wide(&self, first: usize, stride: usize, to: &mut [u64]) {
        if !self.planes {
            return self.in_sequence(first, stride, to, |b| if self.big { u64::from_be_bytes(*b) } else { u64::from_le_bytes(*b) });
        }
        let n = to.len();
        let [a, b, c, d, e, f, g, h] = self.rows(first, n);
        let (a, b, c, d) = (&a[..n], &b[..n], &c[..n], &d[..n]);
        let (e, f, g, h) = (&e[..n], &f[..n], &g[..n], &h[..n]);
        for i in 0..n {
            let low = u32::from(a[i]) | u32::from(b[i]) << 8 | u32::from(c[i]) << 16 | u32::from(d[i]) << 24;
            let high = u32::from(e[i]) | u32::from(f[i]) << 8 | u32::from(g[i]) << 16 | u32::from(h[i]) << 24;
            to[i] = u64::from(low) | u64::from(high) << 32;
        }
    }

    /// The bytes of `n` values from `first` on, the least significant first.
    fn rows<const W: usize>(&self, first: usize, n: usize) -> [&[u8]; W] {
        let count = self.bytes.len() / W;
        std::array::from_fn(|k| &self.bytes[if self.big { W - 1 - k } else { k } * count + first..][..n])
    }

    fn in_sequence<const W: usize, U>(&self, first: usize, stride: usize, to: &mut [U], of: impl Fn(&[u8; W]) -> U) {
        let from = &self.bytes.as_chunks::<W>().0[first..];
        if stride == 1 {
            to.iter_mut().zip(from).for_each(|(o, b)| *o = of(b));
        } else {
            to.iter_mut().zip(from.iter().step_by(stride)).for_each(|(o, b)| *o = of(b));
        }
    }
}
