//! Levels by the rms of a whole run: one pass over all snapshots before the first is analysed.

use crate::base::error::{Error, Result};
use crate::base::observe::Observe;
use crate::model::request::{Family, Level, Request};
use crate::read::Opened;
use crate::run::analysis::{Execution, Snapshot, mean_squares};

/// Whether some family's level is a multiple of the run's rms.
pub fn is_wanted(families: &[Family]) -> bool {
    families.iter().any(|f| f.levels().iter().any(|l| matches!(l, Level::RunRms(_))))
}

/// Gathers the mean squares of one snapshot after the other; every snapshot counts once.
#[derive(Debug, Default)]
pub struct RunRms {
    names: Vec<String>,
    sums: Vec<f64>,
    snapshots: u32,
}

impl RunRms {
    /// Adds a snapshot.
    ///
    /// # Errors
    /// Those of [`mean_squares`].
    pub fn add(&mut self, opened: Opened, name: &str, request: &Request, execution: &Execution, observe: &dyn Observe) -> Result<()> {
        let families = request.families_for(opened.source.fields())?;
        let snapshot = Snapshot { name: name.to_string(), time: opened.time, components: opened.components };
        let squares = mean_squares(opened.source, &snapshot, request, execution, observe)?;
        if self.names.is_empty() {
            self.names = families.iter().map(|f| f.name.clone()).collect();
            self.sums = vec![0.0; squares.len()];
        }
        for (sum, square) in self.sums.iter_mut().zip(squares) {
            *sum += square;
        }
        self.snapshots += 1;
        Ok(())
    }

    /// The rms of each family whose level needs it.
    ///
    /// # Errors
    /// `Data` when no snapshot was added.
    pub fn finish(self, families: &[Family]) -> Result<Vec<(String, f64)>> {
        if self.snapshots == 0 {
            return Err(Error::data("cannot settle levels by run-rms").expected("at least one usable snapshot").found("none"));
        }
        let of = |f: &Family| self.names.iter().position(|n| *n == f.name).map(|k| (self.sums[k] / f64::from(self.snapshots)).sqrt());
        Ok(families.iter().filter(|f| is_wanted(std::slice::from_ref(f))).filter_map(|f| of(f).map(|rms| (f.name.clone(), rms))).collect())
    }
}
