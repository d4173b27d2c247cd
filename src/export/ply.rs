//! Surface meshes in the PLY format (binary, little-endian): header through the PLY library, payload packed here.

use std::io::{self, Read, Seek, SeekFrom, Write};

use ply_rs::ply::{Addable, DefaultElement, ElementDef, Encoding, Header, PropertyDef, PropertyType, ScalarType};
use ply_rs::writer::Writer;

use crate::base::par;
use crate::model::surface::SurfaceMesh;

/// What joins the vertices of a file.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Joins {
    /// Triangles of surfaces.
    Triangles,
    /// Edges of contours.
    Edges,
}

/// Writes meshes one after the other into one file whose counts are known only at the end.
///
/// Vertices go straight to the output behind a header of fixed length; faces wait in memory and, beyond
/// [`PlyWriter::keeping`], in a helper. [`PlyWriter::finish`] appends them and rewrites the header with the final counts.
pub struct PlyWriter<W, S> {
    out: W,
    faces: Faces<S>,
    joins: Joins,
    values: Vec<&'static str>,
    comments: Vec<String>,
    header_bytes: usize,
    vertex_count: u64,
    face_count: u64,
}

/// Faces that wait for the last vertex, in order: first those in the helper, then those in memory.
struct Faces<S> {
    kept: Vec<Vec<u8>>,
    bytes: usize,
    /// Bytes that may wait in memory.
    limit: usize,
    helper: S,
    helped: bool,
}

impl<S: Read + Write + Seek> Faces<S> {
    fn push(&mut self, packed: Vec<u8>) -> io::Result<()> {
        self.bytes += packed.len();
        self.kept.push(packed);
        if self.bytes > self.limit {
            for packed in self.kept.drain(..) {
                self.helper.write_all(&packed)?;
            }
            self.bytes = 0;
            self.helped = true;
        }
        Ok(())
    }

    fn write_to(&mut self, out: &mut impl Write) -> io::Result<()> {
        if self.helped {
            self.helper.flush()?;
            self.helper.seek(SeekFrom::Start(0))?;
            io::copy(&mut self.helper, out)?;
        }
        self.kept.drain(..).try_for_each(|packed| out.write_all(&packed))
    }
}

/// Room for digits of the two counts, so that the header keeps its length.
const COUNT_DIGITS: usize = 20;

/// Bytes of faces that wait in memory unless the caller says otherwise: some five million triangles.
pub const FACES_KEPT: usize = 64 << 20;

impl<W: Write + Seek, S: Read + Write + Seek> PlyWriter<W, S> {
    /// Starts a file. `values` names the vertex values behind position and normal; `comments` go into the header; `helper` takes
    /// the faces that are too many to keep.
    ///
    /// # Errors
    /// Those of the output.
    pub fn new(mut out: W, helper: S, joins: Joins, values: Vec<&'static str>, comments: Vec<String>) -> io::Result<Self> {
        let header = header(joins, &values, &comments, 0, 0, 0)?;
        let header_bytes = header.len() + 2 * COUNT_DIGITS;
        out.write_all(&vec![b' '; header_bytes])?;
        let faces = Faces { kept: Vec::new(), bytes: 0, limit: FACES_KEPT, helper, helped: false };
        Ok(PlyWriter { out, faces, joins, values, comments, header_bytes, vertex_count: 0, face_count: 0 })
    }

    /// Lets at most so many bytes of faces wait in memory.
    pub fn keeping(mut self, bytes: usize) -> Self {
        self.faces.limit = bytes;
        self
    }

    /// Appends meshes in order.
    ///
    /// # Errors
    /// Those of the output, and `InvalidData` when vertices outgrow 32-bit indices.
    pub fn add(&mut self, meshes: &[SurfaceMesh]) -> io::Result<()> {
        let mut bases = Vec::with_capacity(meshes.len());
        for m in meshes {
            bases.push(self.vertex_count);
            self.vertex_count += m.positions.len() as u64;
            self.face_count += (m.triangles.len() + m.edges.len()) as u64;
        }
        if self.vertex_count > u64::from(u32::MAX) {
            return Err(io::Error::new(io::ErrorKind::InvalidData, "more than 2^32 vertices in one file; write one file an object"));
        }
        let packed = par::map(meshes, |i, m| (pack_vertices(m), pack_faces(m, bases[i] as u32)));
        for (vertices, faces) in packed {
            self.out.write_all(&vertices)?;
            self.faces.push(faces)?;
        }
        Ok(())
    }

    /// Appends the faces, writes the header and hands the output back.
    ///
    /// # Errors
    /// Those of the output.
    pub fn finish(mut self) -> io::Result<W> {
        self.faces.write_to(&mut self.out)?;
        let bare = header(self.joins, &self.values, &self.comments, self.vertex_count, self.face_count, 0)?;
        let full = header(self.joins, &self.values, &self.comments, self.vertex_count, self.face_count, self.header_bytes - bare.len())?;
        self.out.seek(SeekFrom::Start(0))?;
        self.out.write_all(&full)?;
        self.out.flush()?;
        Ok(self.out)
    }
}

/// The header, its last comment stretched by `padding` characters.
fn header(joins: Joins, values: &[&'static str], comments: &[String], vertices: u64, faces: u64, padding: usize) -> io::Result<Vec<u8>> {
    let mut h = Header::new();
    h.encoding = Encoding::BinaryLittleEndian;
    for c in comments {
        h.comments.push(c.clone());
    }
    let last = format!("objects are told apart by the vertex property object{}", ".".repeat(padding));
    h.comments.push(last);
    let mut vertex = ElementDef::new("vertex".to_string());
    let floats = ["x", "y", "z", "nx", "ny", "nz"].into_iter().chain(values.iter().copied());
    for name in floats {
        vertex.properties.add(PropertyDef::new(name.to_string(), PropertyType::Scalar(ScalarType::Float)));
    }
    vertex.properties.add(PropertyDef::new("object".to_string(), PropertyType::Scalar(ScalarType::UInt)));
    vertex.count = vertices as usize;
    let mut face = match joins {
        Joins::Triangles => {
            let mut face = ElementDef::new("face".to_string());
            let list = PropertyType::List(ScalarType::UChar, ScalarType::UInt);
            face.properties.add(PropertyDef::new("vertex_indices".to_string(), list));
            face
        }
        Joins::Edges => {
            let mut edge = ElementDef::new("edge".to_string());
            for end in ["vertex1", "vertex2"] {
                edge.properties.add(PropertyDef::new(end.to_string(), PropertyType::Scalar(ScalarType::UInt)));
            }
            edge
        }
    };
    face.count = faces as usize;
    h.elements.add(vertex);
    h.elements.add(face);
    let mut bytes = Vec::new();
    Writer::<DefaultElement>::new().write_header(&mut bytes, &h)?;
    Ok(bytes)
}

fn pack_vertices(m: &SurfaceMesh) -> Vec<u8> {
    let width = 4 * (6 + m.values.len() + 1);
    let mut out = vec![0; m.positions.len() * width];
    let id = (m.id as u32).to_le_bytes();
    let (records, _) = out.as_chunks_mut::<4>();
    for (i, record) in records.chunks_exact_mut(width / 4).enumerate() {
        for (to, v) in record[..3].iter_mut().zip(&m.positions[i]) {
            *to = v.to_le_bytes();
        }
        for (to, v) in record[3..6].iter_mut().zip(&m.normals[i]) {
            *to = v.to_le_bytes();
        }
        let (last, values) = record[6..].split_last_mut().expect("room for the number of the object");
        for (to, v) in values.iter_mut().zip(&m.values) {
            *to = v[i].to_le_bytes();
        }
        *last = id;
    }
    out
}

/// Triangles, or edges: a mesh has one of them.
fn pack_faces(m: &SurfaceMesh, base: u32) -> Vec<u8> {
    const RECORD: usize = 13;
    let mut out = vec![3; m.triangles.len() * RECORD];
    for (record, t) in out.as_chunks_mut::<RECORD>().0.iter_mut().zip(&m.triangles) {
        for (k, v) in t.iter().enumerate() {
            record[1 + 4 * k..5 + 4 * k].copy_from_slice(&(v + base).to_le_bytes());
        }
    }
    for v in m.edges.iter().flatten() {
        out.extend_from_slice(&(v + base).to_le_bytes());
    }
    out
}

#[cfg(test)]
mod tests {
    use super::*;
    use std::io::Cursor;

    /// Read back by the PLY library's own parser.
    #[test]
    fn the_library_reads_what_was_packed() {
        let mesh = |id: u64, shift: f32| SurfaceMesh {
            id,
            positions: vec![[shift, 0.0, 0.0], [1.0, shift, 0.0], [0.0, 1.0, 0.5]],
            normals: vec![[0.0, 0.0, 1.0]; 3],
            values: vec![vec![2.5, 3.5, 4.5]],
            triangles: vec![[0, 1, 2]],
            edges: Vec::new(),
        };
        let file = |limit: usize| {
            let (out, helper) = (Cursor::new(Vec::new()), Cursor::new(Vec::new()));
            let mut w = PlyWriter::new(out, helper, Joins::Triangles, vec!["indicator"], vec!["a test".into()]).unwrap().keeping(limit);
            w.add(&[mesh(7, 0.25)]).unwrap();
            w.add(&[mesh(9, 0.75)]).unwrap();
            assert_eq!(w.faces.helped, limit < 26);
            w.finish().unwrap().into_inner()
        };
        let bytes = file(26);
        assert!([0, 13, 20].iter().all(|&limit| file(limit) == bytes));
        let parser = ply_rs::parser::Parser::<DefaultElement>::new();
        let ply = parser.read_ply(&mut Cursor::new(bytes)).unwrap();
        let vertices = &ply.payload["vertex"];
        let faces = &ply.payload["face"];
        assert_eq!((vertices.len(), faces.len()), (6, 2));
        assert_eq!(format!("{:?}", vertices[3]["x"]), "Float(0.75)");
        assert_eq!(format!("{:?}", vertices[4]["indicator"]), "Float(3.5)");
        assert_eq!(format!("{:?}", vertices[5]["object"]), "UInt(9)");
        assert_eq!(format!("{:?}", faces[1]["vertex_indices"]), "ListUInt([3, 4, 5])");
    }
}
