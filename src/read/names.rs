//! Which arrays make up the fields: those named by the user, else the first complete set of usual names.

use crate::base::error::{Error, Result};
use crate::read::spec::InputSpec;

/// A vector field of a snapshot.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub(super) enum Field {
    /// u, v, w.
    Velocity,
    /// bx, by, bz.
    Magnetic,
}

impl Field {
    /// The option that names its datasets.
    pub fn flag(self) -> &'static str {
        match self {
            Field::Velocity => "--velocity",
            Field::Magnetic => "--magnetic",
        }
    }
}

/// One field and the names of its arrays: three, or one with a component axis.
pub(super) type Choice = (Field, Vec<String>);

const VELOCITY: [&[&str]; 4] = [&["u", "v", "w"], &["ux", "uy", "uz"], &["vx", "vy", "vz"], &["velocity"]];
const MAGNETIC: [&[&str]; 3] = [&["bx", "by", "bz"], &["magnetic"], &["b"]];

/// The guesses as text for messages.
pub(super) const GUESSES: &str = "u,v,w | ux,uy,uz | vx,vy,vz | velocity | bx,by,bz | magnetic | b";

/// What to try when names do not fit.
pub(super) const HINT: &str = "--velocity U,V,W or --magnetic BX,BY,BZ names them (or one name of an array with a component axis)";

/// The fields to read, velocity first. `rank` tells the rank of an array of that name, if there is one.
///
/// Empty when nothing is named and no usual name is there.
///
/// # Errors
/// `Input`, without the file, when most of a set is there but not all of it: reading on without that field would surprise.
pub(super) fn choose(spec: &InputSpec, rank: impl Fn(&str) -> Option<usize>) -> Result<Vec<Choice>> {
    let mut chosen = Vec::new();
    if spec.velocity.is_some() || spec.magnetic.is_some() {
        for (field, names) in [(Field::Velocity, &spec.velocity), (Field::Magnetic, &spec.magnetic)] {
            if let Some(names) = names {
                chosen.push((field, names.clone()));
            }
        }
        return Ok(chosen);
    }
    for (field, sets) in [(Field::Velocity, &VELOCITY[..]), (Field::Magnetic, &MAGNETIC[..])] {
        // A lone `b` of rank 3 is a scalar (buoyancy), not a vector field.
        let complete = |set: &&&[&str]| set.iter().all(|name| rank(name).is_some_and(|r| set.len() == 3 || r == 4));
        if let Some(set) = sets.iter().find(complete) {
            chosen.push((field, set.iter().map(|n| n.to_string()).collect()));
            continue;
        }
        for set in sets.iter().filter(|set| set.len() == 3) {
            let there: Vec<&str> = set.iter().copied().filter(|name| rank(name).is_some()).collect();
            if there.len() == 2 {
                return Err(Error::input("cannot find all components")
                    .expected(set.join(","))
                    .found(format!("only {}", there.join(",")))
                    .hint("--velocity or --magnetic alone reads one field and leaves the other"));
            }
        }
    }
    Ok(chosen)
}
