//! A setting means the same in a run file and behind its flag; flags replace what the file says; paths start from its folder.

use std::path::{Path, PathBuf};

use ropewalk::model::request::{Connectivity, CutOuts, Filter, FilterShape, Frame, Outputs, Scheme, Surfaces};
use ropewalk::read::{Staggering, Stretch};
use ropewalk::run::config::registry::{Key, SETTINGS, Setting};
use ropewalk::run::config::{Given, Settled, check_settings, key_of};

const PI: f64 = std::f64::consts::PI;

fn settled(given: &Given) -> Settled {
    check_settings(given).unwrap_or_else(|e| panic!("{e}"))
}

/// Flags that every run here has, unless another stands in their place.
fn base(setting: &Setting) -> Vec<(Key, &'static str)> {
    let mut out = vec![(Key::Paths, "a.h5"), (Key::Velocity, "u,v,w"), (Key::Magnetic, "b"), (Key::Lengths, "1")];
    out.retain(|(k, _)| *k != setting.key && !(setting.key == Key::Spacing && *k == Key::Lengths));
    match setting.key {
        // These have a meaning only beside another.
        Key::RawValues => out.push((Key::RawShape, "4,4,4")),
        Key::RawShape => out.push((Key::RawValues, "f64")),
        Key::RawEndian | Key::RawOffset | Key::RawRecords => out.extend([(Key::RawValues, "f64"), (Key::RawShape, "4,4,4")]),
        Key::Times => out.push((Key::Steps, "*")),
        _ => {}
    }
    out
}

fn flags(list: &[(Key, &str)]) -> Given {
    let mut given = Given::new();
    list.iter().for_each(|(k, t)| given.flag(*k, vec![t.to_string()]));
    given
}

/// A run file with the same settings, each as its flag has it, and one more line.
fn file(list: &[(Key, &str)], setting: &Setting, value: &str) -> String {
    let mut out = String::new();
    for (key, typed) in list {
        let s = key.setting();
        let quoted = if *key == Key::RawShape { format!("[{typed}]") } else { format!("\"{typed}\"") };
        out += &format!("{} = {quoted}\n", s.path());
    }
    out + &format!("{} = {value}\n", setting.path())
}

/// The examples of the registry, set one at a time: the same settled run from both, and another than without.
#[test]
fn every_setting_means_the_same_in_both_places_and_changes_something() {
    for s in &SETTINGS {
        let list = base(s);
        let without = check_settings(&flags(&list)).ok();
        let mut with = flags(&list);
        let typed: Vec<&str> = match s.key {
            // The example has two entries, for a flag given twice.
            Key::Families => vec!["worms: vorticity > 2.5 rms", "cores: q > 0.01 volume"],
            _ => vec![s.typed],
        };
        with.flag(s.key, typed.iter().map(|t| t.to_string()).collect());
        let from_flags = settled(&with);
        let text = file(&list, s, s.example);
        let from_file = settled(&Given::parse(&text, Path::new("run.toml")));
        assert_eq!(from_flags, from_file, "{}", s.path());
        assert_ne!(Some(&from_flags), without.as_ref(), "{} changes nothing", s.path());
        assert_eq!(key_of(&s.path()), Some(s.key));
    }
}

const WHOLE: &str = r#"
[snapshots]
paths = ["run/*.h5", "/data/b.h5:/step_3"]
lists = "more.txt"
steps = "step_*"
times = [0, 0.5, "pi"]
[input]
velocity = ["u", "v", "w"]
magnetic = "b"
buoyancy = "theta"
density = "rho"
order = "czyx"
lengths = ["2pi", 1, 0.5]
origin = ["-pi", 0, 1]
periodic = "xy"
coordinates = { z = "z" }
staggering = "upper"
region = { x = ["0", "pi/2"], y = "0.25:0.5" }
region_cells = "z=-4:12"
[input.raw]
values = "f64"
endian = "big"
shape = [16, 16, 32]
offset = 0x10
records = 8
[input.time]
attribute = "now"
dataset = "info/t"
name = "out_{time}.h5"
[physics]
viscosity = 1e-3
resistivity = 2e-3
dissipation = 0.1
kolmogorov_length = 0.01
frame = [-0.5, 0, "pi"]
derivative = "opt"
filter = "gaussian 0.2"
portable = true
[objects]
families = ["w: vorticity > 4 rms down to 2 rms", "d: dissipation_ohmic > 2 mean"]
min_cells = 5
connectivity = 18
max_object_cells = 1_000
companions = ["speed", "field"]
[output]
folder = "out"
replace = true
tables = ["jsonl"]
surfaces = "none"
surface_min_cells = 9
mesh_values = "q, strain"
labels = true
cut_outs = [12, "w:3"]
cut_out_margin = 2
[execution]
threads = 3
block_planes = 7
memory = "1.5GiB"
scratch = "aside"
"#;

/// Every value of a run file where it belongs.
#[test]
fn a_whole_run_file_is_settled() {
    let Settled { series, config } = settled(&Given::parse(WHOLE, Path::new("/home/jobs/run.toml")));
    assert_eq!(series.paths, ["/home/jobs/run/*.h5", "/data/b.h5:/step_3"]);
    assert_eq!(series.lists, [PathBuf::from("/home/jobs/more.txt")]);
    assert_eq!(series.steps.as_deref(), Some("step_*"));
    assert_eq!(series.times, [0.0, 0.5, PI]);
    let i = &config.input;
    assert_eq!(i.velocity.as_deref(), Some(&["u", "v", "w"].map(String::from)[..]));
    assert_eq!(i.magnetic.as_deref(), Some(&["b".to_string()][..]));
    assert_eq!((i.buoyancy.as_deref(), i.density.as_deref()), (Some("theta"), Some("rho")));
    assert_eq!((i.order.as_str(), i.periodic, i.staggering), ("czyx", [true, true, false], Staggering::UpperFaces));
    assert_eq!((i.lengths, i.spacing, i.origin), (Some([2.0 * PI, 1.0, 0.5]), None, [-PI, 0.0, 1.0]));
    assert_eq!(i.coordinates, [None, None, Some("z".to_string())]);
    assert_eq!(i.region, [Some(Stretch::Positions(0.0, PI / 2.0)), Some(Stretch::Positions(0.25, 0.5)), Some(Stretch::Indices(-4, 12))]);
    let raw = i.raw.as_ref().expect("a layout");
    assert_eq!((raw.double, raw.big_endian, raw.offset, raw.record_markers), (true, true, 16, Some(8)));
    assert_eq!(raw.shape, [16, 16, 32]);
    let time = [&i.time.attribute, &i.time.dataset, &i.time.name].map(|t| t.as_deref().unwrap_or(""));
    assert_eq!(time, ["now", "info/t", "out_{time}.h5"]);
    let r = &config.request;
    assert_eq!(
        r.families.iter().map(ToString::to_string).collect::<Vec<_>>(),
        ["w: vorticity > 4 rms down to 2 rms", "d: dissipation_ohmic > 2 mean"]
    );
    assert_eq!((r.viscosity, r.resistivity, r.dissipation, r.kolmogorov_length), (Some(1e-3), Some(2e-3), Some(0.1), Some(0.01)));
    assert_eq!((r.frame, r.scheme), (Frame::Given([-0.5, 0.0, PI]), Scheme::Opt));
    assert_eq!(r.filter, Some(Filter { shape: FilterShape::Gaussian, width: 0.2 }));
    assert_eq!((r.min_cells, r.max_object_cells, r.connectivity), (5, 1000, Connectivity::Eighteen));
    assert_eq!(r.companions.iter().map(|i| i.name()).collect::<Vec<_>>(), ["speed", "field"]);
    assert_eq!(r.mesh_values.iter().map(|i| i.name()).collect::<Vec<_>>(), ["q", "strain"]);
    assert_eq!((r.surfaces, r.surface_min_cells), (Surfaces::None, 9));
    let cut_outs = CutOuts::Named(vec![(None, 12), (Some("w".into()), 3)]);
    assert_eq!(config.outputs, Outputs { parquet: false, json_lines: true, labels: true, cut_outs, cut_out_margin: 2 });
    assert_eq!((config.output, config.replace), (PathBuf::from("/home/jobs/out"), true));
    assert_eq!((config.threads, config.execution.block_planes, r.portable), (3, Some(7), true));
    assert_eq!((config.execution.memory, config.execution.scratch), (3 << 29, Some(PathBuf::from("/home/jobs/aside"))));
}

#[test]
fn flags_replace_what_the_file_says() {
    let mut given = Given::parse(WHOLE, Path::new("jobs/run.toml"));
    given.flag(Key::Spacing, vec!["0.1".into()]);
    given.flag(Key::Families, vec!["j: current > 3 rms".into()]);
    given.flag(Key::CutOuts, vec!["none".into()]);
    given.flag(Key::Replace, vec!["no".into()]);
    given.flag(Key::Folder, vec!["here".into()]);
    given.flag(Key::Lists, vec!["a.txt".into(), "b.txt".into()]);
    let Settled { series, config } = settled(&given);
    assert_eq!(
        (config.input.lengths, config.input.spacing),
        (None, Some([0.1, 0.1, 0.0])),
        "one way to say it takes the place of the other; z has coordinates"
    );
    assert_eq!(config.request.families[0].to_string(), "j: current > 3 rms");
    assert_eq!(config.request.families.len(), 1);
    assert_eq!(config.outputs.cut_outs, CutOuts::None);
    assert_eq!((config.output, config.replace), (PathBuf::from("here"), false));
    assert_eq!(series.lists, [PathBuf::from("a.txt"), PathBuf::from("b.txt")]);
    assert_eq!(series.paths[0], "jobs/run/*.h5", "what no flag replaces is as before");
    assert_eq!(config.request.min_cells, 5);

    let mut given = Given::parse("snapshots.paths = \"a\"\ninput.spacing = 1\n", Path::new("run.toml"));
    given.flag(Key::Lengths, vec!["2pi".into()]);
    assert_eq!(settled(&given).config.input.spacing, None);
    given.flag(Key::Spacing, vec!["1".into()]);
    let both = check_settings(&given).unwrap_err().to_string();
    assert!(both.starts_with("cannot settle the size of the box: --lengths, --spacing: expected one of them, found both"), "{both}");
}

/// A fault of a flag that replaces a setting is told without a line of the file.
#[test]
fn faults_of_flags_over_a_file_name_the_flags() {
    let mut given = Given::parse(WHOLE, Path::new("run.toml"));
    given.flag(Key::MinCells, vec!["x".into()]);
    let told = check_settings(&given).unwrap_err().to_string();
    assert_eq!(
        told,
        "cannot use a setting: --min-cells: expected a whole number of at least 1, found \"x\"; hint: for example --min-cells 8"
    );
}

/// The folder of the run file stands for itself even where its name looks like a pattern.
#[test]
fn patterns_in_a_folder_with_brackets() {
    let at =
        |path: &str| settled(&Given::parse("snapshots.paths = [\"*.h5\", \"a.h5\"]\ninput.lengths = 1\n", Path::new(path))).series.paths;
    assert_eq!(at("runs [old]/run.toml"), ["runs [[]old[]]/*.h5", "runs [old]/a.h5"]);
    assert_eq!(at("run.toml"), ["*.h5", "a.h5"]);
}

/// The run file in the README is one.
#[test]
fn the_example_of_the_readme() {
    let readme = include_str!("../../README.md");
    let text = readme.split("```toml\n").nth(1).and_then(|t| t.split("```").next()).expect("a run file");
    let Settled { series, config } = settled(&Given::parse(text, Path::new("run.toml")));
    assert_eq!(series.paths, ["run/*.h5"]);
    assert_eq!(config.input.lengths, Some([4.0 * PI, 2.0, 2.0 * PI]));
    assert_eq!((config.request.families.len(), config.output), (2, PathBuf::from("results")));
}
