//! Values of settings by kind: text, names, numbers, parts of axes. What cannot be read is a fault, and the default goes on.

use std::collections::BTreeSet;
use std::f64::consts::PI;

use crate::base::error::Error;
use crate::model::request::Frame;
use crate::read::Stretch;
use crate::run::config::given::{Given, Node, Raw};
use crate::run::config::nearest::nearest;
use crate::run::config::registry::{Key, Takes};

const AXES: [&str; 3] = ["x", "y", "z"];
const SIZES: &str = "three finite numbers above 0, or one for all axes";
const POSITION: &str = "three finite numbers, or one for all axes";

/// Reads settings and gathers faults.
pub(super) struct Reader<'g> {
    /// The settings.
    pub given: &'g Given,
    /// What is wrong.
    pub faults: Vec<Error>,
    /// Settings with a fault: what follows from them is not checked.
    pub broken: BTreeSet<Key>,
}

impl<'g> Reader<'g> {
    pub fn new(given: &'g Given) -> Self {
        Reader { given, faults: given.faults.clone(), broken: BTreeSet::new() }
    }

    /// Notes that a value is not what it should be; the hint is an example.
    pub fn unlike(&mut self, key: Key, node: &Node, expected: &str) {
        self.fault(key, node, expected, node.found(), example(key, node));
    }

    /// Notes a fault.
    pub fn fault(&mut self, key: Key, node: &Node, expected: &str, found: String, hint: String) {
        let e = Error::usage("cannot use a setting").item(self.given.label(key)).expected(expected).found(found).hint(hint);
        self.push(key, node.line, e);
    }

    /// Notes an error about one setting, at a line.
    pub fn push(&mut self, key: Key, line: Option<usize>, e: Error) {
        self.broken.insert(key);
        self.faults.push(self.given.placed(e, line));
    }

    /// Whether a setting has a fault.
    pub fn is_broken(&self, key: Key) -> bool {
        self.broken.contains(&key)
    }

    /// A text that is not empty.
    pub fn text(&mut self, key: Key) -> Option<String> {
        let node = self.given.node(key)?;
        match &node.raw {
            Raw::Typed(t) | Raw::Text(t) if !t.trim().is_empty() => Some(t.clone()),
            _ => {
                self.unlike(key, node, "a text");
                None
            }
        }
    }

    /// One of the setting's choices.
    pub fn choice(&mut self, key: Key) -> Option<&'static str> {
        let node = self.given.node(key)?;
        let text = match &node.raw {
            Raw::Typed(t) | Raw::Text(t) => t.clone(),
            Raw::Integer(i) => i.to_string(),
            _ => String::new(),
        };
        let choices = key.setting().choices;
        let found = choices.iter().find(|c| **c == text).copied();
        if found.is_none() {
            let hint = nearest(&text, choices.iter().copied()).map_or_else(|| example(key, node), |c| format!("did you mean {c}?"));
            self.fault(key, node, &format!("one of {}", choices.join(", ")), node.found(), hint);
        }
        found
    }

    /// Yes or no.
    pub fn switch(&mut self, key: Key) -> Option<bool> {
        let node = self.given.node(key)?;
        match &node.raw {
            Raw::Bool(b) => Some(*b),
            Raw::Typed(t) if t == "yes" => Some(true),
            Raw::Typed(t) if t == "no" => Some(false),
            _ => {
                self.unlike(key, node, if node.line.is_some() { "true or false" } else { "yes or no" });
                None
            }
        }
    }

    /// A whole number in a range.
    pub fn whole(&mut self, key: Key, least: u64, most: u64) -> Option<u64> {
        let node = self.given.node(key)?;
        let value = match &node.raw {
            Raw::Integer(i) => u64::try_from(*i).ok(),
            Raw::Typed(t) => t.trim().parse().ok(),
            _ => None,
        };
        if let Some(v) = value.filter(|v| (least..=most).contains(v)) {
            return Some(v);
        }
        let expected = match (least, most) {
            (0, u64::MAX) => "a whole number".to_string(),
            (least, u64::MAX) => format!("a whole number of at least {least}"),
            (least, most) => format!("a whole number from {least} to {most}"),
        };
        self.unlike(key, node, &expected);
        None
    }

    /// A number above 0.
    pub fn positive(&mut self, key: Key) -> Option<f64> {
        let node = self.given.node(key)?;
        let value = number(node).filter(|v| *v > 0.0);
        if value.is_none() {
            self.unlike(key, node, "a number above 0");
        }
        value
    }

    /// A number of bytes with its unit.
    pub fn size(&mut self, key: Key) -> Option<u64> {
        let node = self.given.node(key)?;
        let text = match &node.raw {
            Raw::Typed(t) | Raw::Text(t) => t.trim().to_string(),
            Raw::Integer(_) | Raw::Float(_) => node.found(),
            _ => String::new(),
        };
        let value = parse_size(&text);
        if value.is_none() {
            let hint = meant_size(&text).map_or_else(|| example(key, node), |m| format!("did you mean {m}?"));
            self.fault(
                key,
                node,
                &format!("a size above 0 with one of the units {}", UNITS.map(|(u, _)| u).join(", ")),
                node.found(),
                hint,
            );
        }
        value
    }

    /// Numbers, any of them.
    pub fn numbers(&mut self, key: Key) -> Option<Vec<f64>> {
        let node = self.given.node(key)?;
        let values = numbers(node);
        if values.is_none() {
            self.unlike(key, node, "finite numbers");
        }
        values
    }

    /// Lengths along the axes: three numbers, or one for all axes, or two on a plane. Entries of axes that are `free` may be 0.
    pub fn sizes(&mut self, key: Key, free: [bool; 3], plane: bool) -> Option<[f64; 3]> {
        let node = self.given.node(key)?;
        let values = self.axis_numbers(key, SIZES, plane.then_some(1.0))?;
        let values = values.filter(|v| v.iter().zip(free).all(|(v, free)| *v > 0.0 || (free && *v == 0.0)));
        if values.is_none() {
            self.unlike(key, node, SIZES);
        }
        // One number is meant for the axes that need one: coordinates know their own length.
        let single = numbers(node).is_some_and(|n| n.len() == 1);
        let known = |a: usize| single && free[a] && !(a == 2 && plane);
        values.map(|v| std::array::from_fn(|a| if known(a) { 0.0 } else { v[a] }))
    }

    /// A position: three numbers, or one for all axes, or two on a plane.
    pub fn position(&mut self, key: Key, plane: bool) -> Option<[f64; 3]> {
        let node = self.given.node(key)?;
        let values = self.axis_numbers(key, POSITION, plane.then_some(0.0))?;
        if values.is_none() {
            self.unlike(key, node, POSITION);
        }
        values
    }

    /// One number an axis; two with the third that a plane is given. The outer none is a fault that has been told.
    fn axis_numbers(&mut self, key: Key, expected: &str, third: Option<f64>) -> Option<Option<[f64; 3]>> {
        let node = self.given.node(key)?;
        Some(match (numbers(node).as_deref(), third) {
            (Some([v]), _) => Some([*v; 3]),
            (Some([x, y, z]), _) => Some([*x, *y, *z]),
            (Some([x, y]), Some(z)) => Some([*x, *y, z]),
            (Some([_, _]), None) => {
                // Whether a file holds a plane is known only when it is opened, and a box needs all three.
                let order = if node.line.is_some() { "order = \"yx\"" } else { "--order yx" };
                let hint = format!("for a plane give {order} as well (or xy)");
                self.fault(key, node, expected, node.found(), hint);
                return None;
            }
            _ => None,
        })
    }

    /// The frame of the velocity: a word, or a velocity of three numbers, two on a plane.
    pub fn frame(&mut self, plane: bool) -> Option<Frame> {
        const WORDS: [(&str, Frame); 2] = [("box", Frame::Box), ("stored", Frame::Stored)];
        let node = self.given.node(Key::Frame)?;
        let text = match &node.raw {
            Raw::Typed(t) | Raw::Text(t) => t.as_str(),
            _ => "",
        };
        if let Some((_, frame)) = WORDS.iter().find(|(word, _)| *word == text) {
            return Some(*frame);
        }
        match numbers(node).as_deref() {
            Some([u, v, w]) => return Some(Frame::Given([*u, *v, *w])),
            Some([u, v]) if plane => return Some(Frame::Given([*u, *v, 0.0])),
            _ => {}
        }
        let near = nearest(text, WORDS.map(|(word, _)| word)).filter(|_| !text.is_empty());
        let hint = near.map_or_else(|| example(Key::Frame, node), |word| format!("did you mean {word}?"));
        self.fault(Key::Frame, node, "box, stored, or the velocity of a frame, three finite numbers", node.found(), hint);
        None
    }

    /// A list of texts, each with its place. A text with commas is a list.
    pub fn list(&mut self, key: Key) -> Option<Vec<(String, Node)>> {
        let node = self.given.node(key)?;
        let split = |t: &str| t.split(',').map(|p| p.trim().to_string()).collect::<Vec<_>>();
        let items: Vec<(String, Node)> = match &node.raw {
            Raw::Typed(t) | Raw::Text(t) => split(t).into_iter().map(|t| (t, node.clone())).collect(),
            Raw::Integer(i) if key == Key::CutOuts => vec![(i.to_string(), node.clone())],
            Raw::List(items) => items.iter().filter_map(|n| Some((self.entry(key, n)?, n.clone()))).collect(),
            _ => {
                self.unlike(key, node, "a list of texts");
                return None;
            }
        };
        let (items, empty): (Vec<_>, Vec<_>) = items.into_iter().partition(|(t, _)| !t.trim().is_empty());
        if !empty.is_empty() {
            self.unlike(key, node, "a list of texts, none of them empty");
        }
        // The others are looked at all the same.
        (empty.is_empty() || !items.is_empty()).then_some(items)
    }

    /// The text of an entry of a list; an entry that is none is a fault of its own.
    fn entry(&mut self, key: Key, node: &Node) -> Option<String> {
        match &node.raw {
            Raw::Text(t) | Raw::Typed(t) => Some(t.clone()),
            // Ids of objects are numbers.
            Raw::Integer(i) if key == Key::CutOuts => Some(i.to_string()),
            _ => {
                self.unlike(key, node, "a text in the list");
                None
            }
        }
    }

    /// Texts, each of which may hold commas.
    pub fn texts(&mut self, key: Key) -> Option<Vec<(String, Node)>> {
        match self.given.node(key).map(|n| (&n.raw, n)) {
            Some((Raw::Text(t), node)) if !t.trim().is_empty() => Some(vec![(t.clone(), node.clone())]),
            _ => self.list(key),
        }
    }

    /// Periodic axes.
    pub fn axes(&mut self, key: Key) -> Option<[bool; 3]> {
        let node = self.given.node(key)?;
        if let Raw::Typed(t) | Raw::Text(t) = &node.raw {
            if t == "none" {
                return Some([false; 3]);
            }
            let each: [usize; 3] = std::array::from_fn(|a| t.matches(AXES[a]).count());
            if !t.is_empty() && each.iter().sum::<usize>() == t.chars().count() && each.iter().all(|n| *n < 2) {
                return Some(each.map(|n| n == 1));
            }
        }
        self.unlike(key, node, "a subset of xyz, or none");
        None
    }

    /// One text an axis, as `x=TEXT,z=TEXT` or as a table.
    pub fn by_axis(&mut self, key: Key, expected: &str) -> Option<[Option<Node>; 3]> {
        let node = self.given.node(key)?;
        let mut out = [None, None, None];
        let entries: Option<Vec<(String, Node)>> = match &node.raw {
            Raw::Typed(t) | Raw::Text(t) => t
                .split(',')
                .map(|part| {
                    let (axis, rest) = part.split_once('=')?;
                    Some((axis.trim().to_string(), Node { raw: Raw::Text(rest.trim().to_string()), line: node.line }))
                })
                .collect(),
            Raw::Table(entries) => Some(entries.clone()),
            _ => None,
        };
        for (axis, value) in entries.unwrap_or_else(|| vec![(String::new(), node.clone())]) {
            match AXES.iter().position(|a| *a == axis) {
                Some(a) if out[a].is_none() => out[a] = Some(value),
                Some(_) => self.fault(key, node, "every axis once", format!("{axis} twice in {}", node.found()), example(key, node)),
                None => {
                    let found = if axis.is_empty() { node.found() } else { format!("the axis \"{axis}\"") };
                    self.fault(key, node, expected, found, example(key, node));
                }
            }
        }
        Some(out)
    }

    /// Names of coordinates.
    pub fn coordinates(&mut self) -> [Option<String>; 3] {
        const EXPECTED: &str = "the name of a dataset for some of x, y, z";
        let Some(found) = self.by_axis(Key::Coordinates, EXPECTED) else { return [None, None, None] };
        found.map(|node| {
            let node = node?;
            match &node.raw {
                Raw::Text(t) if !t.is_empty() => Some(t.clone()),
                _ => {
                    self.unlike(Key::Coordinates, &node, EXPECTED);
                    None
                }
            }
        })
    }

    /// Parts of axes, by positions or by indices.
    pub fn stretches(&mut self, key: Key) -> [Option<Stretch>; 3] {
        let cells = key == Key::RegionCells;
        let expected = if cells {
            "FIRST:END for some of x, y, z, two whole numbers, the second larger"
        } else {
            "FROM:TO for some of x, y, z, two numbers, the second larger"
        };
        let Some(found) = self.by_axis(key, expected) else { return [None; 3] };
        found.map(|node| {
            let node = node?;
            let out = if cells { indices(&node) } else { positions(&node) };
            if out.is_none() {
                self.unlike(key, &node, expected);
            }
            out
        })
    }
}

/// What a setting looks like, in the form of the place where the fault is.
fn example(key: Key, node: &Node) -> String {
    let s = key.setting();
    match (node.line, s.flag) {
        (Some(_), _) => format!("for example {} = {}", s.name, s.example),
        (None, "") => format!("for example {}", s.typed),
        (None, flag) if s.takes == Takes::Switch => format!("for example --{flag}={}", s.typed),
        (None, flag) if s.typed.contains([' ', '<', '>', '*', '{']) => format!("for example --{flag} \"{}\"", s.typed),
        (None, flag) => format!("for example --{flag} {}", s.typed),
    }
}

/// The two ends of a part of an axis.
fn ends(node: &Node) -> Option<(Node, Node)> {
    match &node.raw {
        Raw::List(both) => match both.as_slice() {
            [a, b] => Some((a.clone(), b.clone())),
            _ => None,
        },
        Raw::Text(t) => {
            let (a, b) = t.split_once(':')?;
            let of = |t: &str| Node { raw: Raw::Typed(t.trim().to_string()), line: node.line };
            Some((of(a), of(b)))
        }
        _ => None,
    }
}

fn positions(node: &Node) -> Option<Stretch> {
    let (a, b) = ends(node)?;
    let (a, b) = (number(&a)?, number(&b)?);
    (a < b).then_some(Stretch::Positions(a, b))
}

fn indices(node: &Node) -> Option<Stretch> {
    let whole = |n: &Node| match &n.raw {
        Raw::Integer(i) => Some(*i),
        Raw::Typed(t) => t.parse().ok(),
        _ => None,
    };
    let (a, b) = ends(node)?;
    let (a, b) = (whole(&a)?, whole(&b)?);
    (a < b).then_some(Stretch::Indices(a, b))
}

fn number(node: &Node) -> Option<f64> {
    let value = match &node.raw {
        Raw::Integer(i) => Some(*i as f64),
        Raw::Float(v) => Some(*v),
        Raw::Typed(t) | Raw::Text(t) => parse_number(t),
        _ => None,
    };
    value.filter(|v| v.is_finite())
}

fn numbers(node: &Node) -> Option<Vec<f64>> {
    match &node.raw {
        Raw::List(items) => items.iter().map(number).collect(),
        Raw::Typed(t) | Raw::Text(t) => t.split(',').map(|p| parse_number(p).filter(|v| v.is_finite())).collect(),
        _ => number(node).map(|v| vec![v]),
    }
}

/// A number, with multiples of pi: `2pi`, `-pi`, `4pi/3`, `0.5pi`.
fn parse_number(text: &str) -> Option<f64> {
    let text = text.trim();
    let Some((before, after)) = text.split_once("pi") else { return text.parse().ok() };
    let factor: f64 = match before.trim_end_matches('*').trim() {
        "" | "+" => 1.0,
        "-" => -1.0,
        number => number.parse().ok()?,
    };
    let divisor: f64 = match after.trim() {
        "" => 1.0,
        rest => rest.strip_prefix('/')?.trim().parse().ok()?,
    };
    Some(factor * PI / divisor)
}

/// Units of sizes: powers of 1024, then of 1000.
const UNITS: [(&str, u64); 8] = [
    ("KiB", 1 << 10),
    ("MiB", 1 << 20),
    ("GiB", 1 << 30),
    ("TiB", 1 << 40),
    ("kB", 1_000),
    ("MB", 1_000_000),
    ("GB", 1_000_000_000),
    ("TB", 1_000_000_000_000),
];

/// Number and unit of a size, whatever the unit.
fn split_size(text: &str) -> Option<(f64, &str)> {
    let (number, unit) = text.split_at(text.find(|c: char| !c.is_ascii_digit() && c != '.').unwrap_or(text.len()));
    Some((number.parse().ok()?, unit.trim()))
}

/// A number of bytes, at least 1.
fn parse_size(text: &str) -> Option<u64> {
    let (number, unit) = split_size(text)?;
    let (_, factor) = UNITS.iter().find(|(u, _)| *u == unit)?;
    let bytes = number * *factor as f64;
    // More than any machine has, and exact enough: a whole number of bytes below 2^53.
    (1.0..9e15).contains(&bytes).then_some(bytes as u64)
}

/// What someone may have meant who left the unit out or wrote it in another way.
fn meant_size(text: &str) -> Option<String> {
    let (number, unit) = split_size(text)?;
    let written = &text[..text.len() - text.trim_start_matches(|c: char| c.is_ascii_digit() || c == '.').len()];
    let unit = unit.to_ascii_lowercase();
    let unit = match unit.as_str() {
        // So few can only be of a larger unit, so many only bytes.
        "" | "b" if number < 1024.0 => "MiB",
        "" | "b" => return Some(format!("{}MiB", (number / 1048576.0).ceil().max(1.0))),
        other => UNITS.iter().map(|(u, _)| *u).find(|u| {
            let u = u.to_ascii_lowercase();
            u == other || u.trim_end_matches('b') == other || u.trim_end_matches("ib") == other
        })?,
    };
    Some(format!("{written}{unit}")).filter(|m| parse_size(m).is_some())
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn sizes_have_units() {
        for (text, bytes) in [
            ("160MiB", 160 << 20),
            ("1.5GiB", 3 << 29),
            ("2 TiB", 2 << 40),
            ("500MB", 500_000_000),
            ("64kB", 64_000),
            ("1KiB", 1024),
            ("0.25GB", 250_000_000),
        ] {
            assert_eq!(parse_size(text), Some(bytes), "{text}");
        }
        for text in ["", "160", "MiB", "-1MiB", "0MiB", "1mib", "2G", "1e3MiB", "1.2.3MiB", "9000000TiB", "1 PiB", "0.0001KiB"] {
            assert_eq!(parse_size(text), None, "{text}");
        }
        for (text, meant) in [
            ("160", Some("160MiB")),
            ("1073741824", Some("1024MiB")),
            ("2G", Some("2GiB")),
            ("2gb", Some("2GB")),
            ("512m", Some("512MiB")),
            ("1.5gib", Some("1.5GiB")),
            ("3KB", Some("3kB")),
            ("much", None),
            ("2 stone", None),
            ("0", None),
        ] {
            assert_eq!(meant_size(text).as_deref(), meant, "{text}");
        }
    }

    #[test]
    fn numbers_with_pi() {
        let tau = std::f64::consts::TAU;
        for (text, value) in [("2pi", tau), ("-pi", -PI), ("4pi/3", 4.0 * PI / 3.0), ("0.5*pi", 0.5 * PI), ("1e-3", 1e-3), (" 2 ", 2.0)] {
            assert_eq!(parse_number(text), Some(value), "{text}");
        }
        for text in ["", "pie", "2pi3", "xpi", "pi/x", "1,5"] {
            assert_eq!(parse_number(text), None, "{text}");
        }
    }
}
