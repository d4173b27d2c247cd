//! Height 4: plain data the stages exchange; no input or output.

pub mod request;
pub mod source;
