//! The isosurface of one object, ready to be written.

/// A triangle mesh with values at its vertices.
#[derive(Debug, Clone, Default, PartialEq)]
pub struct SurfaceMesh {
    /// The object's number.
    pub id: u64,
    /// Positions x, y, z in the user's length unit, unwrapped across periodic faces.
    pub positions: Vec<[f32; 3]>,
    /// Unit normals, pointing out of the object.
    pub normals: Vec<[f32; 3]>,
    /// Values at the vertices, one array for each of [`SurfaceMesh::value_names`].
    pub values: Vec<Vec<f32>>,
    /// Vertex indices, counter-clockwise seen from outside.
    pub triangles: Vec<[u32; 3]>,
    /// Vertex indices of the edges of a contour, the inside on their left; empty for a surface.
    pub edges: Vec<[u32; 2]>,
}

impl SurfaceMesh {
    /// Names of the vertex values of a snapshot with these fields.
    pub fn value_names(fields: crate::model::source::Fields, extras: &[crate::model::indicator::Indicator]) -> Vec<&'static str> {
        let mut names = vec!["indicator"];
        if fields.velocity {
            names.extend(["speed", "cos_u_vorticity"]);
        }
        if fields.magnetic {
            names.push("cos_current_b");
        }
        if fields.velocity && fields.magnetic {
            names.push("cos_u_b");
        }
        // What is there already is not written twice.
        names.extend(extras.iter().map(|i| i.name()).filter(|n| *n != "speed"));
        names
    }
}
