//! Splits a connected region into objects grown from its peaks, each down to a fraction of its own peak.
//!
//! The rule: cells are taken in descending order (ties by index). A cell without a higher neighbour is a peak; any other cell
//! belongs to the slope of its highest neighbour. Where a cell touches two slopes and lies beyond `fraction` times the higher
//! of their peaks, the lower peak is no object of its own: its slope joins the higher one's. What is left of a slope beyond
//! `fraction` times its peak is an object, if the peak lies beyond the inner level.

use crate::base::real::Real;
use crate::detect::rows::{PatchRows, unwrapped};
use crate::space::patch::{Interval, PatchShape};
use crate::space::runs::Connectivity;

/// What makes an object of a peak.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct PeakRule {
    /// Fraction of the peak.
    pub fraction: f64,
    /// The level a peak must exceed.
    pub inner: f64,
    /// Neighbourhood.
    pub connectivity: Connectivity,
}

/// An object grown from a peak.
#[derive(Debug, Clone, PartialEq)]
pub struct Grown {
    /// Value of the peak.
    pub peak: f64,
    /// Its cells, as those of an [`crate::model::object::Object`] before it is brought home: unwrapped, or wrapped where it spans.
    pub intervals: Vec<Interval>,
    /// Axes along which it closes on itself.
    pub spans: [bool; 3],
    /// Share of its boundary faces behind which the field goes on beyond this object's level, on another slope.
    pub wall: f64,
}

const NONE: u32 = u32::MAX;

/// The objects of a region, in the order of their peaks' cells. `values` are those of the stored cells, the inside up; `n` are the
/// cells of the box along x, y, z.
///
/// # Panics
/// When `values` and the stored cells differ in number.
pub fn grow<T: Real>(shape: &PatchShape, values: &[T], rule: &PeakRule, n: [usize; 3]) -> Vec<Grown> {
    assert_eq!(values.len(), shape.cells, "values (left) of the stored cells (right)");
    let rows = PatchRows::new(shape);
    let own = rows.object_cells();
    let slopes = slopes(&rows, &own, values, rule);
    let mut grown: Vec<Grown> = Vec::new();
    let mut place = vec![NONE; slopes.peaks.len()];
    let mut member = vec![NONE; shape.cells];
    for &cell in &own {
        let root = slopes.root(slopes.of[cell as usize]);
        let peak = slopes.peaks[root as usize];
        if peak > rule.inner && values[cell as usize].wide() > rule.fraction * peak {
            let slot = &mut place[root as usize];
            if *slot == NONE {
                *slot = grown.len() as u32;
                grown.push(Grown { peak, intervals: Vec::new(), spans: [false; 3], wall: 0.0 });
            }
            member[cell as usize] = *slot;
            let (x, y, z) = rows.place(cell);
            let intervals = &mut grown[*slot as usize].intervals;
            match intervals.last_mut() {
                Some(last) if last.y == y && last.z == z && last.x + last.len as i32 == x => last.len += 1,
                _ => intervals.push(Interval { x, y, z, len: 1 }),
            }
        }
    }
    walls(&rows, &own, values, &member, rule, &mut grown);
    for g in &mut grown {
        if shape.period.iter().any(Option::is_some) {
            let (intervals, spans) = unwrapped(&g.intervals, rule.connectivity, shape.period, n);
            g.intervals = intervals;
            g.spans = spans;
        }
    }
    grown
}

/// Slopes by number; a slope that joined another points to it.
struct Slopes {
    /// Slope of each stored cell.
    of: Vec<u32>,
    parent: Vec<u32>,
    peaks: Vec<f64>,
}

impl Slopes {
    fn root(&self, mut slope: u32) -> u32 {
        while self.parent[slope as usize] != slope {
            slope = self.parent[slope as usize];
        }
        slope
    }

    fn find(&mut self, slope: u32) -> u32 {
        let root = self.root(slope);
        let mut at = slope;
        while self.parent[at as usize] != root {
            at = std::mem::replace(&mut self.parent[at as usize], root);
        }
        root
    }
}

fn slopes<T: Real>(rows: &PatchRows<'_>, own: &[u32], values: &[T], rule: &PeakRule) -> Slopes {
    let value = |cell: u32| values[cell as usize].wide();
    let mut order = own.to_vec();
    order.sort_unstable_by(|&a, &b| value(b).total_cmp(&value(a)).then(a.cmp(&b)));
    let mut s = Slopes { of: vec![NONE; values.len()], parent: Vec::new(), peaks: Vec::new() };
    let mut near = Vec::with_capacity(26);
    for &cell in &order {
        near.clear();
        rows.neighbours(cell, rule.connectivity, |other| {
            if s.of[other as usize] != NONE {
                near.push(other);
            }
        });
        // The highest neighbour, the smaller index among equals.
        let Some(&highest) = near.iter().max_by(|&&a, &&b| value(a).total_cmp(&value(b)).then(b.cmp(&a))) else {
            let slope = s.peaks.len() as u32;
            s.of[cell as usize] = slope;
            s.parent.push(slope);
            s.peaks.push(value(cell));
            continue;
        };
        s.of[cell as usize] = s.of[highest as usize];
        for &other in &near {
            let (a, b) = (s.find(s.of[cell as usize]), s.find(s.of[other as usize]));
            if a == b {
                continue;
            }
            // Slopes are numbered in descending order of their peaks: the smaller number is the higher peak.
            let (high, low) = (a.min(b), a.max(b));
            if value(cell) > rule.fraction * s.peaks[high as usize] {
                s.parent[low as usize] = high;
            }
        }
    }
    s
}

/// Counts the faces of each object's boundary and those that are walls.
fn walls<T: Real>(rows: &PatchRows<'_>, own: &[u32], values: &[T], member: &[u32], rule: &PeakRule, grown: &mut [Grown]) {
    let mut faces = vec![(0u64, 0u64); grown.len()];
    for &cell in own {
        let k = member[cell as usize];
        if k == NONE {
            continue;
        }
        let level = rule.fraction * grown[k as usize].peak;
        rows.neighbours(cell, Connectivity::Six, |other| {
            if member[other as usize] != k {
                let (all, wall) = &mut faces[k as usize];
                *all += 1;
                *wall += u64::from(values[other as usize].wide() > level);
            }
        });
    }
    for (g, (all, wall)) in grown.iter_mut().zip(faces) {
        g.wall = if all == 0 { 0.0 } else { wall as f64 / all as f64 };
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    /// A line of cells along x as a patch of a box with open faces.
    fn line(values: &[f64]) -> PatchShape {
        let object = vec![Interval { x: 0, y: 0, z: 0, len: values.len() as u32 }];
        PatchShape::around(object, 1, [values.len(), 1, 1], [false; 3], [None; 3])
    }

    fn spans(values: &[f64], fraction: f64, inner: f64) -> Vec<(f64, i32, u32, f64)> {
        let rule = PeakRule { fraction, inner, connectivity: Connectivity::TwentySix };
        let grown = grow(&line(values), values, &rule, [values.len(), 1, 1]);
        grown.iter().map(|g| (g.peak, g.intervals[0].x, g.intervals[0].len, g.wall)).collect()
    }

    #[test]
    fn a_high_saddle_joins_and_a_low_one_splits() {
        // Saddle 6 beyond half of 10: one object.
        assert_eq!(spans(&[1.0, 10.0, 6.0, 8.0, 4.5, 1.0], 0.5, 3.0), vec![(10.0, 1, 3, 0.0)]);
        // Saddle 4: the higher object ends above it; the lower one, down to 3, takes only its own slope and ends at a wall there.
        assert_eq!(spans(&[1.0, 10.0, 7.0, 4.5, 4.0, 6.0, 3.5, 2.0], 0.5, 3.0), vec![(10.0, 1, 2, 0.0), (6.0, 4, 3, 0.5)]);
        // Touching cells; only the lower one would go on beyond the wall.
        assert_eq!(spans(&[1.0, 10.0, 5.5, 4.9, 6.0, 3.5, 2.0], 0.5, 3.0), vec![(10.0, 1, 2, 0.0), (6.0, 3, 3, 0.5)]);
        // A saddle below both levels: no wall.
        assert_eq!(spans(&[1.0, 10.0, 7.0, 2.5, 6.0, 3.5, 2.0], 0.5, 3.0), vec![(10.0, 1, 2, 0.0), (6.0, 4, 2, 0.0)]);
    }

    #[test]
    fn a_peak_below_the_inner_level_is_no_object_but_may_belong_to_one() {
        assert_eq!(spans(&[1.0, 10.0, 5.5, 5.8, 1.0, 3.0, 1.0], 0.5, 6.0), vec![(10.0, 1, 3, 0.0)]);
    }
}
