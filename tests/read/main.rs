//! Reading snapshots: every storage and axis order comes back value for value, every fault has its exact message.

mod chunk_faults;
mod chunks;
mod coordinates;
mod errors;
mod files;
mod flows;
mod guesses;
mod hdf5;
mod inspect;
mod npy;
mod planes;
mod raw;
mod region;
mod series;
mod staggered;
mod steps;
