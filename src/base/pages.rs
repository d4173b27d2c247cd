//! Large arrays in memory of their own, in large pages where the system has them; the only file that names the crate for maps.
//!
//! A page is found for an array when it is first touched, and for small pages that costs more than filling it.

use std::ops::{Deref, DerefMut};

use memmap2::MmapMut;

use crate::base::real::Real;

/// Smaller arrays are plain vectors.
const LEAST_BYTES: usize = 1 << 20;

/// An array of zeros to begin with.
#[derive(Debug)]
pub struct Pages<T> {
    len: usize,
    map: Option<MmapMut>,
    plain: Vec<T>,
}

impl<T: Real> Pages<T> {
    /// An array of `len` zeros.
    pub fn new(len: usize) -> Pages<T> {
        let bytes = len * size_of::<T>();
        let map = if bytes >= LEAST_BYTES { MmapMut::map_anon(bytes).ok() } else { None };
        #[cfg(target_os = "linux")]
        if let Some(map) = &map {
            // A system without large pages says no, and small ones serve.
            let _ = map.advise(memmap2::Advice::HugePage);
        }
        let plain = if map.is_none() { vec![T::ZERO; len] } else { Vec::new() };
        Pages { len, map, plain }
    }
}

impl<T> From<Vec<T>> for Pages<T> {
    fn from(plain: Vec<T>) -> Self {
        Pages { len: plain.len(), map: None, plain }
    }
}

impl<T: Real> Deref for Pages<T> {
    type Target = [T];

    fn deref(&self) -> &[T] {
        match &self.map {
            Some(map) => &bytemuck::cast_slice(map)[..self.len],
            None => &self.plain,
        }
    }
}

impl<T: Real> DerefMut for Pages<T> {
    fn deref_mut(&mut self) -> &mut [T] {
        match &mut self.map {
            Some(map) => &mut bytemuck::cast_slice_mut(map)[..self.len],
            None => &mut self.plain,
        }
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn large_and_small_arrays_hold_what_is_put_in() {
        for len in [0, 5, 1 << 19] {
            let mut a = Pages::<f64>::new(len);
            assert!(a.len() == len && a.iter().all(|v| *v == 0.0));
            a.iter_mut().enumerate().for_each(|(i, v)| *v = i as f64);
            assert!(a.iter().enumerate().all(|(i, v)| *v == i as f64));
        }
    }
}
