//! The edges of a triangle mesh with the triangles on them, grouped by counting, without hash maps.

/// One side of a triangle, seen from an edge.
///
/// The higher vertex index of the edge in the upper half, then the triangle, its side and the direction: one integer,
/// because sorting these is most of the work.
#[derive(Debug, Clone, Copy, PartialEq, Eq, PartialOrd, Ord)]
pub struct HalfEdge(u64);

impl HalfEdge {
    #[inline]
    fn new(triangle: usize, side: usize, from: u32, to: u32) -> HalfEdge {
        let code = (6 * triangle + 2 * side) as u64 + (from > to) as u64;
        HalfEdge((from.max(to) as u64) << 32 | code)
    }

    #[inline]
    fn upper(self) -> u32 {
        (self.0 >> 32) as u32
    }

    /// Index of the triangle.
    #[inline]
    pub fn triangle(self) -> usize {
        self.0 as u32 as usize / 6
    }

    /// Which side of the triangle: 0, 1, 2 for its vertices 0-1, 1-2, 2-0.
    #[inline]
    pub fn side(self) -> usize {
        self.0 as u32 as usize / 2 % 3
    }

    /// Whether the triangle runs along the edge from the higher vertex index to the lower.
    #[inline]
    pub fn downward(self) -> bool {
        self.0 & 1 == 1
    }
}

/// Calls `visit(lower, upper, sides)` once for every edge: its two vertex indices and the triangle sides on it, by
/// ascending triangle. Edges come by ascending lower, then upper index. A side joining a vertex to itself counts as an
/// edge with equal indices.
///
/// # Panics
/// When there are more than 2^32 / 6 triangles, or a triangle names a vertex at or beyond `vertices`.
pub fn for_each_edge(vertices: usize, triangles: &[[u32; 3]], mut visit: impl FnMut(u32, u32, &[HalfEdge])) {
    assert!(triangles.len() < u32::MAX as usize / 6, "half-edges: expected fewer than {} triangles, got {}", u32::MAX / 6, triangles.len());
    let sides = |t: &[u32; 3]| [(t[0], t[1]), (t[1], t[2]), (t[2], t[0])];
    let mut starts = vec![0u32; vertices + 1];
    for t in triangles {
        for (a, b) in sides(t) {
            starts[a.min(b) as usize] += 1;
        }
    }
    // Starts of the lists shifted by one place: filling them moves each entry on to the start of the next list.
    let mut sum = 0;
    for start in &mut starts {
        sum += std::mem::replace(start, sum);
    }
    let mut halves = vec![HalfEdge(0); 3 * triangles.len()];
    for (i, t) in triangles.iter().enumerate() {
        for (side, (a, b)) in sides(t).into_iter().enumerate() {
            let at = &mut starts[a.min(b) as usize];
            halves[*at as usize] = HalfEdge::new(i, side, a, b);
            *at += 1;
        }
    }
    let mut begin = 0;
    for lower in 0..vertices {
        let end = starts[lower] as usize;
        let list = &mut halves[begin..end];
        begin = end;
        list.sort_unstable();
        for same in list.chunk_by(|a, b| a.upper() == b.upper()) {
            visit(lower as u32, same[0].upper(), same);
        }
    }
}

/// What [`for_each_pair`] could not pair.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Default)]
pub struct Unpaired {
    /// Sides without a partner.
    pub open: usize,
    /// Pairs that run along their edge the same way.
    pub same_way: usize,
}

/// Calls `visit(lower, upper, up, down)` for every pair of triangle sides on one edge, in the order in which pairs are
/// completed: `up` is the triangle that runs from the lower to the upper vertex index, `down` the other.
///
/// Faster than [`for_each_edge`], for surfaces of at most two triangles an edge; further sides pair among themselves.
///
/// # Panics
/// When a triangle names a vertex at or beyond `vertices`.
pub fn for_each_pair(vertices: usize, triangles: &[[u32; 3]], mut visit: impl FnMut(u32, u32, usize, usize)) -> Unpaired {
    /// A side that waits for its partner, in a list of its lower vertex.
    struct Waiting {
        upper: u32,
        triangle: u32,
        down: bool,
        next: u32,
    }
    const NONE: u32 = u32::MAX;
    let mut heads = vec![NONE; vertices];
    let mut pool: Vec<Waiting> = Vec::new();
    let mut free = NONE;
    let mut waiting = 0;
    let mut same_way = 0;
    for (i, t) in triangles.iter().enumerate() {
        for (a, b) in [(t[0], t[1]), (t[1], t[2]), (t[2], t[0])] {
            let (lower, upper, down) = (a.min(b), a.max(b), a > b);
            let (mut before, mut at) = (NONE, heads[lower as usize]);
            while at != NONE && pool[at as usize].upper != upper {
                before = at;
                at = pool[at as usize].next;
            }
            if at == NONE {
                let entry = Waiting { upper, triangle: i as u32, down, next: heads[lower as usize] };
                waiting += 1;
                if free == NONE {
                    heads[lower as usize] = pool.len() as u32;
                    pool.push(entry);
                } else {
                    heads[lower as usize] = free;
                    free = std::mem::replace(&mut pool[free as usize], entry).next;
                }
                continue;
            }
            let Waiting { triangle, down: other, next, .. } = pool[at as usize];
            if before == NONE {
                heads[lower as usize] = next;
            } else {
                pool[before as usize].next = next;
            }
            pool[at as usize].next = free;
            free = at;
            waiting -= 1;
            match (other, down) {
                (false, true) => visit(lower, upper, triangle as usize, i),
                (true, false) => visit(lower, upper, i, triangle as usize),
                _ => same_way += 1,
            }
        }
    }
    Unpaired { open: waiting, same_way }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn tetrahedron_has_six_edges_with_two_opposite_sides_each() {
        let triangles = [[0, 2, 1], [0, 1, 3], [1, 2, 3], [2, 0, 3]];
        let mut found = Vec::new();
        for_each_edge(4, &triangles, |a, b, sides| {
            assert_eq!(sides.len(), 2);
            assert_ne!(sides[0].downward(), sides[1].downward());
            for s in sides {
                let t = triangles[s.triangle()];
                let mut ends = [t[s.side()], t[(s.side() + 1) % 3]];
                if s.downward() {
                    ends.reverse();
                }
                assert_eq!(ends, [a, b]);
            }
            found.push((a, b));
        });
        assert_eq!(found, [(0, 1), (0, 2), (0, 3), (1, 2), (1, 3), (2, 3)]);
    }

    #[test]
    fn pairs_are_the_edges_with_two_opposite_sides() {
        let triangles = [[0, 2, 1], [0, 1, 3], [1, 2, 3], [2, 0, 3]];
        let mut found = Vec::new();
        let rest = for_each_pair(4, &triangles, |a, b, up, down| {
            let runs = |t: usize, p: u32, q: u32| (0..3).any(|k| triangles[t][k] == p && triangles[t][(k + 1) % 3] == q);
            assert!(runs(up, a, b) && runs(down, b, a));
            found.push((a, b));
        });
        found.sort_unstable();
        assert_eq!(found, [(0, 1), (0, 2), (0, 3), (1, 2), (1, 3), (2, 3)]);
        assert_eq!(rest, Unpaired::default());
        assert_eq!(for_each_pair(4, &triangles[1..], |_, _, _, _| {}), Unpaired { open: 3, same_way: 0 });
        assert_eq!(for_each_pair(4, &[[0, 1, 2], [0, 1, 3]], |_, _, _, _| {}), Unpaired { open: 4, same_way: 1 });
    }

    #[test]
    fn open_and_overfull_edges_keep_their_counts() {
        let triangles = [[0, 1, 2], [1, 0, 3], [0, 1, 4]];
        let mut counts = Vec::new();
        for_each_edge(5, &triangles, |a, b, sides| counts.push((a, b, sides.len())));
        assert_eq!(counts[0], (0, 1, 3));
        assert!(counts[1..].iter().all(|c| c.2 == 1));
        assert_eq!(counts.len(), 7);
    }
}
