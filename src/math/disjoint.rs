//! Disjoint sets whose members know their box offset from the representative, so that objects unwrap and
//! objects that close on themselves through the box are found while joining.

/// Union by index (the smaller root stays), path compression, offsets in whole boxes along x, y, z.
#[derive(Debug, Clone, Default)]
pub struct OffsetSets {
    parent: Vec<u32>,
    /// Box offset of a member relative to its parent: position in the parent's frame = own position + offset * box.
    offset: Vec<[i32; 3]>,
    /// Axes along which a set closes on itself, kept at the root.
    spans: Vec<[bool; 3]>,
}

impl OffsetSets {
    /// `n` sets of one member.
    pub fn new(n: usize) -> Self {
        assert!(n <= u32::MAX as usize, "expected at most 2^32 - 1 members, got {n}");
        OffsetSets { parent: (0..n as u32).collect(), offset: vec![[0; 3]; n], spans: vec![[false; 3]; n] }
    }

    /// Number of members.
    pub fn len(&self) -> usize {
        self.parent.len()
    }

    /// Whether there is no member.
    pub fn is_empty(&self) -> bool {
        self.parent.is_empty()
    }

    /// Representative (the smallest member) and the member's offset in its frame.
    pub fn find(&mut self, member: u32) -> (u32, [i32; 3]) {
        let mut root = member;
        let mut total = [0i32; 3];
        while self.parent[root as usize] != root {
            total = add(total, self.offset[root as usize]);
            root = self.parent[root as usize];
        }
        // Second walk: hang every member of the path under the root.
        let mut at = member;
        let mut rest = total;
        while self.parent[at as usize] != root && at != root {
            let next = self.parent[at as usize];
            let step = self.offset[at as usize];
            self.parent[at as usize] = root;
            self.offset[at as usize] = rest;
            rest = sub(rest, step);
            at = next;
        }
        (root, total)
    }

    /// Says that `b`, shifted by `shift` boxes, touches `a`: in a's frame b lies at its own position + shift * box.
    pub fn join(&mut self, a: u32, b: u32, shift: [i32; 3]) {
        let (ra, oa) = self.find(a);
        let (rb, ob) = self.find(b);
        // Offset of b in ra's frame as this contact says it.
        let seen = add(oa, shift);
        if ra == rb {
            let miss = sub(seen, ob);
            for axis in 0..3 {
                self.spans[ra as usize][axis] |= miss[axis] != 0;
            }
            return;
        }
        let rb_in_ra = sub(seen, ob);
        let (keep, lose, offset) = if ra < rb { (ra, rb, rb_in_ra) } else { (rb, ra, rb_in_ra.map(|v| -v)) };
        self.parent[lose as usize] = keep;
        self.offset[lose as usize] = offset;
        let lost = self.spans[lose as usize];
        for axis in 0..3 {
            self.spans[keep as usize][axis] |= lost[axis];
        }
    }

    /// Axes along which the set of a root closes on itself.
    pub fn spans(&self, root: u32) -> [bool; 3] {
        self.spans[root as usize]
    }
}

fn add(a: [i32; 3], b: [i32; 3]) -> [i32; 3] {
    std::array::from_fn(|i| a[i] + b[i])
}

fn sub(a: [i32; 3], b: [i32; 3]) -> [i32; 3] {
    std::array::from_fn(|i| a[i] - b[i])
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn offsets_add_up_along_a_chain() {
        let mut s = OffsetSets::new(4);
        s.join(2, 3, [1, 0, 0]);
        s.join(1, 2, [0, -1, 0]);
        s.join(0, 1, [0, 0, 0]);
        assert_eq!(s.find(3), (0, [1, -1, 0]));
        assert_eq!(s.find(2), (0, [0, -1, 0]));
        assert_eq!(s.spans(0), [false; 3]);
        s.join(3, 0, [-1, 1, 0]);
        assert_eq!(s.spans(0), [false; 3], "a consistent contact closes nothing");
        s.join(3, 0, [0, 1, 0]);
        assert_eq!(s.spans(0), [true, false, false]);
    }

    #[test]
    fn spans_survive_further_joins() {
        let mut s = OffsetSets::new(3);
        s.join(2, 2, [0, 0, 1]);
        s.join(1, 2, [0; 3]);
        s.join(0, 1, [0; 3]);
        assert_eq!(s.spans(0), [false, false, true]);
    }
}
