//! Chunked HDF5 files: every chunk shape, filter, order and window gives the bits that the library gives.

use std::path::Path;

use ::hdf5::{Dataset, File};
use ropewalk::base::par::Pool;
use ropewalk::model::source::{AnySource, PlaneSource};
use ropewalk::read::{InputSpec, Stretch, open};

use crate::files::*;
use crate::hdf5::declare_big;

/// What the library needs for a chunk cache alone: who holds less reads without it.
const CACHE: u64 = 1 << 20;
const NAMES: [&str; 3] = ["u", "v", "w"];

/// How a dataset is stored.
#[derive(Debug, Clone, Copy, Default)]
struct Storage {
    chunk: [usize; 3],
    gzip: Option<u8>,
    shuffle: bool,
    checksum: bool,
    /// The axes may grow, so that chunks may be larger than the array.
    open: bool,
    /// Filters that are left to the library.
    nbit: bool,
}

fn store<T: Value>(file: &File, name: &str, shape: &[usize], storage: &Storage) -> Dataset {
    let builder = file.new_dataset::<T>();
    let builder = if storage.open {
        builder.shape(shape.iter().map(|&n| ::hdf5::Extent::from(n..)).collect::<Vec<_>>())
    } else {
        builder.shape(shape)
    };
    let mut builder = builder.chunk(&storage.chunk[..]);
    if storage.nbit {
        builder = builder.nbit();
    }
    if storage.shuffle {
        builder = builder.shuffle();
    }
    if let Some(level) = storage.gzip {
        builder = builder.deflate(level);
    }
    if storage.checksum {
        builder = builder.fletcher32();
    }
    builder.create(name).unwrap()
}

/// Three components of the values of the other tests, in one file.
fn file<T: Value>(path: &Path, order: &str, storage: &Storage) {
    let file = File::create(path).unwrap();
    for (c, name) in NAMES.iter().enumerate() {
        let (shape, values) = array::<T>(order, c);
        store::<T>(&file, name, &shape, storage).write_raw(&values).unwrap();
    }
    file.close().unwrap();
}

/// Every range of planes, and passes of any thickness.
fn check<T: Value>(path: &Path, spec: &InputSpec, direct: bool, case: &str) {
    let mut source = T::take(opened(path, spec).source);
    let bytes = source.reader_bytes(N[2]);
    assert_eq!(bytes < CACHE, direct, "{case}: {bytes} bytes");
    for thickness in 1..=N[2] {
        for z in (0..N[2]).step_by(thickness) {
            check_planes(source.as_mut(), 0, z, (z + thickness).min(N[2]), case);
        }
    }
    for z1 in (1..=N[2]).rev() {
        for z0 in 0..z1 {
            check_planes(source.as_mut(), 0, z0, z1, case);
        }
    }
}

#[test]
fn every_chunk_shape_behind_every_filter() {
    let dir = tempfile::tempdir().unwrap();
    let path = dir.path().join("s.h5");
    // Whole, planes, pencils along each axis, odd edges, single values (a B-tree of several levels).
    let mut shapes =
        vec![[9, 10, 12], [1, 10, 12], [9, 1, 1], [9, 3, 5], [1, 1, 12], [1, 10, 1], [4, 4, 4], [2, 7, 11], [3, 5, 6], [1, 1, 2]];
    shapes.extend([[16, 10, 12], [2, 16, 5], [3, 4, 13], [20, 20, 20]]);
    let pool = Pool::new(2).unwrap();
    for (i, chunk) in shapes.into_iter().enumerate() {
        for (gzip, shuffle, checksum) in
            [(true, true, false), (true, false, false), (false, true, true), (true, true, true), (false, false, false)]
        {
            let gzip = gzip.then_some(1 + i as u8 % 9);
            let open = chunk.iter().zip([9, 10, 12]).any(|(c, n)| *c > n);
            let storage = Storage { chunk, gzip, shuffle, checksum, open, nbit: false };
            let case = format!("{storage:?}");
            file::<f32>(&path, "zyx", &storage);
            pool.run(|| check::<f32>(&path, &spec("zyx"), true, &case));
            file::<f64>(&path, "zyx", &storage);
            pool.run(|| check::<f64>(&path, &spec("zyx"), true, &case));
        }
    }
}

#[test]
fn every_order_in_either_byte_order() {
    let dir = tempfile::tempdir().unwrap();
    let path = dir.path().join("s.h5");
    let pool = Pool::new(2).unwrap();
    for order in ORDERS {
        for (gzip, shuffle) in [(Some(3), true), (Some(9), false), (None, false)] {
            let storage = Storage { chunk: [4, 3, 5], gzip, shuffle, ..Storage::default() };
            let case = format!("{order} {storage:?}");
            file::<f32>(&path, order, &storage);
            pool.run(|| check::<f32>(&path, &spec(order), true, &case));
            let file = File::create(&path).unwrap();
            for (c, name) in NAMES.iter().enumerate() {
                let (shape, mut values) = array::<f64>(order, c);
                values.iter_mut().for_each(|v| *v = v.swapped());
                store::<f64>(&file, name, &shape, &storage).write_raw(&values).unwrap();
            }
            file.close().unwrap();
            declare_big::<f64>(&path, 3);
            pool.run(|| check::<f64>(&path, &spec(order), true, &case));
        }
    }
}

#[test]
fn other_layouts_of_the_file() {
    let dir = tempfile::tempdir().unwrap();
    let path = dir.path().join("s.h5");
    let pool = Pool::new(2).unwrap();
    let storage = Storage { chunk: [4, 3, 5], gzip: Some(4), shuffle: true, ..Storage::default() };
    let write = |file: &File, storage: &Storage| {
        for (c, name) in NAMES.iter().enumerate() {
            let (shape, values) = array::<f32>("zyx", c);
            store::<f32>(file, name, &shape, storage).write_raw(&values).unwrap();
        }
    };
    // Indices of version 4: of fixed and of open axes, of one chunk, of chunks that were all written early.
    for storage in [
        storage,
        Storage { open: true, ..storage },
        Storage { chunk: [9, 10, 12], ..storage },
        Storage { gzip: None, shuffle: false, ..storage },
    ] {
        let latest = File::with_options().with_fapl(|p| p.libver_latest()).create(&path).unwrap();
        write(&latest, &storage);
        latest.close().unwrap();
        pool.run(|| check::<f32>(&path, &spec("zyx"), true, &format!("latest {storage:?}")));
    }
    let block = File::with_options().with_fcpl(|p| p.userblock(1024)).create(&path).unwrap();
    write(&block, &storage);
    block.close().unwrap();
    pool.run(|| check::<f32>(&path, &spec("zyx"), true, "user block"));
    // Many attributes continue the header of the dataset elsewhere.
    let many = File::create(&path).unwrap();
    write(&many, &storage);
    for i in 0..7 {
        many.dataset("v").unwrap().new_attr::<f64>().shape(20).create(&*format!("a{i}")).unwrap().write_raw(&[0.5; 20]).unwrap();
    }
    many.close().unwrap();
    pool.run(|| check::<f32>(&path, &spec("zyx"), true, "attributes"));
    // Other filters, and links into other files, are read by the library.
    let other = File::create(&path).unwrap();
    write(&other, &Storage { nbit: true, ..storage });
    other.close().unwrap();
    pool.run(|| check::<f32>(&path, &spec("zyx"), false, "another filter"));
    file::<f32>(&dir.path().join("far.h5"), "zyx", &storage);
    let links = File::create(&path).unwrap();
    for name in NAMES {
        links.link_external("far.h5", &format!("/{name}"), name).unwrap();
    }
    links.close().unwrap();
    pool.run(|| check::<f32>(&path, &spec("zyx"), false, "links"));
}

#[test]
fn component_axes_of_any_chunk_edge() {
    let dir = tempfile::tempdir().unwrap();
    let path = dir.path().join("s.h5");
    let pool = Pool::new(2).unwrap();
    for form in ["cyxz", "cxyz", "zyxc", "xzyc"] {
        for edge in [1, 2, 3] {
            let (shape, values) = array::<f32>(form, 0);
            let chunk: Vec<usize> = form.chars().map(|l| extent(l, [5, 4, 2], edge)).collect();
            let file = File::create(&path).unwrap();
            let builder = file.new_dataset::<f32>().shape(&shape[..]).chunk(&chunk[..]).shuffle().deflate(2);
            builder.create("velocity").unwrap().write_raw(&values).unwrap();
            drop(builder);
            file.close().unwrap();
            pool.run(|| check::<f32>(&path, &spec(form), true, &format!("{form} {edge}")));
        }
    }
}

/// All values of a source in blocks of some planes.
fn all<T: Value>(source: &mut dyn PlaneSource<T>, thickness: usize) -> Vec<Vec<u64>> {
    let [nx, ny, nz] = source.grid().n;
    let mut store = vec![vec![T::of(f64::NAN); nx * ny * nz]; source.fields().components()];
    for z in (0..nz).step_by(thickness) {
        let planes = z * nx * ny..(z + thickness).min(nz) * nx * ny;
        let mut out: Vec<&mut [T]> = store.iter_mut().map(|v| &mut v[planes.clone()]).collect();
        source.read(z, (z + thickness).min(nz), &mut out).unwrap();
    }
    store.into_iter().map(|c| c.into_iter().map(Value::bits).collect()).collect()
}

#[test]
fn chunks_that_were_never_written_hold_the_fill_value() {
    let dir = tempfile::tempdir().unwrap();
    let path = dir.path().join("s.h5");
    let shape = [N[2], N[1], N[0]];
    for (i, fill) in [None, Some(2.5f32), Some(f32::from_bits(0x7fc0_1234))].into_iter().enumerate() {
        let file = File::create(&path).unwrap();
        for (c, name) in NAMES.iter().enumerate() {
            let builder = file.new_dataset::<f32>().shape(shape).chunk([4, 4, 4]).shuffle().deflate(5);
            let builder = match fill {
                Some(value) => builder.fill_value(value),
                None => builder,
            };
            let dataset = builder.create(*name).unwrap();
            // The first has nothing at all; a written chunk holds the fill value where nothing was written.
            if c > 0 {
                let (z, y, x) = (i..5, 2..3 + c, 5..12);
                let part = ndarray::Array3::from_shape_fn([z.len(), y.len(), x.len()], |(z, y, x)| f32::code(c, x, y, z));
                dataset.write_slice(&part, (z, y, x)).unwrap();
            }
        }
        file.close().unwrap();
        let file = File::open(&path).unwrap();
        let want: Vec<Vec<u64>> =
            NAMES.iter().map(|n| file.dataset(n).unwrap().read_raw::<f32>().unwrap().into_iter().map(Value::bits).collect()).collect();
        file.close().unwrap();
        for thickness in [1, 3, 4, 9] {
            let mut source = f32::take(opened(&path, &spec("zyx")).source);
            assert!(all(source.as_mut(), thickness) == want, "fill {fill:?}, {thickness} planes");
        }
    }
}

#[test]
fn chunks_that_left_out_filters_are_taken_as_they_are() {
    let dir = tempfile::tempdir().unwrap();
    let path = dir.path().join("s.h5");
    file::<f32>(&path, "zyx", &Storage { chunk: [9, 10, 4], gzip: Some(1), shuffle: true, ..Storage::default() });
    // The first chunk of every dataset becomes one that was not compressed, and one that was neither: size, filter mask and offsets of
    // a key stand before the address of its chunk (HDF5 File Format Specification 3.0, III.A.1). Filters may be left out by who writes.
    let mut bytes = std::fs::read(&path).unwrap();
    let plain: Vec<u8> = (0..360).flat_map(|i| (i as f32).sqrt().to_le_bytes()).collect();
    let shuffled: Vec<u8> = (0..4).flat_map(|k| plain.iter().skip(k).step_by(4).copied().collect::<Vec<_>>()).collect();
    let trees: Vec<usize> = (0..bytes.len() - 8).filter(|&i| bytes[i..].starts_with(b"TREE\x01")).collect();
    assert_eq!(trees.len(), 3);
    for (tree, (mask, values)) in trees.into_iter().zip([(2u32, &shuffled), (3, &plain), (2, &shuffled)]) {
        let end = bytes.len() as u64;
        bytes.extend(values);
        bytes[tree + 24..][..4].copy_from_slice(&(values.len() as u32).to_le_bytes());
        bytes[tree + 28..][..4].copy_from_slice(&mask.to_le_bytes());
        bytes[tree + 64..][..8].copy_from_slice(&end.to_le_bytes());
    }
    // The end of the file is the third address of the superblock.
    let end = (bytes.len() as u64).to_le_bytes();
    bytes[24 + 2 * 8..][..8].copy_from_slice(&end);
    std::fs::write(&path, bytes).unwrap();
    let file = File::open(&path).unwrap();
    let want: Vec<Vec<u64>> =
        NAMES.iter().map(|n| file.dataset(n).unwrap().read_raw::<f32>().unwrap().into_iter().map(Value::bits).collect()).collect();
    drop(file);
    assert_eq!(f32::from_bits(want[1][N[0]] as u32), 2.0, "what was put in");
    let source = f32::take(opened(&path, &spec("zyx")).source);
    let bytes = Pool::new(2).unwrap().run(move || source.reader_bytes(9));
    assert!(bytes < CACHE, "{bytes} bytes");
    for thickness in [1, 2, 3, 9] {
        let mut source = f32::take(opened(&path, &spec("zyx")).source);
        assert!(all(source.as_mut(), thickness) == want, "{thickness} planes");
    }
}

#[test]
fn what_lies_over_chunks_sees_no_difference() {
    let dir = tempfile::tempdir().unwrap();
    let write = |name: &str, storage: Option<Storage>| {
        let path = dir.path().join(name);
        let file = File::create(&path).unwrap();
        for (c, name) in ["u", "v", "w", "bx", "by", "bz", "rho"].into_iter().enumerate() {
            let (shape, mut values) = array::<f64>("zyx", c);
            // A density above 0.
            values.iter_mut().for_each(|v| *v = if name == "rho" { v.abs() + 1.0 } else { *v });
            match &storage {
                Some(storage) => store::<f64>(&file, name, &shape, storage),
                None => file.new_dataset::<f64>().shape(&shape[..]).create(name).unwrap(),
            }
            .write_raw(&values)
            .unwrap();
        }
        file.close().unwrap();
        path
    };
    let plain = write("plain.h5", None);
    let whole = || InputSpec { magnetic: names(&["bx", "by", "bz"]), velocity: names(&NAMES), ..spec("zyx") };
    let cut = |a: (i64, i64), b: (i64, i64), c: (i64, i64)| [a, b, c].map(|(a, b)| Some(Stretch::Indices(a, b)));
    let specs = [
        InputSpec { region: cut((3, 10), (2, 9), (1, 8)), ..whole() },
        InputSpec { region: cut((-4, 7), (8, 15), (5, 13)), ..whole() },
        InputSpec { staggering: ropewalk::read::Staggering::LowerFaces, ..whole() },
        InputSpec { staggering: ropewalk::read::Staggering::UpperFaces, density: Some("rho".into()), ..whole() },
    ];
    for chunk in [[4, 4, 4], [9, 2, 3], [1, 10, 12], [2, 10, 5]] {
        let packed = write("packed.h5", Some(Storage { chunk, gzip: Some(1), shuffle: true, ..Storage::default() }));
        for spec in &specs {
            let want = all(f64::take(opened(&plain, spec).source).as_mut(), 3);
            for thickness in [1, 2, 4, 16] {
                let got = all(f64::take(opened(&packed, spec).source).as_mut(), thickness);
                assert!(got == want, "{chunk:?} {:?} {:?} {thickness}", spec.region, spec.staggering);
            }
        }
    }
}

#[test]
fn planes_to_decode_together_are_told() {
    let dir = tempfile::tempdir().unwrap();
    let path = dir.path().join("s.h5");
    let told = |chunk, gzip, spec: &InputSpec| {
        file::<f32>(&path, "zyx", &Storage { chunk, gzip, ..Storage::default() });
        let source = f32::take(opened(&path, spec).source);
        (source.natural_planes(), source.decoded_planes())
    };
    let gzip = Some(1);
    assert_eq!(told([9, 2, 2], gzip, &spec("zyx")), (9, 9));
    assert_eq!(told([4, 2, 2], gzip, &spec("zyx")), (4, 4));
    assert_eq!(told([1, 10, 12], gzip, &spec("zyx")), (1, 1));
    // Values of chunks that are not compressed are reached one by one.
    assert_eq!(told([9, 2, 2], None, &spec("zyx")), (9, 1));
    let part = InputSpec { region: [None, None, Some(Stretch::Indices(2, 7))], ..spec("zyx") };
    assert_eq!(told([9, 2, 2], gzip, &part), (5, 5));
}

#[test]
fn chunks_left_behind_by_thin_blocks_are_not_read_again() {
    let dir = tempfile::tempdir().unwrap();
    let path = dir.path().join("s.h5");
    file::<f32>(&path, "zyx", &Storage { chunk: [4, 3, 5], gzip: Some(6), ..Storage::default() });
    let mut source = f32::take(opened(&path, &spec("zyx")).source);
    check_planes(source.as_mut(), 0, 0, 1, "first plane");
    // Nothing is left of the file but its length.
    let length = std::fs::metadata(&path).unwrap().len();
    std::fs::write(&path, vec![0; length as usize]).unwrap();
    for z in 1..4 {
        check_planes(source.as_mut(), 0, z, z + 1, "planes of the first chunks");
    }
    let mut store = vec![vec![0.0; N[0] * N[1]]; 3];
    let mut out: Vec<&mut [f32]> = store.iter_mut().map(|v| &mut v[..]).collect();
    assert!(source.read(4, 5, &mut out).is_err(), "the next chunks have to be read");
    // What was delivered to the end is let go.
    assert!(source.read(0, 1, &mut out).is_err(), "the first chunks are gone");
}

#[test]
fn any_number_of_threads_reads_the_same() {
    let dir = tempfile::tempdir().unwrap();
    let path = dir.path().join("s.h5");
    file::<f64>(&path, "zyx", &Storage { chunk: [2, 3, 5], gzip: Some(6), shuffle: true, ..Storage::default() });
    let mut held = Vec::new();
    for threads in [1, 2, 5] {
        let pool = Pool::new(threads).unwrap();
        pool.run(|| {
            let AnySource::F64(mut source) = open(&path.clone().into(), &spec("zyx")).unwrap().source else { unreachable!() };
            held.push(source.reader_bytes(2));
            check_planes(source.as_mut(), 0, 0, N[2], "threads");
        });
    }
    // Buffers go with the threads.
    assert!(held[0] < held[1] && held[1] < held[2], "{held:?}");
}
