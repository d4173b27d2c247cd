//! Derivatives and derived quantities against exact flows, defining sums and closed forms.

mod common;
mod criteria;
mod fields;
mod filter;
mod lines;
mod loss;
mod room;
mod schemes;
