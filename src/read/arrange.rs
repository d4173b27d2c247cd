//! Checks that the arrays of a snapshot fit together, and finds every axis of each.

use crate::base::error::{Error, Result};
use crate::read::header::Header;
use crate::read::names::{Choice, Field};
use crate::read::order::{Axes, End, Order};

/// Fewest samples along an axis: what an eighth-order central difference spans.
const FEWEST: usize = 9;

/// The axes of every array, in the order of the headers, and the samples along x, y, z.
pub(super) struct Arrangement {
    /// One for each header.
    pub axes: Vec<Axes>,
    /// Common to all.
    pub samples: [usize; 3],
}

/// Checks ranks, component axes and shapes. `headers` follow the names of `choices`.
///
/// # Panics
/// When the numbers of names and headers differ or are zero.
pub(super) fn arrange(choices: &[Choice], headers: &[Header], order: &Order) -> Result<Arrangement> {
    let sets: Vec<(Field, usize)> = choices.iter().flat_map(|(f, names)| names.iter().map(|_| (*f, names.len()))).collect();
    assert_eq!(sets.len(), headers.len(), "one header a name");
    let mut axes = Vec::with_capacity(headers.len());
    for (header, &(field, names)) in headers.iter().zip(&sets) {
        axes.push(axes_of(header, field, names, order)?);
    }
    let samples_of = |i: usize| axes[i].space.map(|a| headers[i].shape[a]);
    let samples = samples_of(0);
    for (i, header) in headers.iter().enumerate() {
        let own = samples_of(i);
        if own != samples {
            let text = |n: [usize; 3]| format!("{} x {} x {} samples along x, y, z", n[0], n[1], n[2]);
            return Err(header
                .fault("cannot use the dataset")
                .expected(format!("{} as in {}", text(samples), headers[0].label))
                .found(text(own))
                .hint("all components of a snapshot share one grid"));
        }
        if own.iter().any(|&n| n < FEWEST) {
            return Err(header
                .fault("cannot use the dataset")
                .expected(format!("at least {FEWEST} samples along every axis (order-8 differences need 9)"))
                .found(header.shape_text())
                .hint("--order gives the axes slowest first, with c for a component axis"));
        }
    }
    Ok(Arrangement { axes, samples })
}

fn axes_of(header: &Header, field: Field, names: usize, order: &Order) -> Result<Axes> {
    let found = || format!("{} (rank {})", header.shape_text(), header.shape.len());
    if names == 3 {
        if header.shape.len() == 3 {
            return Ok(Axes::new(order, None));
        }
        return Err(header
            .fault("cannot use the dataset")
            .expected("rank 3, as one of three components")
            .found(found())
            .hint(format!("a dataset with a component axis is named alone: {} NAME", field.flag())));
    }
    if header.shape.len() != 4 {
        return Err(header
            .fault("cannot use the dataset")
            .expected("rank 4, three space axes and a component axis")
            .found(found())
            .hint(format!("{} takes three names where every component has its own dataset", field.flag())));
    }
    let (first, last) = (header.shape[0] == 3, header.shape[3] == 3);
    let end = match (order.component, first, last) {
        (Some(End::First), true, _) | (None, true, false) => End::First,
        (Some(End::Last), _, true) | (None, false, true) => End::Last,
        (None, true, true) => {
            let o = order.letters();
            return Err(header
                .place(Error::usage("cannot tell the component axis"))
                .expected("length 3 on the first or on the last axis")
                .found(format!("both in {}", header.shape_text()))
                .hint(format!("write --order c{o} or --order {o}c")));
        }
        (said, _, _) => {
            let wanted = match said {
                Some(End::First) => "length 3 on the first axis, where --order has its c",
                Some(End::Last) => "length 3 on the last axis, where --order has its c",
                None => "length 3 on the first or on the last axis, for the components",
            };
            return Err(header
                .fault("cannot use the dataset")
                .expected(wanted)
                .found(header.shape_text())
                .hint("--order gives the axes slowest first, with c for a component axis"));
        }
    };
    Ok(Axes::new(order, Some(end)))
}
