//! Cut-outs: all fields around one object as an HDF5 file that is a snapshot of its own.

use std::path::Path;

use crate::base::error::Result;
use crate::export::hdf5::{Hdf5File, Stored};
use crate::model::object::Object;
use crate::model::sink::{CutPlanes, FamilyObjects};
use crate::space::cut::CutBox;

/// What is cut out of which snapshot.
#[derive(Debug, Clone)]
pub struct CutOut {
    /// The box.
    pub cut: CutBox,
    /// Datasets: the components by their usual names, then the indicator.
    pub datasets: Vec<&'static str>,
    /// What their values are.
    pub stored: Stored,
}

impl CutOut {
    /// Lays out the cut-out of an object.
    pub fn new(found: &FamilyObjects<'_>, cut: CutBox) -> CutOut {
        let mut datasets = found.fields.names();
        datasets.push("indicator");
        CutOut { cut, datasets, stored: if found.precision == "f32" { Stored::F32 } else { Stored::F64 } }
    }

    /// Creates the file: everything but the planes.
    ///
    /// # Errors
    /// `Output`.
    pub fn begin(&self, path: &Path, snapshot: &str, found: &FamilyObjects<'_>, object: &Object) -> Result<Hdf5File> {
        let file = Hdf5File::create(path)?;
        file.text("snapshot", snapshot)?;
        file.text("family", &found.family.name)?;
        file.text("definition", &found.family.to_string())?;
        file.text("indicator", found.family.indicator.name())?;
        file.number("id", object.id)?;
        file.number("level", object.level.unwrap_or(found.level))?;
        if let Some(time) = found.time {
            file.number("time", time)?;
        }
        if found.fields.velocity {
            file.triple("frame_velocity", found.frame)?;
        }
        if found.fields.compressible {
            // Without the density, which is not kept, a reader could not know.
            file.number("compressible", 1u32)?;
        }
        file.grid(&self.cut.grid(found.grid))?;
        for name in &self.datasets {
            file.planes(name, self.stored, self.cut.n)?;
        }
        file.planes("mask", Stored::U8, self.cut.n)?;
        file.plane_bytes("mask", Stored::U8, 0, self.cut.n, &self.cut.mask(&object.intervals))?;
        Ok(file)
    }

    /// Writes planes.
    ///
    /// # Errors
    /// `Output`.
    pub fn write(&self, file: &Hdf5File, planes: &CutPlanes<'_>) -> Result<()> {
        let n = [self.cut.n[0], self.cut.n[1], planes.planes];
        for (name, bytes) in self.datasets.iter().zip(&planes.values) {
            file.plane_bytes(name, self.stored, planes.z, n, bytes)?;
        }
        Ok(())
    }
}
