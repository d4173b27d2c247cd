//! A guess at how a file is to be read: names, axis order, size of the box, coordinates, steps and time from what stands in it.

use std::collections::BTreeMap;
use std::f64::consts::TAU;

use crate::read::contents::{Inside, Named, axis_of};
use crate::read::natural;
use crate::read::spec::InputSpec;

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

/// Words that attributes with the lengths of the box, or with the spacing, have as names.
const LENGTHS: [&str; 9] = ["lengths", "length", "box_lengths", "box_size", "boxsize", "box", "domain_size", "domain", "l"];
const SPACING: [&str; 3] = ["spacing", "dx", "h"];
const TIMES: [&str; 4] = ["time", "t", "sim_time", "simulation_time"];
const DENSITY: [&str; 2] = ["rho", "density"];
const BUOYANCY: [&str; 3] = ["buoyancy", "theta", "temperature"];

/// Guesses how `inside` is to be read; `single` is the name of the only array of a file that holds no other.
pub(super) fn guess(inside: &Inside, single: Option<&str>) -> Guess {
    let steps = steps(inside);
    let mut g = Guess { spec: InputSpec { lengths: Some([TAU; 3]), ..InputSpec::default() }, reasons: Vec::new(), steps, time: None };
    if g.steps.len() > 1 {
        g.reasons.push(format!("{} groups look like steps, {} the first", g.steps.len(), g.steps[0]));
    }
    let Some((place, shape)) = names(inside, single, &mut g) else {
        g.reasons.push("no usual names of a velocity or magnetic field: name them".into());
        return g;
    };
    let lines = lines(inside, &place);
    let samples = order(&shape, &lines, &mut g);
    scalars(inside, &place, &shape, &mut g);
    coordinates(&lines, samples, &place, &mut g);
    let attributes = attributes(inside, &place);
    size(&attributes, samples, &mut g);
    time(inside, &attributes, &place, &mut g);
    g
}

/// Groups with numbers in otherwise equal names, in natural order.
fn steps(inside: &Inside) -> Vec<String> {
    let mut alike: BTreeMap<String, Vec<String>> = BTreeMap::new();
    for (path, _) in &inside.groups {
        let last = path.rsplit('/').next().unwrap_or(path);
        if !last.bytes().any(|b| b.is_ascii_digit()) {
            continue;
        }
        let above = &path[..path.len() - last.len()];
        let bare: String = last.chars().filter(|c| !c.is_ascii_digit() && *c != '.').collect();
        let holds = inside.items.iter().any(|i| i.name.starts_with(&format!("{path}/")) && i.shape.len() > 1);
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

/// Finds the fields: their place (a group path, empty for the root) and the shape of the first array.
fn names(inside: &Inside, single: Option<&str>, g: &mut Guess) -> Option<(String, Vec<usize>)> {
    if let Some(name) = single {
        let item = inside.items.first()?;
        g.reasons.push(format!("{name} is taken as the velocity"));
        g.spec.velocity = Some(vec![name.into()]);
        return Some((String::new(), item.shape.clone()));
    }
    let velocity = sets(&["u", "v", "vel", "velocity"], &[&["u", "v", "w"]], &["velocity", "vel", "u"]);
    let magnetic = sets(&["b", "mag", "magnetic", "magnetic_field"], &[], &["magnetic", "magnetic_field", "b"]);
    let mut places: Vec<String> = g.steps.first().map(|s| format!("/{s}")).into_iter().collect();
    places.push(String::new());
    places.extend(inside.groups.iter().map(|(path, _)| path.clone()));
    for place in places {
        let here: Vec<(&str, &Vec<usize>)> =
            inside.items.iter().filter_map(|i| Some((rest(&i.name, &place)?, &i.shape))).filter(|(n, _)| !n.contains('/')).collect();
        let find = |sets: &[Vec<String>]| -> Option<(Vec<String>, Vec<usize>)> { sets.iter().find_map(|set| complete(set, &here)) };
        let (u, b) = (find(&velocity), find(&magnetic));
        let Some(shape) = u.as_ref().or(b.as_ref()).map(|found| found.1.clone()) else { continue };
        let full = |name: String| said(&format!("{place}/{name}"), &place, &g.steps);
        let full = |found: Option<(Vec<String>, Vec<usize>)>| found.map(|(set, _)| set.into_iter().map(full).collect::<Vec<_>>());
        let (u, b) = (full(u), full(b));
        for (field, found, slot) in [("velocity", u, 0), ("magnetic field", b, 1)] {
            let Some(set) = found else { continue };
            g.reasons.push(format!("{} named as a {field}", set.join(",")));
            if slot == 0 { g.spec.velocity = Some(set) } else { g.spec.magnetic = Some(set) }
        }
        return Some((place, shape));
    }
    None
}

/// The rest of a path below a place.
fn rest<'a>(path: &'a str, place: &str) -> Option<&'a str> {
    path.strip_prefix(place).map(|r| r.trim_start_matches('/'))
}

/// How a path is named: relative to the root or to the step where the fields are in one of them, else in full.
fn said(path: &str, place: &str, steps: &[String]) -> String {
    let relative = place.is_empty() || steps.first().is_some_and(|s| place == format!("/{s}"));
    match rest(path, place) {
        Some(name) if relative && !name.contains('/') => name.into(),
        _ => path.into(),
    }
}

/// The names of a set as they are spelled, when all are there with one shape that suits.
fn complete(set: &[String], here: &[(&str, &Vec<usize>)]) -> Option<(Vec<String>, Vec<usize>)> {
    let plain = |name: &str| name.strip_suffix(".npy").unwrap_or(name).to_lowercase();
    let spelled: Vec<&(&str, &Vec<usize>)> = set.iter().filter_map(|name| here.iter().find(|(n, _)| plain(n) == *name)).collect();
    let shape = spelled.first()?.1;
    let few = |n: usize| n == 2 || n == 3;
    let fits = match set.len() {
        1 => shape.len() == 4 || (shape.len() == 3 && (few(shape[0]) || few(shape[2]))),
        _ => shape.len() == 2 || shape.len() == 3,
    };
    let enough =
        spelled.len() == set.len() || (spelled.len() == 2 && (shape.len() == 2 || shape.contains(&1)) && plain(spelled[1].0) == set[1]);
    let same = spelled.iter().all(|s| s.1 == shape);
    (fits && enough && same).then(|| (spelled.iter().map(|s| s.0.to_string()).collect(), shape.clone()))
}

/// Coordinates that may belong to a place: axis, path, number of samples.
fn lines(inside: &Inside, place: &str) -> Vec<(usize, String, usize)> {
    let mut out = Vec::new();
    for axis in 0..3 {
        let of = |near: &dyn Fn(&str) -> bool| {
            inside.lines.iter().find(|(name, _)| axis_of(name) == Some(axis) && near(name)).map(|(name, n)| (axis, name.clone(), *n))
        };
        let here = |name: &str| rest(name, place).is_some_and(|r| !r.contains('/'));
        let root = |name: &str| !name.trim_start_matches('/').contains('/');
        out.extend(of(&here).or_else(|| of(&root)).or_else(|| of(&|_| true)));
    }
    out
}

/// Settles the axis order, and gives the samples along x, y, z.
fn order(shape: &[usize], lines: &[(usize, String, usize)], g: &mut Guess) -> [usize; 3] {
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
    let fits = |order: &&&str| lines.iter().all(|(axis, _, n)| samples(order)[*axis] == *n);
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
fn scalars(inside: &Inside, place: &str, shape: &[usize], g: &mut Guess) {
    let single = g.spec.velocity.as_ref().or(g.spec.magnetic.as_ref()).is_some_and(|n| n.len() == 1);
    let rank = shape.len() - usize::from(single);
    for (words, density) in [(&DENSITY[..], true), (&BUOYANCY[..], false)] {
        let found = inside.items.iter().find_map(|i| {
            let name = rest(&i.name, place)?;
            let plain = name.strip_suffix(".npy").unwrap_or(name).to_lowercase();
            let sized = i.shape.len() == rank && (single || i.shape == shape);
            (sized && words.contains(&plain.as_str())).then(|| said(&i.name, place, &g.steps))
        });
        let Some(name) = found else { continue };
        g.reasons.push(format!("{name} named as a {}", if density { "density" } else { "buoyancy" }));
        if density { g.spec.density = Some(name) } else { g.spec.buoyancy = Some(name) }
    }
}

fn coordinates(lines: &[(usize, String, usize)], samples: [usize; 3], place: &str, g: &mut Guess) {
    for (axis, path, n) in lines {
        if samples[*axis] != *n || *n < 2 {
            continue;
        }
        let name = said(path, place, &g.steps);
        g.reasons.push(format!("{name} has as many numbers as samples along {}", ["x", "y", "z"][*axis]));
        g.spec.coordinates[*axis] = Some(name);
    }
}

/// Attributes that may tell of a place: those of its group, of the root, of the first dataset in it.
fn attributes<'a>(inside: &'a Inside, place: &str) -> Vec<&'a Named> {
    let own = inside.groups.iter().filter(|(path, _)| path == place).flat_map(|(_, a)| a);
    let first = inside.of_items.iter().find(|(path, _)| rest(path, place).is_some_and(|r| !r.is_empty() && !r.contains('/')));
    own.chain(&inside.attributes).chain(first.into_iter().flat_map(|(_, a)| a)).collect()
}

/// Lengths or spacing of the box.
fn size(attributes: &[&Named], n: [usize; 3], g: &mut Guess) {
    let flat = n[2] == 1;
    if (0..3).all(|a| g.spec.coordinates[a].is_some() || (a == 2 && flat)) {
        g.spec.lengths = None;
        return;
    }
    let good = |v: &[f64]| v.iter().all(|x| x.is_finite() && *x > 0.0);
    let find = |name: &str| attributes.iter().find(|a| a.name.eq_ignore_ascii_case(name) && good(&a.numbers)).copied();
    let triple = |v: &[f64]| match *v {
        [one] => Some([one; 3]),
        [x, y] if flat => Some([x, y, 1.0]),
        [x, y, z] => Some([x, y, z]),
        _ => None,
    };
    let each = |names: [&str; 3]| {
        let v = names.map(|name| find(name).and_then(|a| if let [one] = a.numbers[..] { Some((a.name.clone(), one)) } else { None }));
        let said: Vec<&str> = v.iter().flatten().map(|(name, _)| name.as_str()).collect();
        let said = format!("attributes {}", said.join(", "));
        let v = v.map(|found| found.map(|(_, one)| one));
        Some((said, [v[0]?, v[1]?, v[2].or(flat.then_some(1.0))?]))
    };
    let whole =
        |words: &[&str]| words.iter().find_map(|w| find(w).and_then(|a| Some((format!("attribute {}", a.name), triple(&a.numbers)?))));
    if let Some((from, v)) = each(["lx", "ly", "lz"]).or_else(|| whole(&LENGTHS)) {
        g.reasons.push(format!("lengths of the box from the {from}, in the order x, y, z"));
        g.spec.lengths = Some(v);
    } else if let Some((from, v)) = each(["dx", "dy", "dz"]).or_else(|| whole(&SPACING)) {
        g.reasons.push(format!("spacing from the {from}, in the order x, y, z"));
        (g.spec.lengths, g.spec.spacing) = (None, Some(v));
    } else {
        g.reasons.push("nothing tells the size of the box: 2 pi is assumed".into());
    }
}

fn time(inside: &Inside, attributes: &[&Named], place: &str, g: &mut Guess) {
    let one = |a: &&&Named| a.numbers.len() == 1 && a.numbers[0].is_finite() && TIMES.contains(&a.name.to_lowercase().as_str());
    if let Some(a) = attributes.iter().find(one) {
        g.time = Some(a.numbers[0]);
        g.reasons.push(format!("time from the attribute {}", a.name));
        if !["time", "t"].contains(&a.name.as_str()) {
            g.spec.time.attribute = Some(a.name.clone());
        }
        return;
    }
    let near = |name: &str| rest(name, place).is_some_and(|r| TIMES.contains(&r.to_lowercase().as_str()));
    if let Some((path, value)) = inside.scalars.iter().find(|(path, _)| near(path)) {
        let name = said(path, place, &g.steps);
        g.time = Some(*value);
        g.reasons.push(format!("time from the dataset {name}"));
        g.spec.time.dataset = Some(name);
    }
}
