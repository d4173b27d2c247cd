//! Statistics of the whole box in streaming form: what planes hold, spectra of lines, gradient sums, indicator sums, levels, alignment.

pub mod box_alignment;
pub mod levels;
pub mod moments;
pub mod scan;
pub mod spectra;
