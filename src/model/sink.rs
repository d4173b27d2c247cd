//! Who takes what an analysis finds as it finds it: objects with their cells, fields around some of them, meshes.

use crate::base::error::Result;
use crate::model::object::Object;
use crate::model::request::Family;
use crate::model::source::Fields;
use crate::model::surface::SurfaceMesh;
use crate::space::cut::CutBox;
use crate::space::grid::Grid;

/// The objects of one family with their cells, and what a file about them states.
#[derive(Debug, Clone, Copy)]
pub struct FamilyObjects<'a> {
    /// Number of the family.
    pub index: usize,
    /// The family.
    pub family: &'a Family,
    /// Its absolute level.
    pub level: f64,
    /// The grid.
    pub grid: &'a Grid,
    /// The fields.
    pub fields: Fields,
    /// Storage precision, `f32` or `f64`.
    pub precision: &'static str,
    /// Velocity that was subtracted.
    pub frame: [f64; 3],
    /// Time of the snapshot, where known.
    pub time: Option<f64>,
    /// Its objects, by id.
    pub objects: &'a [Object],
}

/// Some planes of a cut-out, in storage precision.
pub struct CutPlanes<'a> {
    /// First plane, counted in the cut-out.
    pub z: usize,
    /// Number of planes.
    pub planes: usize,
    /// The bytes of every component of the snapshot and of the family's indicator, x fastest.
    pub values: Vec<&'a [u8]>,
}

/// Takes results as they come; what it does not override it lets pass.
pub trait ObjectSink {
    /// Takes the objects of a family, once, before anything else of that family. Returns the boxes whose fields it wants.
    ///
    /// # Errors
    /// `Output` when they cannot be written.
    fn objects(&mut self, _found: &FamilyObjects<'_>) -> Result<Vec<CutBox>> {
        Ok(Vec::new())
    }

    /// Takes planes of a box: `which` counts the boxes of all families in the order in which they were asked for. Every plane of a
    /// box comes once; across a periodic face they do not come in ascending order.
    ///
    /// # Errors
    /// `Output` when they cannot be written.
    fn cut_planes(&mut self, _which: usize, _planes: &CutPlanes<'_>) -> Result<()> {
        Ok(())
    }

    /// Takes the meshes of some objects of a family, in an order that is the same for every run.
    ///
    /// # Errors
    /// `Output` when they cannot be written.
    fn put(&mut self, _family: usize, _meshes: Vec<SurfaceMesh>) -> Result<()> {
        Ok(())
    }
}

/// Keeps nothing.
pub struct NoFiles;

impl ObjectSink for NoFiles {}
