//! Progress and notices as values: library code reports, only the console prints.

/// What a run tells whoever watches it. Every method does nothing by default.
pub trait Observe: Sync {
    /// What follows is about a snapshot, the `k`th (from 1) of `n`.
    fn snapshot(&self, _name: &str, _k: u64, _n: u64) {}
    /// A stage begins; `total` counts the units (planes) it will go through, 0 where it does not go through planes.
    fn stage(&self, _name: &str, _total: u64) {}
    /// `units` more are done.
    fn advance(&self, _units: u64) {}
    /// So many bytes were read from files; may come from any thread, at any time.
    fn read(&self, _bytes: u64) {}
    /// So many bytes were written to files; may come from any thread, at any time.
    fn wrote(&self, _bytes: u64) {}
    /// The current stage is over.
    fn done(&self) {}
    /// Something the user should know; also kept in the results.
    fn warning(&self, _text: &str) {}

    /// Something failed and the run goes on without it.
    fn failure(&self, _text: &str) {}
}

/// Watches nothing.
pub struct Silent;

impl Observe for Silent {}
