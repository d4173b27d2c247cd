//! Reading snapshots: every storage and axis order comes back value for value, every fault has its exact message.

mod errors;
mod files;
mod hdf5;
mod npy;
