//! The grid of a snapshot: from what the user says of the box, and from coordinates.

use crate::base::error::Result;
use crate::read::coordinates::{Coordinates, Spaced};
use crate::read::spec::{InputSpec, check_size, no_size};
use crate::space::grid::Grid;

/// The grid, and what the user should know of it.
///
/// # Errors
/// `Usage` when the size of an axis without coordinates is not given, `Input` for coordinates that do not fit.
pub(super) fn grid(spec: &InputSpec, n: [usize; 3], coordinates: &[Option<Coordinates>; 3]) -> Result<(Grid, Vec<String>)> {
    let flat = n[2] == 1;
    let needed = [0, 1, 2].map(|a| coordinates[a].is_none() && !(a == 2 && flat));
    let mut spacing = [1.0; 3];
    if needed.contains(&true) {
        let size = spec.lengths.or(spec.spacing).ok_or_else(no_size)?;
        let flag = if spec.lengths.is_some() { "--lengths" } else { "--spacing" };
        check_size(flag, &size, needed)?;
        for a in (0..3).filter(|&a| needed[a]) {
            spacing[a] = if spec.lengths.is_some() { size[a] / n[a] as f64 } else { size[a] };
        }
    }
    let mut periodic = spec.periodic;
    periodic[2] &= !flat;
    let mut grid = Grid { n, spacing, origin: spec.origin, periodic, stretched: [None, None, None] };
    let mut notes = Vec::new();
    for (a, c) in coordinates.iter().enumerate() {
        let Some(c) = c else { continue };
        let axis = ["x", "y", "z"][a];
        match c.check(a, n[a])? {
            Spaced::Equal(first, spacing) => {
                grid.origin[a] = first;
                if n[a] > 1 {
                    grid.spacing[a] = spacing;
                    notes.push(format!("{axis} axis: the coordinates {} are equally spaced, {} apart", c.place(), short(spacing)));
                }
            }
            Spaced::Unequal(positions) => {
                let open = if spec.periodic[a] { ", the axis is open" } else { "" };
                notes.push(format!("{axis} axis: the coordinates {} are unequally spaced{open}", c.place()));
                grid = grid.with_positions(a, positions);
            }
        }
    }
    Ok((grid, notes))
}

/// A number with nine digits, enough to recognise it.
fn short(value: f64) -> f64 {
    format!("{value:.8e}").parse().unwrap_or(value)
}
