//! Height 0: knows nothing about grids or flows.

pub mod budget;
pub mod error;
pub mod observe;
pub mod pages;
pub mod par;
pub mod real;
pub mod scratch;
