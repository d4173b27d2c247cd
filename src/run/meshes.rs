//! Writes the meshes of a snapshot into the run folder as they are finished.

use std::fs::File;
use std::io::{self, BufWriter, Read, Seek, SeekFrom, Write};

use crate::base::error::{Error, Result};
use crate::export::atomic::Folder;
use crate::export::ply::{Joins, PlyWriter};
use crate::model::request::{Family, Indicator, Surfaces};
use crate::model::sink::ObjectSink;
use crate::model::source::Fields;
use crate::model::surface::SurfaceMesh;

/// One file a family, or one an object.
pub struct MeshFiles<'a> {
    folder: &'a Folder,
    snapshot: String,
    families: Vec<Family>,
    values: Vec<&'static str>,
    each: bool,
    joins: Joins,
    /// Every file begun.
    begun: Vec<String>,
    together: Vec<Option<Writer<'a>>>,
    faces_kept: usize,
}

type Writer<'a> = PlyWriter<BufWriter<File>, Helper<'a>>;

/// The file where the faces wait that are too many to keep; made when the first are written.
struct Helper<'a> {
    folder: &'a Folder,
    name: String,
    file: Option<File>,
}

impl Helper<'_> {
    fn opened(&mut self) -> io::Result<&mut File> {
        match &mut self.file {
            Some(file) => Ok(file),
            none => Ok(none.insert(self.folder.file(&self.name).map_err(io::Error::other)?)),
        }
    }
}

impl Read for Helper<'_> {
    fn read(&mut self, out: &mut [u8]) -> io::Result<usize> {
        self.opened()?.read(out)
    }
}

impl Write for Helper<'_> {
    fn write(&mut self, bytes: &[u8]) -> io::Result<usize> {
        self.opened()?.write(bytes)
    }

    fn flush(&mut self) -> io::Result<()> {
        self.opened()?.flush()
    }
}

impl Seek for Helper<'_> {
    fn seek(&mut self, to: SeekFrom) -> io::Result<u64> {
        self.opened()?.seek(to)
    }
}

impl Drop for Helper<'_> {
    fn drop(&mut self) {
        if self.file.take().is_some() {
            // Of no use any more, whether its faces were copied or writing failed.
            let _ = self.folder.remove(&self.name);
        }
    }
}

/// What is added to the name of a mesh file for its helper.
const FACES: &str = ".faces";

/// Bytes that small meshes wait for before they are written.
const BUFFER: usize = 1 << 18;

impl<'a> MeshFiles<'a> {
    /// Prepares the files of a snapshot, of whose faces up to `faces_kept` bytes wait in memory; `surfaces` must not be [`Surfaces::None`].
    pub fn new(
        folder: &'a Folder,
        snapshot: &str,
        families: Vec<Family>,
        fields: Fields,
        extras: &[Indicator],
        surfaces: Surfaces,
        flat: bool,
        faces_kept: usize,
    ) -> Result<Self> {
        folder.subfolder(&format!("surfaces/{snapshot}"))?;
        if surfaces == Surfaces::Each {
            for family in &families {
                folder.subfolder(&format!("surfaces/{snapshot}/{}", family.name))?;
            }
        }
        let together = families.iter().map(|_| None).collect();
        let values = SurfaceMesh::value_names(fields, extras);
        Ok(MeshFiles {
            faces_kept,
            folder,
            snapshot: snapshot.to_string(),
            families,
            values,
            each: surfaces == Surfaces::Each,
            joins: if flat { Joins::Edges } else { Joins::Triangles },
            begun: Vec::new(),
            together,
        })
    }

    fn name(&self, family: usize, id: Option<u64>) -> String {
        let family = &self.families[family].name;
        match id {
            Some(id) => format!("surfaces/{}/{family}/{id:06}.ply", self.snapshot),
            None => format!("surfaces/{}/{family}.ply", self.snapshot),
        }
    }

    fn open(&mut self, name: &str, family: usize) -> Result<Writer<'a>> {
        let out = BufWriter::with_capacity(BUFFER, self.folder.file(name)?);
        let helper = Helper { folder: self.folder, name: format!("{name}{FACES}"), file: None };
        self.begun.push(name.to_string());
        let comments = vec![
            format!("ropewalk {}", env!("CARGO_PKG_VERSION")),
            // A line break would end the comment and spoil the header.
            format!("snapshot {}", self.snapshot.replace(char::is_control, " ")),
            format!("family {}", self.families[family]),
        ];
        let writer = PlyWriter::new(out, helper, self.joins, self.values.clone(), comments).map_err(|e| self.failed(name, &e))?;
        Ok(writer.keeping(self.faces_kept / self.families.len().max(1)))
    }

    fn failed(&self, name: &str, e: &std::io::Error) -> Error {
        Error::output("cannot write a mesh").at(self.folder.path(name)).found(e.to_string())
    }

    fn close(&self, name: &str, writer: Writer<'a>) -> Result<()> {
        writer.finish().map_err(|e| self.failed(name, &e))?;
        Ok(())
    }

    /// Completes the files.
    ///
    /// # Errors
    /// `Output`.
    pub fn finish(mut self) -> Result<()> {
        for family in 0..self.families.len() {
            let name = self.name(family, None);
            if let Some(writer) = self.together[family].take() {
                self.close(&name, writer)?;
            }
        }
        Ok(())
    }

    /// Removes what was begun, after a failure.
    pub fn abandon(self) {
        for name in &self.begun {
            // The failure that led here is what gets reported.
            let _ = self.folder.remove(name);
        }
    }
}

impl ObjectSink for MeshFiles<'_> {
    fn put(&mut self, family: usize, meshes: Vec<SurfaceMesh>) -> Result<()> {
        if self.each {
            for mesh in &meshes {
                let name = self.name(family, Some(mesh.id));
                let mut writer = self.open(&name, family)?;
                writer.add(std::slice::from_ref(mesh)).map_err(|e| self.failed(&name, &e))?;
                self.close(&name, writer)?;
            }
            return Ok(());
        }
        let name = self.name(family, None);
        if self.together[family].is_none() {
            self.together[family] = Some(self.open(&name, family)?);
        }
        match &mut self.together[family] {
            Some(writer) => {
                writer.add(&meshes).map_err(|e| Error::output("cannot write a mesh").at(self.folder.path(&name)).found(e.to_string()))
            }
            None => Ok(()),
        }
    }
}
