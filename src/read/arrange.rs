//! Checks that the arrays of a snapshot fit together, finds every axis of each, and where each component goes.

use crate::base::error::{Error, Result};
use crate::model::source::Fields;
use crate::read::header::Header;
use crate::read::names::{Choice, Field};
use crate::read::order::{Axes, End, Order};
use crate::read::spec::Staggering;

const WHAT: &str = "cannot use the dataset";
const ORDER_HINT: &str = "--order gives the axes slowest first, with c for a component axis";

/// The axes of every array, in the order of the headers, and the samples along x, y, z.
pub(super) struct Arrangement {
    /// One for each header.
    pub axes: Vec<Axes>,
    /// Common to all.
    pub samples: [usize; 3],
    /// Where the components go.
    pub slots: Slots,
    /// Per axis, whether its magnetic component has one more sample along it: the face behind the last sample.
    pub last_face: [bool; 3],
}

/// Where the components of the arrays go among those of the snapshot: velocity, magnetic field, buoyancy, and last the density
/// where the magnetic field needs it.
#[derive(Debug, Clone, PartialEq)]
pub(super) struct Slots {
    /// For every component of every array its place; none when it is not read.
    pub places: Vec<Vec<Option<usize>>>,
    /// Places that no array fills.
    pub zeros: Vec<usize>,
    /// What is delivered.
    pub fields: Fields,
    /// Whether the density stands behind the fields.
    pub density: bool,
}

impl Slots {
    /// The places of fields with the given numbers of components in each of their arrays.
    pub fn new(parts: &[(Field, Vec<usize>)]) -> Slots {
        let has = |field| parts.iter().any(|(f, _)| *f == field);
        let fields = Fields {
            velocity: has(Field::Velocity),
            magnetic: has(Field::Magnetic),
            buoyancy: has(Field::Buoyancy),
            compressible: has(Field::Density),
        };
        let density = fields.compressible && fields.magnetic;
        let mut slots = Slots { places: Vec::new(), zeros: Vec::new(), fields, density };
        for (field, arrays) in parts {
            let mut next = match field {
                Field::Velocity => Some(0),
                Field::Magnetic => Some(fields.first_magnetic()),
                Field::Buoyancy => Some(fields.components() - 1),
                Field::Density => density.then_some(fields.components()),
            };
            let end = next.map(|n| n + if field.is_vector() { 3 } else { 1 });
            for &components in arrays {
                slots.places.push((0..components).map(|c| next.map(|n| n + c)).collect());
                next = next.map(|n| n + components);
            }
            if let (Some(next), Some(end)) = (next, end) {
                slots.zeros.extend(next..end);
            }
        }
        slots
    }

    /// Number of places.
    pub fn components(&self) -> usize {
        self.fields.components() + usize::from(self.density)
    }

    /// What the user should know of components that are not there.
    pub fn notes(&self) -> Vec<String> {
        let mut out: Vec<String> = Vec::new();
        for &zero in &self.zeros {
            let magnetic = self.fields.magnetic && zero >= self.fields.first_magnetic();
            let field = if magnetic { Field::Magnetic } else { Field::Velocity };
            out.push(format!("the {} has two components: the third is taken as 0", field.word()));
        }
        out
    }
}

/// Checks ranks, component axes and shapes. `headers` follow the names of `choices`. On lower faces a magnetic component may have one
/// more sample along its own axis.
///
/// # Panics
/// When the numbers of names and headers differ or are zero.
pub(super) fn arrange(choices: &[Choice], headers: &[Header], order: &Order, staggering: Staggering) -> Result<Arrangement> {
    // Field, number of names and place among them, for each header.
    let places = |(f, names): &Choice| (0..names.len()).map(|c| (*f, names.len(), c)).collect::<Vec<_>>();
    let sets: Vec<(Field, usize, usize)> = choices.iter().flat_map(places).collect();
    assert_eq!(sets.len(), headers.len(), "one header a name");
    let mut axes = Vec::with_capacity(headers.len());
    for (header, &(field, names, _)) in headers.iter().zip(&sets) {
        axes.push(axes_of(header, field, names, order)?);
    }
    let samples_of = |i: usize| {
        let shape = axes[i].full(&headers[i].shape);
        axes[i].space.map(|a| shape[a])
    };
    // The axis along which an array may have one face more.
    let faced = |i: usize| (sets[i].0 == Field::Magnetic && sets[i].1 > 1).then_some(sets[i].2);
    let first = (0..headers.len()).find(|&i| faced(i).is_none());
    let samples = match first {
        Some(first) => samples_of(first),
        // Components of a magnetic field alone: along every axis the other two have no face more.
        None => (1..headers.len()).fold(samples_of(0), |n, i| std::array::from_fn(|a| n[a].min(samples_of(i)[a]))),
    };
    let first = first.or_else(|| (0..headers.len()).find(|&i| samples_of(i) == samples)).unwrap_or(0);
    let mut last_face = [false; 3];
    for (i, header) in headers.iter().enumerate() {
        let own = samples_of(i);
        let mut less = own;
        if let Some(a) = faced(i).filter(|&a| own[a] == samples[a] + 1) {
            less[a] -= 1;
            last_face[a] = less == samples && staggering == Staggering::LowerFaces;
        }
        if own != samples && !(less == samples && staggering == Staggering::LowerFaces) {
            let text = |n: [usize; 3]| format!("{} x {} x {} samples along x, y, z", n[0], n[1], n[2]);
            let hint = if less == samples {
                "a magnetic component with one more face than samples is one on lower faces: say so"
            } else {
                "all components of a snapshot share one grid"
            };
            let from = if samples_of(first) == samples { format!(" as in {}", headers[first].label) } else { String::new() };
            return Err(header.fault(WHAT).expected(format!("{}{from}", text(samples))).found(text(own)).hint(hint));
        }
        check_samples(header, own)?;
        if sets[i].1 == 2 && own[2] != 1 {
            return Err(header
                .fault(WHAT)
                .expected("a plane, as one of two components")
                .found(header.shape_text())
                .hint(format!("a field in space has three components: {} takes three names", sets[i].0.flag())));
        }
    }
    let mut next = axes.iter().map(|a| a.components);
    let parts: Vec<(Field, Vec<usize>)> = choices.iter().map(|(f, names)| (*f, next.by_ref().take(names.len()).collect())).collect();
    Ok(Arrangement { samples, slots: Slots::new(&parts), axes, last_face })
}

/// Refuses what is no box and no plane; the scheme of derivatives may want more samples later.
pub(super) fn check_samples(header: &Header, n: [usize; 3]) -> Result<()> {
    if n[0] < 2 || n[1] < 2 || n[2] < 1 {
        return Err(header
            .fault(WHAT)
            .expected("at least 2 samples along x and y")
            .found(format!("{} ({} x {} x {} samples along x, y, z)", header.shape_text(), n[0], n[1], n[2]))
            .hint("--order gives the axes slowest first; the axis of length 1 of a plane is z"));
    }
    Ok(())
}

/// The letters of the space axes of an array.
fn letters(header: &Header, order: &Order, rank: usize) -> Result<String> {
    order.letters_of(rank).ok_or_else(|| {
        header
            .place(Error::usage("cannot use the axis order"))
            .expected("x, y and z for an array with three space axes")
            .found(format!("--order {} for {}", order.letters(), header.shape_text()))
            .hint("--order zyx for arrays with z slowest and x fastest")
    })
}

fn axes_of(header: &Header, field: Field, names: usize, order: &Order) -> Result<Axes> {
    let rank = header.shape.len();
    let found = || format!("{} (rank {rank})", header.shape_text());
    if names > 1 || !field.is_vector() {
        if rank == 2 || rank == 3 {
            return Ok(Axes::new(&letters(header, order, rank)?, None, 1));
        }
        let (role, hint) = if field.is_vector() {
            let role = if names == 3 { "as one of three components" } else { "as one of two components" };
            (role, format!("a dataset with a component axis is named alone: {} NAME", field.flag()))
        } else {
            ("as a scalar", format!("{} takes an array without a component axis", field.flag()))
        };
        return Err(header.fault(WHAT).expected(format!("rank 3 (2 on a plane), {role}")).found(found()).hint(hint));
    }
    let no_components = || {
        header
            .fault(WHAT)
            .expected("rank 4 (3 on a plane), space axes and a component axis")
            .found(found())
            .hint(format!("{} takes three names where every component has its own dataset", field.flag()))
    };
    if rank != 3 && rank != 4 {
        return Err(no_components());
    }
    let letters = letters(header, order, rank - 1)?;
    let with = |end: End| Axes::new(&letters, Some(end), header.shape[if end == End::First { 0 } else { rank - 1 }]);
    let fits = |end: End| {
        let axes = with(end);
        let flat = axes.full(&header.shape)[axes.space[2]] == 1;
        axes.components == 3 || (axes.components == 2 && flat)
    };
    let (first, last) = (fits(End::First), fits(End::Last));
    match (order.component, first, last) {
        (Some(End::First), true, _) | (None, true, false) => Ok(with(End::First)),
        (Some(End::Last), _, true) | (None, false, true) => Ok(with(End::Last)),
        (None, true, true) => {
            let o = order.letters();
            Err(header
                .place(Error::usage("cannot tell the component axis"))
                .expected(format!("length {} on the first or on the last axis", lengths(rank)))
                .found(format!("both in {}", header.shape_text()))
                .hint(format!("write --order c{o} or --order {o}c")))
        }
        (None, false, false) if rank == 3 => Err(no_components()),
        (said, _, _) => {
            let wanted = match said {
                Some(End::First) => "on the first axis, where --order has its c",
                Some(End::Last) => "on the last axis, where --order has its c",
                None => "on the first or on the last axis, for the components",
            };
            Err(header.fault(WHAT).expected(format!("length {} {wanted}", lengths(rank))).found(header.shape_text()).hint(ORDER_HINT))
        }
    }
}

/// Lengths of a component axis.
fn lengths(rank: usize) -> &'static str {
    if rank == 4 { "3" } else { "2 or 3" }
}
