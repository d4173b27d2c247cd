//! Small non-cubic snapshots whose every value tells its component and place, in any stored form.

use std::path::Path;

use ::hdf5::H5Type;
use ropewalk::base::real::Real;
use ropewalk::model::source::{AnySource, PlaneSource};
use ropewalk::read::{InputSpec, Opened, open};

/// Samples along x, y, z: all different, none divided by the chunk edges below.
pub const N: [usize; 3] = [12, 10, 9];
pub const ORDERS: [&str; 6] = ["zyx", "xyz", "yzx", "zxy", "xzy", "yxz"];

/// A stored precision of the tests.
pub trait Value: Real + H5Type {
    /// Different for every component and place, with a full mantissa.
    fn code(c: usize, x: usize, y: usize, z: usize) -> Self;
    fn swapped(self) -> Self;
    fn bits(self) -> u64;
    fn bytes(self, big: bool) -> Vec<u8>;
    fn take(source: AnySource) -> Box<dyn PlaneSource<Self>>;
    /// The datatype message of an HDF5 file, little-endian: class and version, bit fields, size.
    const MESSAGE: [u8; 8];
}

macro_rules! value {
    ($t:ident, $variant:ident, $factor:literal, $message:expr) => {
        impl Value for $t {
            const MESSAGE: [u8; 8] = $message;
            fn code(c: usize, x: usize, y: usize, z: usize) -> Self {
                (((c * N[2] + z) * N[1] + y) * N[0] + x) as $t * $factor - 1000.3
            }
            fn swapped(self) -> Self {
                $t::from_bits(self.to_bits().swap_bytes())
            }
            fn bits(self) -> u64 {
                self.to_bits().into()
            }
            fn bytes(self, big: bool) -> Vec<u8> {
                if big { self.to_be_bytes().into() } else { self.to_le_bytes().into() }
            }
            fn take(source: AnySource) -> Box<dyn PlaneSource<Self>> {
                match source {
                    AnySource::$variant(s) => s,
                    _ => panic!("the source has the wrong precision"),
                }
            }
        }
    };
}
value!(f32, F32, 1.000_123, [0x11, 0x20, 0x1f, 0, 4, 0, 0, 0]);
value!(f64, F64, 1.000_123_456_789_1, [0x11, 0x20, 0x3f, 0, 8, 0, 0, 0]);

/// Shape and values of an array with the given axes, slowest first; `first` is added to its component index.
pub fn array<T: Value>(axes: &str, first: usize) -> (Vec<usize>, Vec<T>) {
    let letters: Vec<char> = axes.chars().collect();
    let shape: Vec<usize> = letters.iter().map(|&l| extent(l, N, 3)).collect();
    let mut values = Vec::new();
    for i in 0..shape.iter().product() {
        let (mut rest, mut at) = (i, std::collections::HashMap::new());
        for (&l, &n) in letters.iter().zip(&shape).rev() {
            at.insert(l, rest % n);
            rest /= n;
        }
        values.push(T::code(first + at.get(&'c').unwrap_or(&0), at[&'x'], at[&'y'], at[&'z']));
    }
    (shape, values)
}

/// What belongs to an axis letter.
pub fn extent(letter: char, space: [usize; 3], component: usize) -> usize {
    match letter {
        'x' => space[0],
        'y' => space[1],
        'z' => space[2],
        _ => component,
    }
}

/// A description with the box 1 x 1 x 1 and the given axis order.
pub fn spec(order: &str) -> InputSpec {
    InputSpec { order: order.into(), lengths: Some([1.0; 3]), ..InputSpec::default() }
}

pub fn names(list: &[&str]) -> Option<Vec<String>> {
    Some(list.iter().map(|s| s.to_string()).collect())
}

/// Opens a snapshot that is expected to be good.
pub fn opened(path: &Path, spec: &InputSpec) -> Opened {
    open(&path.to_path_buf().into(), spec).unwrap_or_else(|e| panic!("{e}"))
}

/// Reads planes of a source whose components carry the codes `first..`, and compares every bit.
pub fn check_planes<T: Value>(source: &mut dyn PlaneSource<T>, first: usize, z0: usize, z1: usize, case: &str) {
    let count = source.fields().components();
    let mut store = vec![vec![T::of(f64::NAN); (z1 - z0) * N[1] * N[0]]; count];
    let mut out: Vec<&mut [T]> = store.iter_mut().map(|v| &mut v[..]).collect();
    source.read(z0, z1, &mut out).unwrap();
    for (c, values) in store.iter().enumerate() {
        let mut next = values.iter();
        for z in z0..z1 {
            for y in 0..N[1] {
                for x in 0..N[0] {
                    let (got, want) = (*next.next().unwrap(), T::code(first + c, x, y, z));
                    assert_eq!(got.bits(), want.bits(), "{case}: component {c} at {x} {y} {z}: {got} {want}");
                }
            }
        }
    }
}

/// Whole, one plane, a middle part, the last planes, and nothing at all.
pub fn check_all<T: Value>(source: AnySource, first: usize, case: &str) {
    let mut source = T::take(source);
    assert_eq!(source.grid().n, N, "{case}");
    for (z0, z1) in [(0, 9), (4, 5), (3, 7), (7, 9), (0, 2), (5, 5)] {
        check_planes(source.as_mut(), first, z0, z1, case);
    }
}
