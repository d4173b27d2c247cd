//! Looking into files, and the run file that is written for them.

use crate::place::{N, Place, flow};

#[test]
fn what_a_file_holds_is_told() {
    let place = Place::with_snapshot();
    let ran = place.succeed("inspect good.h5");
    assert_eq!(ran.err, "");
    let lines: Vec<&str> = ran.out.lines().collect();
    assert!(lines[0].starts_with("good.h5: HDF5, ") && lines[0].ends_with(" KiB"), "{}", lines[0]);
    for name in ["u", "v", "w"] {
        let line = format!("    /{name}  16 x 16 x 16  float32 little-endian  contiguous");
        assert!(lines.contains(&line.as_str()), "{}", ran.out);
    }
    assert!(lines.contains(&"    input.velocity  [\"u\", \"v\", \"w\"]"), "{}", ran.out);
    assert!(lines.contains(&"  because"), "{}", ran.out);
}

/// The run file that is written runs, and gives what flags give.
#[test]
fn the_run_file_runs_as_it_is() {
    let place = Place::with_snapshot();
    std::fs::create_dir(place.path("jobs")).expect("a folder");
    std::fs::create_dir(place.path("jobs/data")).expect("a folder");
    place.hdf5("jobs/data/s1.h5", &flow());
    let ran = place.succeed("inspect jobs/data/s1.h5 good.h5 --run-file jobs/run.toml");
    assert!(
        ran.out.ends_with("\nrun file jobs/run.toml: look it through, then ropewalk catalogue jobs/run.toml --dry-run\n"),
        "{}",
        ran.out
    );
    let text = place.read("jobs/run.toml");
    let whole = place.path("good.h5").canonicalize().expect("a path").display().to_string();
    assert!(text.contains("\npaths = [\"data/s1.h5\", \"") && text.contains(&whole), "{text}");
    // The size of the box is nowhere told, and nobody is to overlook that.
    let missing = place.run("catalogue jobs/run.toml --dry-run");
    assert_eq!(missing.code, 2);
    assert_eq!(
        missing.err,
        "error: cannot settle the size of the box: input.lengths, input.spacing: expected one of them, found neither; \
         hint: lengths = \"2pi\" is a cube of that side\n"
    );
    place.write("jobs/run.toml", text.replace("#lengths = ", "lengths = ").as_bytes());
    place.succeed("catalogue jobs/run.toml --dry-run");
    place.succeed("catalogue jobs/run.toml -o from-file --surfaces none");
    place.succeed("catalogue jobs/data/s1.h5 good.h5 --lengths 2pi -o from-flags --surfaces none");
    assert_eq!(place.read("from-file/catalogue.csv"), place.read("from-flags/catalogue.csv"));
}

#[test]
fn an_edited_run_file_is_not_lost() {
    let place = Place::with_snapshot();
    place.write("run.toml", b"mine");
    let ran = place.run("inspect good.h5 --run-file run.toml");
    assert_eq!(ran.code, 5);
    assert_eq!(
        ran.err,
        "error: cannot write the run file: run.toml: expected nothing there, found a file of that name; \
         hint: name another, or pass --replace to overwrite it\n"
    );
    assert_eq!(place.read("run.toml"), "mine");
    place.succeed("inspect good.h5 --run-file run.toml --replace");
    place.succeed("catalogue run.toml --dry-run --lengths 2pi");
}

/// A size that the file tells is active, also when it is 2 pi.
#[test]
fn a_size_in_the_file_is_taken() {
    let place = Place::with_snapshot();
    place.sized("good.h5", std::f64::consts::TAU);
    let told = place.succeed("inspect good.h5 --run-file run.toml").out;
    assert!(told.lines().any(|l| l.trim_start().starts_with("input.lengths ") && l.ends_with("[\"2pi\", \"2pi\", \"2pi\"]")), "{told}");
    assert!(place.read("run.toml").contains("\nlengths = [\"2pi\", \"2pi\", \"2pi\"]\n"));
    place.succeed("catalogue run.toml --dry-run");
}

#[test]
fn what_cannot_be_read_is_told() {
    let place = Place::with_snapshot();
    assert_eq!(place.run("inspect absent.h5").code, 3);
    let some = place.run("inspect absent.h5 good.h5");
    assert_eq!(some.code, 1, "{}", some.err);
    assert!(some.out.starts_with("good.h5: HDF5") && some.err.starts_with("error: cannot look into the file: absent.h5: "), "{}", some.err);
    let none = place.run("inspect absent.h5 other.h5 --run-file run.toml");
    assert_eq!(none.code, 3);
    assert!(
        none.err.ends_with("error: cannot look into any file: expected at least one that can be read, found 2 that cannot\n"),
        "{}",
        none.err
    );
    assert_eq!(place.listing(), ["good.h5"]);
}

/// A file without a header: the run file holds its layout.
#[test]
fn the_layout_of_a_file_without_a_header() {
    let place = Place::new();
    let bytes: Vec<u8> = flow().into_iter().flat_map(|(_, v)| v).flat_map(f32::to_le_bytes).collect();
    assert_eq!(bytes.len(), 3 * N * N * N * 4);
    place.write("all.dat", &bytes);
    place.succeed("inspect all.dat --run-file run.toml");
    let text = place.read("run.toml");
    for line in ["values = \"f32\"", "shape = [16, 16, 16]", "records = \"none\""] {
        assert!(text.lines().any(|l| l == line), "{line}\n{text}");
    }
}
