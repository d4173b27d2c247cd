//! Axis orders: from letters such as `zyx` or `czyx` to the place of every axis in an array.

use std::ops::Range;

use crate::base::error::{Error, Result};

/// Which end of the axes the components are on.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub(super) enum End {
    /// Slowest axis: every component is one piece.
    First,
    /// Fastest axis: the components of a sample stand together.
    Last,
}

/// A checked axis order, slowest first.
#[derive(Debug, Clone, PartialEq, Eq)]
pub(super) struct Order {
    /// Where the component axis was said to be.
    pub component: Option<End>,
    /// The space axes: three, or `xy` in some order for planes.
    letters: String,
}

impl Order {
    /// Understands a permutation of `xyz` (of `xy` for planes) with an optional `c` first or last.
    pub fn parse(text: &str) -> Result<Order> {
        let (component, rest) = if let Some(rest) = text.strip_prefix('c') {
            (Some(End::First), rest)
        } else if let Some(rest) = text.strip_suffix('c') {
            (Some(End::Last), rest)
        } else {
            (None, text)
        };
        let mut sorted: Vec<char> = rest.chars().collect();
        sorted.sort_unstable();
        if sorted == ['x', 'y', 'z'] || sorted == ['x', 'y'] {
            return Ok(Order { component, letters: rest.into() });
        }
        Err(Error::usage("cannot use the axis order")
            .item("--order")
            .expected("a permutation of xyz (of xy for planes) with an optional c first or last")
            .found(format!("{text:?}"))
            .hint("--order zyx for arrays with z slowest and x fastest"))
    }

    /// The space axes as letters.
    pub fn letters(&self) -> &str {
        &self.letters
    }

    /// The space axes of an array of `rank` space axes: without z where it has two. None where z is missing.
    pub fn letters_of(&self, rank: usize) -> Option<String> {
        let letters: String = self.letters.chars().filter(|&l| rank == 3 || l != 'z').collect();
        (letters.len() == rank).then_some(letters)
    }
}

/// Samples of a box to read, wrapped indices.
#[derive(Debug, Clone, PartialEq, Eq)]
pub(super) struct Window {
    /// Along x, y, z.
    pub range: [Range<usize>; 3],
}

impl Window {
    /// Whole planes `z`.
    pub fn planes(n: [usize; 3], z: Range<usize>) -> Window {
        Window { range: [0..n[0], 0..n[1], z] }
    }

    /// The same with another range along one axis.
    pub fn with(&self, axis: usize, range: Range<usize>) -> Window {
        let mut out = self.clone();
        out.range[axis] = range;
        out
    }

    /// Samples along x, y, z.
    pub fn size(&self) -> [usize; 3] {
        [0, 1, 2].map(|a| self.range[a].len())
    }

    /// Number of samples.
    pub fn values(&self) -> usize {
        self.size().iter().product()
    }
}

/// Place of every axis in one array, slowest axis 0. An array without z has one of length 1 put before its space axes.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub(super) struct Axes {
    /// Axis of x, y, z.
    pub space: [usize; 3],
    /// Axis of the components, if the array has one.
    pub component: Option<End>,
    /// Number of components in the array.
    pub components: usize,
    /// The axis that was put in.
    pub put_in: Option<usize>,
}

impl Axes {
    /// The axes of an array with the given space axes (three letters, or two) and components.
    pub fn new(letters: &str, component: Option<End>, components: usize) -> Axes {
        let shift = usize::from(component == Some(End::First));
        let flat = letters.len() == 2;
        let place = |l: char| letters.find(l).map_or(shift, |p| p + shift + usize::from(flat));
        Axes { space: [place('x'), place('y'), place('z')], component, components, put_in: flat.then_some(shift) }
    }

    /// The shape with the axis put in.
    pub fn full(&self, shape: &[usize]) -> Vec<usize> {
        let mut shape = shape.to_vec();
        if let Some(at) = self.put_in {
            shape.insert(at, 1);
        }
        shape
    }

    /// Number of axes, that put in included.
    fn rank(&self) -> usize {
        3 + usize::from(self.component.is_some())
    }

    /// Whether planes stand in the file as they are delivered: z slowest and x fastest; z does not matter on a plane.
    pub fn is_zyx(&self, n: [usize; 3]) -> bool {
        (self.space[2] < self.space[1] || n[2] == 1) && self.space[1] < self.space[0]
    }

    /// Start and count along every axis: of component `c` where the components come first, of all of them where they come last.
    pub fn block(&self, at: &Window, c: usize) -> (Vec<usize>, Vec<usize>) {
        let mut start = vec![0; self.rank()];
        let mut count = vec![1; self.rank()];
        for a in 0..3 {
            start[self.space[a]] = at.range[a].start;
            count[self.space[a]] = at.range[a].len();
        }
        match self.component {
            Some(End::First) => start[0] = c,
            Some(End::Last) => count[3] = self.components,
            None => {}
        }
        (start, count)
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    fn axes(order: &str, rank: usize, component: Option<End>) -> Axes {
        Axes::new(&Order::parse(order).unwrap().letters_of(rank).unwrap(), component, 3)
    }

    #[test]
    fn places_follow_the_letters() {
        let o = Order::parse("yzxc").unwrap();
        assert_eq!(o.component, Some(End::Last));
        assert_eq!(o.letters(), "yzx");
        assert_eq!(axes("yzxc", 3, None).space, [2, 0, 1]);
        assert_eq!(axes("yzxc", 3, Some(End::First)).space, [3, 1, 2]);
        assert!(axes("zyx", 3, None).is_zyx([9; 3]));
        assert!(!axes("yzx", 3, None).is_zyx([9; 3]));
        assert!(axes("yxz", 3, None).is_zyx([9, 9, 1]));
    }

    #[test]
    fn planes_have_an_axis_put_in() {
        assert_eq!(axes("zyx", 2, None), axes("yx", 2, None));
        assert_eq!(axes("yx", 2, None).space, [2, 1, 0]);
        let first = axes("cxy", 2, Some(End::First));
        assert_eq!((first.space, first.put_in), ([2, 3, 1], Some(1)));
        assert_eq!(first.full(&[3, 7, 5]), [3, 1, 7, 5]);
        assert_eq!(Order::parse("yx").unwrap().letters_of(3), None);
        let at = Window::planes([7, 5, 1], 0..1);
        assert_eq!(first.block(&at, 2), (vec![2, 0, 0, 0], vec![1, 1, 7, 5]));
    }

    #[test]
    fn blocks_pick_planes_and_components() {
        let at = Window { range: [0..12, 3..10, 2..5] };
        assert_eq!(axes("xzy", 3, None).block(&at, 0), (vec![0, 2, 3], vec![12, 3, 7]));
        let first = axes("xzy", 3, Some(End::First));
        assert_eq!(first.block(&at, 1), (vec![1, 0, 2, 3], vec![1, 12, 3, 7]));
        let last = axes("xzy", 3, Some(End::Last));
        assert_eq!(last.block(&at, 1), (vec![0, 2, 3, 0], vec![12, 3, 7, 3]));
    }

    #[test]
    fn nonsense_is_refused() {
        for bad in ["", "xyzz", "xxy", "zcyx", "cxyzc", "xz", "XYZ", "c", "cx"] {
            assert!(Order::parse(bad).is_err(), "{bad}");
        }
    }
}
