//! Magnetic fields in velocity units where the density varies: b = B / sqrt(rho).

use crate::base::error::{Error, Result};
use crate::base::real::Real;
use crate::read::header::Header;
use crate::read::layers::Layer;
use crate::read::order::Window;

/// Divides three components by the root of the last, which is not passed on.
pub(super) struct Alfvenic<T> {
    inner: Box<dyn Layer<T>>,
    /// The first magnetic component.
    first: usize,
    /// Place of the density.
    density: usize,
    /// The array of the density, for messages.
    header: Header,
    rho: Vec<T>,
}

impl<T: Real> Alfvenic<T> {
    /// The components before `density`, of which `first` and the next two are magnetic.
    pub fn new(inner: Box<dyn Layer<T>>, first: usize, density: usize, header: Header) -> Self {
        Alfvenic { inner, first, density, header, rho: Vec::new() }
    }
}

impl<T: Real> Layer<T> for Alfvenic<T> {
    fn samples(&self) -> [usize; 3] {
        self.inner.samples()
    }

    fn read(&mut self, at: &Window, out: &mut [Option<&mut [T]>]) -> Result<()> {
        let magnetic = self.first..self.first + 3;
        let needed = out[magnetic.clone()].iter().any(Option::is_some);
        if needed {
            self.rho.resize(at.values(), T::ZERO);
        }
        let mut all: Vec<Option<&mut [T]>> = out.iter_mut().map(|o| o.as_deref_mut()).collect();
        all.resize_with(self.density, || None);
        all.push(needed.then_some(&mut self.rho[..]));
        self.inner.read(at, &mut all)?;
        if !needed {
            return Ok(());
        }
        // Written so that a NaN is refused as well.
        if let Some(i) = self.rho.iter().position(|&r| !(r > T::ZERO && r.is_finite())) {
            let [nx, ny, _] = at.size();
            let [x, y, z] = [at.range[0].start + i % nx, at.range[1].start + i / nx % ny, at.range[2].start + i / nx / ny];
            return Err(self
                .header
                .place(Error::data("cannot divide the magnetic field by the root of the density"))
                .expected("densities above 0")
                .found(format!("{} at x={x} y={y} z={z}", self.rho[i]))
                .hint("indices count from 0; was the file written completely?"));
        }
        for r in &mut self.rho {
            *r = r.sqrt();
        }
        for b in out[magnetic].iter_mut().flatten() {
            for (b, r) in b.iter_mut().zip(&self.rho) {
                *b = *b / *r;
            }
        }
        Ok(())
    }

    fn natural_planes(&self) -> usize {
        self.inner.natural_planes()
    }

    fn is_costly(&self) -> bool {
        self.inner.is_costly()
    }

    fn decoded_planes(&self) -> usize {
        self.inner.decoded_planes()
    }

    fn reader_bytes(&self, planes: usize) -> u64 {
        let [nx, ny, _] = self.inner.samples();
        self.inner.reader_bytes(planes) + (planes * ny * nx * size_of::<T>()) as u64
    }
}
