//! The plan of a run: what is told, and that nothing is done.

use std::path::Path;

use ropewalk::base::error::Kind;
use ropewalk::model::request::{CutOuts, Family, Outputs, Request, Scheme, Surfaces};
use ropewalk::model::snapshot::SnapshotRef;
use ropewalk::read::InputSpec;
use ropewalk::run::analysis::Execution;
use ropewalk::run::catalogue::RunConfig;
use ropewalk::run::plan::{Memory, Place as Where, Plan, plan};

use crate::place::{OPTIONS, Place, flow};

fn demo(name: &str) -> SnapshotRef {
    Path::new(env!("CARGO_MANIFEST_DIR")).join("demo-data").join(name).into()
}

fn config(snapshots: Vec<SnapshotRef>) -> RunConfig {
    RunConfig {
        snapshots,
        input: InputSpec { lengths: Some([std::f64::consts::TAU; 3]), ..InputSpec::default() },
        request: Request::default(),
        outputs: Outputs::default(),
        execution: Execution::default(),
        memory_from: String::new(),
        threads: 0,
        output: "no such folder/run".into(),
        replace: false,
    }
}

fn passes(plan: &Plan) -> Vec<(&str, u64)> {
    plan.snapshots[0].passes.iter().map(|p| (p.name, p.bytes)).collect()
}

/// Bytes of all components of an MHD snapshot of the demo: 6 of 64^3 values of 4 bytes.
const WHOLE: u64 = 6 * 64 * 64 * 64 * 4;
/// The same of one plane.
const PLANE: u64 = WHOLE / 64;

#[test]
fn the_demo_is_planned() {
    let names = ["mhd_0001", "mhd_0002", "mhd_0003"];
    let plan = plan(&config(names.iter().map(|n| demo(&format!("{n}.h5"))).collect())).expect("a plan");
    assert!(plan.unusable.is_empty());
    for (s, name) in plan.snapshots.iter().zip(names) {
        assert_eq!((s.name.as_str(), s.precision, s.grid.n), (name, "f32", [64; 3]));
        assert_eq!(s.components, ["u", "v", "w", "bx", "by", "bz"]);
        assert_eq!(s.families.iter().map(|f| f.name.as_str()).collect::<Vec<_>>(), ["vorticity", "current"]);
        // Compressed, and small enough to be kept: read once.
        assert_eq!(s.bytes(), WHOLE);
        assert_eq!(s.memory.kept, WHOLE);
        assert_eq!((s.memory.filter, s.memory.spectral, s.memory.cut_outs), (0, 0, 0));
        // 200 bytes a cell of the largest object, which is no larger than the box, and 16 for each of the twelve components of u, ω,
        // b and j that its vertices carry.
        assert_eq!(s.memory.objects, (200 + 12 * 16) * 64 * 64 * 64);
    }
    assert_eq!(plan.snapshots.iter().map(|s| s.time).collect::<Vec<_>>(), [Some(1.5), Some(1.6), Some(1.7)]);
    assert_eq!(passes(&plan), [("read", WHOLE), ("survey", 0), ("detection", 0), ("shapes", 0)]);
    assert_eq!(plan.bytes(), 3 * WHOLE, "compressed: read once, and kept");
    assert_eq!(plan.memory(), plan.snapshots[0].memory.total());
    assert_eq!(plan.place, Where::Free);
    let files = [
        "catalogue.csv",
        "catalogue.parquet",
        "columns.json",
        "run.json",
        "timing.json",
        "parts/mhd_0001.json",
        "parts/mhd_0001.jsonl",
        "surfaces/mhd_0001/vorticity.ply",
        "surfaces/mhd_0001/current.ply",
    ];
    assert_eq!(plan.files[..9], files);
    assert_eq!(plan.files.len(), 5 + 3 * 4);
}

/// What is asked for decides the passes, the memory and the files.
#[test]
fn passes_follow_the_request() {
    let mut c = config(vec![demo("mhd_0001.h5")]);
    let of = |c: &RunConfig| plan(c).expect("a plan");
    c.execution = Execution { block_planes: Some(8), ..Execution::default() };
    // Indicators are kept where they fit, and planes that have to be decoded.
    let kept = of(&c);
    assert_eq!(passes(&kept), [("read", WHOLE), ("survey", 0), ("detection", 0), ("shapes", 0)]);
    let Memory { blocks, indicators, kept, .. } = kept.snapshots[0].memory;
    assert_eq!((indicators, kept), (2 * 64 * PLANE / 6, WHOLE));
    // The block, its halo, what is read ahead, and the ends that stand beyond the periodic faces too; and what decodes them.
    assert!(blocks > (4 * 8 + 2 * 4 + 2 * 8) * PLANE, "{blocks}");
    // With no more than that nothing is kept: every pass reads all planes.
    c.execution.memory = blocks;
    assert_eq!(passes(&of(&c)), [("read", WHOLE), ("survey", WHOLE), ("detection", WHOLE), ("shapes", WHOLE)]);
    // Less is refused, with what would do.
    c.execution.memory = blocks - 1;
    let refused = plan(&c).expect_err("too little");
    assert_eq!(refused.kind(), Kind::Limit);
    assert!(refused.to_string().contains("for the thinnest blocks of planes and their halo; hint: --memory "), "{refused}");
    c.execution.memory = 2 * blocks;

    c.request.scheme = Scheme::Fd2;
    let families = ["h: helicity > 2 rms", "v: vorticity > 3 run-rms", "t: current > 0.5 peak"];
    c.request.families = families.iter().map(|f| Family::parse(f).expect("a family")).collect();
    c.request.surfaces = Surfaces::Each;
    c.outputs = Outputs { parquet: false, json_lines: true, labels: true, cut_outs: CutOuts::Largest(2), cut_out_margin: 8 };
    let asked = of(&c);
    let names: Vec<&str> = asked.snapshots[0].passes.iter().map(|p| p.name).collect();
    assert_eq!(names, ["read", "survey", "read", "survey", "detection", "peaks", "sums", "cut-outs", "shapes"]);
    // Two boxes of each of three families, of six components and the indicator.
    let Memory { threads, blocks, kept, indicators, objects, cut_outs, .. } = asked.snapshots[0].memory;
    assert_eq!(cut_outs, 2 * 3 * 7 * 64 * 64 * 64 * 4);
    assert_eq!(asked.memory(), (32 << 20) + threads + blocks + kept + indicators + objects + cut_outs);
    // 64 MiB are held at most.
    let many = RunConfig { outputs: Outputs { cut_outs: CutOuts::Largest(9), ..c.outputs.clone() }, ..c.clone() };
    assert_eq!(of(&many).snapshots[0].memory.cut_outs, 64 << 20);
    assert_eq!(asked.files[..5], ["catalogue.csv", "catalogue.jsonl", "columns.json", "run.json", "timing.json"]);
    assert_eq!(asked.files[7..10], ["surfaces/mhd_0001/h/ID.ply", "labels/mhd_0001/h.h5", "cutouts/mhd_0001/h/ID.h5"]);

    c.execution = Execution { block_planes: Some(8), ..Execution::default() };
    c.request = Request {
        scheme: Scheme::Spectral,
        filter: Some("sharp 0.5").map(|t| ropewalk::model::request::Filter::parse(t).expect("a filter")),
        ..Request::default()
    };
    // One box of the six components and the indicator of one of two families, and of the other.
    c.outputs.cut_outs = CutOuts::Named(vec![(None, 3)]);
    assert_eq!(of(&c).snapshots[0].memory.cut_outs, 2 * 7 * 64 * 64 * 64 * 4);
    c.outputs = Outputs::default();
    let whole_field = of(&c);
    let reads: Vec<(&str, bool)> = passes(&whole_field).iter().map(|(n, b)| (*n, *b > 0)).collect();
    let names = ["read", "filter", "read", "lines", "survey", "detection", "shapes"];
    let wanted: Vec<(&str, bool)> = names.into_iter().enumerate().map(|(k, n)| (n, k < 2)).collect();
    assert_eq!(reads, wanted);
    let Memory { spectral, filter, disk, .. } = whole_field.snapshots[0].memory;
    assert_eq!((spectral, filter, disk), (WHOLE, WHOLE, 0), "derivatives along z of all components, and these filtered");
    // With less memory they are put aside in files, which the run folder has room for.
    c.execution = Execution { memory: 12 << 20, ..Execution::default() };
    let Memory { filter, disk, .. } = of(&c).snapshots[0].memory;
    assert_eq!(filter, 0);
    assert!(disk > WHOLE, "{disk}");
}

/// A run goes through the passes that were planned (label volumes are written without one) and leaves the files that were planned, `ID` standing for one or more.
#[test]
fn the_run_does_what_was_planned() {
    let place = Place::with_snapshot();
    for options in [
        "",
        "--labels --cut-outs largest:2 --surfaces each --tables csv,jsonl",
        "--family 'h: helicity > 2 rms' --family 't: vorticity > 1.5 rms down to 0.4 peak' --cut-outs largest:1",
        "--filter 'sharp 0.6' --derivative spectral --surfaces none",
    ] {
        let line = format!("catalogue good.h5 {OPTIONS} {options} --replace -o run");
        let told = place.succeed(&format!("{line} --dry-run")).out;
        let part = |title: &str| told.split(&format!("\n{title}")).nth(1).expect("a part").lines().skip(1).take_while(|l| !l.is_empty());
        let passes: Vec<&str> = part("Passes").filter_map(|l| l.split_whitespace().next()).collect();
        let stages = place.succeed(&format!("{line} -v")).err;
        let ran: Vec<&str> = stages.lines().filter_map(|l| l.strip_suffix(": 16 planes")).filter(|l| *l != "labels").collect();
        assert_eq!(passes, ran, "{options}");

        let mut planned: Vec<String> = part("Run folder").map(|l| l.trim().to_string()).collect();
        let id = |name: &str| match name.rsplit_once('/') {
            Some((folder, file)) if file.starts_with(|c: char| c.is_ascii_digit()) => {
                format!("{folder}/ID{}", file.trim_start_matches(|c: char| c.is_ascii_digit()))
            }
            _ => name.to_string(),
        };
        let files = place.listing();
        let mut left: Vec<String> =
            files.iter().filter_map(|f| f.strip_prefix("run/")).filter(|f| !f.is_empty() && !f.ends_with('/')).map(id).collect();
        left.sort();
        left.dedup();
        planned.sort();
        assert_eq!(left, planned, "{options}");
    }
}

/// The estimate is of the right size: a run takes no more than 1.5 times of it, and not less than a tenth.
#[test]
fn memory_is_near_what_a_run_takes() {
    let place = Place::new();
    let snapshot = demo("mhd_0001.h5");
    place.succeed(&format!("catalogue '{snapshot}' --lengths 2pi -o run"));
    let taken = place.json("run/timing.json")["peak_memory_bytes"].as_u64().expect("Linux tells");
    let told = plan(&config(vec![snapshot])).expect("a plan").memory();
    assert!(taken * 2 < 3 * told && told < 10 * taken, "{told} told, {taken} taken");
}

#[test]
fn the_plan_is_printed_and_nothing_is_done() {
    let place = Place::with_snapshot();
    let ran = place.succeed(&format!("catalogue good.h5 {OPTIONS} --dry-run -o out"));
    let wanted = "\
1 of 1 snapshots can be used; nothing was read but headers, nothing is written.

snapshot             samples x y z      type  components                     time    to read     memory
good                 16 x 16 x 16       f32   u,v,w                                192.0 KiB   49.4 MiB

Box
  lengths 6.283185307179586, 6.283185307179586, 6.283185307179586
  spacing 0.39269908169872414, 0.39269908169872414, 0.39269908169872414
  first sample at 0, 0, 0
  periodic axes: xyz

Families
  v: vorticity > 2.2 rms

Passes
  read         48.0 KiB
  survey       72.0 KiB
  detection   in memory
  shapes       72.0 KiB

Memory
  the program itself     48.0 MiB
  blocks of planes      144.0 KiB
  the snapshot at most   48.0 KiB
  indicators, kept       16.0 KiB
  objects, at most        1.2 MiB

To read in all: 192.0 KiB of uncompressed values
Memory: about 49.4 MiB, of which objects take what they need; an estimate

Run folder out: new
  catalogue.csv
  catalogue.parquet
  columns.json
  run.json
  timing.json
  parts/good.json
  parts/good.jsonl
  surfaces/good/v.ply
";
    assert_eq!(ran.out, wanted);
    assert_eq!(ran.err, "");
    assert_eq!(place.listing(), ["good.h5"]);
}

#[test]
fn it_ends_as_the_run_would() {
    let place = Place::with_snapshot();
    place.write("bad.h5", b"nothing of the kind");
    let some = place.run(&format!("catalogue bad.h5 good.h5 {OPTIONS} --dry-run"));
    assert_eq!(some.code, 1, "{}", some.err);
    assert!(some.out.starts_with("1 of 2 snapshots can be used;"), "{}", some.out);
    assert!(some.out.contains("\nbad.h5: not usable: cannot read the HDF5 file: bad.h5: expected an HDF5 signature"), "{}", some.out);
    for line in
        ["catalogue bad.h5 --lengths 1", "catalogue bad.h5 bad.h5 --lengths 1", "catalogue good.h5 --lengths 1 --family 'c: current > 1'"]
    {
        let (run, dry) = (place.run(line), place.run(&format!("{line} --dry-run")));
        assert_eq!(dry.code, run.code, "{line}");
        assert_eq!(dry.err.lines().last(), run.err.lines().last(), "{line}");
        assert_eq!(dry.out, "", "{line}");
    }
    place.write("taken", b"");
    let taken = place.run(&format!("catalogue good.h5 {OPTIONS} -o taken --dry-run"));
    assert_eq!(taken.code, 5);
    assert!(taken.out.contains("Run folder taken: is there already, and not replaced without --replace"), "{}", taken.out);
    assert_eq!(taken.err, place.run(&format!("catalogue good.h5 {OPTIONS} -o taken")).err);
    assert_eq!(place.listing(), ["bad.h5", "good.h5", "taken"]);
}

/// Snapshots that differ are told apart where they differ.
#[test]
fn differences_between_snapshots_are_told() {
    let place = Place::with_snapshot();
    let field: Vec<_> = ["bx", "by", "bz"].into_iter().zip(flow()).map(|(name, (_, v))| (name, v)).collect();
    place.hdf5("field.h5", &field);
    let ran = place.succeed("catalogue good.h5 field.h5 --lengths 1 --dry-run");
    let part = "Families\n  of 1 snapshot\n  vorticity: vorticity > 3 rms\n  of 1 snapshot\n  current: current > 3 rms\n";
    assert!(ran.out.contains(part), "{}", ran.out);
}

/// What headers tell is told before anything is read, by the run as by its plan.
#[test]
fn too_few_samples_and_a_useless_filter_are_found_beforehand() {
    let place = Place::with_snapshot();
    for (options, code, text) in [
        ("--region-cells x=0:8", 3, "cannot derive along an axis: good.h5: good axis x: expected at least 9 samples, found 8"),
        ("--filter 'sharp 9'", 2, "a wider filter leaves nothing but the mean"),
    ] {
        for dry in ["", "--dry-run"] {
            let ran = place.run(&format!("catalogue good.h5 {OPTIONS} {options} {dry}"));
            assert_eq!(ran.code, code, "{}", ran.err);
            assert!(ran.err.contains(text), "{}", ran.err);
        }
    }
    assert!(!place.path("ropewalk-run").exists(), "nothing was begun");
}
