//! Marching-cubes table: how the surface loops run through a cube, for every inside mask and every face decision.
//!
//! Corner `c` of a cube sits at `y = c & 1`, `z = c >> 1 & 1`, `x = c >> 2 & 1`, so the low four bits of an inside
//! mask are the column of corners at lower x and the high four bits the column at upper x. The table is computed, not
//! typed in: on every face, seen from outside the cube, a segment runs from the crossing where a counter-clockwise
//! walk enters the inside to a crossing where it leaves; segments of the six faces chain into loops which wind
//! counter-clockwise seen from the outside (low) side of the surface.
//!
//! Two vertices of a loop that lie on one cube face but are not neighbours on the loop could be joined by a chord of the
//! neighbour cube too. Loops of four and five vertices have no such pair (a test holds this), so any of their chords may
//! be used.

use std::sync::LazyLock;

/// Corner bit of each axis x, y, z.
pub(super) const AXIS_BIT: [usize; 3] = [4, 1, 2];

/// A cube edge: its lower corner and its axis.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub(super) struct CubeEdge {
    /// Lower corner.
    pub corner: u8,
    /// Axis 0, 1, 2 = x, y, z.
    pub axis: u8,
}

/// The twelve cube edges, four to an axis.
pub(super) const EDGES: [CubeEdge; 12] = cube_edges();

/// Corners of the six faces (x low, x high, y low, y high, z low, z high), counter-clockwise seen from outside the cube.
pub(super) const FACES: [[u8; 4]; 6] = cube_faces();

/// Longest loop a cube can hold.
pub(super) const LONGEST: usize = 12;

/// One closed loop of crossing edges.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub(super) struct Loop {
    /// Number of crossing edges, 3 to 12.
    pub len: u8,
    /// Indices into [`EDGES`], in order around the loop.
    pub edges: [u8; LONGEST],
    /// For each segment, from an edge to the next around the loop: the place in the loop of the edge it is filed under (upper bits)
    /// and which of the four faces at that edge it lies on (lower two bits). Both cubes at a face file a segment under
    /// the same grid edge and number, so each finds what the other left there.
    pub keys: [u8; LONGEST],
}

/// Loops for all masks and decisions.
pub(super) struct Table {
    /// Bit f: face f has two diagonal inside corners.
    ambiguous: [u8; 256],
    /// First case of each mask; one case for each combination of decisions.
    first: [u16; 256],
    /// First loop of each case, and one past the last.
    cases: Vec<u16>,
    loops: Vec<Loop>,
}

/// The table, computed on first use.
pub(super) static TABLE: LazyLock<Table> = LazyLock::new(Table::new);

impl Table {
    /// Loops of a cube. `joined(face)` is asked for every ambiguous face whether its two inside corners are connected
    /// across the face.
    #[inline]
    pub fn loops(&self, mask: u8, joined: impl Fn(usize) -> bool) -> &[Loop] {
        let mut case = self.first[mask as usize] as usize;
        let mut faces = self.ambiguous[mask as usize];
        let mut bit = 1;
        while faces != 0 {
            if joined(faces.trailing_zeros() as usize) {
                case += bit;
            }
            bit <<= 1;
            faces &= faces - 1;
        }
        &self.loops[self.cases[case] as usize..self.cases[case + 1] as usize]
    }

    fn new() -> Table {
        let mut table = Table { ambiguous: [0; 256], first: [0; 256], cases: vec![0], loops: Vec::new() };
        for mask in 0..=255u8 {
            let ambiguous = (0..6).filter(|&f| face_is_ambiguous(mask, f)).fold(0u8, |m, f| m | 1 << f);
            table.ambiguous[mask as usize] = ambiguous;
            table.first[mask as usize] = (table.cases.len() - 1) as u16;
            for decisions in 0..1u8 << ambiguous.count_ones() {
                trace(mask, spread(decisions, ambiguous), &mut table.loops);
                table.cases.push(table.loops.len() as u16);
            }
        }
        table
    }
}

/// Moves the low bits of `bits` to the set positions of `places`.
fn spread(bits: u8, places: u8) -> u8 {
    let set = (0..8).filter(|p| places >> p & 1 == 1);
    set.enumerate().fold(0, |out, (i, p)| out | (bits >> i & 1) << p)
}

fn inside(mask: u8, corner: u8) -> bool {
    mask >> corner & 1 == 1
}

fn face_is_ambiguous(mask: u8, face: usize) -> bool {
    let [a, b, c, d] = FACES[face].map(|corner| inside(mask, corner));
    a == c && b == d && a != b
}

/// The cube edge between two neighbouring corners.
fn edge_between(a: u8, b: u8) -> usize {
    let (low, bit) = (a & b, (a ^ b) as usize);
    EDGES.iter().position(|e| e.corner == low && AXIS_BIT[e.axis as usize] == bit).expect("corners of a face are neighbours")
}

/// Appends the loops of one cube; bit f of `joined` holds the decision of ambiguous face f.
fn trace(mask: u8, joined: u8, loops: &mut Vec<Loop>) {
    let mut next = [None; 12];
    let mut face_of = [0; 12];
    for face in 0..6 {
        let corners = FACES[face];
        let entering = |i: usize| !inside(mask, corners[i % 4]) && inside(mask, corners[(i + 1) % 4]);
        let leaving = |i: usize| inside(mask, corners[i % 4]) && !inside(mask, corners[(i + 1) % 4]);
        for i in (0..4).filter(|&i| entering(i)) {
            // Walking on from an entry the first exit cuts off the inside corner just entered; the exit before the
            // entry cuts off the outside corner between them, which joins the two inside corners.
            let mut steps = if face_is_ambiguous(mask, face) && joined >> face & 1 == 1 { [3, 2, 1] } else { [1, 2, 3] }.into_iter();
            let exit = steps.find(|s| leaving(i + s)).expect("a face is left as often as entered");
            let edge = |i: usize| edge_between(corners[i % 4], corners[(i + 1) % 4]);
            next[edge(i)] = Some(edge(i + exit) as u8);
            face_of[edge(i)] = face;
        }
    }
    for start in 0..12 {
        let mut traced = Loop { len: 0, edges: [0; LONGEST], keys: [0; LONGEST] };
        let mut at = start;
        while let Some(following) = next[at].take() {
            traced.edges[traced.len as usize] = at as u8;
            traced.len += 1;
            at = following as usize;
        }
        if traced.len > 0 {
            let n = traced.len as usize;
            for k in 0..n {
                let face = face_of[traced.edges[k] as usize];
                // Segments run opposite ways in the two cubes: the first edge as seen from the cube below the face.
                let at = if face % 2 == 1 { k } else { (k + 1) % n };
                traced.keys[k] = (at as u8) << 2 | side_of_edge(traced.edges[at] as usize, face);
            }
            loops.push(traced);
        }
    }
}

/// Number, among the four faces at a grid edge, of a face of the cube that has both.
fn side_of_edge(edge: usize, face: usize) -> u8 {
    let CubeEdge { corner, axis } = EDGES[edge];
    let (b, c) = ((axis as usize + 1) % 3, (axis as usize + 2) % 3);
    let high = |axis: usize| (corner as usize & AXIS_BIT[axis] != 0) as u8;
    // A face across one of these axes lies along the other, on the side where the cube is.
    if face / 2 == b { high(c) } else { 2 + high(b) }
}

const fn cube_edges() -> [CubeEdge; 12] {
    let mut edges = [CubeEdge { corner: 0, axis: 0 }; 12];
    let mut count = 0;
    let mut axis = 0;
    while axis < 3 {
        let mut corner = 0;
        while corner < 8 {
            if corner & AXIS_BIT[axis] == 0 {
                edges[count] = CubeEdge { corner: corner as u8, axis: axis as u8 };
                count += 1;
            }
            corner += 1;
        }
        axis += 1;
    }
    edges
}

const fn cube_faces() -> [[u8; 4]; 6] {
    let mut faces = [[0; 4]; 6];
    let mut axis = 0;
    while axis < 3 {
        // (second, third) x axis is right-handed: this order is counter-clockwise about the positive axis.
        let (u, v) = (AXIS_BIT[(axis + 1) % 3] as u8, AXIS_BIT[(axis + 2) % 3] as u8);
        let high = AXIS_BIT[axis] as u8;
        faces[2 * axis] = [0, v, u | v, u];
        faces[2 * axis + 1] = [high, high | u, high | u | v, high | v];
        axis += 1;
    }
    faces
}

#[cfg(test)]
mod tests {
    use super::*;

    /// What both sides of a face must agree on: axis, side, inside corners, decision.
    type FaceKey = (usize, bool, Vec<bool>, bool);

    /// Calls `check(mask, decisions by face, loops)` for every case.
    fn for_all(mut check: impl FnMut(u8, u8, &[Loop])) {
        for mask in 0..=255u8 {
            let ambiguous = TABLE.ambiguous[mask as usize];
            for decisions in 0..1u8 << ambiguous.count_ones() {
                let joined = spread(decisions, ambiguous);
                check(mask, joined, TABLE.loops(mask, |f| joined >> f & 1 == 1));
            }
        }
    }

    /// Whether two cube edges lie on a common face: they agree in the position along an axis neither of them runs along.
    fn share_face(a: u8, b: u8) -> bool {
        let (a, b) = (EDGES[a as usize], EDGES[b as usize]);
        (0..3u8).any(|axis| axis != a.axis && axis != b.axis && (a.corner ^ b.corner) as usize & AXIS_BIT[axis as usize] == 0)
    }

    fn crosses(mask: u8, edge: usize) -> bool {
        let e = EDGES[edge];
        inside(mask, e.corner) != inside(mask, e.corner | AXIS_BIT[e.axis as usize] as u8)
    }

    /// Directed loop segments lying on a face, as the neighbour cube names them too: the corner bit of the face's own
    /// axis is cleared.
    fn segments(loops: &[Loop], face: usize) -> Vec<[CubeEdge; 2]> {
        let (axis, high) = (face / 2, face % 2 == 1);
        let on_face = |e: CubeEdge| e.axis as usize != axis && (e.corner as usize & AXIS_BIT[axis] != 0) == high;
        let flat = |e: CubeEdge| CubeEdge { corner: e.corner & !(AXIS_BIT[axis] as u8), ..e };
        let mut found = Vec::new();
        for l in loops {
            let n = l.len as usize;
            for i in 0..n {
                let (a, b) = (EDGES[l.edges[i] as usize], EDGES[l.edges[(i + 1) % n] as usize]);
                if on_face(a) && on_face(b) {
                    found.push([flat(a), flat(b)]);
                }
            }
        }
        found.sort_by_key(|s| s.map(|e| (e.corner, e.axis)));
        found
    }

    #[test]
    fn every_crossing_edge_is_on_exactly_one_closed_loop() {
        let mut cases = 0;
        for_all(|mask, _, loops| {
            cases += 1;
            let mut seen = [0; 12];
            for l in loops {
                assert!(l.len >= 3, "mask {mask}");
                let edges = &l.edges[..l.len as usize];
                for (i, &e) in edges.iter().enumerate() {
                    seen[e as usize] += 1;
                    // Closed: consecutive crossings, the last and the first included, lie on a common face.
                    assert!(share_face(e, edges[(i + 1) % edges.len()]), "mask {mask}");
                }
            }
            for edge in 0..12 {
                assert_eq!(seen[edge], crosses(mask, edge) as i32, "mask {mask} edge {edge}");
            }
        });
        assert!(cases > 256);
    }

    #[test]
    fn both_cubes_at_a_face_draw_the_same_segments_in_opposite_directions() {
        // Segments depend on the face's own four corners and decision alone, and the two sides run opposite ways.
        use std::collections::HashMap;
        let mut drawn: HashMap<FaceKey, Vec<[CubeEdge; 2]>> = HashMap::new();
        for_all(|mask, joined, loops| {
            for face in 0..6 {
                let axis = face / 2;
                let flat = (0..8u8).filter(|c| *c as usize & AXIS_BIT[axis] == 0);
                let side = if face % 2 == 1 { AXIS_BIT[axis] as u8 } else { 0 };
                let pattern: Vec<bool> = flat.map(|c| inside(mask, c | side)).collect();
                let key = (axis, face % 2 == 1, pattern, joined >> face & 1 == 1);
                let mine = segments(loops, face);
                let known = drawn.entry(key).or_insert_with(|| mine.clone());
                assert_eq!(*known, mine, "mask {mask} face {face}");
            }
        });
        assert_eq!(drawn.len(), 3 * 2 * (16 + 2));
        for ((axis, high, pattern, joined), segments) in &drawn {
            let mut reversed: Vec<_> = segments.iter().map(|s| [s[1], s[0]]).collect();
            reversed.sort_by_key(|s| s.map(|e| (e.corner, e.axis)));
            assert_eq!(drawn[&(*axis, !*high, pattern.clone(), *joined)], reversed);
        }
    }

    #[test]
    fn chords_of_short_loops_lie_in_no_face() {
        for_all(|mask, _, loops| {
            for l in loops.iter().filter(|l| l.len <= 5) {
                let n = l.len as usize;
                for i in 0..n {
                    for j in i + 2..n.min(i + n - 1) {
                        assert!(!share_face(l.edges[i], l.edges[j]), "mask {mask}: {l:?}");
                    }
                }
            }
        });
    }

    #[test]
    fn joining_a_face_connects_its_inside_corners() {
        // Corners 0 and 3 are diagonal on the face of lower x: apart they are two triangles, joined one loop of six.
        let apart = TABLE.loops(0b1001, |_| false);
        assert_eq!(apart.iter().map(|l| l.len).collect::<Vec<_>>(), [3, 3]);
        let joined = TABLE.loops(0b1001, |_| true);
        assert_eq!(joined.iter().map(|l| l.len).collect::<Vec<_>>(), [6]);
    }

    #[test]
    fn single_inside_corner_winds_counter_clockwise_seen_from_outside() {
        // Corner 0 alone: the normal of the triangle on the x, y, z edges, in this order, points to (+, +, +).
        let loops = TABLE.loops(1, |_| false);
        assert_eq!(loops.len(), 1);
        let axes: Vec<u8> = (0..3).map(|i| EDGES[loops[0].edges[i] as usize].axis).collect();
        let start = axes.iter().position(|&a| a == 0).unwrap();
        assert_eq!([axes[start], axes[(start + 1) % 3], axes[(start + 2) % 3]], [0, 1, 2]);
    }
}
