//! Whole analyses of fields whose answer is known: exact flows, bodies, random fields, and the same answer however it is computed.

mod bodies;
mod cells;
mod common;
mod ellipsoids;
mod gaussian;
mod guide;
mod labels;
mod levels;
mod meshes;
mod periodic_flows;
mod planes;
mod same_answer;
mod sheets;
mod stretched;
mod symmetries;
mod uniform_flows;
mod vortices;
