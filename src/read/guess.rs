//! A guess at how a file is to be read: names, axis order, coordinates, steps and time from what stands in it.

use std::collections::BTreeMap;
use std::f64::consts::TAU;

use crate::read::contents::{Inside, Named, axis_of};
use crate::read::coordinates::Coordinates;
use crate::read::spec::InputSpec;
use crate::read::{guess_box, natural};

/// What was guessed.
pub(super) struct Guess {
    /// How to read it.
    pub spec: InputSpec,
    /// From what, one sentence each.
    pub reasons: Vec<String>,
    /// Groups that look like steps.
    pub steps: Vec<String>,
    /// The time found.
    pub time: Option<f64>,
}

/// What of a file is looked at.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub(super) enum View<'a> {
    /// All of it.
    Whole,
    /// The only array of a file that holds no other, by its name.
    Single(&'a str),
    /// One group, without slashes around it.
    Group(&'a str),
}

/// Where the fields were found.
struct Found {
    /// The group that holds them, empty for the root.
    place: String,
    /// The group that names begin in: that of the step, empty for the root.
    step: String,
    /// The first array.
    first: String,
    /// Its shape.
    shape: Vec<usize>,
}

const TIMES: [&str; 4] = ["time", "t", "sim_time", "simulation_time"];
const DENSITY: [&str; 2] = ["rho", "density"];
const BUOYANCY: [&str; 3] = ["buoyancy", "theta", "temperature"];

/// Guesses how `inside` is to be read.
pub(super) fn guess(inside: &Inside, view: View<'_>) -> Guess {
    let steps = if view == View::Whole { steps(inside) } else { Vec::new() };
    let mut g = Guess { spec: InputSpec { lengths: Some([TAU; 3]), ..InputSpec::default() }, reasons: Vec::new(), steps, time: None };
    let found = names(inside, view, &mut g);
    if let Some(first) = g.steps.first() {
        let told = format!("{} groups look like steps, {first} the first", g.steps.len());
        if found.as_ref().is_some_and(|f| f.step.is_empty()) {
            g.reasons.push(format!("{told}, but the fields are in none of them"));
            g.steps.clear();
        } else {
            g.reasons.insert(0, told);
        }
    }
    let Some(found) = found else {
        if view == View::Whole || g.reasons.is_empty() {
            g.reasons.push("no usual names of a velocity or magnetic field: name them".into());
        }
        return g;
    };
    let lines = lines(inside, &found);
    let samples = order(&found.shape, &lines, &mut g);
    scalars(inside, &found, &mut g);
    let spaced = coordinates(&lines, samples, &found, &mut g);
    let mut attributes = of_group(inside, &found.place);
    if found.step != found.place {
        attributes.extend(of_group(inside, &found.step));
    }
    if !found.place.is_empty() && !found.step.is_empty() {
        attributes.extend(&inside.attributes);
    }
    let first = inside.of_items.iter().find(|(path, _)| *path == found.first);
    attributes.extend(first.into_iter().flat_map(|(_, a)| a));
    guess_box::settle(&attributes, samples, &spaced, &mut g);
    time(inside, &found, &mut g);
    g
}

/// Groups with numbers in otherwise equal names, in natural order.
pub(super) fn steps(inside: &Inside) -> Vec<String> {
    let mut alike: BTreeMap<String, Vec<String>> = BTreeMap::new();
    for (path, _) in &inside.groups {
        let last = path.rsplit('/').next().unwrap_or(path);
        if !last.bytes().any(|b| b.is_ascii_digit()) {
            continue;
        }
        let above = &path[..path.len() - last.len()];
        let bare: String = last.chars().filter(|c| !c.is_ascii_digit() && *c != '.').collect();
        let holds = inside.items.iter().any(|i| i.shape.len() > 1 && rest(&i.name, path).is_some());
        if holds {
            alike.entry(format!("{above}{bare}")).or_default().push(path.trim_matches('/').into());
        }
    }
    let mut out = alike.into_values().max_by_key(Vec::len).filter(|all| all.len() > 1).unwrap_or_default();
    out.sort_by(|a, b| natural::compare(a, b));
    out
}

/// Sets of names of a vector field, in lower case.
fn sets(stems: &[&str], first: &[&[&str]], whole: &[&str]) -> Vec<Vec<String>> {
    let owned = |set: &&[&str]| set.iter().map(|n| n.to_string()).collect();
    let mut out: Vec<Vec<String>> = first.iter().map(owned).collect();
    for stem in stems {
        for (between, ends) in [("", ["x", "y", "z"]), ("_", ["x", "y", "z"]), ("", ["1", "2", "3"]), ("_", ["1", "2", "3"])] {
            out.push(ends.iter().map(|e| format!("{stem}{between}{e}")).collect());
        }
    }
    out.extend(whole.iter().map(|n| vec![n.to_string()]));
    out
}

/// Sets of names of the velocity and of the magnetic field.
fn vectors() -> [Vec<Vec<String>>; 2] {
    [
        sets(&["u", "v", "vel", "velocity"], &[&["u", "v", "w"]], &["velocity", "vel", "u"]),
        sets(&["b", "mag", "magnetic", "magnetic_field"], &[], &["magnetic", "magnetic_field", "b"]),
    ]
}

/// All usual names of fields, in lower case.
pub(super) fn usual_names() -> Vec<String> {
    let mut out: Vec<String> = Vec::new();
    for name in vectors().concat().concat().into_iter().chain(DENSITY.iter().chain(&BUOYANCY).map(|n| n.to_string())) {
        if !out.contains(&name) {
            out.push(name);
        }
    }
    out
}

/// Finds the fields.
fn names(inside: &Inside, view: View<'_>, g: &mut Guess) -> Option<Found> {
    if let View::Single(name) = view {
        let item = inside.items.first()?;
        let found = Found { place: String::new(), step: String::new(), first: item.name.clone(), shape: item.shape.clone() };
        if !has_components(&item.shape) {
            g.reasons.push(match item.shape.len() {
                4 => format!("{name} has four axes, none of length 3 at its ends for the components (is one the time?): not a velocity"),
                2 | 3 => format!("{name} has no component axis, it is one component: give its folder, or {{field}} for the names of all"),
                n => format!("{name} has {n} axes: not a velocity"),
            });
            return None;
        }
        g.reasons.push(format!("{name} is taken as the velocity"));
        g.spec.velocity = Some(vec![name.into()]);
        return Some(found);
    }
    let [velocity, magnetic] = vectors();
    let step = match view {
        View::Group(group) => format!("/{group}"),
        _ => g.steps.first().map_or(String::new(), |s| format!("/{s}")),
    };
    let mut places = vec![step.clone()];
    places.extend(inside.groups.iter().map(|(path, _)| path).filter(|p| !step.is_empty() && is_below(p, &step)).cloned());
    places.push(String::new());
    places.extend(inside.groups.iter().map(|(path, _)| path.clone()));
    let mut odd: Vec<String> = Vec::new();
    for place in places {
        let here: Vec<(&str, &Vec<usize>)> =
            inside.items.iter().filter_map(|i| Some((rest(&i.name, &place)?, &i.shape))).filter(|(n, _)| !n.contains('/')).collect();
        let find = |sets: &[Vec<String>]| -> Option<(Vec<String>, Vec<usize>)> { sets.iter().find_map(|set| complete(set, &here)) };
        let (u, b) = (find(&velocity), find(&magnetic));
        let Some((set, shape)) = u.as_ref().or(b.as_ref()) else {
            let known = |n: &str| velocity.iter().chain(&magnetic).flatten().any(|k| *k == plain(n));
            odd.extend(here.iter().filter(|(n, s)| s.len() == 4 && known(n)).map(|(n, _)| format!("{place}/{n}")));
            continue;
        };
        let whole = |name: &str| if inside.items.iter().any(|i| i.name == name) { name.to_string() } else { format!("{place}/{name}") };
        // The step counts only where the fields are in it.
        let step = if place == step || is_below(&place, &step) { step } else { String::new() };
        let found = Found { first: whole(&set[0]), shape: shape.clone(), step, place: place.clone() };
        let full = |f: Option<(Vec<String>, Vec<usize>)>| f.map(|(set, _)| set.iter().map(|n| said(&whole(n), &found.step)).collect());
        let fields: [(&str, Option<Vec<String>>); 2] = [("velocity", full(u)), ("magnetic field", full(b))];
        for (field, set) in &fields {
            if let Some(set) = set {
                g.reasons.push(format!("{} named as a {field}", set.join(",")));
            }
        }
        let [(_, u), (_, b)] = fields;
        (g.spec.velocity, g.spec.magnetic) = (u, b);
        return Some(found);
    }
    odd.dedup();
    odd.truncate(3);
    for name in odd {
        g.reasons.push(format!("{name} has four axes, none of length 3 at its ends for the components (is one the time?): not taken"));
    }
    None
}

/// The rest of a path below a place.
fn rest<'a>(path: &'a str, place: &str) -> Option<&'a str> {
    let rest = path.strip_prefix(place)?;
    if place.is_empty() { Some(rest.trim_start_matches('/')) } else { rest.strip_prefix('/') }
}

fn is_below(path: &str, place: &str) -> bool {
    !place.is_empty() && rest(path, place).is_some()
}

/// How a path is named: relative to the step where it is in it, by its name alone where it is in the root group, else in full.
fn said(path: &str, step: &str) -> String {
    let top = path.trim_start_matches('/');
    match rest(path, step) {
        Some(inner) if !step.is_empty() => inner.into(),
        _ if step.is_empty() && !top.contains('/') => top.into(),
        _ => path.into(),
    }
}

/// A name as it is compared.
fn plain(name: &str) -> String {
    name.strip_suffix(".npy").unwrap_or(name).to_lowercase()
}

/// Whether a single array can be a vector field.
fn has_components(shape: &[usize]) -> bool {
    let few = |n: usize| n == 2 || n == 3;
    match *shape {
        [first, .., last] if shape.len() == 4 => first == 3 || last == 3,
        [first, _, last] => few(first) || few(last),
        _ => false,
    }
}

/// The names of a set as they are spelled, when all are there with one shape that suits.
fn complete(set: &[String], here: &[(&str, &Vec<usize>)]) -> Option<(Vec<String>, Vec<usize>)> {
    let spelled: Vec<&(&str, &Vec<usize>)> = set.iter().filter_map(|name| here.iter().find(|(n, _)| plain(n) == *name)).collect();
    let shape = spelled.first()?.1;
    let fits = match set.len() {
        1 => has_components(shape),
        _ => shape.len() == 2 || shape.len() == 3,
    };
    let enough =
        spelled.len() == set.len() || (spelled.len() == 2 && (shape.len() == 2 || shape.contains(&1)) && plain(spelled[1].0) == set[1]);
    let same = spelled.iter().all(|s| s.1 == shape);
    (fits && enough && same).then(|| (spelled.iter().map(|s| s.0.to_string()).collect(), shape.clone()))
}

/// Coordinates that may belong to the fields, with their axes: those beside them before those of the step, of the root, of any group.
fn lines<'a>(inside: &'a Inside, found: &Found) -> Vec<(usize, &'a str, &'a Coordinates)> {
    let mut out = Vec::new();
    for axis in 0..3 {
        let of = |near: &dyn Fn(&str) -> bool| {
            inside.lines.iter().find(|(name, _)| axis_of(name) == Some(axis) && near(name)).map(|(name, c)| (axis, name.as_str(), c))
        };
        let directly = |name: &str, place: &str| rest(name, place).is_some_and(|r| !r.contains('/'));
        out.extend(
            of(&|n| directly(n, &found.place))
                .or_else(|| of(&|n| directly(n, &found.step)))
                .or_else(|| of(&|n| is_below(n, &found.step)))
                .or_else(|| of(&|n| directly(n, "")))
                .or_else(|| of(&|_| true)),
        );
    }
    out
}

/// Settles the axis order, and gives the samples along x, y, z.
fn order(shape: &[usize], lines: &[(usize, &str, &Coordinates)], g: &mut Guess) -> [usize; 3] {
    let single = g.spec.velocity.as_ref().or(g.spec.magnetic.as_ref()).is_some_and(|n| n.len() == 1);
    let few = |n: usize| n == 3 || (n == 2 && shape.len() == 3);
    let (before, after) = match (single, few(shape[0]), few(shape[shape.len() - 1])) {
        (true, true, _) => ("c", ""),
        (true, false, true) => ("", "c"),
        _ => ("", ""),
    };
    let space = &shape[before.len()..shape.len() - after.len()];
    let orders: &[&str] = if space.len() == 2 { &["yx", "xy"] } else { &["zyx", "xyz", "zxy", "yzx", "yxz", "xzy"] };
    let samples = |order: &str| ["x", "y", "z"].map(|l| order.find(l).and_then(|p| space.get(p)).copied().unwrap_or(1));
    let fits = |order: &&&str| lines.iter().all(|(axis, _, c)| samples(order)[*axis] == c.values.len());
    let found = orders.iter().find(fits).unwrap_or(&orders[0]);
    g.spec.order = format!("{before}{found}{after}");
    if !(before.is_empty() && after.is_empty()) {
        let end = if after.is_empty() { "first" } else { "last" };
        g.reasons.push(format!("the {end} axis has the length of a component axis"));
    }
    if *found != orders[0] {
        g.reasons.push(format!("the coordinates fit the axis order {found}"));
    }
    samples(found)
}

/// Scalars on the same grid.
fn scalars(inside: &Inside, found: &Found, g: &mut Guess) {
    let shape = &found.shape;
    let single = g.spec.velocity.as_ref().or(g.spec.magnetic.as_ref()).is_some_and(|n| n.len() == 1);
    let rank = shape.len() - usize::from(single);
    for (words, density) in [(&DENSITY[..], true), (&BUOYANCY[..], false)] {
        let named = inside.items.iter().find_map(|i| {
            let name = plain(rest(&i.name, &found.place)?);
            let sized = i.shape.len() == rank && (single || i.shape == *shape);
            (sized && words.contains(&name.as_str())).then(|| said(&i.name, &found.step))
        });
        let Some(name) = named else { continue };
        g.reasons.push(format!("{name} named as a {}", if density { "density" } else { "buoyancy" }));
        if density { g.spec.density = Some(name) } else { g.spec.buoyancy = Some(name) }
    }
}

/// Names the coordinates that fit, and gives how each axis is spaced by them.
fn coordinates<'a>(
    lines: &[(usize, &str, &'a Coordinates)],
    samples: [usize; 3],
    found: &Found,
    g: &mut Guess,
) -> [Option<&'a Coordinates>; 3] {
    let mut out = [None, None, None];
    for &(axis, path, line) in lines {
        let n = samples[axis];
        if line.values.len() != n || n < 2 {
            continue;
        }
        let (name, letter) = (said(path, &found.step), ["x", "y", "z"][axis]);
        if line.check(axis, n).is_err() {
            g.reasons.push(format!("{name} has as many numbers as samples along {letter}, but they do not ascend: not taken"));
            continue;
        }
        g.reasons.push(format!("{name} has as many numbers as samples along {letter}"));
        g.spec.coordinates[axis] = Some(name);
        out[axis] = Some(line);
    }
    out
}

/// Attributes of a group; empty for the root.
fn of_group<'a>(inside: &'a Inside, place: &str) -> Vec<&'a Named> {
    if place.is_empty() {
        return inside.attributes.iter().collect();
    }
    inside.groups.iter().filter(|(path, _)| path == place).flat_map(|(_, a)| a).collect()
}

/// The time, from the places that are looked at when the snapshot is opened.
fn time(inside: &Inside, found: &Found, g: &mut Guess) {
    let one = |a: &&Named| a.one().filter(|_| TIMES.contains(&a.name.to_lowercase().as_str()));
    let first = inside.of_items.iter().find(|(path, _)| *path == found.first);
    let mut attributes = of_group(inside, &found.step);
    attributes.extend(if found.step.is_empty() { &[][..] } else { &inside.attributes[..] });
    attributes.extend(first.into_iter().flat_map(|(_, a)| a));
    if let Some((a, value)) = attributes.iter().find_map(|a| Some((a, one(a)?))) {
        g.time = Some(value);
        g.reasons.push(format!("time from the attribute {}", a.name));
        if !["time", "t"].contains(&a.name.as_str()) {
            g.spec.time.attribute = Some(a.name.clone());
        }
        return;
    }
    let near = |place: &str| {
        let named = |path: &str| rest(path, place).is_some_and(|r| TIMES.contains(&r.to_lowercase().as_str()));
        inside.scalars.iter().find(|(path, _)| named(path))
    };
    if let Some((path, value)) = near(&found.place).or_else(|| near(&found.step)).or_else(|| near("")) {
        let name = said(path, &found.step);
        g.time = Some(*value);
        g.reasons.push(format!("time from the dataset {name}"));
        g.spec.time.dataset = Some(name);
    }
}
