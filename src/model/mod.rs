//! Height 4: plain data the stages exchange; no input or output.

pub mod columns;
pub mod contents;
pub mod family;
pub mod indicator;
pub mod object;
pub mod request;
pub mod row;
pub mod rows;
pub mod schema;
pub mod sink;
pub mod snapshot;
pub mod source;
pub mod statistics;
pub mod surface;
