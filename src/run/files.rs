//! Everything that is written of one snapshot while it is analysed: label volumes, cut-outs, meshes.

use std::collections::VecDeque;

use crate::base::error::Result;
use crate::base::observe::Observe;
use crate::export::atomic::Folder;
use crate::export::cutout::CutOut;
use crate::export::hdf5::Hdf5File;
use crate::export::labels;
use crate::math::diff::WIDTH;
use crate::model::object::Object;
use crate::model::request::{CutOuts, Family, Outputs, Request, Surfaces};
use crate::model::sink::{CutPlanes, FamilyObjects, ObjectSink};
use crate::model::source::Fields;
use crate::model::surface::SurfaceMesh;
use crate::run::memory::faces_kept;
use crate::run::meshes::MeshFiles;
use crate::space::cut::CutBox;

/// Cut-outs open at a time; systems limit open files to some hundred.
const MOST_OPEN: usize = 32;

/// The files of one snapshot.
pub struct SnapshotFiles<'a> {
    folder: &'a Folder,
    observe: &'a dyn Observe,
    snapshot: String,
    outputs: &'a Outputs,
    meshes: Option<MeshFiles<'a>>,
    /// Where each cut-out lies, in the order in which they were asked for.
    cuts: Vec<(String, CutOut)>,
    open: VecDeque<(usize, Hdf5File)>,
    /// Which of the named cut-outs have been seen.
    seen: Vec<bool>,
}

impl<'a> SnapshotFiles<'a> {
    /// Prepares the files of a snapshot.
    ///
    /// # Errors
    /// `Output`.
    pub fn new(
        folder: &'a Folder,
        snapshot: &str,
        families: Vec<Family>,
        fields: Fields,
        flat: bool,
        request: &Request,
        outputs: &'a Outputs,
        memory: u64,
        observe: &'a dyn Observe,
    ) -> Result<Self> {
        let meshes = if request.surfaces == Surfaces::None {
            None
        } else {
            Some(MeshFiles::new(
                folder,
                snapshot,
                families,
                fields,
                &request.mesh_values,
                request.surfaces,
                flat,
                faces_kept(memory) as usize,
            )?)
        };
        let named = if let CutOuts::Named(list) = &outputs.cut_outs { list.len() } else { 0 };
        let (cuts, open) = (Vec::new(), VecDeque::new());
        Ok(SnapshotFiles { folder, observe, snapshot: snapshot.to_string(), outputs, meshes, cuts, open, seen: vec![false; named] })
    }

    /// The objects of a family that are cut out.
    fn chosen<'o>(&mut self, found: &FamilyObjects<'o>) -> Vec<&'o Object> {
        match &self.outputs.cut_outs {
            CutOuts::None => Vec::new(),
            CutOuts::Largest(n) => {
                let mut by_size: Vec<&Object> = found.objects.iter().collect();
                by_size.sort_by_key(|o| (std::cmp::Reverse(o.tally.moments.count), o.id));
                by_size.truncate(*n);
                by_size
            }
            CutOuts::Named(list) => {
                let mut out: Vec<&Object> = Vec::new();
                for ((family, id), seen) in list.iter().zip(&mut self.seen) {
                    if family.as_ref().is_some_and(|f| *f != found.family.name) {
                        continue;
                    }
                    if let Some(o) = found.objects.iter().find(|o| o.id == *id) {
                        *seen = true;
                        if out.iter().all(|other| other.id != *id) {
                            out.push(o);
                        }
                    }
                }
                out
            }
        }
    }

    /// Completes the files; returns what the user should know.
    ///
    /// # Errors
    /// `Output`.
    pub fn finish(mut self) -> Result<Vec<String>> {
        self.open.drain(..).try_for_each(|(_, file)| file.close())?;
        if let Some(meshes) = self.meshes {
            meshes.finish()?;
        }
        let CutOuts::Named(list) = &self.outputs.cut_outs else { return Ok(Vec::new()) };
        let name = |(family, id): &(Option<String>, u64)| family.as_ref().map_or(id.to_string(), |f| format!("{f}:{id}"));
        let missing: Vec<String> = list.iter().zip(&self.seen).filter(|(_, seen)| !**seen).map(|(wanted, _)| name(wanted)).collect();
        Ok(if missing.is_empty() { Vec::new() } else { vec![format!("no cut-out, for want of a listed object: {}", missing.join(", "))] })
    }

    /// Removes what was begun, after a failure.
    pub fn abandon(mut self) {
        self.open.clear();
        for kind in ["labels", "cutouts"] {
            // The failure that led here is what gets reported.
            let _ = self.folder.remove_folder(&format!("{kind}/{}", self.snapshot));
        }
        if let Some(meshes) = self.meshes {
            meshes.abandon();
        }
    }
}

impl ObjectSink for SnapshotFiles<'_> {
    fn objects(&mut self, found: &FamilyObjects<'_>) -> Result<Vec<CutBox>> {
        let (snapshot, family) = (&self.snapshot, &found.family.name);
        if self.outputs.labels {
            let planes = found.grid.n[2] as u64;
            self.observe.stage("labels", planes);
            self.folder.subfolder(&format!("labels/{snapshot}"))?;
            labels::write(&self.folder.path(&format!("labels/{snapshot}/{family}.h5")), snapshot, found)?;
            self.observe.advance(planes);
            self.observe.done();
        }
        let chosen = self.chosen(found);
        let place = format!("cutouts/{}/{family}", self.snapshot);
        if chosen.is_empty() {
            return Ok(Vec::new());
        }
        self.observe.stage("cut-outs", 0);
        self.folder.subfolder(&place)?;
        let mut boxes = Vec::new();
        for object in chosen {
            let cut = CutBox::around(&object.intervals, self.outputs.cut_out_margin, WIDTH, found.grid);
            let out = CutOut::new(found, cut);
            let name = format!("{place}/{:06}.h5", object.id);
            out.begin(&self.folder.path(&name), &self.snapshot, found, object)?.close()?;
            self.cuts.push((name, out));
            boxes.push(cut);
        }
        self.observe.done();
        Ok(boxes)
    }

    fn cut_planes(&mut self, which: usize, planes: &CutPlanes<'_>) -> Result<()> {
        let (name, out) = &self.cuts[which];
        let place = match self.open.iter().position(|(k, _)| *k == which) {
            Some(place) => place,
            None => {
                if self.open.len() == MOST_OPEN
                    && let Some((_, longest_open)) = self.open.pop_front()
                {
                    longest_open.close()?;
                }
                self.open.push_back((which, Hdf5File::reopen(&self.folder.path(name))?));
                self.open.len() - 1
            }
        };
        out.write(&self.open[place].1, planes)
    }

    fn put(&mut self, family: usize, meshes: Vec<SurfaceMesh>) -> Result<()> {
        self.meshes.as_mut().map_or(Ok(()), |files| files.put(family, meshes))
    }
}
