//! Faults that hide behind others: all of one setting, families and paths that are named twice, what planes and coordinates allow.

use ropewalk::model::request::Frame;
use ropewalk::read::InputSpec;
use ropewalk::run::config::registry::{Key, SETTINGS};
use ropewalk::run::config::{Given, check_settings};

use crate::faults::{BASE, told};

fn added(text: &str, faults: &[&str]) {
    assert_eq!(told(&format!("{BASE}{text}")), faults.join("\n"), "{text}");
}

/// The input and frame settled from flags, for a file a.h5; or the faults.
fn flags(list: &[(&str, &str)]) -> Result<(InputSpec, Frame), String> {
    let mut given = Given::new();
    given.flag(Key::Paths, vec!["a.h5".into()]);
    for (flag, typed) in list {
        let key = SETTINGS.iter().find(|s| s.flag == *flag).unwrap_or_else(|| panic!("no flag {flag}")).key;
        given.flag(key, vec![typed.to_string()]);
    }
    check_settings(&given).map(|s| (s.config.input, s.config.request.frame)).map_err(|e| e.to_string())
}

#[test]
fn all_faults_within_one_setting() {
    const REGION: &str = "hint: for example region = { x = [0.5, 1.5], z = [\"0\", \"pi\"] }";
    const EXPECTED: &str =
        "cannot use a setting: run.toml:5: input.region: expected FROM:TO for some of x, y, z, two numbers, the second larger, found";
    added(
        "region = { x = [2, 1], q = [0, 1], z = 3 }\n",
        &[&format!("{EXPECTED} the axis \"q\"; {REGION}"), &format!("{EXPECTED} [2, 1]; {REGION}"), &format!("{EXPECTED} 3; {REGION}")],
    );
    const COORDINATES: &str = "hint: for example coordinates = { y = \"grid/y\" }";
    added(
        "coordinates = \"x=a,x=b,q=c\"\n",
        &[
            &format!(
                "cannot use a setting: run.toml:5: input.coordinates: expected every axis once, found x twice in \"x=a,x=b,q=c\"; {COORDINATES}"
            ),
            &format!(
                "cannot use a setting: run.toml:5: input.coordinates: expected the name of a dataset for some of x, y, z, found the axis \"q\"; {COORDINATES}"
            ),
        ],
    );
    let velocity = told(&format!("{BASE}velocity = [\"u\", \"u\", \"\", \"v\", \"w\"]\n"));
    assert_eq!(velocity.lines().count(), 3, "an empty name, four others, two of them the same: {velocity}");
    let tables = told(&format!("{BASE}[output]\ntables = [\"\", \"exel\"]\nmesh_values = [\"\", \"colour\"]\n"));
    assert_eq!(tables.lines().count(), 4, "{tables}");
}

/// What depends on families is checked although one of them cannot be read.
#[test]
fn names_of_families_among_unreadable_ones() {
    const CUT: &str = "cannot cut out objects: run.toml:8: output.cut_outs: expected a family: a, b, a, c, found";
    added(
        "[objects]\nfamilies = [\"a: q > 1\", \"b: vortex > 1\", \"a: q > x\", \"c speed > 1\"]\n[output]\ncut_outs = [\"b:1\", \"c:2\", \"d:3\", \"x:y\", \"e:4\"]\n",
        &[
            &format!(
                "cannot read family: run.toml:6: \"b: vortex > 1\": expected an indicator of this version, found \"vortex\"; hint: one of {}",
                ropewalk::model::indicator::INDICATORS.iter().map(|i| i.name).collect::<Vec<_>>().join(", ")
            ),
            "cannot read family: run.toml:6: \"a: q > x\": expected \"NAME: INDICATOR > LEVEL [down to LEVEL]\", found the level \"x\"; \
             hint: a level is a number, alone or with rms, run-rms, mean, volume or peak",
            "cannot read family: run.toml:6: \"c speed > 1\": expected \"NAME: INDICATOR > LEVEL [down to LEVEL]\", found no colon; \
             hint: for example \"vorticity: vorticity > 3 rms\"",
            "cannot use family: run.toml:6: \"a: q > x\": expected a name of its own, found \"a\" twice; \
             hint: give every family another name before the colon",
            "cannot use a setting: run.toml:8: output.cut_outs: expected largest:N, or ids like 12 or FAMILY:12, or none, found \"x:y\"; \
             hint: for example cut_outs = \"largest:3\"",
            &format!("{CUT} \"d\"; hint: FAMILY:ID, ID or largest:N"),
            &format!("{CUT} \"e\"; hint: FAMILY:ID, ID or largest:N"),
        ],
    );
}

#[test]
fn paths_that_are_named_twice() {
    assert_eq!(
        told(
            "[snapshots]\npaths = [\n  \"a.h5\",\n  \"b/../a.h5\",\n  \"s.h5:/1\",\n  \"s.h5:/2\",\n  \"*.h5\",\n  \"*.h5\",\n]\nlists = [\"l.txt\", \"./l.txt\"]\n[input]\nlengths = 0\n"
        ),
        "cannot take snapshots twice: run.toml:4: snapshots.paths: expected every path once, found b/../a.h5 again; hint: drop one of them\n\
         cannot take snapshots twice: run.toml:8: snapshots.paths: expected every path once, found *.h5 again; hint: drop one of them\n\
         cannot take snapshots twice: run.toml:10: snapshots.lists: expected every path once, found ./l.txt again; hint: drop one of them\n\
         cannot use a setting: run.toml:12: input.lengths: expected three finite numbers above 0, or one for all axes, found 0; \
         hint: for example lengths = [\"2pi\", \"2pi\", \"pi\"]"
    );
}

/// (0.002^3/0.08)^(1/4) = (1e-7)^(1/4) = 0.0177828.
#[test]
fn viscosity_dissipation_and_kolmogorov_length() {
    let of = |length: &str| told(&format!("{BASE}[physics]\nviscosity = 0.002\ndissipation = 0.08\nkolmogorov_length = {length}\n"));
    for near in ["0.0177828", "0.0178", "0.01795", "0.01761"] {
        assert_eq!(of(near), "", "{near}");
    }
    for (far, found) in [("0.018", "1.8000e-2"), ("0.0176", "1.7600e-2"), ("0.02", "2.0000e-2")] {
        assert_eq!(
            of(far),
            format!(
                "cannot settle the Kolmogorov length: run.toml:8: physics.viscosity, physics.dissipation, physics.kolmogorov_length: \
                 expected the length (viscosity^3/dissipation)^(1/4) = 1.7783e-2, found {found}; \
                 hint: correct one of them, or leave the dissipation or the length out"
            )
        );
    }
    added("[physics]\nviscosity = 0.002\nkolmogorov_length = 1\n", &[]);
    added("[physics]\ndissipation = 0.002\nkolmogorov_length = 1\n", &[]);
}

#[test]
fn two_numbers_on_a_plane() {
    for order in ["yx", "xyc"] {
        let (input, frame) = flags(&[("lengths", "2pi,1"), ("origin", "-pi,3"), ("order", order), ("frame", "0.5,-1")]).unwrap();
        assert_eq!(input.lengths, Some([std::f64::consts::TAU, 1.0, 1.0]));
        assert_eq!(input.origin, [-std::f64::consts::PI, 3.0, 0.0]);
        assert_eq!(frame, Frame::Given([0.5, -1.0, 0.0]));
        assert_eq!(flags(&[("spacing", "0.1,0.2"), ("order", order)]).unwrap().0.spacing, Some([0.1, 0.2, 1.0]));
    }
    // In space a third number is missing.
    let refused = flags(&[("lengths", "1,2"), ("origin", "3,4")]).unwrap_err();
    assert_eq!(
        refused,
        "cannot use a setting: --lengths: expected three finite numbers above 0, or one for all axes, found \"1,2\"; \
         hint: for a plane give --order yx as well (or xy)\n\
         cannot use a setting: --origin: expected three finite numbers, or one for all axes, found \"3,4\"; \
         hint: for a plane give --order yx as well (or xy)"
    );
    added("origin = [1, 2]\norder = \"xy\"\n", &[]);
    added(
        "origin = [1, 2]\n",
        &["cannot use a setting: run.toml:5: input.origin: expected three finite numbers, or one for all axes, found [1, 2]; \
           hint: for a plane give order = \"yx\" as well (or xy)"],
    );
    assert!(flags(&[("lengths", "1,0"), ("order", "yx")]).is_err());
}

/// An axis with coordinates may have the length 0: it follows from them.
#[test]
fn no_length_for_an_axis_with_coordinates() {
    let (input, _) = flags(&[("lengths", "2,0,pi"), ("coordinates", "y=grid/y")]).unwrap();
    assert_eq!(input.lengths, Some([2.0, 0.0, std::f64::consts::PI]));
    assert_eq!(flags(&[("lengths", "2,3,4"), ("coordinates", "y=grid/y")]).unwrap().0.lengths, Some([2.0, 3.0, 4.0]));
    for (lengths, coordinates) in [("0,2,1", "y=grid/y"), ("2,-1,1", "y=grid/y"), ("1,0,1", "x=grid/x")] {
        let told = flags(&[("lengths", lengths), ("coordinates", coordinates)]).unwrap_err();
        assert!(told.starts_with("cannot use a setting: --lengths: expected three finite numbers above 0"), "{told}");
    }
}

#[test]
fn frames() {
    let of = |typed: &str| flags(&[("lengths", "1"), ("frame", typed)]).map(|(_, frame)| frame);
    assert_eq!(of("box"), Ok(Frame::Box));
    assert_eq!(of("stored"), Ok(Frame::Stored));
    assert_eq!(of("-0.1, 0,1e-3"), Ok(Frame::Given([-0.1, 0.0, 1e-3])));
    let near = of("Stord").unwrap_err();
    assert!(near.ends_with("found \"Stord\"; hint: did you mean stored?"), "{near}");
    let odd = of("1,2").unwrap_err();
    assert_eq!(
        odd,
        "cannot use a setting: --frame: expected box, stored, or the velocity of a frame, three finite numbers, found \"1,2\"; \
         hint: for example --frame 0.1,0,0"
    );
}
