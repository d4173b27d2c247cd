//! Every fault of a snapshot or its description, with its exact message and who must act.

use std::path::Path;

use ::hdf5::{File, H5Type};
use ropewalk::base::error::Kind;
use ropewalk::model::source::AnySource;
use ropewalk::read::{InputSpec, open};

use crate::files::{names, spec};
use crate::npy::npy;

/// Kind and message of the error, with the folder of the test written as `DIR`.
fn fault(dir: &Path, path: &Path, spec: &InputSpec) -> (Kind, String) {
    let e = open(&path.to_path_buf().into(), spec).err().unwrap_or_else(|| panic!("{} was accepted", path.display()));
    let text = e.to_string();
    assert_eq!(text.lines().count(), 1, "{text}");
    (e.kind(), text.replace(&dir.display().to_string(), "DIR"))
}

fn input(text: &str) -> (Kind, String) {
    (Kind::Input, text.into())
}

fn usage(text: &str) -> (Kind, String) {
    (Kind::Usage, text.into())
}

fn zeros<T: H5Type + Default + Clone>(file: &File, name: &str, shape: &[usize]) {
    let values = vec![T::default(); shape.iter().product()];
    file.new_dataset::<T>().shape(shape).create(name).unwrap().write_raw(&values).unwrap();
}

/// An HDF5 file of f32 datasets.
fn hdf5(path: &Path, datasets: &[(&str, &[usize])]) {
    let file = File::create(path).unwrap();
    for (name, shape) in datasets {
        zeros::<f32>(&file, name, shape);
    }
    file.close().unwrap();
}

/// An HDF5 file of one dataset `velocity` of shape 3x9x10x12 in one deflated chunk.
fn compressed(path: &Path, values: &[f32]) {
    let file = File::create(path).unwrap();
    let builder = file.new_dataset::<f32>().shape([3, 9, 10, 12]).chunk([3, 9, 10, 12]).deflate(6);
    builder.create("velocity").unwrap().write_raw(values).unwrap();
    // The file is complete only once nothing holds it.
    drop((builder, file));
}

const GOOD: &[usize] = &[9, 10, 12];

#[test]
fn descriptions_that_make_no_sense() {
    let dir = tempfile::tempdir().unwrap();
    let path = dir.path().join("never-looked-at.h5");
    let check = |change: &dyn Fn(&mut InputSpec), text: &str| {
        let mut own = spec("zyx");
        change(&mut own);
        assert_eq!(fault(dir.path(), &path, &own), usage(text));
    };
    check(
        &|s| s.order = "zyy".into(),
        "cannot use the axis order: --order: expected a permutation of xyz (of xy for planes) with an optional c first or last, found \"zyy\"; hint: --order zyx for arrays with z slowest and x fastest",
    );
    check(
        &|s| s.velocity = names(&["u", "v", "w", "p"]),
        "cannot use the dataset names: --velocity: expected 3 names (one dataset a component; 2 on a plane) or 1 name (a component axis), found 4 (u,v,w,p); hint: --velocity u,v,w",
    );
    check(
        &|s| s.velocity = names(&["u", "u"]),
        "cannot use the dataset names: --velocity: expected 2 different names, found 2 (u,u); hint: --velocity u,v,w",
    );
    check(
        &|s| s.density = Some(String::new()),
        "cannot use the dataset names: --density: expected a name that is not empty, found nothing",
    );
    check(
        &|s| s.time.name = Some("snap_*.h5".into()),
        "cannot read a pattern of times: \"snap_*.h5\": expected {time} once, where the number stands, found it 0 times; hint: for example out_t{time}.h5",
    );
    check(
        &|s| s.magnetic = names(&["bx", "by", "by"]),
        "cannot use the dataset names: --magnetic: expected 3 different names, found 3 (bx,by,by); hint: --magnetic bx,by,bz",
    );
    check(
        &|s| s.velocity = names(&[""]),
        "cannot use the dataset names: --velocity: expected names that are not empty, found 1 (); hint: --velocity u,v,w",
    );
    check(
        &|s| s.lengths = None,
        "cannot settle the size of the box: --lengths, --spacing: expected one of them, found neither; hint: --lengths 6.283185,6.283185,6.283185 for a 2 pi box",
    );
    check(
        &|s| s.spacing = Some([1.0; 3]),
        "cannot settle the size of the box: --lengths, --spacing: expected one of them, found both; hint: drop one of them",
    );
    check(
        &|s| s.lengths = Some([1.0, 0.0, 1.0]),
        "cannot settle the size of the box: --lengths: expected 3 finite numbers above 0, found 1,0,1",
    );
    check(
        &|s| (s.lengths, s.spacing) = (None, Some([1.0, f64::NAN, -1.0])),
        "cannot settle the size of the box: --spacing: expected 3 finite numbers above 0, found 1,NaN,-1",
    );
    check(&|s| s.origin[2] = f64::INFINITY, "cannot place the box: --origin: expected 3 finite numbers, found 0,0,inf");
}

#[test]
fn files_that_are_not_hdf5() {
    let dir = tempfile::tempdir().unwrap();
    let path = dir.path().join("s.h5");
    let check = |bytes: Option<&[u8]>, text: &str| {
        if let Some(bytes) = bytes {
            std::fs::write(&path, bytes).unwrap();
        }
        assert_eq!(fault(dir.path(), &path, &spec("zyx")), input(text));
    };
    check(
        None,
        "cannot find the snapshot: DIR/s.h5: expected an HDF5 file, a .npy file or a folder of .npy files, found nothing; hint: check the path",
    );
    check(
        Some(b""),
        "cannot read the HDF5 file: DIR/s.h5: expected an HDF5 signature, found an empty file; hint: the file is truncated: copy or write it again",
    );
    check(
        Some(b"time,energy\n0,1\n"),
        "cannot read the HDF5 file: DIR/s.h5: expected an HDF5 signature, found a file beginning \"time,ene\"; hint: snapshots are HDF5 files, .npy files or folders of .npy files; files without a header need --raw-values and --raw-shape",
    );
    check(
        Some(&[b'x'; 5000]),
        "cannot read the HDF5 file: DIR/s.h5: expected an HDF5 signature, found a file beginning \"xxxxxxxx\"; hint: snapshots are HDF5 files, .npy files or folders of .npy files; files without a header need --raw-values and --raw-shape",
    );
    check(
        Some(b"\x89HDF"),
        "cannot read the HDF5 file: DIR/s.h5: expected a complete superblock, found a file of 4 bytes; hint: the file is truncated: copy or write it again",
    );
    check(
        Some(b"\x89HDF\r\n\x1a\n\0\0"),
        "cannot read the HDF5 file: DIR/s.h5: expected a complete superblock, found a file of 10 bytes; hint: the file is truncated: copy or write it again",
    );
}

#[cfg(unix)]
#[test]
fn devices_are_not_waited_for() {
    let path = Path::new("/dev/null");
    assert_eq!(
        fault(Path::new("/nowhere"), path, &spec("zyx")),
        input("cannot open the snapshot: /dev/null: expected a file or a folder, found a device or pipe")
    );
}

#[test]
fn truncated_hdf5_files() {
    let dir = tempfile::tempdir().unwrap();
    let path = dir.path().join("s.h5");
    hdf5(&path, &[("velocity", &[3, 9, 10, 12])]);
    let whole = std::fs::read(&path).unwrap();
    let all = whole.len();
    for percent in [1, 50, 99] {
        let kept = all * percent / 100;
        std::fs::write(&path, &whole[..kept]).unwrap();
        let text = format!(
            "cannot read the HDF5 file: DIR/s.h5: expected {all} bytes, as its header says, found {kept}; \
             hint: the file is truncated: copy or write it again"
        );
        assert_eq!(fault(dir.path(), &path, &spec("zyx")), input(&text));
    }
}

#[test]
fn damaged_hdf5_files() {
    let dir = tempfile::tempdir().unwrap();
    let path = dir.path().join("s.h5");
    // The group's symbol table is overwritten: only the library notices.
    hdf5(&path, &[("velocity", &[3, 9, 10, 12])]);
    let mut bytes = std::fs::read(&path).unwrap();
    for i in 96..800 {
        bytes[i] = 0xee;
    }
    std::fs::write(&path, &bytes).unwrap();
    let (kind, text) = fault(dir.path(), &path, &spec("zyx"));
    assert_eq!(kind, Kind::Input);
    assert!(text.starts_with("cannot read the HDF5 file: DIR/s.h5: found "), "{text}");

    // A chunk that does not decompress is found when it is read.
    let values: Vec<f32> = (0..3240).map(|i| (i as f32).sin()).collect();
    compressed(&path, &values);
    let mut bytes = std::fs::read(&path).unwrap();
    // The zlib stream begins with 0x78 (RFC 1950) in the largest stretch of the file.
    let start = (0..bytes.len() - 1).rfind(|&i| bytes[i] == 0x78 && bytes[i + 1] == 0x9c).unwrap();
    for b in &mut bytes[start + 2..start + 64] {
        *b = 0xff;
    }
    std::fs::write(&path, &bytes).unwrap();
    let AnySource::F32(mut source) = open(&path.clone().into(), &spec("zyx")).unwrap().source else { unreachable!() };
    let mut store = vec![vec![0.0; 120]; 3];
    let mut out: Vec<&mut [f32]> = store.iter_mut().map(|v| &mut v[..]).collect();
    let e = source.read(0, 1, &mut out).unwrap_err();
    assert_eq!(
        e.to_string().replace(&dir.path().display().to_string(), "DIR"),
        "cannot read values: DIR/s.h5: /velocity: expected gzip data of 12960 bytes in the chunk that begins at 0,0,0,0, found damaged ones; \
         hint: the file is damaged: copy or write it again"
    );
}

#[test]
fn datasets_that_are_not_there() {
    let dir = tempfile::tempdir().unwrap();
    let path = dir.path().join("s.h5");
    let check = |own: &InputSpec, text: &str| assert_eq!(fault(dir.path(), &path, own), input(text));
    hdf5(&path, &[]);
    check(
        &spec("zyx"),
        "cannot find a velocity or magnetic field: DIR/s.h5: expected u,v,w | ux,uy,uz | vx,vy,vz | velocity | bx,by,bz | magnetic | b in the root group, found no dataset; hint: --velocity U,V,W or --magnetic BX,BY,BZ names them (or one name of an array with a component axis)",
    );
    hdf5(&path, &[("flow/u", GOOD), ("flow/v", GOOD), ("b", GOOD), ("rho", &[2])]);
    check(
        &spec("zyx"),
        "cannot find a velocity or magnetic field: DIR/s.h5: expected u,v,w | ux,uy,uz | vx,vy,vz | velocity | bx,by,bz | magnetic | b in the root group, found /b 9x10x12, /flow/u 9x10x12, /flow/v 9x10x12, /rho 2; hint: --velocity U,V,W or --magnetic BX,BY,BZ names them (or one name of an array with a component axis)",
    );
    check(
        &InputSpec { velocity: names(&["flow/u", "/flow/v", "flow/w"]), ..spec("zyx") },
        "cannot find the dataset: DIR/s.h5: /flow/w: found only /b 9x10x12, /flow/u 9x10x12, /flow/v 9x10x12, /rho 2; hint: --velocity U,V,W or --magnetic BX,BY,BZ names them (or one name of an array with a component axis)",
    );
    check(
        &InputSpec { velocity: names(&["flow"]), ..spec("zyx") },
        "cannot use the dataset: DIR/s.h5: /flow: expected a dataset, found a group; hint: --velocity U,V,W or --magnetic BX,BY,BZ names them (or one name of an array with a component axis)",
    );
    hdf5(&path, &[("u", GOOD), ("v", GOOD), ("w", GOOD), ("bx", GOOD), ("bz", GOOD)]);
    check(
        &spec("zyx"),
        "cannot find all components: DIR/s.h5: expected bx,by,bz, found only bx,bz; hint: --velocity or --magnetic alone reads one field and leaves the other",
    );
    let many: Vec<String> = (10..30).map(|i| format!("d{i}")).collect();
    let many: Vec<(&str, &[usize])> = many.iter().map(|n| (n.as_str(), &[1][..])).collect();
    hdf5(&path, &many);
    check(
        &spec("zyx"),
        "cannot find a velocity or magnetic field: DIR/s.h5: expected u,v,w | ux,uy,uz | vx,vy,vz | velocity | bx,by,bz | magnetic | b in the root group, found /d10 1, /d11 1, /d12 1, /d13 1, /d14 1, /d15 1, /d16 1, /d17 1, /d18 1, /d19 1, /d20 1, /d21 1, and more; hint: --velocity U,V,W or --magnetic BX,BY,BZ names them (or one name of an array with a component axis)",
    );
}

#[test]
fn datasets_of_a_wrong_kind() {
    let dir = tempfile::tempdir().unwrap();
    let path = dir.path().join("s.h5");
    let check = |order: &str, datasets: &[(&str, &[usize])], text: &str| {
        hdf5(&path, datasets);
        assert_eq!(fault(dir.path(), &path, &spec(order)), input(text));
    };
    check(
        "zyx",
        &[("u", GOOD), ("v", GOOD), ("w", &[9, 10, 12, 3])],
        "cannot use the dataset: DIR/s.h5: /w: expected rank 3 (2 on a plane), as one of three components, found 9x10x12x3 (rank 4); hint: a dataset with a component axis is named alone: --velocity NAME",
    );
    check(
        "zyx",
        &[("velocity", &[2, 9, 10, 12])],
        "cannot use the dataset: DIR/s.h5: /velocity: expected length 3 on the first or on the last axis, for the components, found 2x9x10x12; hint: --order gives the axes slowest first, with c for a component axis",
    );
    check(
        "czyx",
        &[("velocity", &[9, 10, 12, 3])],
        "cannot use the dataset: DIR/s.h5: /velocity: expected length 3 on the first axis, where --order has its c, found 9x10x12x3; hint: --order gives the axes slowest first, with c for a component axis",
    );
    check(
        "zyxc",
        &[("velocity", &[3, 9, 10, 12])],
        "cannot use the dataset: DIR/s.h5: /velocity: expected length 3 on the last axis, where --order has its c, found 3x9x10x12; hint: --order gives the axes slowest first, with c for a component axis",
    );
    check(
        "zyx",
        &[("u", GOOD), ("v", GOOD), ("w", &[9, 10, 11])],
        "cannot use the dataset: DIR/s.h5: /w: expected 12 x 10 x 9 samples along x, y, z as in s.h5:/u, found 11 x 10 x 9 samples along x, y, z; hint: all components of a snapshot share one grid",
    );
    check(
        "yxz",
        &[("velocity", &[3, 9, 10, 12]), ("b", &[9, 12, 10, 3])],
        "cannot use the dataset: DIR/s.h5: /b: expected 10 x 9 x 12 samples along x, y, z as in s.h5:/velocity, found 12 x 9 x 10 samples along x, y, z; hint: all components of a snapshot share one grid",
    );
    check(
        "zyx",
        &[("u", &[9, 10, 1]), ("v", &[9, 10, 1]), ("w", &[9, 10, 1])],
        "cannot use the dataset: DIR/s.h5: /u: expected at least 2 samples along x and y, found 9x10x1 (1 x 10 x 9 samples along x, y, z); hint: --order gives the axes slowest first; the axis of length 1 of a plane is z",
    );
    let named = InputSpec { magnetic: names(&["u"]), ..spec("zyx") };
    hdf5(&path, &[("u", GOOD)]);
    assert_eq!(
        fault(dir.path(), &path, &named),
        input(
            "cannot use the dataset: DIR/s.h5: /u: expected rank 4 (3 on a plane), space axes and a component axis, found 9x10x12 (rank 3); hint: --magnetic takes three names where every component has its own dataset"
        )
    );
    hdf5(&path, &[("velocity", &[3, 9, 10, 3])]);
    assert_eq!(
        fault(dir.path(), &path, &spec("yzx")),
        usage(
            "cannot tell the component axis: DIR/s.h5: /velocity: expected length 3 on the first or on the last axis, found both in 3x9x10x3; hint: write --order cyzx or --order yzxc"
        )
    );
}

#[test]
fn datasets_of_a_wrong_type() {
    let dir = tempfile::tempdir().unwrap();
    let path = dir.path().join("s.h5");
    let file = File::create(&path).unwrap();
    zeros::<i32>(&file, "velocity", &[3, 9, 10, 12]);
    file.close().unwrap();
    assert_eq!(
        fault(dir.path(), &path, &spec("zyx")),
        input(
            "cannot use the dataset: DIR/s.h5: /velocity: expected float32 or float64 values, found int32; hint: convert the dataset to float32 or float64"
        )
    );

    // An f32 datatype message rewritten as IEEE half precision (HDF5 File Format Specification 3.0, IV.A.2.d).
    hdf5(&path, &[("velocity", &[3, 9, 10, 12])]);
    let single = [0x11, 0x20, 0x1f, 0, 4, 0, 0, 0, 0, 0, 32, 0, 23, 8, 0, 23, 127, 0, 0, 0];
    let half = [0x11, 0x20, 0x0f, 0, 2, 0, 0, 0, 0, 0, 16, 0, 10, 5, 0, 10, 15, 0, 0, 0];
    rewrite(&path, &single, &half);
    assert_eq!(
        fault(dir.path(), &path, &spec("zyx")),
        input(
            "cannot use the dataset: DIR/s.h5: /velocity: expected float32 or float64 values, found float16; hint: convert the dataset to float32 or float64"
        )
    );

    // The deflate filter renamed to one that nobody has registered.
    compressed(&path, &[0.0; 3240]);
    rewrite(&path, b"\x01\0\x08\0\x01\0\x01\0deflate\0", b"\xff\x7f\x08\0\x01\0\x01\0deflate\0");
    assert_eq!(
        fault(dir.path(), &path, &spec("zyx")),
        input(
            "cannot use the dataset: DIR/s.h5: /velocity: expected compression this build can undo, found filter 32767; hint: store it again with gzip"
        )
    );
}

fn rewrite(path: &Path, from: &[u8], to: &[u8]) {
    let mut bytes = std::fs::read(path).unwrap();
    let at = bytes.windows(from.len()).position(|w| w == from).expect("the message is in the file");
    bytes[at..at + to.len()].copy_from_slice(to);
    std::fs::write(path, bytes).unwrap();
}

#[test]
fn damaged_npy_files() {
    let dir = tempfile::tempdir().unwrap();
    let path = dir.path().join("s.npy");
    let check = |bytes: &[u8], text: &str| {
        std::fs::write(&path, bytes).unwrap();
        assert_eq!(fault(dir.path(), &path, &spec("zyx")), input(text));
    };
    let good = npy(1, "'<f4'", false, &[3, 9, 10, 12], &[0; 12960]);
    assert_eq!(good.len(), 13088);
    check(
        b"",
        "cannot read the npy file: DIR/s.npy: expected the signature \"\\x93NUMPY\", found an empty file; hint: write it with numpy.save",
    );
    check(
        b"PK\x03\x04zip",
        "cannot read the npy file: DIR/s.npy: expected the signature \"\\x93NUMPY\", found a file beginning \"PK\\x03\\x04zip\"; hint: write it with numpy.save",
    );
    check(
        &good[..7],
        "cannot read the npy file: DIR/s.npy: expected a complete header, found a file of 7 bytes; hint: the file is truncated: copy or write it again",
    );
    check(
        &good[..9],
        "cannot read the npy file: DIR/s.npy: expected a complete header, found a file of 9 bytes; hint: the file is truncated: copy or write it again",
    );
    check(
        &good[..100],
        "cannot read the npy file: DIR/s.npy: expected a complete header, found a file of 100 bytes; hint: the file is truncated: copy or write it again",
    );
    check(
        &good[..128],
        "cannot read the npy file: DIR/s.npy: expected 13088 bytes, as its header says, found 128; hint: the file is truncated or damaged: copy or write it again",
    );
    check(
        &good[..13087],
        "cannot read the npy file: DIR/s.npy: expected 13088 bytes, as its header says, found 13087; hint: the file is truncated or damaged: copy or write it again",
    );
    check(
        &[&good[..], b"x"].concat(),
        "cannot read the npy file: DIR/s.npy: expected 13088 bytes, as its header says, found 13089; hint: the file is truncated or damaged: copy or write it again",
    );
    check(&npy(4, "'<f4'", false, &[3], &[]), "cannot read the npy file: DIR/s.npy: expected format version 1.0, 2.0 or 3.0, found 4.0");
    check(
        &npy(1, "'<i4'", false, &[3, 9, 10, 12], &[0; 12960]),
        "cannot use the dataset: DIR/s.npy: expected float32 or float64 values, found '<i4'; hint: convert the dataset to float32 or float64",
    );
    check(
        &npy(1, "'<f2'", false, &[3, 9, 10, 12], &[0; 6480]),
        "cannot use the dataset: DIR/s.npy: expected float32 or float64 values, found '<f2'; hint: convert the dataset to float32 or float64",
    );
    check(
        &npy(1, "[('u', '<f4'), ('v', '<f4')]", false, &[3, 9, 10, 12], &[0; 25920]),
        "cannot use the dataset: DIR/s.npy: expected float32 or float64 values, found [('u', '<f4'), ('v', '<f4')]; hint: convert the dataset to float32 or float64",
    );
    check(
        &npy(2, "'<f8'", false, &[usize::MAX, 9, 10, 12], &[]),
        "cannot read the npy file: DIR/s.npy: expected a possible shape, found 18446744073709551615x9x10x12; hint: the file is truncated or damaged: copy or write it again",
    );
    let mut no_shape = good.clone();
    no_shape[61..66].copy_from_slice(b"forms");
    check(
        &no_shape,
        "cannot read the npy file: DIR/s.npy: expected a header with descr, fortran_order and shape, found \"{'descr': '<f4', 'fortran_order': False, 'shape': (forms 10, 12), }\"",
    );
    let mut long = npy(2, "'<f4'", false, &[3], &[]);
    long[11] = 0xff;
    check(&long, "cannot read the npy file: DIR/s.npy: expected a header of at most 1048576 bytes, found 4278190196");
    check(
        &npy(1, "'<f4'", false, &[9, 10, 12], &[0; 4320]),
        "cannot use the dataset: DIR/s.npy: expected rank 4 (3 on a plane), space axes and a component axis, found 9x10x12 (rank 3); hint: --velocity takes three names where every component has its own dataset",
    );
    check(
        &npy(1, "'<f4'", true, &[3, 1, 10, 12], &[0; 1440]),
        "cannot use the dataset: DIR/s.npy: expected at least 2 samples along x and y, found 12x10x1x3 (1 x 10 x 12 samples along x, y, z); hint: --order gives the axes slowest first; the axis of length 1 of a plane is z",
    );
}

#[test]
fn names_that_do_not_fit_npy_files() {
    let dir = tempfile::tempdir().unwrap();
    let path = dir.path().join("s.npy");
    std::fs::write(&path, npy(1, "'<f4'", false, &[3, 9, 10, 12], &[0; 12960])).unwrap();
    let both = InputSpec { velocity: names(&["s"]), magnetic: names(&["s"]), ..spec("zyx") };
    assert_eq!(
        fault(dir.path(), &path, &both),
        usage(
            "cannot read several fields from one npy file: DIR/s.npy: --velocity, --magnetic: expected --velocity or --magnetic alone, found 2 fields; hint: put the files into a folder and give the folder"
        )
    );
    let other = InputSpec { velocity: names(&["u", "v", "w"]), ..spec("zyx") };
    assert_eq!(
        fault(dir.path(), &path, &other),
        usage(
            "cannot use the dataset names: DIR/s.npy: --velocity: expected s.npy, the file itself, found u,v,w; hint: for one file a component give their folder"
        )
    );

    let run = dir.path().join("run");
    std::fs::create_dir(&run).unwrap();
    assert_eq!(
        fault(dir.path(), &run, &spec("zyx")),
        input(
            "cannot find a velocity or magnetic field: DIR/run: expected npy files named u,v,w | ux,uy,uz | vx,vy,vz | velocity | bx,by,bz | magnetic | b, found no npy file; hint: --velocity U,V,W or --magnetic BX,BY,BZ names them (or one name of an array with a component axis)"
        )
    );
    std::fs::write(run.join("u.npy"), npy(1, "'<f4'", false, &[9, 10, 12], &[0; 4320])).unwrap();
    std::fs::write(run.join("v.npy"), b"nothing").unwrap();
    std::fs::write(run.join("notes.txt"), b"nothing").unwrap();
    assert_eq!(
        fault(dir.path(), &run, &spec("zyx")),
        input(
            "cannot find all components: DIR/run: expected u,v,w, found only u,v; hint: --velocity or --magnetic alone reads one field and leaves the other"
        )
    );
    let named = InputSpec { velocity: names(&["u", "w", "v"]), ..spec("zyx") };
    assert_eq!(
        fault(dir.path(), &run, &named),
        input(
            "cannot find the file: DIR/run/w.npy: found only u.npy 9x10x12, v.npy (not usable); hint: --velocity U,V,W or --magnetic BX,BY,BZ names them (or one name of an array with a component axis)"
        )
    );
    std::fs::write(run.join("w.npy"), npy(1, "'<f4'", false, &[9, 10, 12], &[0; 4320])).unwrap();
    assert_eq!(
        fault(dir.path(), &run, &spec("zyx")),
        input(
            "cannot read the npy file: DIR/run/v.npy: expected the signature \"\\x93NUMPY\", found a file beginning \"nothing\"; hint: write it with numpy.save"
        )
    );
    std::fs::write(run.join("v.npy"), npy(1, "'<f4'", true, &[9, 10, 12], &[0; 4320])).unwrap();
    assert_eq!(
        fault(dir.path(), &run, &spec("zyx")),
        input(
            "cannot use the dataset: DIR/run/v.npy: expected 12 x 10 x 9 samples along x, y, z as in run/u.npy, found 9 x 10 x 12 samples along x, y, z; hint: all components of a snapshot share one grid"
        )
    );
}

#[test]
fn files_that_change_while_they_are_read() {
    let dir = tempfile::tempdir().unwrap();
    let path = dir.path().join("s.npy");
    let good = npy(1, "'<f4'", false, &[3, 9, 10, 12], &[0; 12960]);
    std::fs::write(&path, &good).unwrap();
    let AnySource::F32(mut source) = open(&path.clone().into(), &spec("zyx")).unwrap().source else { unreachable!() };
    std::fs::write(&path, &good[..1000]).unwrap();
    let mut store = vec![vec![0.0; 120]; 3];
    let mut out: Vec<&mut [f32]> = store.iter_mut().map(|v| &mut v[..]).collect();
    let e = source.read(8, 9, &mut out).unwrap_err();
    assert_eq!(
        e.to_string().replace(&dir.path().display().to_string(), "DIR"),
        "cannot read values: DIR/s.npy: found the end of the file; hint: the file changed or its disk failed"
    );
}
