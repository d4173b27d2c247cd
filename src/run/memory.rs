//! How the memory budget is shared out before anything is read, and what has to be refused.

use std::ops::Range;

use crate::base::budget::{rounded_up, size};
use crate::base::error::{Error, Result};
use crate::base::real::Real;
use crate::derive::Deriver;
use crate::model::request::{Family, Request};
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
    /// Bytes of the planes that are in memory at once.
    pub blocks: u64,
    /// Whether all planes are kept when they are first read.
    pub keep_planes: bool,
    /// Bytes of all planes.
    pub planes: u64,
    /// Whether the families' indicators are kept from the survey on.
    pub keep_indicators: bool,
    /// Bytes of these.
    pub indicators: u64,
}

/// Shares out a budget.
///
/// Kept come first: planes that are costly to read, then indicators, then other planes. At least a quarter of what remains is left for
/// objects.
///
/// # Errors
/// `Limit` when not even the thinnest blocks fit.
pub fn arrange<T: Real>(
    source: &dyn PlaneSource<T>,
    families: &[Family],
    halo: usize,
    wanted: Option<usize>,
    memory: u64,
    name: &str,
) -> Result<Arrangement> {
    let grid = source.grid();
    let planes = grid.cells().saturating_mul((source.fields().components() * size_of::<T>()) as u64);
    let indicators = kept_bytes(grid, families, size_of::<T>());
    let ranges = block_ranges(source, wanted, halo, memory / BLOCKS);
    let thickest = ranges.iter().map(ExactSizeIterator::len).max().unwrap_or(0);
    let blocks = alive(source, thickest, halo);
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
    let mut take = |bytes: u64| {
        let fits = bytes <= left / 4 * 3;
        if fits {
            left -= bytes;
        }
        fits
    };
    let held = source.held().is_some();
    let costly = source.is_costly() && !held && take(planes);
    let keep_indicators = take(indicators);
    let keep_planes = costly || (!held && !source.is_costly() && take(planes));
    Ok(Arrangement { ranges, blocks, keep_planes, planes, keep_indicators, indicators })
}

/// Whether a snapshot can be analysed within the budget, as far as its headers tell.
///
/// # Errors
/// `Limit` when it cannot; `Usage` when the request does not fit the fields.
pub fn check(source: &AnySource, name: &str, request: &Request, execution: &Execution) -> Result<()> {
    fn typed<T: Real>(source: &dyn PlaneSource<T>, name: &str, request: &Request, execution: &Execution) -> Result<()> {
        let families = request.families_for(source.fields())?;
        let halo = Deriver::<T>::new(source.grid(), source.fields(), derived(&families, request)).halo();
        arrange(source, &families, halo, execution.block_planes, execution.memory, name).map(|_| ())
    }
    match source {
        AnySource::F32(s) => typed(&**s, name, request, execution),
        AnySource::F64(s) => typed(&**s, name, request, execution),
    }
}
