//! What the user says about a snapshot: names, axis order and the box, with the checks that need no file.

use crate::base::error::{Error, Result};
use crate::read::order::Order;
use crate::read::time;

/// Layout of headerless binary files.
#[derive(Debug, Clone, PartialEq)]
pub struct RawLayout {
    /// Whether values are f64 rather than f32.
    pub double: bool,
    /// Whether the most significant byte comes first.
    pub big_endian: bool,
    /// Samples along every axis, slowest first, as [`InputSpec::order`] names them; without the component axis, which is
    /// there when all components of all fields stand in one file.
    pub shape: Vec<usize>,
    /// Bytes before the first value (or before the first record marker).
    pub offset: u64,
    /// Fortran sequential records: bytes of the length marker before and after every record, 4 or 8; none where there are no
    /// records. A record holds one component, or all of them.
    pub record_markers: Option<u8>,
}

/// Where on their cells the magnetic components are stored.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Default)]
pub enum Staggering {
    /// At the samples, as all other fields.
    #[default]
    Centres,
    /// bx half a cell below the sample in x, by in y, bz in z. In HDF5 and `.npy` files each may have one more sample along its own
    /// axis, the face behind the last sample.
    LowerFaces,
    /// Half a cell above.
    UpperFaces,
}

/// A part of an axis.
#[derive(Debug, Clone, Copy, PartialEq)]
pub enum Stretch {
    /// Samples `first..end`; on a periodic axis they may lie below 0 or beyond the last sample.
    Indices(i64, i64),
    /// Samples whose positions lie in `from..=to`; on a periodic axis they may leave the box.
    Positions(f64, f64),
}

/// Where the time of a snapshot stands; the first that is given and found wins, then the attributes `time` and `t`, then datasets of
/// those names in the step's group or the root group that hold one number. Attributes may be numbers or texts of one number.
#[derive(Debug, Clone, PartialEq, Default)]
pub struct TimeSource {
    /// Name of an attribute of the root group, the step's group or the first dataset.
    pub attribute: Option<String>,
    /// Path of a dataset that holds one number.
    pub dataset: Option<String>,
    /// A file name with `{time}` where the number stands and `*` for anything else, e.g. `out_t{time}.h5`.
    pub name: Option<String>,
}

/// How to read a snapshot. Triples are in the order x, y, z.
#[derive(Debug, Clone, PartialEq)]
pub struct InputSpec {
    /// Names of the velocity: three (one dataset a component, in the order u, v, w), one (a dataset with a component axis), or two
    /// on a plane, whose third component is then 0. HDF5 names may have group paths (`flow/u`), from the group of the step where
    /// they do not begin with `/`; in a folder they are file names with or without `.npy`; where the path of the snapshot has
    /// `{field}`, they stand in its place; in a file without a header they only say how many components there are.
    ///
    /// Default none: when [`InputSpec::magnetic`] is none as well, both fields are guessed, each as
    /// the first complete set of
    /// `u,v,w` | `ux,uy,uz` | `vx,vy,vz` | `velocity`, and `bx,by,bz` | `magnetic` | `b`,
    /// in the root group or folder. A single name is taken only for an array of rank 4 (3 on a plane). When one of
    /// the two is given, only that one is read. A file without a header is a velocity, or with twice as many components both.
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
    ///
    /// A plane is `yx` or `xy`, which any order without its z means as well, or has an axis of length 1, which must be z.
    pub order: String,
    /// Box lengths, in the user's length unit: number of samples times spacing, at open faces too.
    /// Exactly one of lengths and spacing must be given, unless all axes have coordinates. The entry of z on a plane means nothing.
    ///
    /// On an axis with coordinates 0 says nothing. Otherwise, where they are unequally spaced, the two cells at the ends are made so
    /// that all cells together have that length L: each reaches `(L - (last - first)) / 2` beyond its sample, which must be from 0
    /// to the distance to the neighbour. Samples on the walls of a channel have `L = last - first`, half cells at the walls. With 0
    /// each reaches half the distance to its neighbour. Where they are equally spaced L must be the number of samples times their
    /// distance, to a thousandth and to half a spacing. Default none.
    pub lengths: Option<[f64; 3]>,
    /// Distance between samples, in the user's length unit. On an axis with coordinates 0 says nothing; otherwise it must be their
    /// distance, which unequally spaced ones do not have. Default none.
    pub spacing: Option<[f64; 3]>,
    /// Position of the first sample; on an axis with coordinates these decide. Default 0.
    pub origin: [f64; 3],
    /// Which axes wrap. Default all.
    pub periodic: [bool; 3],
    /// Name of the buoyancy. Default none: it is read only where named.
    pub buoyancy: Option<String>,
    /// Name of the density: the magnetic field is divided by its square root, and the flow counts as compressible. Default none.
    pub density: Option<String>,
    /// Where the magnetic components are stored. Default at the samples.
    pub staggering: Staggering,
    /// Names of one-dimensional datasets of the file with the coordinates of the samples, per axis, or of files beside it: `.npy`, or
    /// text with one number a line. Such an axis is open, unless the spacing turns out to be equal. Default none.
    pub coordinates: [Option<String>; 3],
    /// Layout of files without a header; with one, every path is read as such. Default none.
    pub raw: Option<RawLayout>,
    /// The part of the box to use; open faces where cut. Default all of it.
    pub region: [Option<Stretch>; 3],
    /// Where the time stands.
    pub time: TimeSource,
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
            buoyancy: None,
            density: None,
            staggering: Staggering::Centres,
            coordinates: [None, None, None],
            raw: None,
            region: [None; 3],
            time: TimeSource::default(),
        }
    }
}

impl InputSpec {
    /// Checks everything that needs no file and returns the axis order.
    pub(super) fn check(&self) -> Result<Order> {
        let order = Order::parse(&self.order)?;
        check_names("--velocity", "u,v,w", self.velocity.as_deref())?;
        check_names("--magnetic", "bx,by,bz", self.magnetic.as_deref())?;
        for (flag, name) in [("--buoyancy", &self.buoyancy), ("--density", &self.density)] {
            if name.as_ref().is_some_and(String::is_empty) {
                return Err(Error::usage("cannot use the dataset names").item(flag).expected("a name that is not empty").found("nothing"));
            }
        }
        // A plane needs no size along z: whether it is one is known only when its arrays are.
        let needed = [0, 1].map(|a| self.coordinates[a].is_none());
        let needed = [needed[0], needed[1], false];
        let bare = [0, 1, 2].map(|a| self.coordinates[a].is_none());
        match (&self.lengths, &self.spacing) {
            (Some(l), None) => check_size("--lengths", l, needed)?,
            (None, Some(s)) => check_size("--spacing", s, needed)?,
            (None, None) if needed.contains(&true) => return Err(no_size(bare)),
            (None, None) => {}
            (Some(_), Some(_)) => return Err(size_fault("both", "drop one of them")),
        }
        if !self.origin.iter().all(|v| v.is_finite()) {
            return Err(Error::usage("cannot place the box").item("--origin").expected("3 finite numbers").found(listed(&self.origin)));
        }
        if let Some(pattern) = &self.time.name {
            time::check(pattern)?;
        }
        if let Some(raw) = &self.raw {
            raw.check(&order)?;
        }
        Ok(order)
    }
}

impl RawLayout {
    /// Bytes of a value.
    pub(super) fn width(&self) -> u64 {
        if self.double { 8 } else { 4 }
    }

    /// Bytes of a component.
    pub(super) fn bytes(&self) -> u64 {
        self.shape.iter().product::<usize>() as u64 * self.width()
    }

    fn check(&self, order: &Order) -> Result<()> {
        let fault = || Error::usage("cannot use the layout of a file without a header");
        let shape = self.shape.iter().map(usize::to_string).collect::<Vec<_>>().join(",");
        if order.letters_of(self.shape.len()).is_none() {
            return Err(fault()
                .item("shape")
                .expected(format!("{} numbers of samples, as --order {} names the axes", order.letters().len(), order.letters()))
                .found(if shape.is_empty() { "none".into() } else { shape })
                .hint("a plane has two"));
        }
        let bytes = self.shape.iter().try_fold(self.width(), |all, &n| all.checked_mul(n as u64));
        if bytes.is_none_or(|b| b == 0 || b > i64::MAX as u64 / 64) {
            return Err(fault().item("shape").expected("possible numbers of samples").found(shape));
        }
        match self.record_markers {
            None | Some(4 | 8) => Ok(()),
            Some(other) => Err(fault().item("record markers").expected("4 or 8 bytes").found(other.to_string())),
        }
    }
}

fn size_fault(found: &str, hint: &str) -> Error {
    Error::usage("cannot settle the size of the box").item("--lengths, --spacing").expected("one of them").found(found).hint(hint)
}

/// The error when the size of axes is not given.
pub(super) fn no_size(without: [bool; 3]) -> Error {
    let axes: Vec<&str> = ["x", "y", "z"].into_iter().zip(without).filter(|(_, w)| *w).map(|(a, _)| a).collect();
    let error = size_fault("neither", "--lengths 6.283185,6.283185,6.283185 for a 2 pi box");
    if axes.len() == 3 { error } else { error.expected(format!("one of them for {}", axes.join(", "))) }
}

/// Checks the entries of a triple that are needed.
pub(super) fn check_size(flag: &str, size: &[f64; 3], needed: [bool; 3]) -> Result<()> {
    if size.iter().zip(needed).all(|(v, needed)| !needed || (v.is_finite() && *v > 0.0)) {
        return Ok(());
    }
    Err(Error::usage("cannot settle the size of the box").item(flag).expected("3 finite numbers above 0").found(listed(size)))
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
    if !(1..=3).contains(&names.len()) {
        return Err(fault("3 names (one dataset a component; 2 on a plane) or 1 name (a component axis)"));
    }
    if names.iter().any(|n| n.is_empty()) {
        return Err(fault("names that are not empty"));
    }
    if (1..names.len()).any(|i| names[..i].contains(&names[i])) {
        return Err(fault(&format!("{} different names", names.len())));
    }
    Ok(())
}

fn listed(values: &[f64; 3]) -> String {
    format!("{},{},{}", values[0], values[1], values[2])
}
