//! Catalogues of coherent structures from gridded turbulence snapshots.

pub mod base;
pub mod derive;
pub mod detect;
pub mod export;
pub mod math;
pub mod measure;
pub mod model;
pub mod read;
pub mod run;
pub mod space;
pub mod survey;
