//! From derived rows to objects: runs of cells beyond a level, joined into components, across tiles, blocks and periodic faces.

mod components;
pub mod peaks;
pub mod rows;
mod tile;

pub use components::Labeller;
pub use tile::{ClosedTile, Criterion, TileSweep};
