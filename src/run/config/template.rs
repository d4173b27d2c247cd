//! A commented run file with every setting: what is known is active, the rest stands behind `#` with its default or an example.

use std::f64::consts::PI;
use std::path::{Path, PathBuf};

use crate::model::indicator::INDICATORS;
use crate::read::inspect::Contents;
use crate::read::{Staggering, Stretch};
use crate::run::config::registry::{Key, SETTINGS, Setting, TABLES};

/// Longest line of comments.
const WIDTH: usize = 100;

/// Settings with their values as they stand in a run file.
pub type Known = Vec<(Key, String)>;

/// What was found out about snapshots.
#[derive(Debug, Clone, PartialEq, Default)]
pub struct Findings {
    /// Settings that are known.
    pub known: Known,
    /// Whether nothing tells the size of the box.
    pub size_is_missing: bool,
}

/// The text of a run file in which what is known is active. `notes` go to its top.
pub fn text(findings: &Findings, notes: &[String]) -> String {
    let mut out = String::new();
    comment(
        &mut out,
        "Run file of ropewalk. A setting counts once the # before it is taken away. Of alternatives one is enough: lengths or spacing, positions or indices.",
    );
    comment(&mut out, "What would be done with it: ropewalk catalogue RUN.toml --dry-run. Flags replace what stands here.");
    if !notes.is_empty() {
        out.push_str("#\n");
    }
    notes.iter().for_each(|n| comment(&mut out, n));
    for (table, _, about) in TABLES {
        out.push_str(&format!("\n[{table}]\n"));
        comment(&mut out, &format!("{}.", capital(about)));
        for s in SETTINGS.iter().filter(|s| s.table == table) {
            out.push('\n');
            let value = findings.known.iter().find(|(k, _)| *k == s.key);
            let missing = s.key == Key::Lengths && findings.size_is_missing;
            comment(&mut out, &explained(s, value.is_some(), missing));
            match value {
                _ if missing => out.push_str(&format!("#{} = {}\n", s.name, triple(&[2.0 * PI; 3]))),
                Some((_, value)) => out.push_str(&format!("{} = {value}\n", s.name)),
                None => out.push_str(&format!("#{} = {}\n", s.name, placeholder(s))),
            }
        }
    }
    out
}

/// Help, flag and choices, and what the line below is.
fn explained(s: &Setting, active: bool, missing: bool) -> String {
    let mut text = format!("{}.", s.help.trim_end_matches('.'));
    if s.key == Key::Families {
        let names: Vec<&str> = INDICATORS.iter().map(|i| i.name).collect();
        text += &format!(" Indicators: {}; ropewalk columns defines them.", names.join(", "));
    }
    match s.short {
        Some(letter) => text += &format!(" Flag -{letter}."),
        // The others are called as their keys.
        None if !s.flag.is_empty() && s.flag != s.name.replace('_', "-") => text += &format!(" Flag --{}.", s.flag),
        None => {}
    }
    if missing {
        return text + " Nothing tells the size of the box: give it here or as a spacing. A box of 2 pi would be:";
    }
    if !s.choices.is_empty() {
        text += &format!(" One of {}.", s.choices.join(", "));
    }
    match (active, s.default) {
        (true, "") => {}
        (true, default) => text += &format!(" Default {default}."),
        (false, "") => text += " For example:",
        (false, _) => text += " Default:",
    }
    text
}

/// The default, or an example where there is none.
fn placeholder(s: &Setting) -> String {
    let plain = |t: &str| if t.parse::<f64>().is_ok() { t.to_string() } else { quoted(t) };
    match s.default {
        "" => s.example.to_string(),
        "yes" => "true".to_string(),
        "no" => "false".to_string(),
        list if list.contains(',') => format!("[{}]", list.split(',').map(plain).collect::<Vec<_>>().join(", ")),
        one => plain(one),
    }
}

/// What was found out about a snapshot, as settings.
///
/// `at` is where the run file will stand; paths are written relative to its folder where they lie below it, else whole.
pub fn guessed(contents: &[Contents], at: &Path) -> Findings {
    let Some(first) = contents.first() else { return Findings::default() };
    let size_is_missing = size_is_assumed(first);
    let mut out: Known = Vec::new();
    let paths: Vec<String> = contents.iter().map(|c| quoted(&from_folder_of(&c.path, at))).collect();
    out.push((Key::Paths, format!("[{}]", paths.join(", "))));
    if let Some(pattern) = common_pattern(&first.steps) {
        out.push((Key::Steps, quoted(&pattern)));
    }
    let g = &first.guess;
    let mut put = |key: Key, value: Option<String>| out.extend(value.map(|v| (key, v)));
    let names = |list: &Vec<String>| match list.as_slice() {
        [one] => quoted(one),
        several => format!("[{}]", several.iter().map(|n| quoted(n)).collect::<Vec<_>>().join(", ")),
    };
    let text = |t: &Option<String>| t.as_deref().map(quoted);
    put(Key::Velocity, g.velocity.as_ref().map(names));
    put(Key::Magnetic, g.magnetic.as_ref().map(names));
    put(Key::Buoyancy, text(&g.buoyancy));
    put(Key::Density, text(&g.density));
    put(Key::Order, Some(quoted(&g.order)));
    put(Key::Lengths, g.lengths.as_ref().filter(|_| !size_is_missing).map(triple));
    put(Key::Spacing, g.spacing.as_ref().filter(|_| g.lengths.is_none()).map(triple));
    put(Key::Origin, Some(triple(&g.origin)));
    let axes = ["x", "y", "z"];
    let periodic: String = (0..3).filter(|a| g.periodic[*a]).map(|a| axes[a]).collect();
    put(Key::Periodic, Some(quoted(if periodic.is_empty() { "none" } else { &periodic })));
    let by_axis = |value: &dyn Fn(usize) -> Option<String>| {
        let parts: Vec<String> = (0..3).filter_map(|a| Some(format!("{} = {}", axes[a], value(a)?))).collect();
        (!parts.is_empty()).then(|| format!("{{ {} }}", parts.join(", ")))
    };
    put(Key::Coordinates, by_axis(&|a| text(&g.coordinates[a])));
    put(
        Key::Staggering,
        match g.staggering {
            Staggering::Centres => None,
            Staggering::LowerFaces => Some(quoted("lower")),
            Staggering::UpperFaces => Some(quoted("upper")),
        },
    );
    put(
        Key::Region,
        by_axis(&|a| match g.region[a] {
            Some(Stretch::Positions(from, to)) => Some(format!("[{}, {}]", number(from), number(to))),
            _ => None,
        }),
    );
    put(
        Key::RegionCells,
        by_axis(&|a| match g.region[a] {
            Some(Stretch::Indices(first, end)) => Some(format!("[{first}, {end}]")),
            _ => None,
        }),
    );
    if let Some(raw) = &g.raw {
        put(Key::RawValues, Some(quoted(if raw.double { "f64" } else { "f32" })));
        put(Key::RawEndian, Some(quoted(if raw.big_endian { "big" } else { "little" })));
        put(Key::RawShape, Some(format!("{:?}", raw.shape)));
        put(Key::RawOffset, Some(raw.offset.to_string()));
        put(Key::RawRecords, Some(raw.record_markers.map_or_else(|| quoted("none"), |m| m.to_string())));
    }
    put(Key::TimeAttribute, text(&g.time.attribute));
    put(Key::TimeDataset, text(&g.time.dataset));
    put(Key::TimeName, text(&g.time.name));
    for (key, name) in [(Key::Viscosity, "viscosity"), (Key::Resistivity, "resistivity")] {
        put(key, stated(first, name).map(number));
    }
    Findings { known: out, size_is_missing }
}

/// Whether the lengths are those that stand for unknown ones: 2 pi along all axes, of which no reason speaks.
fn size_is_assumed(contents: &Contents) -> bool {
    contents.guess.lengths == Some([2.0 * PI; 3]) && !contents.reasons.iter().any(|r| r.starts_with("lengths of the box from"))
}

/// A coefficient that the file states in an attribute of that name.
fn stated(contents: &Contents, name: &str) -> Option<f64> {
    let (_, value) = contents.attributes.iter().find(|(n, _)| n == name)?;
    value.trim().parse().ok().filter(|v: &f64| v.is_finite() && *v > 0.0)
}

/// A pattern that all names match: what they begin with.
fn common_pattern(names: &[String]) -> Option<String> {
    let first = names.first()?;
    let shared = names.iter().fold(first.len(), |n, name| {
        let same = first.char_indices().zip(name.chars()).take_while(|((_, a), b)| a == b);
        n.min(same.map(|((i, a), _)| i + a.len_utf8()).last().unwrap_or(0))
    });
    let stem = first[..shared].trim_end_matches(|c: char| c.is_ascii_digit());
    Some(if names.len() == 1 && shared == first.len() && stem == first { first.clone() } else { format!("{stem}*") })
}

/// A path as it stands in a run file at `at`.
fn from_folder_of(path: &Path, at: &Path) -> String {
    let full = |p: &Path| std::path::absolute(p).unwrap_or_else(|_| p.to_path_buf());
    let (path, at) = (full(path), full(at));
    let folder = at.parent().map(PathBuf::from).unwrap_or_default();
    path.strip_prefix(&folder).unwrap_or(&path).to_string_lossy().into_owned()
}

fn triple(v: &[f64; 3]) -> String {
    format!("[{}, {}, {}]", number(v[0]), number(v[1]), number(v[2]))
}

/// The shortest text that reads back to the same number; multiples of pi are told as such.
fn number(v: f64) -> String {
    let multiple = (v / PI).round();
    if multiple != 0.0 && multiple.abs() < 1000.0 && multiple * PI == v {
        return quoted(&if multiple == 1.0 { "pi".to_string() } else { format!("{multiple}pi") });
    }
    // Debug forms have a point or an exponent: TOML wants numbers of a form it knows.
    format!("{v:?}")
}

/// A TOML string.
fn quoted(text: &str) -> String {
    let mut out = String::from("\"");
    for c in text.chars() {
        match c {
            '"' | '\\' => out.extend(['\\', c]),
            c if c.is_control() => out.push_str(&format!("\\u{:04X}", u32::from(c))),
            c => out.push(c),
        }
    }
    out.push('"');
    out
}

fn capital(text: &str) -> String {
    let mut c = text.chars();
    c.next().map(|first| first.to_uppercase().chain(c).collect()).unwrap_or_default()
}

/// A comment, wrapped between words.
fn comment(out: &mut String, text: &str) {
    let mut line = String::from("#");
    for word in text.split_whitespace() {
        if line.chars().count() + 1 + word.chars().count() > WIDTH && line != "#" {
            out.push_str(&line);
            out.push('\n');
            line = String::from("#");
        }
        line.push(' ');
        line.push_str(word);
    }
    out.push_str(&line);
    out.push('\n');
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::read::inspect::Item;
    use crate::read::{InputSpec, RawLayout, TimeSource};
    use crate::run::config::{Given, check_settings};

    fn contents(guess: InputSpec) -> Contents {
        let item = Item {
            name: "/flow/u".into(),
            shape: vec![64; 3],
            values: "float32 little-endian".into(),
            storage: "contiguous".into(),
            attributes: Vec::new(),
        };
        Contents {
            path: "data/odd \"name\".h5".into(),
            kind: "HDF5".into(),
            bytes: 100,
            items: vec![item],
            attributes: vec![("viscosity".into(), "0.019".into())],
            steps: vec!["step_0001".into(), "step_0012".into()],
            guess,
            reasons: vec!["velocity: a sentence long enough to be wrapped, ".repeat(4)],
            time: None,
        }
    }

    fn rich() -> InputSpec {
        InputSpec {
            velocity: Some(vec!["flow/u".into(), "flow/v".into(), "flow/w".into()]),
            magnetic: Some(vec!["B".into()]),
            buoyancy: Some("theta".into()),
            density: Some("rho".into()),
            order: "czyx".into(),
            lengths: Some([2.0 * PI, 0.1, 1e-7]),
            origin: [-PI, 0.0, 3.5],
            periodic: [true, false, false],
            coordinates: [None, Some("grid/y".into()), None],
            staggering: Staggering::UpperFaces,
            region: [Some(Stretch::Indices(-3, 9)), Some(Stretch::Positions(0.25, 1.0)), None],
            raw: Some(RawLayout { double: true, big_endian: true, shape: vec![3, 4, 5], offset: 7, record_markers: Some(8) }),
            time: TimeSource { attribute: Some("t".into()), dataset: Some("d".into()), name: Some("a{time}".into()) },
            ..InputSpec::default()
        }
    }

    #[test]
    fn what_is_guessed_comes_back() {
        let c = contents(rich());
        let text = text(&guessed(std::slice::from_ref(&c), Path::new("data/run.toml")), &c.reasons);
        let settled = check_settings(&Given::parse(&text, Path::new("data/run.toml"))).unwrap_or_else(|e| panic!("{e}\n{text}"));
        assert_eq!(settled.config.input, c.guess);
        assert_eq!(settled.series.paths, ["data/odd \"name\".h5"]);
        assert_eq!(settled.series.steps.as_deref(), Some("step_*"));
        assert_eq!(settled.config.request.viscosity, Some(0.019));
        assert!(text.lines().all(|l| !l.starts_with('#') || l.chars().count() <= WIDTH || l.starts_with("#families")), "{text}");
        for s in &SETTINGS {
            assert_eq!(
                text.lines().filter(|l| l.trim_start_matches('#').starts_with(&format!("{} = ", s.name))).count(),
                1,
                "{}",
                s.path()
            );
        }
    }

    /// Behind the # stands the default itself, or an example that can be used.
    #[test]
    fn every_line_can_be_switched_on() {
        let plain = InputSpec {
            lengths: Some([1.0; 3]),
            velocity: Some(vec!["u".into()]),
            magnetic: Some(vec!["b".into()]),
            ..InputSpec::default()
        };
        let known = guessed(&[contents(plain)], Path::new("run.toml"));
        let whole = text(&known, &[]);
        assert!(!known.size_is_missing);
        let settle = |text: &str| check_settings(&Given::parse(text, Path::new("run.toml")));
        let base = settle(&whole).unwrap();
        let lines: Vec<&str> = whole.lines().collect();
        let mut tried = 0;
        for (i, line) in lines.iter().enumerate().filter(|(_, l)| l.starts_with('#') && !l.starts_with("# ") && l.len() > 1) {
            let name = line[1..].split(' ').next().unwrap();
            // These stand instead of, or beside, another.
            if ["spacing", "values", "shape", "endian", "offset", "records", "coordinates", "times"].contains(&name) {
                continue;
            }
            let mut on = lines.clone();
            on[i] = &line[1..];
            let settled = settle(&on.join("\n")).unwrap_or_else(|e| panic!("{line}: {e}"));
            let table = whole.lines().take(i).filter_map(|l| l.strip_prefix('[')?.strip_suffix(']')).last().unwrap();
            let setting = SETTINGS.iter().find(|s| s.table == table && s.name == name).unwrap();
            assert_eq!(settled == base, !setting.default.is_empty(), "{line}");
            tried += 1;
        }
        assert!(tried > 25, "{tried}");
    }

    /// A size that nothing tells is not active, so that it is asked for; one that the file tells is, also when it is the same.
    #[test]
    fn an_assumed_size_is_not_active() {
        let two_pi = |reasons: &[&str]| {
            let spec = InputSpec { lengths: Some([2.0 * PI; 3]), ..InputSpec::default() };
            Contents { reasons: reasons.iter().map(|r| r.to_string()).collect(), ..contents(spec) }
        };
        let of = |c: Contents| {
            let text = text(&guessed(&[c], Path::new("run.toml")), &[]);
            (check_settings(&Given::parse(&text, Path::new("run.toml"))).map(|s| s.config.input.lengths), text)
        };
        let (settled, text) = of(two_pi(&["u,v,w named as a velocity"]));
        let told = settled.unwrap_err().to_string();
        assert!(
            told.starts_with("cannot settle the size of the box: input.lengths, input.spacing: expected one of them, found neither"),
            "{told}"
        );
        let on = text.replace("#lengths = [\"2pi\", \"2pi\", \"2pi\"]", "lengths = [\"2pi\", \"2pi\", \"2pi\"]");
        assert_ne!(on, text);
        let settled = check_settings(&Given::parse(&on, Path::new("run.toml"))).unwrap_or_else(|e| panic!("{e}"));
        assert_eq!(settled.config.input.lengths, Some([2.0 * PI; 3]));
        let (settled, _) = of(two_pi(&["lengths of the box from the attribute L, in the order x, y, z"]));
        assert_eq!(settled, Ok(Some([2.0 * PI; 3])));
    }

    /// Where key and flag are not called alike, the comment tells the flag.
    #[test]
    fn flags_of_other_names_are_told() {
        let flat = text(&Findings::default(), &[]).replace("\n# ", " ");
        let before = |key: &str| flat.lines().zip(flat.lines().skip(1)).find(|(_, l)| l.starts_with(&format!("#{key} = "))).unwrap().0;
        for (key, flag) in [
            ("families", "--family"),
            ("lists", "--list"),
            ("folder", "-o"),
            ("values", "--raw-values"),
            ("shape", "--raw-shape"),
            ("name", "--time-name"),
        ] {
            assert!(before(key).contains(&format!(" Flag {flag}. ")), "{key}: {}", before(key));
        }
        for key in ["min_cells", "lengths", "cut_outs", "paths"] {
            assert!(!before(key).contains(" Flag "), "{key}: {}", before(key));
        }
        assert!(INDICATORS.iter().all(|i| before("families").contains(i.name)));
    }

    #[test]
    fn patterns_take_in_all_steps() {
        let of = |names: &[&str]| common_pattern(&names.iter().map(|n| n.to_string()).collect::<Vec<_>>());
        assert_eq!(of(&[]), None);
        assert_eq!(of(&["step_0010", "step_0011"]).as_deref(), Some("step_*"));
        assert_eq!(of(&["last"]).as_deref(), Some("last"));
        assert_eq!(of(&["0001", "0002"]).as_deref(), Some("*"));
    }
}
