//! Derivatives across rows of four rows at a time: neighbouring rows read nearly the same samples.

use std::ops::Range;

use crate::base::real::Real;
use crate::math::diff::{AxisStencil, FOUR, HALF, Pick, Support, four};

/// Rows that will be derived whole: every one in each plane, and those of one row in all planes before the next row.
#[derive(Debug, Clone, Default, PartialEq, Eq)]
pub struct Ahead {
    /// Rows.
    pub rows: Range<usize>,
    /// Planes.
    pub planes: Range<usize>,
}

/// Four rows of a derivative, taken one by one.
struct Group<T> {
    first: usize,
    rows: [Vec<T>; 4],
    /// Which of them can still be taken.
    there: [bool; 4],
}

impl<T> Default for Group<T> {
    fn default() -> Self {
        Group { first: 0, rows: Default::default(), there: [false; 4] }
    }
}

/// Derivatives made before they are asked for.
pub struct Groups<T> {
    ahead: Ahead,
    /// Along y, plane by plane, component by component.
    along_y: Vec<Group<T>>,
    /// Along z, component by component.
    along_z: Vec<Group<T>>,
}

impl<T> Default for Groups<T> {
    fn default() -> Self {
        Groups { ahead: Ahead::default(), along_y: Vec::new(), along_z: Vec::new() }
    }
}

/// The most components there are.
const COMPONENTS: usize = 7;

impl<T: Real> Groups<T> {
    /// What will be asked for from now on. What was made before is forgotten.
    pub fn expect(&mut self, ahead: Ahead) {
        self.along_y.resize_with(COMPONENTS * ahead.planes.len(), Group::default);
        self.along_z.resize_with(COMPONENTS, Group::default);
        self.along_y.iter_mut().chain(&mut self.along_z).for_each(|g| g.there = [false; 4]);
        self.ahead = ahead;
    }

    /// The derivative along y of row (y, z), where it can be made together with those of the next three rows. `row` gives the rows of the plane.
    pub fn along_y<'a>(
        &mut self,
        (component, y, z): (usize, usize, usize),
        stencil: &AxisStencil<T>,
        row: impl Fn(isize) -> &'a [T],
        out: &mut Vec<T>,
    ) -> bool {
        if !(self.ahead.rows.contains(&y) && self.ahead.planes.contains(&z)) {
            return false;
        }
        let group = &mut self.along_y[(z - self.ahead.planes.start) * COMPONENTS + component];
        group.take(y, y, self.ahead.rows.end, stencil, row, out)
    }

    /// The derivative along z of row (y, z), where it can be made together with those of the same row in the other planes expected. `row` gives
    /// the row in any plane.
    pub fn along_z<'a>(
        &mut self,
        (component, y, z): (usize, usize, usize),
        stencil: &AxisStencil<T>,
        row: impl Fn(isize) -> &'a [T],
        out: &mut Vec<T>,
    ) -> bool {
        if !(self.ahead.rows.contains(&y) && self.ahead.planes.contains(&z)) {
            return false;
        }
        let (from, to) = (self.ahead.planes.start, self.ahead.planes.end);
        let group = &mut self.along_z[component];
        if z == from {
            group.there = [false; 4];
        }
        group.take(z, from, to, stencil, row, out)
    }
}

impl<T: Real> Group<T> {
    /// Takes row `at`; where it is not there, four are made from it on, if it lies at `from` or behind and the four end before `to`.
    fn take<'a>(
        &mut self,
        at: usize,
        from: usize,
        to: usize,
        stencil: &AxisStencil<T>,
        row: impl Fn(isize) -> &'a [T],
        out: &mut Vec<T>,
    ) -> bool {
        let is_here = |g: &Group<T>| (g.first..g.first + 4).contains(&at) && g.there[at - g.first];
        if !is_here(self) && (at < from || at + 4 > to || !self.make(at, stencil, row)) {
            return false;
        }
        let k = at - self.first;
        self.there[k] = false;
        std::mem::swap(out, &mut self.rows[k]);
        true
    }

    fn make<'a>(&mut self, first: usize, stencil: &AxisStencil<T>, row: impl Fn(isize) -> &'a [T]) -> bool {
        let central = |k: usize| matches!(stencil.support(first + k, Pick::Scheme), Support::Central { .. });
        let Support::Central { weights, terms } = stencil.support(first, Pick::Scheme) else { return false };
        if !(1..4).all(central) {
            return false;
        }
        // Rows out of reach are not touched: the nearest ones stand in their places.
        let place = |k: usize| (k as isize - HALF as isize).clamp(-(terms as isize), 3 + terms as isize);
        let rows: [&[T]; FOUR] = std::array::from_fn(|k| row(first as isize + place(k)));
        for out in &mut self.rows {
            out.resize(rows[0].len(), T::ZERO);
        }
        let [a, b, c, d] = &mut self.rows;
        four(a, b, c, d, rows, weights, terms);
        (self.first, self.there) = (first, [true; 4]);
        true
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::math::diff::{Scheme, difference};

    /// What is made in fours has the bits of what is made one by one, at the ends of open axes too.
    #[test]
    fn four_rows_at_once_have_the_same_bits() {
        let (n, width) = (13, 21);
        let rows: Vec<Vec<f32>> = (0..n).map(|y| (0..width).map(|x| (x as f32 * 0.37 + y as f32 * 1.7).sin()).collect()).collect();
        for scheme in [Scheme::Fd2, Scheme::Fd4, Scheme::Fd6, Scheme::Fd8, Scheme::Opt] {
            for periodic in [true, false] {
                let stencil = AxisStencil::<f32>::new(scheme, n, 0.3, periodic);
                let row = |y: isize| rows[y.rem_euclid(n as isize) as usize].as_slice();
                let mut made = 0;
                for ahead in [Ahead { rows: 0..n, planes: 2..6 }, Ahead { rows: 3..10, planes: 5..7 }] {
                    let mut groups = Groups::default();
                    groups.expect(ahead.clone());
                    for (y, z) in ahead.rows.clone().flat_map(|y| ahead.planes.clone().map(move |z| (y, z))) {
                        let one = |at: usize| {
                            let Support::Central { weights, terms } = stencil.support(at, Pick::Scheme) else { return None };
                            let offset = |k: usize| (k + 1).min(terms) as isize;
                            let minus = std::array::from_fn(|k| row(at as isize - offset(k)));
                            let plus = std::array::from_fn(|k| row(at as isize + offset(k)));
                            let mut out = vec![0.0; width];
                            difference(&mut out, minus, plus, weights, terms, std::slice::from_ref(&(0..width)));
                            Some(out)
                        };
                        let mut out = Vec::new();
                        if groups.along_y((1, y, z), &stencil, row, &mut out) {
                            assert_eq!(Some(&out), one(y).as_ref(), "{scheme:?} y {y}");
                            made += 1;
                        }
                        if groups.along_z((1, y, z), &stencil, row, &mut out) {
                            assert_eq!(Some(&out), one(z).as_ref(), "{scheme:?} z {z}");
                            made += 1;
                        }
                    }
                }
                assert!(made > 20, "{scheme:?} {periodic}: {made}");
            }
        }
    }
}
