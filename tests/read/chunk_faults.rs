//! Damaged chunks of HDF5 files: what is told of them.

use std::path::Path;

use ::hdf5::File;
use ropewalk::base::error::Kind;
use ropewalk::model::source::AnySource;
use ropewalk::read::open;

use crate::files::*;

/// Three components in chunks of 4 planes, 5 rows, 12 values; of `v`, the chunk that begins at plane 4 and row 5 stands at the place returned.
fn write(path: &Path, gzip: bool, checksum: bool) -> (u64, usize) {
    let file = File::create(path).unwrap();
    for (c, name) in ["u", "v", "w"].into_iter().enumerate() {
        let (shape, values) = array::<f32>("zyx", c);
        let builder = file.new_dataset::<f32>().shape(shape).chunk([4, 5, 12]);
        let builder = if gzip { builder.shuffle().deflate(6) } else { builder };
        let builder = if checksum { builder.fletcher32() } else { builder };
        builder.create(name).unwrap().write_raw(&values).unwrap();
    }
    let dataset = file.dataset("v").unwrap();
    let all = (0..6).map(|i| dataset.chunk_info(i).unwrap());
    let place = all.into_iter().find(|c| c.offset == [4, 5, 0]).map(|c| (c.addr, c.size as usize)).unwrap();
    drop(dataset);
    file.close().unwrap();
    place
}

/// What is told of the planes, with the folder of the test written as `DIR`.
fn told(dir: &Path, path: &Path, z: std::ops::Range<usize>, change: impl FnOnce()) -> Option<String> {
    let AnySource::F32(mut source) = open(&path.to_path_buf().into(), &spec("zyx")).unwrap().source else { unreachable!() };
    change();
    let mut store = vec![vec![0.0; z.len() * N[0] * N[1]]; 3];
    let mut out: Vec<&mut [f32]> = store.iter_mut().map(|v| &mut v[..]).collect();
    let e = source.read(z.start, z.end, &mut out).err()?;
    assert_eq!(e.kind(), Kind::Input);
    Some(e.to_string().replace(&dir.display().to_string(), "DIR"))
}

fn changed(path: &Path, change: impl FnOnce(&mut Vec<u8>)) {
    let mut bytes = std::fs::read(path).unwrap();
    change(&mut bytes);
    std::fs::write(path, bytes).unwrap();
}

const AT: &str = "in the chunk that begins at 4,5,0";
const HINT: &str = "hint: the file is damaged: copy or write it again";

#[test]
fn a_damaged_chunk_is_named() {
    let dir = tempfile::tempdir().unwrap();
    let path = dir.path().join("s.h5");
    for (gzip, checksum, expected) in
        [(true, false, "gzip data of 960 bytes"), (true, true, "the checksum "), (false, true, "the checksum ")]
    {
        let (byte, size) = write(&path, gzip, checksum);
        changed(&path, |bytes| bytes[byte as usize + size / 2..][..8].iter_mut().for_each(|b| *b ^= 0x5a));
        let text = told(dir.path(), &path, 3..9, || {}).expect("a fault");
        assert!(text.starts_with(&format!("cannot read values: DIR/s.h5: /v: expected {expected}")), "{text}");
        assert!(text.contains(AT) && text.ends_with(HINT), "{text}");
        // Planes beside it can be read.
        assert_eq!(told(dir.path(), &path, 0..4, || {}), None);
        assert_eq!(told(dir.path(), &path, 8..9, || {}), None);
    }
}

#[test]
fn what_ends_too_early_is_named() {
    let dir = tempfile::tempdir().unwrap();
    let path = dir.path().join("s.h5");
    // The file loses its end after it was opened.
    let (byte, size) = write(&path, true, false);
    let cut = || changed(&path, |bytes| bytes.truncate(byte as usize + size - 1));
    assert_eq!(
        told(dir.path(), &path, 4..8, cut).unwrap(),
        format!("cannot read values: DIR/s.h5: /v: expected {size} bytes {AT}, found the end of the file; {HINT}")
    );
    // A chunk that is another stream of fewer values.
    let (byte, _) = write(&path, true, false);
    let short = [0x78, 0x9c, 0x4b, 0x4c, 0x4a, 0x06, 0x00, 0x02, 0x4d, 0x01, 0x27];
    changed(&path, |bytes| bytes[byte as usize..][..short.len()].copy_from_slice(&short));
    assert_eq!(
        told(dir.path(), &path, 4..8, || {}).unwrap(),
        format!("cannot read values: DIR/s.h5: /v: expected gzip data of 960 bytes {AT}, found 3 bytes; {HINT}")
    );
}

#[test]
fn damaged_indices_end_in_a_message() {
    let dir = tempfile::tempdir().unwrap();
    let path = dir.path().join("s.h5");
    write(&path, true, false);
    let whole = std::fs::read(&path).unwrap();
    let trees: Vec<usize> = (0..whole.len() - 8).filter(|&i| whole[i..].starts_with(b"TREE\x01")).collect();
    assert_eq!(trees.len(), 3, "B-trees of chunks");
    // Every byte of the tree of `u` that stands for something is damaged in turn: it is either noticed or without effect.
    for at in 0..24 + 6 * 48 + 40 {
        let mut bytes = whole.clone();
        bytes[trees[0] + at] ^= 0x81;
        std::fs::write(&path, bytes).unwrap();
        match open(&path.clone().into(), &spec("zyx")) {
            Err(e) => assert_eq!(e.kind(), Kind::Input, "byte {at}: {e}"),
            Ok(_) => {
                told(dir.path(), &path, 0..9, || {});
            }
        }
    }
}
