//! A triangle mesh in physical coordinates.

/// Triangles over shared vertices. Counter-clockwise seen from outside (the low side of the indicator).
#[derive(Debug, Clone, Default, PartialEq)]
pub struct Mesh {
    /// Vertex positions x, y, z in the user's length unit, unwrapped across periodic faces.
    pub vertices: Vec<[f64; 3]>,
    /// Three vertex indices a triangle.
    pub triangles: Vec<[u32; 3]>,
}
