//! What the user says about a snapshot: names, axis order and the box, with the checks that need no file.

use crate::base::error::{Error, Result};
use crate::read::order::Order;
use crate::space::grid::Grid;

/// How to read a snapshot. Triples are in the order x, y, z.
#[derive(Debug, Clone, PartialEq)]
pub struct InputSpec {
    /// Names of the velocity: three (one dataset a component, in the order u, v, w) or one (a dataset
    /// with a component axis). HDF5 names may have group paths (`/flow/u`); in a folder they are file
    /// names with or without `.npy`.
    ///
    /// Default none: when [`InputSpec::magnetic`] is none as well, both fields are guessed, each as
    /// the first complete set of
    /// `u,v,w` | `ux,uy,uz` | `vx,vy,vz` | `velocity`, and `bx,by,bz` | `magnetic` | `b`,
    /// in the root group or folder. A single name is taken only for an array of rank 4. When one of
    /// the two is given, only that one is read.
    pub velocity: Option<Vec<String>>,
    /// Names of the magnetic field, as for the velocity. Default none.
    pub magnetic: Option<Vec<String>>,
    /// Axes of the arrays as stored, slowest first: a permutation of `xyz`, with a `c` first or last
    /// where an array has a component axis. Default `zyx`.
    ///
    /// HDF5 shapes and C-order `.npy` shapes list the slowest axis first. The shape of a
    /// Fortran-order `.npy` file lists it last and is reversed before anything else, so that an array
    /// indexed (x, y, z) in Fortran is `zyx`. Without `c`, the component axis of an array of rank 4
    /// is whichever of its first and last axes has length 3.
    pub order: String,
    /// Box lengths, in the user's length unit: number of samples times spacing, at open faces too.
    /// Exactly one of lengths and spacing must be given. Default none.
    pub lengths: Option<[f64; 3]>,
    /// Distance between samples, in the user's length unit. Default none.
    pub spacing: Option<[f64; 3]>,
    /// Position of the first sample. Default 0.
    pub origin: [f64; 3],
    /// Which axes wrap. Default all.
    pub periodic: [bool; 3],
}

impl Default for InputSpec {
    fn default() -> Self {
        InputSpec {
            velocity: None,
            magnetic: None,
            order: "zyx".into(),
            lengths: None,
            spacing: None,
            origin: [0.0; 3],
            periodic: [true; 3],
        }
    }
}

impl InputSpec {
    /// Checks everything that needs no file and returns the axis order.
    pub(super) fn check(&self) -> Result<Order> {
        let order = Order::parse(&self.order)?;
        check_names("--velocity", "u,v,w", self.velocity.as_deref())?;
        check_names("--magnetic", "bx,by,bz", self.magnetic.as_deref())?;
        let given = match (&self.lengths, &self.spacing) {
            (Some(l), None) => Ok(("--lengths", l)),
            (None, Some(s)) => Ok(("--spacing", s)),
            (None, None) => Err(("neither", "--lengths 6.283185,6.283185,6.283185 for a 2 pi box")),
            (Some(_), Some(_)) => Err(("both", "drop one of them")),
        };
        let (flag, values) = given.map_err(|(found, hint)| {
            Error::usage("cannot settle the size of the box")
                .item("--lengths, --spacing")
                .expected("exactly one of them")
                .found(found)
                .hint(hint)
        })?;
        if !values.iter().all(|v| v.is_finite() && *v > 0.0) {
            return Err(Error::usage("cannot settle the size of the box")
                .item(flag)
                .expected("3 finite numbers above 0")
                .found(listed(values)));
        }
        if !self.origin.iter().all(|v| v.is_finite()) {
            return Err(Error::usage("cannot place the box").item("--origin").expected("3 finite numbers").found(listed(&self.origin)));
        }
        Ok(order)
    }

    /// The grid of checked settings.
    pub(super) fn grid(&self, n: [usize; 3]) -> Grid {
        let spacing = match (self.lengths, self.spacing) {
            (Some(l), _) => std::array::from_fn(|a| l[a] / n[a] as f64),
            (None, Some(s)) => s,
            (None, None) => unreachable!("refused by check"),
        };
        Grid { n, spacing, origin: self.origin, periodic: self.periodic }
    }
}

fn check_names(flag: &str, example: &str, names: Option<&[String]>) -> Result<()> {
    let Some(names) = names else { return Ok(()) };
    let fault = |expected: &str| {
        Error::usage("cannot use the dataset names")
            .item(flag)
            .expected(expected)
            .found(format!("{} ({})", names.len(), names.join(",")))
            .hint(format!("{flag} {example}"))
    };
    if names.len() != 3 && names.len() != 1 {
        return Err(fault("3 names (one dataset a component) or 1 name (a component axis)"));
    }
    if names.iter().any(|n| n.is_empty()) {
        return Err(fault("names that are not empty"));
    }
    if names.len() == 3 && (names[0] == names[1] || names[0] == names[2] || names[1] == names[2]) {
        return Err(fault("3 different names"));
    }
    Ok(())
}

fn listed(values: &[f64; 3]) -> String {
    format!("{},{},{}", values[0], values[1], values[2])
}
