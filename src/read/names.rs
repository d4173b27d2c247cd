//! Which arrays make up the fields: those named by the user, else the first complete set of usual names.

use std::path::{Path, PathBuf};

use crate::base::error::{Error, Result};
use crate::read::spec::InputSpec;

/// What stands for a component's name in a path.
pub(super) const PLACE: &str = "{field}";

/// A field of a snapshot.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub(super) enum Field {
    /// u, v, w.
    Velocity,
    /// bx, by, bz.
    Magnetic,
    /// A scalar.
    Buoyancy,
    /// A scalar that is not delivered.
    Density,
}

impl Field {
    /// The option that names its datasets.
    pub fn flag(self) -> &'static str {
        match self {
            Field::Velocity => "--velocity",
            Field::Magnetic => "--magnetic",
            Field::Buoyancy => "--buoyancy",
            Field::Density => "--density",
        }
    }

    /// Its word in sentences.
    pub fn word(self) -> &'static str {
        match self {
            Field::Velocity => "velocity",
            Field::Magnetic => "magnetic field",
            Field::Buoyancy => "buoyancy",
            Field::Density => "density",
        }
    }

    /// What to try when its names do not fit.
    pub fn hint(self) -> &'static str {
        match self {
            Field::Velocity | Field::Magnetic => HINT,
            Field::Buoyancy => "--buoyancy NAME names it",
            Field::Density => "--density NAME names it",
        }
    }

    /// Whether it has components.
    pub fn is_vector(self) -> bool {
        matches!(self, Field::Velocity | Field::Magnetic)
    }
}

/// One field and the names of its arrays: of a vector three (two on planes), or one with a component axis; of a scalar one.
pub(super) type Choice = (Field, Vec<String>);

/// Usual names of the velocity, those tried first before the others.
pub(super) const VELOCITY: [&[&str]; 4] = [&["u", "v", "w"], &["ux", "uy", "uz"], &["vx", "vy", "vz"], &["velocity"]];
/// Usual names of the magnetic field.
pub(super) const MAGNETIC: [&[&str]; 3] = [&["bx", "by", "bz"], &["magnetic"], &["b"]];

/// The guesses as text for messages.
pub(super) const GUESSES: &str = "u,v,w | ux,uy,uz | vx,vy,vz | velocity | bx,by,bz | magnetic | b";

/// What to try when names do not fit.
pub(super) const HINT: &str = "--velocity U,V,W or --magnetic BX,BY,BZ names them (or one name of an array with a component axis)";

/// A path with the name of a component in its place.
pub(super) fn with_name(path: &Path, name: &str) -> PathBuf {
    PathBuf::from(path.to_string_lossy().replace(PLACE, name))
}

/// Whether a path has a place for the component's name.
pub(super) fn has_place(path: &Path) -> bool {
    path.to_string_lossy().contains(PLACE)
}

/// The fields to read, velocity first. `shape` tells the shape of an array of that name, if there is one.
///
/// Without velocity and magnetic field when neither is named and no usual name is there.
///
/// # Errors
/// `Input`, without the file, when most of a set is there but not all of it: reading on without that field would surprise.
pub(super) fn choose(spec: &InputSpec, shape: impl Fn(&str) -> Option<Vec<usize>>) -> Result<Vec<Choice>> {
    let mut chosen = named(spec);
    if spec.velocity.is_some() || spec.magnetic.is_some() {
        return Ok(chosen);
    }
    let mut guessed = Vec::new();
    for (field, sets) in [(Field::Velocity, &VELOCITY[..]), (Field::Magnetic, &MAGNETIC[..])] {
        if let Some(names) = guess(sets, &shape)? {
            guessed.push((field, names));
        }
    }
    guessed.append(&mut chosen);
    Ok(guessed)
}

/// The fields that the user names.
pub(super) fn named(spec: &InputSpec) -> Vec<Choice> {
    let one = |name: &Option<String>| name.clone().map(|n| vec![n]);
    let fields = [
        (Field::Velocity, spec.velocity.clone()),
        (Field::Magnetic, spec.magnetic.clone()),
        (Field::Buoyancy, one(&spec.buoyancy)),
        (Field::Density, one(&spec.density)),
    ];
    fields.into_iter().filter_map(|(field, names)| names.map(|n| (field, n))).collect()
}

/// Whether there is a field to analyse.
pub(super) fn has_vector(choices: &[Choice]) -> bool {
    choices.iter().any(|(field, _)| field.is_vector())
}

/// The first complete set.
pub(super) fn guess(sets: &[&[&str]], shape: &impl Fn(&str) -> Option<Vec<usize>>) -> Result<Option<Vec<String>>> {
    let owned = |set: &[&str]| Some(set.iter().map(|n| n.to_string()).collect());
    if let Some(set) = sets.iter().find(|set| set.iter().all(|name| shape(name).is_some_and(|s| set.len() > 1 || has_components(&s)))) {
        return Ok(owned(set));
    }
    for set in sets.iter().filter(|set| set.len() == 3) {
        let there: Vec<&str> = set.iter().copied().filter(|name| shape(name).is_some()).collect();
        if there.len() == 2 {
            // Two components make up a field in a plane.
            if there == set[..2] && there.iter().all(|name| shape(name).is_some_and(|s| is_plane(&s))) {
                return Ok(owned(&there));
            }
            return Err(Error::input("cannot find all components")
                .expected(set.join(","))
                .found(format!("only {}", there.join(",")))
                .hint("--velocity or --magnetic alone reads one field and leaves the other"));
        }
    }
    Ok(None)
}

/// Whether a single array can be a vector field: a lone `b` of rank 3 is a scalar (buoyancy), unless it is a plane with a
/// component axis.
fn has_components(shape: &[usize]) -> bool {
    let few = |n: &usize| (2..=3).contains(n);
    shape.len() == 4 || (shape.len() == 3 && (few(&shape[0]) || few(&shape[2])))
}

fn is_plane(shape: &[usize]) -> bool {
    shape.len() == 2 || (shape.len() == 3 && shape.contains(&1))
}

/// What the user should know of names that are absolute and lie in a group like that of the step: they are the same for every step.
pub(super) fn fixed(spec: &InputSpec, group: Option<&str>) -> Vec<String> {
    let Some(group) = group.filter(|g| g.bytes().any(|b| b.is_ascii_digit())) else { return Vec::new() };
    let bare = |part: &str| part.chars().filter(|c| !c.is_ascii_digit() && *c != '.').collect::<String>();
    let numbered = |part: &str| part.bytes().any(|b| b.is_ascii_digit());
    let steps: Vec<&str> = group.trim_matches('/').split('/').collect();
    let is_fixed = |name: &String| {
        let parts: Vec<&str> = name.trim_matches('/').split('/').collect();
        let alike = |(a, b): (&&str, &&str)| a == b || (numbered(a) && numbered(b) && bare(a) == bare(b));
        name.starts_with('/') && parts.len() > steps.len() && parts.iter().zip(&steps).all(alike)
    };
    let vectors = [&spec.velocity, &spec.magnetic].into_iter().flatten().flatten();
    let others = [&spec.buoyancy, &spec.density, &spec.time.dataset].into_iter().chain(&spec.coordinates).flatten();
    let all = vectors.chain(others).filter(|name| is_fixed(name));
    all.map(|name| format!("the name {name} is absolute: the same for every step")).collect()
}
