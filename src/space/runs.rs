//! Runs of consecutive cells along x, rows of runs, and which rows touch.

/// Consecutive cells `x0..x1` of row (y, z) that belong to one provisional component.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub struct Run {
    /// First cell.
    pub x0: u32,
    /// One past the last cell.
    pub x1: u32,
    /// Row.
    pub y: u32,
    /// Plane.
    pub z: u32,
    /// Provisional component.
    pub component: u32,
}

/// Which of a cell's 26 neighbours belong to the same object.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Connectivity {
    /// Shared faces.
    Six,
    /// Shared faces and edges.
    Eighteen,
    /// Shared faces, edges and corners.
    TwentySix,
}

impl Connectivity {
    /// Number of neighbours.
    pub fn neighbours(self) -> u32 {
        match self {
            Connectivity::Six => 6,
            Connectivity::Eighteen => 18,
            Connectivity::TwentySix => 26,
        }
    }

    /// How far along x two cells of rows that lie (dy, dz) apart may be and still be neighbours; `None` if never.
    pub fn reach(self, dy: i32, dz: i32) -> Option<u32> {
        match (self, dy.abs() + dz.abs()) {
            (Connectivity::Six, 0..=1) => Some(0),
            (Connectivity::Six, _) => None,
            (Connectivity::Eighteen, 0..=1) => Some(1),
            (Connectivity::Eighteen, _) => Some(0),
            (Connectivity::TwentySix, _) => Some(1),
        }
    }
}

/// Calls `touch(i, j)` for every pair of runs `a[i]`, `b[j]` of two rows that lie within `reach` of each other along x.
pub fn touching(a: &[Run], b: &[Run], reach: u32, mut touch: impl FnMut(usize, usize)) {
    let (mut i, mut j) = (0, 0);
    while i < a.len() && j < b.len() {
        if a[i].x1 + reach <= b[j].x0 {
            i += 1;
        } else if b[j].x1 + reach <= a[i].x0 {
            j += 1;
        } else {
            touch(i, j);
            if a[i].x1 < b[j].x1 { i += 1 } else { j += 1 }
        }
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    fn row(spans: &[(u32, u32)]) -> Vec<Run> {
        spans.iter().map(|&(x0, x1)| Run { x0, x1, y: 0, z: 0, component: 0 }).collect()
    }

    #[test]
    fn touching_finds_every_pair_that_brute_force_finds() {
        let a = row(&[(0, 2), (4, 5), (9, 14), (20, 21)]);
        let b = row(&[(2, 4), (5, 6), (8, 9), (10, 11), (13, 20)]);
        for reach in [0u32, 1] {
            let mut got = Vec::new();
            touching(&a, &b, reach, |i, j| got.push((i, j)));
            let mut want = Vec::new();
            for (i, p) in a.iter().enumerate() {
                for (j, q) in b.iter().enumerate() {
                    if p.x0 < q.x1 + reach && q.x0 < p.x1 + reach {
                        want.push((i, j));
                    }
                }
            }
            got.sort_unstable();
            assert_eq!(got, want, "reach {reach}");
        }
    }
}
