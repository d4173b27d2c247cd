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
        match (self.precision, size_of::<T>()) {
            (Precision::F32, 4) => self.words::<4, u32>(first, stride, bytemuck::cast_slice_mut(to), u32::from_le_bytes),
            (Precision::F64, 8) => self.words::<8, u64>(first, stride, bytemuck::cast_slice_mut(to), u64::from_le_bytes),
            (Precision::F32, _) => self.words::<4, T>(first, stride, to, |b| T::of(f64::from(f32::from_le_bytes(b)))),
            (Precision::F64, _) => panic!("values are never narrowed"),
        }
    }

    fn words<const W: usize, U>(&self, first: usize, stride: usize, to: &mut [U], of: impl Fn([u8; W]) -> U) {
        if self.planes {
            assert_eq!(stride, 1, "stride of bytes in planes");
            let count = self.bytes.len() / W;
            let rows: [&[u8]; W] = std::array::from_fn(|k| {
                let plane = if self.big { W - 1 - k } else { k };
                &self.bytes[plane * count + first..][..to.len()]
            });
            for (i, o) in to.iter_mut().enumerate() {
                *o = of(rows.map(|row| row[i]));
            }
            return;
        }
        let from = &self.bytes.as_chunks::<W>().0[first..];
        let swapped = |b: &[u8; W]| std::array::from_fn(|k| b[W - 1 - k]);
        match (stride, self.big) {
            (1, false) => to.iter_mut().zip(from).for_each(|(o, b)| *o = of(*b)),
            (1, true) => to.iter_mut().zip(from).for_each(|(o, b)| *o = of(swapped(b))),
            (_, false) => to.iter_mut().zip(from.iter().step_by(stride)).for_each(|(o, b)| *o = of(*b)),
            (_, true) => to.iter_mut().zip(from.iter().step_by(stride)).for_each(|(o, b)| *o = of(swapped(b))),
        }
    }
}
