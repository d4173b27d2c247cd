//! How the memory budget is shared out before anything is read, and what has to be refused.

use std::ops::Range;

use crate::base::budget::{rounded_up, size};
use crate::base::error::{Error, Result};
use crate::base::real::Real;
use crate::derive::{Deriver, Plan, Room, filter, z_lines_needs, z_lines_stay};
use crate::export::ply::FACES_KEPT;
use crate::model::request::{Family, Request, Surfaces};
use crate::model::source::{AnySource, PlaneSource};
use crate::run::analysis::Execution;
use crate::run::kept::kept_bytes;
use crate::run::ready::derived;
use crate::run::stream::{alive, block_ranges};

/// Share of the budget for planes that are worked on, where blocks can be made thinner.
const BLOCKS: u64 = 5;

/// What stays in memory between passes, and the blocks of planes.
#[derive(Debug, Clone, PartialEq, Eq)]
pub struct Arrangement {
    /// The blocks that planes are worked on in.
    pub ranges: Vec<Range<usize>>,
    /// Bytes of the planes that are in memory at once, of what is prepared from them, and of who reads them.
    pub blocks: u64,
    /// Bytes that the filter may take.
    pub filter_room: u64,
    /// Bytes of filtered fields, where they stay in memory.
    pub filtered: u64,
    /// Bytes that derivatives along z may take.
    pub lines_room: u64,
    /// Bytes of them, where they stay in memory.
    pub lines: u64,
    /// Whether all planes are kept when they are first read.
    pub keep_planes: bool,
    /// Bytes of all planes.
    pub planes: u64,
    /// Whether the families' indicators are kept from the survey on.
    pub keep_indicators: bool,
    /// Bytes of these.
    pub indicators: u64,
    /// Bytes of files for what stays in none.
    pub disk: u64,
    /// Bytes that are left for objects.
    pub objects: u64,
}

/// Bytes of the faces of mesh files that wait in memory until all vertices are written.
pub fn faces_kept(memory: u64) -> u64 {
    (memory / 16).min(FACES_KEPT as u64)
}

/// Shares out a budget.
///
/// What the request cannot do without comes first, in memory or else in files (filtered fields, derivatives along z); then what saves
/// most: planes that are costly to read, indicators, other planes. A quarter of what there is each time is left.
///
/// # Errors
/// `Limit` when not even the thinnest blocks fit, or what cannot be done without.
pub fn arrange<T: Real>(
    source: &dyn PlaneSource<T>,
    plan: &Plan,
    request: &Request,
    families: &[Family],
    execution: &Execution,
    name: &str,
) -> Result<Arrangement> {
    let (grid, fields, memory) = (source.grid(), source.fields(), execution.memory);
    let deriver = Deriver::<T>::new(grid, fields, plan.clone());
    let (halo, width) = (deriver.halo(), size_of::<T>());
    let planes = grid.cells().saturating_mul((fields.components() * width) as u64);
    let indicators = kept_bytes(grid, families, width);
    let spectral = deriver.wanted_z_lines().is_some();
    let cost =
        |thickness: usize| alive(source, thickness, halo) + source.reader_bytes(thickness) + deriver.prepared_bytes(thickness, spectral);
    let ranges = block_ranges(source, execution.block_planes, |thickness| cost(thickness) <= memory / BLOCKS);
    let blocks = cost(ranges.iter().map(ExactSizeIterator::len).max().unwrap_or(0));
    if blocks > memory {
        return Err(Error::limit("cannot analyse the snapshot within the memory budget")
            .item(name)
            .expected(format!("at most {}", size(memory)))
            .found(format!("a need of {} for the thinnest blocks of planes and their halo", size(blocks)))
            .hint(format!(
                "--memory {} or more, or a derivative of lower order, which reads fewer planes",
                rounded_up(blocks + blocks / 4)
            )));
    }
    let mut left = memory - blocks;
    if request.surfaces == Surfaces::Together {
        left = left.saturating_sub(faces_kept(memory));
    }
    let scratch = execution.scratch.as_deref();
    let together = source.natural_planes().clamp(1, grid.n[2]);
    let (mut filter_room, mut filtered, mut lines_room, mut lines) = (0, 0, 0, 0);
    let mut disk = 0;
    if request.filter.is_some() {
        filter_room = left;
        if filter::stays(grid, fields, width, together, &Room { bytes: left, scratch })? {
            filtered = planes;
            left -= planes;
        } else {
            disk += filter::filter_needs(grid, fields, width, together).disk;
        }
    }
    if spectral {
        lines_room = left;
        if z_lines_stay(grid, fields, width, together, &Room { bytes: left, scratch })? {
            lines = z_lines_needs(grid, fields, width, together).memory;
            left -= lines;
        } else {
            disk += z_lines_needs(grid, fields, width, together).disk;
        }
    }
    // A file takes memory of its own while it is made.
    let crowded = (request.filter.is_some() && filtered == 0) || (spectral && lines == 0);
    let mut take = |bytes: u64| {
        let fits = !crowded && bytes <= left / 4 * 3;
        if fits {
            left -= bytes;
        }
        fits
    };
    let may_keep = source.held().is_none() && request.filter.is_none();
    let costly = may_keep && source.is_costly() && take(planes);
    let keep_indicators = take(indicators);
    let keep_planes = costly || (may_keep && !source.is_costly() && take(planes));
    if keep_planes && spectral {
        lines_room = lines;
    }
    Ok(Arrangement {
        ranges,
        blocks,
        filter_room,
        filtered,
        lines_room,
        lines,
        keep_planes,
        planes,
        keep_indicators,
        indicators,
        disk,
        objects: left,
    })
}

/// Whether a snapshot can be analysed within the budget, as far as its headers tell. Call inside the pool that will do it.
///
/// # Errors
/// `Limit` when it cannot; `Usage` when the request does not fit the fields.
pub fn check(source: &AnySource, name: &str, request: &Request, execution: &Execution) -> Result<()> {
    fn typed<T: Real>(source: &dyn PlaneSource<T>, name: &str, request: &Request, execution: &Execution) -> Result<()> {
        let families = request.families_for(source.fields())?;
        arrange(source, &derived(&families, request), request, &families, execution, name).map(|_| ())
    }
    match source {
        AnySource::F32(s) => typed(&**s, name, request, execution),
        AnySource::F64(s) => typed(&**s, name, request, execution),
    }
}
