//! The nine derivatives of a vector field along one row.

use std::ops::Range;

use crate::base::real::Real;
use crate::math::diff::{AxisStencil, HALF, Support, WIDTH, difference, weighted};
use crate::space::slab::Block;

/// Derivatives of one row: `d[i][a]` is the derivative of component i along axis a.
pub struct Gradient<T> {
    pub d: [[Vec<T>; 3]; 3],
    padded: Vec<T>,
    other: Vec<T>,
}

impl<T: Real> Default for Gradient<T> {
    fn default() -> Self {
        Gradient { d: Default::default(), padded: Vec::new(), other: Vec::new() }
    }
}

/// The row (y, z) of a component, with its neighbours reachable by offset.
struct At<'a, 'b, T> {
    block: &'b Block<'a, T>,
    component: usize,
    z: usize,
    y: usize,
    /// The positions wanted along the row.
    x: &'b Range<usize>,
    nx: usize,
    ny: usize,
}

impl<'a, T: Real> At<'a, '_, T> {
    /// The whole row.
    fn here(&self) -> &'a [T] {
        &self.block.plane(self.component, self.z as isize)[self.y * self.nx..(self.y + 1) * self.nx]
    }

    /// The wanted positions of another row.
    fn row_of(&self, z: isize, y: usize) -> &'a [T] {
        &self.block.plane(self.component, z)[y * self.nx + self.x.start..y * self.nx + self.x.end]
    }

    fn row_y(&self, offset: isize) -> &'a [T] {
        let y = (self.y as isize + offset).rem_euclid(self.ny as isize) as usize;
        self.row_of(self.z as isize, y)
    }

    fn along_y(&self, stencil: &AxisStencil<T>, central: &[T; HALF], out: &mut [T]) {
        match stencil.support(self.y) {
            Support::Central => difference(
                out,
                std::array::from_fn(|k| self.row_y(-(k as isize) - 1)),
                std::array::from_fn(|k| self.row_y(k as isize + 1)),
                central,
            ),
            Support::Window { first, weights } => {
                let rows: [&[T]; WIDTH] = std::array::from_fn(|k| self.row_of(self.z as isize, first + k));
                weighted(out, rows, weights);
            }
        }
    }

    fn along_z(&self, stencil: &AxisStencil<T>, central: &[T; HALF], out: &mut [T]) {
        let z = self.z as isize;
        match stencil.support(self.z) {
            Support::Central => difference(
                out,
                std::array::from_fn(|k| self.row_of(z - 1 - k as isize, self.y)),
                std::array::from_fn(|k| self.row_of(z + 1 + k as isize, self.y)),
                central,
            ),
            Support::Window { first, weights } => {
                let rows: [&[T]; WIDTH] = std::array::from_fn(|k| self.row_of((first + k) as isize, self.y));
                weighted(out, rows, weights);
            }
        }
    }
}

impl<T: Real> Gradient<T> {
    /// The derivatives of the vector whose first component is `component`: all nine, or without `diagonal` the six of the curl.
    pub fn row(
        &mut self,
        s: &[AxisStencil<T>; 3],
        block: &Block<'_, T>,
        component: usize,
        z: usize,
        y: usize,
        x: &Range<usize>,
        ny: usize,
        diagonal: bool,
    ) {
        for c in 0..3 {
            let nx = block.plane(component + c, z as isize).len() / ny;
            let at = At { block, component: component + c, z, y, x, nx, ny };
            for a in 0..3 {
                self.d[c][a].resize(x.len(), T::ZERO);
            }
            let [dx, dy, dz] = &mut self.d[c];
            if c != 0 || diagonal {
                s[0].along(at.here(), at.x.clone(), &mut self.padded, dx);
            }
            if c != 1 || diagonal {
                at.along_y(&s[1], &s[1].central, dy);
            }
            if c != 2 || diagonal {
                at.along_z(&s[2], &s[2].central, dz);
            }
        }
    }

    /// Divergence of order 8 minus that of order 6, zero where one-sided stencils are used. Call after [`Gradient::row`] for the same row.
    pub fn divergence_miss(
        &mut self,
        s: &[AxisStencil<T>; 3],
        block: &Block<'_, T>,
        component: usize,
        z: usize,
        y: usize,
        x: &Range<usize>,
        ny: usize,
        out: &mut Vec<T>,
    ) {
        out.clear();
        out.resize(x.len(), T::ZERO);
        self.other.resize(x.len(), T::ZERO);
        for c in 0..3 {
            let nx = block.plane(component + c, z as isize).len() / ny;
            let at = At { block, component: component + c, z, y, x, nx, ny };
            match c {
                0 => s[0].along_with(&s[0].central6, at.here(), at.x.clone(), &mut self.padded, &mut self.other),
                1 => at.along_y(&s[1], &s[1].central6, &mut self.other),
                _ => at.along_z(&s[2], &s[2].central6, &mut self.other),
            }
            for (o, (a, b)) in out.iter_mut().zip(self.d[c][c].iter().zip(&self.other)) {
                *o += *a - *b;
            }
        }
    }
}
