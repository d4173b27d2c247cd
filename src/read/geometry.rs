//! The grid of a snapshot: from what the user says of the box, and from coordinates.

use crate::base::error::{Error, Result};
use crate::read::coordinates::{Coordinates, Spaced};
use crate::read::spec::{InputSpec, check_size, no_size};
use crate::space::grid::Grid;

const WHAT: &str = "cannot settle the size of the box";
const AXES: [&str; 3] = ["x", "y", "z"];
/// Share by which a length may differ from that of equally spaced coordinates.
const CONTRADICTS: f64 = 1e-3;
/// Share of their span by which a length may miss what unequal coordinates allow: digits left out where it was written.
const ROUNDED: f64 = 1e-6;

/// The grid, and what the user should know of it.
///
/// # Errors
/// `Usage` when the size of an axis without coordinates is not given, `Input` for coordinates that do not fit.
pub(super) fn grid(spec: &InputSpec, n: [usize; 3], coordinates: &[Option<Coordinates>; 3]) -> Result<(Grid, Vec<String>)> {
    let flat = n[2] == 1;
    let needed = [0, 1, 2].map(|a| coordinates[a].is_none() && !(a == 2 && flat));
    let mut spacing = [1.0; 3];
    if needed.contains(&true) {
        let size = spec.lengths.or(spec.spacing).ok_or_else(|| no_size(needed))?;
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
        let axis = AXES[a];
        let size = spec.lengths.or(spec.spacing).map_or(0.0, |size| size[a]);
        let spaced = c.check(a, n[a])?;
        let length = if n[a] > 1 { agrees(c, a, n[a], size, spec.lengths.is_some())? } else { None };
        if spec.origin[a] != 0.0 && spec.origin[a] != c.values[0] {
            let (first, said) = (c.values[0], spec.origin[a]);
            notes.push(format!("{axis} axis: it begins at {first}, as the coordinates {} say, not at the origin {said}", c.place()));
        }
        match spaced {
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
                grid = match length {
                    Some(length) => grid.with_positions_over(a, positions, length),
                    None => grid.with_positions(a, positions),
                };
            }
        }
    }
    Ok((grid, notes))
}

/// Settles what a length or spacing says of an axis with coordinates, 0 being nothing: the length that its cells have together where
/// they are unequal.
///
/// # Errors
/// `Usage` when it contradicts the coordinates, the error of the coordinates where they are no good.
pub(super) fn agrees(c: &Coordinates, a: usize, n: usize, said: f64, is_length: bool) -> Result<Option<f64>> {
    if said == 0.0 {
        return Ok(None);
    }
    let (axis, place) = (AXES[a], c.place());
    let flag = if is_length { "--lengths" } else { "--spacing" };
    let fault = || Error::usage(WHAT).item(format!("{flag} for {axis}")).found(said.to_string());
    let leave = format!("leave the entry of {axis} 0 to take what the coordinates say");
    if !(said.is_finite() && said > 0.0) {
        return Err(fault().expected("a finite number above 0, or 0").hint(leave));
    }
    let positions = match c.check(a, n)? {
        Spaced::Equal(_, dx) => {
            let whole = n as f64 * dx;
            let wanted = if is_length { whole } else { dx };
            // One sample more or less must not pass on fine grids either.
            if (said - wanted).abs() <= CONTRADICTS.min(0.5 / n as f64) * wanted {
                return Ok(None);
            }
            let without = (n - 1) as f64 * dx;
            let repeats = is_length && (said - without).abs() <= CONTRADICTS.min(0.5 / n as f64) * without;
            let hint = if repeats {
                format!(
                    "the last sample repeats the first one of the period, or the samples lie on both walls: \
                     store the arrays without it, or leave the entry of {axis} 0 for whole cells at the walls"
                )
            } else {
                leave
            };
            let how = format!("{}, as {n} coordinates {place} that are {} apart say", short(wanted), short(dx));
            return Err(fault().expected(how).hint(hint));
        }
        Spaced::Unequal(positions) => positions,
    };
    if !is_length {
        let expected = format!("0, as the coordinates {place} are unequally spaced");
        return Err(fault().expected(expected).hint("--lengths says how long all cells are together"));
    }
    let (first, last) = (positions[0], positions[n - 1]);
    let span = last - first;
    let reach = (positions[1] - first).min(last - positions[n - 2]);
    let (least, most) = (span, span + 2.0 * reach);
    let slack = ROUNDED * span;
    if said < least - slack || said > most + slack {
        return Err(fault()
            .expected(format!("{} to {}, as the coordinates {place} go from {first} to {last}", short(least), short(most)))
            .hint(format!("leave the entry of {axis} 0 for whole cells at the ends")));
    }
    Ok(Some(said.clamp(least, most)))
}

/// Length of all cells of unequal coordinates when no length is given.
pub(super) fn whole_cells(positions: &[f64]) -> f64 {
    let n = positions.len();
    positions[n - 1] - positions[0] + 0.5 * (positions[1] - positions[0] + positions[n - 1] - positions[n - 2])
}

/// A number with nine digits, enough to recognise it.
fn short(value: f64) -> f64 {
    format!("{value:.8e}").parse().unwrap_or(value)
}
