//! Attributes of HDF5 files as numbers and texts.

use ::hdf5::types::{FixedAscii, FixedUnicode, TypeDescriptor, VarLenAscii, VarLenUnicode};
use ::hdf5::{Attribute, Location};

/// Longest text of fixed length that is read.
const LONGEST: usize = 256;

/// An attribute, if it is one finite number, be it written as text.
pub(super) fn number(place: &Location, name: &str) -> Option<f64> {
    let attribute = place.attr(name).ok()?;
    let one = match attribute.read_raw::<f64>() {
        Ok(values) => {
            if let [one] = values[..] {
                Some(one)
            } else {
                None
            }
        }
        Err(_) => match &texts(&attribute)?[..] {
            [one] => one.trim().parse().ok(),
            _ => None,
        },
    };
    one.filter(|v: &f64| v.is_finite())
}

/// The texts of a string attribute.
pub(super) fn texts(attribute: &Attribute) -> Option<Vec<String>> {
    fn all<S: ToString>(values: Vec<S>) -> Vec<String> {
        values.iter().map(ToString::to_string).collect()
    }
    match attribute.dtype().ok()?.to_descriptor().ok()? {
        TypeDescriptor::VarLenUnicode => attribute.read_raw::<VarLenUnicode>().ok().map(all),
        TypeDescriptor::VarLenAscii => attribute.read_raw::<VarLenAscii>().ok().map(all),
        TypeDescriptor::FixedAscii(n) if n <= LONGEST => attribute.read_raw::<FixedAscii<LONGEST>>().ok().map(all),
        TypeDescriptor::FixedUnicode(n) if n <= LONGEST => attribute.read_raw::<FixedUnicode<LONGEST>>().ok().map(all),
        _ => None,
    }
}
