//! Height 3: fields made from formulas, with known answers.

pub mod flows;
pub mod random;
