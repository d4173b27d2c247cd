//! Axis orders: from letters such as `zyx` or `czyx` to the place of every axis in an array.

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
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub(super) struct Order {
    /// Place of x, y, z among the three space axes.
    pub places: [usize; 3],
    /// Where the component axis was said to be.
    pub component: Option<End>,
    letters: [char; 3],
}

impl Order {
    /// Understands a permutation of `xyz` with an optional `c` first or last.
    pub fn parse(text: &str) -> Result<Order> {
        let (component, rest) = if let Some(rest) = text.strip_prefix('c') {
            (Some(End::First), rest)
        } else if let Some(rest) = text.strip_suffix('c') {
            (Some(End::Last), rest)
        } else {
            (None, text)
        };
        let place = |axis: char| rest.chars().position(|l| l == axis);
        match (place('x'), place('y'), place('z'), rest.chars().count()) {
            (Some(x), Some(y), Some(z), 3) => {
                let mut letters = ['x'; 3];
                letters[y] = 'y';
                letters[z] = 'z';
                Ok(Order { places: [x, y, z], component, letters })
            }
            _ => Err(Error::usage("cannot use the axis order")
                .item("--order")
                .expected("a permutation of xyz with an optional c first or last")
                .found(format!("{text:?}"))
                .hint("--order zyx for arrays with z slowest and x fastest")),
        }
    }

    /// The space axes as letters.
    pub fn letters(&self) -> String {
        self.letters.iter().collect()
    }
}

/// Place of every axis in one array, slowest axis 0.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub(super) struct Axes {
    /// Axis of x, y, z.
    pub space: [usize; 3],
    /// Axis of the components, if the array has one.
    pub component: Option<End>,
}

impl Axes {
    /// The axes of an array of the given order.
    pub fn new(order: &Order, component: Option<End>) -> Axes {
        let shift = usize::from(component == Some(End::First));
        Axes { space: order.places.map(|p| p + shift), component }
    }

    /// Number of axes.
    pub fn rank(&self) -> usize {
        3 + usize::from(self.component.is_some())
    }

    /// Number of components in the array.
    pub fn components(&self) -> usize {
        if self.component.is_some() { 3 } else { 1 }
    }

    /// Whether z is slower than y and y slower than x.
    pub fn is_zyx(&self) -> bool {
        self.space[2] < self.space[1] && self.space[1] < self.space[0]
    }

    /// Start and count along every axis of the planes `z0..z1`: of component `c` where the components
    /// come first, of all of them where they come last.
    pub fn block(&self, n: [usize; 3], z0: usize, z1: usize, c: usize) -> (Vec<usize>, Vec<usize>) {
        let mut start = vec![0; self.rank()];
        let mut count = vec![1; self.rank()];
        for a in 0..3 {
            count[self.space[a]] = n[a];
        }
        start[self.space[2]] = z0;
        count[self.space[2]] = z1 - z0;
        match self.component {
            Some(End::First) => start[0] = c,
            Some(End::Last) => count[3] = 3,
            None => {}
        }
        (start, count)
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn places_follow_the_letters() {
        let o = Order::parse("yzxc").unwrap();
        assert_eq!(o.places, [2, 0, 1]);
        assert_eq!(o.component, Some(End::Last));
        assert_eq!(o.letters(), "yzx");
        assert_eq!(Axes::new(&o, Some(End::First)).space, [3, 1, 2]);
        assert!(Axes::new(&Order::parse("zyx").unwrap(), None).is_zyx());
        assert!(!Axes::new(&o, None).is_zyx());
    }

    #[test]
    fn blocks_pick_planes_and_components() {
        let o = Order::parse("xzy").unwrap();
        let n = [12, 10, 9];
        assert_eq!(Axes::new(&o, None).block(n, 2, 5, 0), (vec![0, 2, 0], vec![12, 3, 10]));
        let first = Axes::new(&o, Some(End::First));
        assert_eq!(first.block(n, 2, 5, 1), (vec![1, 0, 2, 0], vec![1, 12, 3, 10]));
        let last = Axes::new(&o, Some(End::Last));
        assert_eq!(last.block(n, 2, 5, 1), (vec![0, 2, 0, 0], vec![12, 3, 10, 3]));
    }

    #[test]
    fn nonsense_is_refused() {
        for bad in ["", "xyzz", "xxy", "zcyx", "cxyzc", "xy", "XYZ", "c"] {
            assert!(Order::parse(bad).is_err(), "{bad}");
        }
    }
}
