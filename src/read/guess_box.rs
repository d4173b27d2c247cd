//! A guess at the box of a file: its size, where it begins and which axes are periodic, from attributes.

use std::f64::consts::TAU;

use crate::read::contents::Named;
use crate::read::coordinates::{Coordinates, Spaced};
use crate::read::geometry;
use crate::read::guess::Guess;

/// Words that attributes with the lengths of the box, or with the spacing, have as names.
const LENGTHS: [&str; 9] = ["lengths", "length", "box_lengths", "box_size", "boxsize", "box", "domain_size", "domain", "l"];
const SPACING: [&str; 3] = ["spacing", "dx", "h"];
const AXES: [&str; 3] = ["x", "y", "z"];

/// Size, origin and periodic axes of `n` samples, some of which may have coordinates.
pub(super) fn settle(attributes: &[&Named], n: [usize; 3], lines: &[Option<&Coordinates>; 3], g: &mut Guess) {
    size(attributes, n, lines, g);
    let find = |name: &'static str| attributes.iter().filter(move |a| a.name.eq_ignore_ascii_case(name));
    if let Some(mut origin) = find("origin").find_map(|a| triple(&a.numbers, n[2] == 1, 0.0)).filter(|o| o.iter().all(|v| v.is_finite())) {
        // Coordinates say where an axis begins.
        for (at, _) in origin.iter_mut().zip(lines).filter(|(_, line)| line.is_some()) {
            *at = 0.0;
        }
        if origin != [0.0; 3] {
            g.spec.origin = origin;
            g.reasons.push("position of the first sample from the attribute origin, in the order x, y, z".into());
        }
    }
    if let Some(periodic) = find("periodic").find_map(|a| flags(a, n[2] == 1)) {
        g.spec.periodic = periodic;
        let named: Vec<&str> = (0..3).filter(|&a| periodic[a]).map(|a| AXES[a]).collect();
        let named = if named.is_empty() { "none".into() } else { named.join(", ") };
        g.reasons.push(format!("periodic axes from the attribute periodic: {named}"));
    }
    if g.spec.velocity.is_some() && find("compressible").any(|a| a.one() == Some(1.0)) {
        g.reasons.push("the attribute compressible says that the flow is compressible".into());
    }
}

/// Three numbers, or one for all axes, or two on a plane.
fn triple(v: &[f64], flat: bool, third: f64) -> Option<[f64; 3]> {
    match *v {
        [one] => Some([one; 3]),
        [x, y] if flat => Some([x, y, third]),
        [x, y, z] => Some([x, y, z]),
        _ => None,
    }
}

/// Which axes an attribute names: letters of the axes or `none`, or one number (0 or 1) an axis.
fn flags(a: &Named, flat: bool) -> Option<[bool; 3]> {
    if !a.numbers.is_empty() {
        return triple(&a.numbers, flat, 0.0).filter(|v| v.iter().all(|x| *x == 0.0 || *x == 1.0)).map(|v| v.map(|x| x == 1.0));
    }
    let text: String = a.text.to_lowercase().chars().filter(|c| !c.is_whitespace() && *c != ',').collect();
    if text == "none" {
        return Some([false; 3]);
    }
    let letters = !text.is_empty() && text.chars().all(|c| "xyz".contains(c));
    letters.then(|| AXES.map(|axis| text.contains(axis)))
}

/// Lengths or spacing of the box.
fn size(attributes: &[&Named], n: [usize; 3], lines: &[Option<&Coordinates>; 3], g: &mut Guess) {
    let flat = n[2] == 1;
    let needed = [0, 1, 2].map(|a| lines[a].is_none() && !(a == 2 && flat));
    let good = |v: &[f64]| v.iter().all(|x| x.is_finite() && *x > 0.0);
    let find = |name: &str| attributes.iter().find(|a| a.name.eq_ignore_ascii_case(name) && good(&a.numbers)).copied();
    let each = |names: [&str; 3]| {
        let v = names.map(|name| find(name).and_then(|a| if let [one] = a.numbers[..] { Some((a.name.clone(), one)) } else { None }));
        let said: Vec<&str> = v.iter().flatten().map(|(name, _)| name.as_str()).collect();
        let said = format!("attributes {}", said.join(", "));
        let v = v.map(|found| found.map(|(_, one)| one));
        Some((said, [v[0]?, v[1]?, v[2].or(flat.then_some(1.0))?]))
    };
    let whole = |words: &[&str]| {
        words.iter().find_map(|w| find(w).and_then(|a| Some((format!("attribute {}", a.name), triple(&a.numbers, flat, 1.0)?))))
    };
    let mut told = Vec::new();
    let (v, is_length) = if let Some((from, v)) = each(["lx", "ly", "lz"]).or_else(|| whole(&LENGTHS)) {
        told.push(format!("lengths of the box from the {from}, in the order x, y, z"));
        (v, true)
    } else if let Some((from, v)) = each(["dx", "dy", "dz"]).or_else(|| whole(&SPACING)) {
        told.push(format!("spacing from the {from}, in the order x, y, z"));
        (v, false)
    } else {
        if needed.contains(&true) {
            told.push("nothing tells the size of the box".into());
        }
        ([0, 1, 2].map(|a| if lines[a].is_some() { 0.0 } else { TAU }), true)
    };
    let mut v = v;
    for a in 0..3 {
        let Some(line) = lines[a].filter(|_| v[a] != 0.0) else { continue };
        let fits = geometry::agrees(line, a, n[a], v[a], is_length).is_ok();
        if !fits {
            told.push(format!("it does not fit the coordinates of {}, which are taken instead", AXES[a]));
        }
        // What the coordinates say by themselves is not said twice.
        let adds = match line.check(a, n[a]) {
            Ok(Spaced::Unequal(positions)) => (geometry::whole_cells(&positions) - v[a]).abs() > 1e-9 * v[a],
            _ => false,
        };
        if !fits || !adds {
            v[a] = 0.0;
        }
    }
    let says = (0..3).any(|a| v[a] != 0.0 && !(a == 2 && flat));
    if says {
        g.reasons.extend(told);
    }
    (g.spec.lengths, g.spec.spacing) = if !says {
        (None, None)
    } else if is_length {
        (Some(v), None)
    } else {
        (None, Some(v))
    };
}
