//! Derivatives of the components of a block along one row.

use std::ops::Range;

use crate::base::real::Real;
use crate::derive::group::Groups;
use crate::derive::lines::{Prepared, ZLines};
use crate::math::diff::{AxisStencil, HALF, Pick, RowScratch, Support, WIDTH, difference, each, weighted};
use crate::space::slab::Block;

/// Derivatives of one row of a vector: `d[i][a]` is the derivative of component i along axis a.
pub struct Gradient<T> {
    pub d: [[Vec<T>; 3]; 3],
}

impl<T> Default for Gradient<T> {
    fn default() -> Self {
        Gradient { d: Default::default() }
    }
}

/// Buffers of one worker.
pub struct Buffers<T> {
    row: RowScratch<T>,
    other: Vec<T>,
    pub groups: Groups<T>,
}

impl<T: Real> Default for Buffers<T> {
    fn default() -> Self {
        Buffers { row: RowScratch::default(), other: Vec::new(), groups: Groups::default() }
    }
}

/// The positions of row (y, z) in `pieces`, and all that their derivatives are made from.
pub struct Place<'a, T> {
    pub stencils: &'a [AxisStencil<T>; 3],
    pub block: &'a Block<'a, T>,
    pub ready: &'a Prepared<T>,
    pub z_lines: Option<&'a ZLines<T>>,
    pub z: usize,
    pub y: usize,
    /// Ascending and disjoint; what is made of them stands one after the other.
    pub pieces: &'a [Range<usize>],
    /// Positions in all of them.
    pub len: usize,
    pub nx: usize,
    pub ny: usize,
}

impl<'a, T: Real> Place<'a, T> {
    /// Row `y` of a plane.
    fn whole(&self, plane: &'a [T], y: usize) -> &'a [T] {
        &plane[y * self.nx..(y + 1) * self.nx]
    }

    /// The wanted positions of this row of a plane.
    fn copy(&self, plane: &'a [T], out: &mut [T]) {
        let row = self.whole(plane, self.y);
        each(self.pieces, out, |x, out| out.copy_from_slice(&row[x]));
    }

    /// The values of a component, piece by piece.
    pub fn values(&self, component: usize) -> impl Iterator<Item = &'a [T]> {
        let row = self.whole(self.block.plane(component, self.z as isize), self.y);
        self.pieces.iter().map(|x| &row[x.clone()])
    }

    /// The derivative of a component along an axis.
    pub fn along(&self, component: usize, axis: usize, pick: Pick, buffers: &mut Buffers<T>, out: &mut Vec<T>) {
        out.resize(self.len, T::ZERO);
        let stencil = &self.stencils[axis];
        let plane = |z: isize| self.block.plane(component, z);
        let all = self.len == self.nx && pick == Pick::Scheme;
        let at = (component, self.y, self.z);
        match axis {
            0 if pick == Pick::Scheme && stencil.line().is_some() => self.copy(self.ready.along(component, 0, self.z), out),
            0 => {
                let whole = self.whole(plane(self.z as isize), self.y);
                stencil.along(pick, whole, self.pieces, &mut buffers.row, out);
            }
            1 => {
                let here = plane(self.z as isize);
                let wrapped = |y: isize| self.whole(here, y.rem_euclid(self.ny as isize) as usize);
                if all && buffers.groups.along_y(at, stencil, wrapped, out) {
                    return;
                }
                match stencil.support(self.y, pick) {
                    Support::Line => self.copy(self.ready.along(component, 1, self.z), out),
                    support => self.across(support, self.y, wrapped, out),
                }
            }
            _ if all && buffers.groups.along_z(at, stencil, |z| self.whole(plane(z), self.y), out) => {}
            _ => match (stencil.support(self.z, pick), self.z_lines) {
                (Support::Line, Some(lines)) => {
                    self.copy(lines.plane(component, self.z).unwrap_or_else(|| self.ready.along(component, 2, self.z)), out);
                }
                (Support::Line, None) => panic!("transforms along z need the lines of the whole box"),
                (support, _) => self.across(support, self.z, |z| self.whole(plane(z), self.y), out),
            },
        }
    }

    /// The derivatives of the vector whose first component is `first`: all nine, or without `diagonal` the six of the curl.
    pub fn gradient(&self, first: usize, diagonal: bool, buffers: &mut Buffers<T>, out: &mut Gradient<T>) {
        for c in 0..3 {
            for a in (0..3).filter(|&a| a != c || diagonal) {
                self.along(first + c, a, Pick::Scheme, buffers, &mut out.d[c][a]);
            }
            // The curl takes its length from here.
            out.d[c][c].resize(self.len, T::ZERO);
        }
    }

    /// Divergence by the scheme minus that by its comparison, from the gradient of the same row; zero where one-sided stencils are
    /// used.
    pub fn divergence_miss(&self, first: usize, gradient: &Gradient<T>, buffers: &mut Buffers<T>, out: &mut Vec<T>) {
        out.clear();
        out.resize(self.len, T::ZERO);
        for c in 0..3 {
            let mut other = std::mem::take(&mut buffers.other);
            self.along(first + c, c, Pick::Comparison, buffers, &mut other);
            for (o, (a, b)) in out.iter_mut().zip(gradient.d[c][c].iter().zip(&other)) {
                *o += *a - *b;
            }
            buffers.other = other;
        }
    }

    /// A derivative across rows: `row` gives the row at an index, beyond the ends of a periodic axis too.
    fn across(&self, support: Support<'_, T>, at: usize, row: impl Fn(isize) -> &'a [T], out: &mut [T]) {
        match support {
            Support::Central { weights, terms } => {
                // Terms that do not count repeat the last one, so that no row outside is touched.
                let offset = |k: usize| (k + 1).min(terms) as isize;
                let minus: [&[T]; HALF] = std::array::from_fn(|k| row(at as isize - offset(k)));
                let plus: [&[T]; HALF] = std::array::from_fn(|k| row(at as isize + offset(k)));
                difference(out, minus, plus, weights, terms, self.pieces);
            }
            Support::Window { first, span, weights } => {
                let rows: [&[T]; WIDTH] = std::array::from_fn(|k| row((first + k.min(span - 1)) as isize));
                each(self.pieces, out, |x, out| weighted(out, rows.map(|r| &r[x.clone()]), weights, span));
            }
            Support::Nothing => out.fill(T::ZERO),
            Support::Line => unreachable!("lines are derived before"),
        }
    }
}
