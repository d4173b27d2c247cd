//! Isosurfaces of objects: smooth bodies against closed forms, random fields against the rules of a closed manifold.

mod bodies;
mod large;
mod patches;
mod random;
