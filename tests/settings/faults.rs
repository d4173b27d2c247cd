//! Every message for every fault of a run file.

use std::path::Path;

use ropewalk::run::config::{Given, check_settings};

/// Four lines without a fault; what is added begins on line 5, below [input].
pub const BASE: &str = "[snapshots]\npaths = [\"a.h5\"]\n[input]\nlengths = 1\n";

/// All faults of a run file, one a line.
pub fn told(text: &str) -> String {
    check_settings(&Given::parse(text, Path::new("run.toml"))).map_or_else(|e| e.to_string(), |_| String::new())
}

/// Checks the faults of the base with something added.
fn added(text: &str, faults: &[&str]) {
    whole(&format!("{BASE}{text}"), faults);
}

fn whole(text: &str, faults: &[&str]) {
    assert_eq!(told(text), faults.join("\n"), "{text}");
}

#[test]
fn the_base_has_none() {
    added("", &[]);
    added("[input.raw]\n[input.time]\n[physics]\n[objects]\n[output]\n[execution]\n", &[]);
}

#[test]
fn syntax() {
    const HINT: &str = "; hint: strings stand in quotes, as in order = \"zyx\"; a key or table stands once";
    let at = |line: usize, found: &str| format!("cannot read the run file: run.toml:{line}: expected TOML, found {found}{HINT}");
    added("order = zyx\n", &[&at(5, "string values must be quoted, expected literal string")]);
    added("order = \"zyx\n", &[&at(5, "invalid basic string, expected `\"`")]);
    added("lengths = 2\n", &[&at(5, "duplicate key")]);
    added("[input]\norigin = 1\n", &[&at(5, "duplicate key")]);
    added("order\n", &[&at(5, "key with no value, expected `=`")]);
    // The rest is looked at all the same, but nothing is called missing that may stand on a line that cannot be read.
    whole(
        "[snapshots]\npaths = [\"a.h5\"\n[input]\nperiodic = \"xq\"\n",
        &[&at(3, "missing comma between array elements, expected `,`"), &at(4, "missing comma between array elements, expected `,`")],
    );
    whole(
        "[input]\nlengths == 3\nperiodic = \"xq\"\n",
        &[
            &at(2, "extra `=`, expected nothing"),
            "cannot use a setting: run.toml:3: input.periodic: expected a subset of xyz, or none, found \"xq\"; hint: for example periodic = \"xz\"",
        ],
    );
}

#[test]
fn unknown_names() {
    const TABLES: &str = "one of the tables snapshots, input, input.raw, input.time, physics, objects, output, execution";
    added(
        "velosity = \"u\"\n[physic]\nviscosity = 1\n[colours]\nred = 1\n[objects]\nviscosity = 1\nhue = 3\n[input.rw]\n[output.meshes]\n",
        &[
            "cannot use a setting: run.toml:5: input.velosity: expected a key of [input], found the key \"velosity\"; hint: did you mean velocity?",
            &format!(
                "cannot use a setting: run.toml:6: physic: expected {TABLES}, found the table \"physic\"; hint: did you mean [physics]?"
            ),
            &format!(
                "cannot use a setting: run.toml:8: colours: expected {TABLES}, found the table \"colours\"; \
                 hint: ropewalk inspect SNAPSHOT --run-file RUN.toml writes one with every key"
            ),
            "cannot use a setting: run.toml:11: objects.viscosity: expected a key of [objects], found the key \"viscosity\"; \
             hint: viscosity stands below [physics]",
            "cannot use a setting: run.toml:12: objects.hue: expected a key of [objects], found the key \"hue\"; \
             hint: one of families, min_cells, connectivity, max_object_cells, companions",
            "cannot use a setting: run.toml:13: input.rw: expected a key of [input], found the table \"rw\"; hint: did you mean raw?",
            "cannot use a setting: run.toml:14: output.meshes: expected a key of [output], found the table \"meshes\"; \
             hint: one of folder, replace, tables, surfaces, surface_min_cells, mesh_values, labels, cut_outs, cut_out_margin",
        ],
    );
    whole(
        &format!("lengths = 3\nphysics = 4\n{BASE}"),
        &[
            &format!(
                "cannot use a setting: run.toml:1: lengths: expected {TABLES}, found the key \"lengths\"; hint: lengths stands below [input]"
            ),
            "cannot use a setting: run.toml:2: physics: expected a table, found 4; hint: write [physics] on a line of its own, its keys below",
        ],
    );
}

#[test]
fn values_of_the_wrong_kind() {
    // One line each: what is written, what is expected, what is found, the example.
    let cases = [
        ("[snapshots]", "steps = 3", "a text", "3", "steps = \"step_*\""),
        ("[snapshots]", "steps = \"\"", "a text", "nothing", "steps = \"step_*\""),
        ("[snapshots]", "lists = 1979-05-27", "a list of texts", "the date 1979-05-27", "lists = [\"run.txt\"]"),
        ("[snapshots]", "times = [1, true]", "finite numbers", "[1, true]", "times = [0.0, 0.5]"),
        ("[snapshots]", "times = [nan]", "finite numbers", "[NaN]", "times = [0.0, 0.5]"),
        ("[input]", "velocity = [\"u\", \"v\", \"w\", \"x\"]", VECTOR, "[\"u\", \"v\", \"w\", \"x\"]", VELOCITY),
        ("[input]", "velocity = [\"u\", \"v\", \"u\"]", "different datasets for the components", "[\"u\", \"v\", \"u\"]", VELOCITY),
        ("[input]", "velocity = [\"u\", \"\", \"w\"]", "a list of texts, none of them empty", "[\"u\", nothing, \"w\"]", VELOCITY),
        ("[input]", "velocity = 1.5", "a list of texts", "1.5", VELOCITY),
        ("[input]", "buoyancy = [\"b\"]", "a text", "[\"b\"]", "buoyancy = \"theta\""),
        ("[input]", "density = true", "a text", "true", "density = \"rho\""),
        ("[input]", "order = \"zyy\"", ORDER, "\"zyy\"", "order = \"xyz\""),
        ("[input]", "order = \"zcyx\"", ORDER, "\"zcyx\"", "order = \"xyz\""),
        ("[input]", "origin = [1, 2, 3, 4]", "three finite numbers, or one for all axes", "[1, 2, 3, 4]", "origin = [0, -1.5, \"-pi\"]"),
        ("[input]", "origin = \"2pies\"", "three finite numbers, or one for all axes", "\"2pies\"", "origin = [0, -1.5, \"-pi\"]"),
        ("[input]", "periodic = \"xx\"", "a subset of xyz, or none", "\"xx\"", "periodic = \"xz\""),
        ("[input]", "periodic = true", "a subset of xyz, or none", "true", "periodic = \"xz\""),
        ("[input]", "coordinates = { a = \"x\" }", COORDINATES, "the axis \"a\"", "coordinates = { y = \"grid/y\" }"),
        ("[input]", "coordinates = { y = 3 }", COORDINATES, "3", "coordinates = { y = \"grid/y\" }"),
        ("[input]", "coordinates = \"grid\"", COORDINATES, "\"grid\"", "coordinates = { y = \"grid/y\" }"),
        ("[input]", "coordinates = \"x=a,x=b\"", "every axis once", "x twice in \"x=a,x=b\"", "coordinates = { y = \"grid/y\" }"),
        ("[input]", "region = { x = [2, 1] }", POSITIONS, "[2, 1]", REGION),
        ("[input]", "region = { x = [1, 2, 3] }", POSITIONS, "[1, 2, 3]", REGION),
        ("[input]", "region = { z = \"0:pie\" }", POSITIONS, "\"0:pie\"", REGION),
        ("[input]", "region = 4", POSITIONS, "4", REGION),
        ("[input]", "region_cells = { x = [0.5, 3] }", CELLS, "[0.5, 3]", "region_cells = { x = [10, 50], z = [-8, 24] }"),
        ("[input]", "region_cells = { x = \"9:3\" }", CELLS, "\"9:3\"", "region_cells = { x = [10, 50], z = [-8, 24] }"),
        ("[input.time]", "name = \"out.h5\"", "a file name with {time} once in it", "\"out.h5\"", "name = \"out_t{time}.h5\""),
        ("[input.time]", "attribute = 3", "a text", "3", "attribute = \"t_now\""),
        ("[input.time]", "dataset = []", "a text", "an empty list", "dataset = \"info/time\""),
        ("[physics]", "viscosity = 0", "a number above 0", "0", "viscosity = 0.002"),
        ("[physics]", "viscosity = \"low\"", "a number above 0", "\"low\"", "viscosity = 0.002"),
        ("[physics]", "resistivity = -1.5", "a number above 0", "-1.5", "resistivity = 0.003"),
        ("[physics]", "dissipation = inf", "a number above 0", "inf", "dissipation = 0.08"),
        ("[physics]", "kolmogorov_length = [1]", "a number above 0", "[1]", "kolmogorov_length = 0.0178"),
        ("[physics]", "frame = \"moving\"", FRAME, "\"moving\"", "frame = [0.1, 0, 0]"),
        ("[physics]", "frame = [0.1, 0]", FRAME, "[0.1, 0]", "frame = [0.1, 0, 0]"),
        ("[physics]", "frame = [0.1, 0, inf]", FRAME, "[0.1, 0, inf]", "frame = [0.1, 0, 0]"),
        ("[physics]", "frame = 2", FRAME, "2", "frame = [0.1, 0, 0]"),
        ("[physics]", "frame = \"\"", FRAME, "nothing", "frame = [0.1, 0, 0]"),
        ("[objects]", "min_cells = 0", "a whole number of at least 1", "0", "min_cells = 8"),
        ("[objects]", "min_cells = \"8\"", "a whole number of at least 1", "\"8\"", "min_cells = 8"),
        ("[objects]", "max_object_cells = 1.5", "a whole number of at least 1", "1.5", "max_object_cells = 1000000"),
        (
            "[objects]",
            "max_object_cells = 99999999999999999999",
            "a whole number of at least 1",
            "99999999999999999999, beyond the range of whole numbers",
            "max_object_cells = 1000000",
        ),
        ("[output]", "folder = 1", "a text", "1", "folder = \"results\""),
        ("[output]", "replace = \"yes\"", "true or false", "\"yes\"", "replace = true"),
        ("[output]", "labels = 1", "true or false", "1", "labels = true"),
        ("[output]", "surface_min_cells = -1", "a whole number", "-1", "surface_min_cells = 100"),
        ("[output]", "cut_out_margin = 2000000", "a whole number from 0 to 1048576", "2000000", "cut_out_margin = 4"),
        ("[output]", "cut_outs = \"largest:0\"", CUT_OUTS, "\"largest:0\"", "cut_outs = \"largest:3\""),
        ("[output]", "cut_outs = [12, \"worms:x\"]", CUT_OUTS, "\"worms:x\"", "cut_outs = \"largest:3\""),
        ("[output]", "cut_outs = [\"largest:3\", 4]", CUT_OUTS, "\"largest:3\"", "cut_outs = \"largest:3\""),
        ("[execution]", "threads = 5000", "a whole number from 0 to 1024", "5000", "threads = 2"),
        ("[execution]", "block_planes = 0", "a whole number of at least 1", "0", "block_planes = 16"),
        ("[execution]", "memory = \"0MiB\"", SIZE, "\"0MiB\"", "memory = \"1.5GiB\""),
        ("[execution]", "memory = true", SIZE, "true", "memory = \"1.5GiB\""),
        ("[execution]", "scratch = 1", "a text", "1", "scratch = \"/scratch\""),
        ("[physics]", "portable = \"yes\"", "true or false", "\"yes\"", "portable = true"),
    ];
    for (table, line, expected, found, example) in cases {
        let key = line.split(' ').next().unwrap();
        let path = format!("{}.{key}", table.trim_matches(['[', ']']));
        let (text, at) = match table {
            "[snapshots]" => (format!("[snapshots]\npaths = [\"a.h5\"]\n{line}\n[input]\nlengths = 1\n"), 3),
            "[input]" => (format!("{BASE}{line}\n"), 5),
            other => (format!("{BASE}{other}\n{line}\n"), 6),
        };
        let message =
            format!("cannot use a setting: run.toml:{at}: {path}: expected {expected}, found {found}; hint: for example {example}");
        whole(&text, &[&message]);
    }
}

const FRAME: &str = "box, stored, or the velocity of a frame, three finite numbers";
const VECTOR: &str = "three names (one dataset a component; two on a plane), or one (a component axis)";
const VELOCITY: &str = "velocity = [\"flow/u\", \"flow/v\", \"flow/w\"]";
const ORDER: &str = "a permutation of xyz (of xy for planes) with an optional c first or last";
const COORDINATES: &str = "the name of a dataset for some of x, y, z";
const POSITIONS: &str = "FROM:TO for some of x, y, z, two numbers, the second larger";
const CELLS: &str = "FIRST:END for some of x, y, z, two whole numbers, the second larger";
const REGION: &str = "region = { x = [0.5, 1.5], z = [\"0\", \"pi\"] }";
const CUT_OUTS: &str = "largest:N, or ids like 12 or FAMILY:12, or none";
const SIZE: &str = "a size above 0 with one of the units KiB, MiB, GiB, TiB, kB, MB, GB, TB";

/// What a size without a unit, or with another one, may have been meant to be.
#[test]
fn sizes_without_a_unit() {
    for (given, found, meant) in
        [("160", "160", "160MiB"), ("\"2G\"", "\"2G\"", "2GiB"), ("1073741824", "1073741824", "1024MiB"), ("1.5", "1.5", "1.5MiB")]
    {
        let message =
            format!("cannot use a setting: run.toml:6: execution.memory: expected {SIZE}, found {found}; hint: did you mean {meant}?");
        whole(&format!("{BASE}[execution]\nmemory = {given}\n"), &[&message]);
    }
}

#[test]
fn choices() {
    let cases = [
        ("[input]", "staggering = \"centers\"", "centres, lower, upper", "\"centers\"", "did you mean centres?"),
        ("[physics]", "derivative = \"fd9\"", "auto, fd2, fd4, fd6, fd8, opt, spectral", "\"fd9\"", "did you mean fd2?"),
        ("[physics]", "derivative = 8", "auto, fd2, fd4, fd6, fd8, opt, spectral", "8", "for example derivative = \"spectral\""),
        ("[objects]", "connectivity = 27", "6, 18, 26", "27", "did you mean 26?"),
        ("[output]", "surfaces = \"every\"", "together, each, none", "\"every\"", "for example surfaces = \"each\""),
        ("[output]", "surfaces = true", "together, each, none", "true", "for example surfaces = \"each\""),
    ];
    for (table, line, choices, found, hint) in cases {
        let path = format!("{}.{}", table.trim_matches(['[', ']']), line.split(' ').next().unwrap());
        let (text, at) = if table == "[input]" { (format!("{line}\n"), 5) } else { (format!("{table}\n{line}\n"), 6) };
        added(&text, &[&format!("cannot use a setting: run.toml:{at}: {path}: expected one of {choices}, found {found}; hint: {hint}")]);
    }
    added(
        "[input.raw]\nvalues = \"f16\"\nendian = \"middle\"\nrecords = 16\nshape = [1, 2.5]\noffset = -1\n",
        &[
            "cannot use a setting: run.toml:6: input.raw.values: expected one of f32, f64, found \"f16\"; hint: for example values = \"f32\"",
            "cannot use a setting: run.toml:7: input.raw.endian: expected one of little, big, found \"middle\"; hint: for example endian = \"big\"",
            "cannot use a setting: run.toml:8: input.raw.records: expected one of none, 4, 8, found 16; hint: for example records = 4",
            "cannot use a setting: run.toml:9: input.raw.shape: expected whole numbers of at least 1, found [1, 2.5]; \
             hint: for example shape = [64, 64, 128]",
            "cannot use a setting: run.toml:10: input.raw.offset: expected a whole number, found -1; \
             hint: for example offset = 512",
        ],
    );
    added(
        "[output]\ntables = [\"csv\", \"parket\", \"excel\"]\nmesh_values = [\"q\", \"vorticty\", \"q\"]\n",
        &[
            "cannot use a setting: run.toml:6: output.tables: expected some of csv, parquet, jsonl, found \"parket\"; hint: did you mean parquet?",
            "cannot use a setting: run.toml:6: output.tables: expected some of csv, parquet, jsonl, found \"excel\"; hint: csv is always written",
            "cannot use a setting: run.toml:7: output.mesh_values: expected names of indicators, found \"vorticty\"; hint: did you mean vorticity?",
            "cannot use a setting: run.toml:7: output.mesh_values: expected every indicator once, found \"q\" twice; hint: drop one",
        ],
    );
    let faults = told(&format!("{BASE}[objects]\ncompanions = \"speed,colour\"\n"));
    assert!(
        faults.starts_with("cannot use a setting: run.toml:6: objects.companions: expected names of indicators, found \"colour\"; hint: one of vorticity, enstrophy, "),
        "{faults}"
    );
}

#[test]
fn families_and_what_they_need() {
    added(
        "velocity = [\"u\", \"v\", \"w\"]\n[objects]\nfamilies = [\n  \"a: q > 1 rms\",\n  \"b vorticity > 1\",\n  \"c: current > 3 rms\",\n  \"d: dissipation_viscous > 1 mean\",\n  \"a: speed > 1\",\n  \"e: q > 2 volume\",\n  \"f: buoyancy > 1\",\n  3,\n]\ncompanions = [\"cross_helicity\", \"dissipation_ohmic\"]\n[output]\nmesh_values = [\"buoyancy_gradient\"]\n",
        &[
            "cannot read family: run.toml:9: \"b vorticity > 1\": expected \"NAME: INDICATOR > LEVEL [down to LEVEL]\", found no colon; \
             hint: for example \"vorticity: vorticity > 3 rms\"",
            "cannot detect family: run.toml:10: \"c: current > 3 rms\": expected a magnetic field, found none; \
             hint: magnetic = [\"flow/bx\", \"flow/by\", \"flow/bz\"] below [input] names its datasets",
            "cannot detect family: run.toml:11: \"d: dissipation_viscous > 1 mean\": expected the viscosity, found none; \
             hint: viscosity = 0.002 below [physics], or strain instead",
            "cannot use family: run.toml:12: \"a: speed > 1\": expected a name of its own, found \"a\" twice; \
             hint: give every family another name before the colon",
            "cannot read family: run.toml:13: \"e: q > 2 volume\": expected \"NAME: INDICATOR > LEVEL [down to LEVEL]\", \
             found the volume fraction 2; hint: a volume fraction lies between 0 and 1",
            "cannot detect family: run.toml:14: \"f: buoyancy > 1\": expected a buoyancy field, found none; hint: buoyancy = \"theta\" below [input] names its dataset",
            "cannot use a setting: run.toml:15: objects.families: expected a text in the list, found 3; \
             hint: for example families = [\"worms: vorticity > 2.5 rms\", \"cores: q > 0.01 volume\"]",
            "cannot add companion columns: run.toml:17: cross_helicity: expected a magnetic field, found none; \
             hint: magnetic = [\"flow/bx\", \"flow/by\", \"flow/bz\"] below [input] names its datasets",
            "cannot add companion columns: run.toml:17: dissipation_ohmic: expected a magnetic field, found none; \
             hint: magnetic = [\"flow/bx\", \"flow/by\", \"flow/bz\"] below [input] names its datasets",
            "cannot add mesh values: run.toml:19: buoyancy_gradient: expected a buoyancy field, found none; hint: buoyancy = \"theta\" below [input] names its dataset",
        ],
    );
    added(
        "magnetic = \"b\"\n[objects]\nfamilies = \"d: dissipation_ohmic > 1\"\n",
        &["cannot detect family: run.toml:7: \"d: dissipation_ohmic > 1\": expected the resistivity, found none; \
         hint: resistivity = 0.003 below [physics], or current instead"],
    );
    // Without names both fields may be found.
    added("[objects]\nfamilies = [\"c: current > 3 rms\", \"v: vorticity > 3 rms\"]\n", &[]);
    // A coefficient with a fault of its own is not called missing.
    added(
        "[physics]\nviscosity = -1\n[objects]\nfamilies = [\"d: dissipation_viscous > 1\"]\n",
        &["cannot use a setting: run.toml:6: physics.viscosity: expected a number above 0, found -1; hint: for example viscosity = 0.002"],
    );
}

#[test]
fn contradictions() {
    let cases = [
        (
            "spacing = 1\n",
            "cannot settle the size of the box: run.toml:5: input.lengths, input.spacing: expected one of them, found both; hint: drop one of them",
        ),
        (
            "velocity = [\"u\", \"v\", \"w\"]\nmagnetic = [\"a\", \"/v\", \"w\"]\n",
            "cannot read two fields from one dataset: run.toml:6: input.velocity, input.magnetic: expected different datasets, \
             found /v, w in both; hint: every dataset is one field",
        ),
        (
            "buoyancy = \"rho\"\ndensity = \"rho\"\n",
            "cannot read two fields from one dataset: run.toml:6: input.buoyancy, input.density: expected different datasets, \
             found rho in both; hint: every dataset is one field",
        ),
        (
            "velocity = \"u\"\nstaggering = \"lower\"\n",
            "cannot place the magnetic components: run.toml:6: input.staggering: expected a magnetic field, found a velocity alone; \
             hint: magnetic = [\"bx\", \"by\", \"bz\"] names it",
        ),
        (
            "region = { x = [0, 1], y = [0, 1] }\nregion_cells = { y = [0, 9] }\n",
            "cannot cut a part out of the box: run.toml:6: input.region, input.region_cells: expected one of them for each axis, found both for y; \
             hint: positions or indices, not both",
        ),
        (
            "periodic = \"xz\"\n[physics]\nfilter = \"sharp 0.2\"\n",
            "cannot filter: run.toml:7: physics.filter, input.periodic: expected a box periodic along every axis, found y open; \
             hint: leave the filter out, or filter the fields before they are stored",
        ),
        (
            "[physics]\nfilter = \"box 0.2\"\n",
            "cannot read filter: run.toml:6: \"box 0.2\": expected \"sharp WIDTH\" or \"gaussian WIDTH\", the width a length above 0, \
             found \"box 0.2\"; hint: for example \"gaussian 0.2\"",
        ),
        (
            "[input.raw]\nshape = [4, 4, 4]\n",
            "cannot read files without a header: run.toml:6: input.raw.values: expected it beside input.raw.shape, found none; \
             hint: for example values = \"f32\"",
        ),
        (
            "[input.raw]\nvalues = \"f32\"\n",
            "cannot read files without a header: run.toml:6: input.raw.shape: expected it beside input.raw.values, found none; \
             hint: for example shape = [64, 64, 64]",
        ),
        (
            "[input.raw]\nvalues = \"f32\"\nshape = [4, 4, 4, 3]\n",
            "cannot read files without a header: run.toml:7: input.raw.shape: expected 3 numbers, one an axis of zyx, found 4; \
             hint: the component axis is not among them; a plane has two",
        ),
        (
            "[objects]\nfamilies = \"worms: vorticity > 3 rms\"\n[output]\ncut_outs = [\"worms:3\", \"worm:4\"]\n",
            "cannot cut out objects: run.toml:8: output.cut_outs: expected a family: worms, found \"worm\"; hint: FAMILY:ID, ID or largest:N",
        ),
        (
            "[output]\ncut_outs = \"sheets:3\"\n",
            "cannot cut out objects: run.toml:6: output.cut_outs: expected a family: vorticity, current, found \"sheets\"; \
             hint: FAMILY:ID, ID or largest:N",
        ),
        (
            "[output]\nfolder = \".\"\n",
            "cannot write beside the snapshots: run.toml:6: output.folder: expected a run folder of its own, found the folder of a.h5; \
             hint: name another, which need not exist",
        ),
        (
            "[output]\nfolder = \"./b/../a.h5\"\n",
            "cannot write beside the snapshots: run.toml:6: output.folder: expected a run folder of its own, found the folder of a.h5; \
             hint: name another, which need not exist",
        ),
    ];
    for (text, message) in cases {
        added(text, &[message]);
    }
    let endian = "[input.raw]\nendian = \"big\"\n";
    let beside = |key: &str, example: &str| {
        format!(
            "cannot read files without a header: run.toml:6: input.raw.{key}: expected it beside input.raw.endian, found none; hint: for example {key} = {example}"
        )
    };
    added(endian, &[&beside("values", "\"f32\""), &beside("shape", "[64, 64, 64]")]);
    whole(
        "[snapshots]\npaths = [\"a.h5\", \"b.h5\"]\ntimes = [1, 2, 3]\n[input]\nlengths = 1\n",
        &["cannot give the snapshots their times: run.toml:3: snapshots.times: expected 2, one a snapshot, found 3; \
           hint: without it, the times in the files are taken"],
    );
    // How many snapshots a pattern, a list or steps give is not known before they are looked for.
    for more in ["paths = [\"*.h5\"]", "paths = [\"a.h5\"]\nlists = [\"b.txt\"]", "paths = [\"a.h5\"]\nsteps = \"*\""] {
        whole(&format!("[snapshots]\n{more}\ntimes = [1, 2, 3]\n[input]\nlengths = 1\n"), &[]);
    }
}

#[test]
fn missing_settings() {
    const SNAPSHOTS: &str = "cannot tell which snapshots: snapshots.paths, snapshots.lists: expected at least one path, found none; hint: paths = [\"run/*.h5\"]";
    const SIZE: &str = "cannot settle the size of the box: input.lengths, input.spacing: expected one of them, found neither; \
                        hint: lengths = \"2pi\" is a cube of that side";
    whole("", &[SNAPSHOTS, SIZE]);
    whole("[snapshots]\npaths = []\n[input]\nspacing = 1\n", &[&SNAPSHOTS.replace(": snapshots.paths", ": run.toml:2: snapshots.paths")]);
    whole("[snapshots]\nlists = \"a.txt\"\n[input]\n", &[SIZE]);
    whole(
        "[snapshots]\npaths = \"a.h5\"\n[input]\ncoordinates = { y = \"y\" }\n",
        &[&SIZE.replace("one of them,", "one of them for x, z,")],
    );
    // A plane needs no size along z.
    whole("[snapshots]\npaths = \"a.h5\"\n[input]\ncoordinates = { x = \"x\", y = \"y\" }\n", &[]);
}

#[test]
fn all_faults_are_told_in_the_order_of_their_lines() {
    let text =
        "[physics]\nviscosity = -1\nfilter = \"sharp\"\n[snapshots]\npath = \"a.h5\"\n[input]\norder = \"yy\"\n[execution]\nthreads = -4\n";
    let found = told(text);
    let starts = [
        "cannot use a setting: run.toml:2: physics.viscosity:",
        "cannot read filter: run.toml:3: \"sharp\":",
        "cannot use a setting: run.toml:5: snapshots.path:",
        "cannot use a setting: run.toml:7: input.order:",
        "cannot use a setting: run.toml:9: execution.threads:",
        "cannot tell which snapshots: snapshots.paths, snapshots.lists:",
        "cannot settle the size of the box: input.lengths, input.spacing:",
    ];
    let lines: Vec<&str> = found.lines().collect();
    assert_eq!(lines.len(), starts.len(), "{found}");
    for (line, start) in lines.iter().zip(starts) {
        assert!(line.starts_with(start), "{line}\n{start}");
    }
}

#[test]
fn files_that_are_no_text() {
    let folder = tempfile::tempdir().expect("a folder");
    let path = folder.path().join("run.toml");
    let told = || Given::read(&path).map(|_| ()).unwrap_err().to_string().replace(&folder.path().display().to_string(), "");
    assert_eq!(
        told(),
        "cannot read the run file: /run.toml: found no such file; hint: ropewalk inspect SNAPSHOT --run-file RUN.toml writes one"
    );
    std::fs::write(&path, b"[input]\nvelocity = \"\xff\"\n").expect("written");
    assert_eq!(told(), "cannot read the run file: /run.toml:2: expected text in UTF-8, found other bytes");
    let large = std::fs::File::create(&path).expect("made");
    large.set_len(17 << 20).expect("made long");
    assert_eq!(told(), "cannot read the run file: /run.toml: expected a text of a few lines, found 17825792 bytes");
}
