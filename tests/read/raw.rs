//! Files without a header: every layout gives the values that were written, every wrong size its hint.

use std::path::Path;

use ropewalk::base::error::Kind;
use ropewalk::model::source::Fields;
use ropewalk::read::{InputSpec, RawLayout};

use crate::files::{names, opened, spec};
use crate::flows::*;

const N: [usize; 3] = [5, 4, 3];

fn layout(double: bool, big_endian: bool, offset: u64, record_markers: Option<u8>) -> RawLayout {
    RawLayout { double, big_endian, shape: vec![N[2], N[1], N[0]], offset, record_markers }
}

fn raw(layout: RawLayout) -> InputSpec {
    InputSpec { raw: Some(layout), ..spec("zyx") }
}

fn bytes(values: &[f64], l: &RawLayout) -> Vec<u8> {
    if l.double { doubles(values, l.big_endian) } else { singles(values, l.big_endian) }
}

fn marker(value: i64, l: &RawLayout) -> Vec<u8> {
    let mut out = if l.record_markers == Some(4) { (value as i32).to_be_bytes().to_vec() } else { value.to_be_bytes().to_vec() };
    if !l.big_endian {
        out.reverse();
    }
    out
}

/// A Fortran record, where the layout has records.
fn record(body: Vec<u8>, l: &RawLayout) -> Vec<u8> {
    if l.record_markers.is_none() {
        return body;
    }
    let m = marker(body.len() as i64, l);
    [m.clone(), body, m].concat()
}

fn check(path: &Path, own: &InputSpec, components: usize) {
    let got = values(path, own);
    assert_eq!(got.len(), components);
    for (c, values) in got.iter().enumerate() {
        assert_eq!(*values, coded(N, c), "component {c}");
    }
}

#[test]
fn every_type_offset_and_record_in_one_file() {
    let dir = tempfile::tempdir().unwrap();
    for double in [false, true] {
        for big in [false, true] {
            for (offset, markers) in [(0, None), (13, None), (0, Some(4)), (100, Some(4)), (0, Some(8)), (7, Some(8))] {
                let l = layout(double, big, offset, markers);
                let head = vec![0xee; offset as usize];
                for components in [3, 6] {
                    let each: Vec<u8> = (0..components).flat_map(|c| record(bytes(&coded(N, c), &l), &l)).collect();
                    let path = write(dir.path(), "flow.dat", &[head.clone(), each].concat());
                    check(&path, &raw(l.clone()), components);
                    let all: Vec<f64> = (0..components).flat_map(|c| coded(N, c)).collect();
                    let path = write(dir.path(), "flow.dat", &[head.clone(), record(bytes(&all, &l), &l)].concat());
                    check(&path, &raw(l.clone()), components);
                    // Components together at every sample.
                    let cells = all.len() / components;
                    let mixed: Vec<f64> =
                        (0..cells).flat_map(|i| (0..components).map(move |c| (c, i))).map(|(c, i)| all[c * cells + i]).collect();
                    let path = write(dir.path(), "flow.dat", &[head.clone(), record(bytes(&mixed, &l), &l)].concat());
                    check(&path, &InputSpec { order: "zyxc".into(), ..raw(l.clone()) }, components);
                }
            }
        }
    }
}

#[test]
fn subrecords_are_joined() {
    // Compilers cut records beyond 2 GiB; the convention does not depend on the length. Cuts go through values.
    let dir = tempfile::tempdir().unwrap();
    let l = layout(false, false, 0, Some(4));
    let mut all = Vec::new();
    for c in 0..3 {
        let body = bytes(&coded(N, c), &l);
        let parts: Vec<&[u8]> = body.chunks(101).collect();
        for (i, part) in parts.iter().enumerate() {
            let sign = |negative: bool| if negative { -(part.len() as i64) } else { part.len() as i64 };
            all.extend(marker(sign(i + 1 < parts.len()), &l));
            all.extend(*part);
            all.extend(marker(sign(i > 0), &l));
        }
    }
    check(&write(dir.path(), "flow.dat", &all), &raw(l.clone()), 3);
    // One that ends too early.
    let cut = write(dir.path(), "cut.dat", &all[..all.len() - 50]);
    let (kind, text) = fault(dir.path(), &cut.into(), &raw(l));
    assert_eq!(kind, Kind::Input);
    assert_eq!(
        text,
        "cannot read the records: DIR/cut.dat: expected a length marker at byte 742, found the end of the file at 742; \
         hint: the file is truncated, or has no records"
    );
}

#[test]
fn names_count_the_components() {
    let dir = tempfile::tempdir().unwrap();
    let l = layout(false, false, 0, None);
    let cells = N.iter().product::<usize>();
    let with_density = |components: usize| {
        let mut all: Vec<f64> = (0..components).flat_map(|c| coded(N, c)).collect();
        all.extend(vec![4.0; cells]);
        write(dir.path(), "flow.dat", &bytes(&all, &l))
    };
    // Velocity, magnetic field, buoyancy, density.
    let named = InputSpec {
        velocity: names(&["a", "b", "c"]),
        magnetic: names(&["d", "e", "f"]),
        buoyancy: Some("g".into()),
        density: Some("h".into()),
        ..raw(l.clone())
    };
    let path = with_density(7);
    let got = opened(&path, &named);
    assert_eq!(got.source.fields(), Fields { velocity: true, magnetic: true, buoyancy: true, compressible: true });
    assert_eq!(got.datasets, ["a", "b", "c", "d", "e", "f", "g", "h"].map(|n| format!("flow.dat:{n}")));
    assert_eq!(got.components, got.datasets[..7]);
    let all = values(&path, &named);
    for (c, v) in all.iter().enumerate() {
        let factor = if (3..6).contains(&c) { 0.5 } else { 1.0 };
        assert_eq!(*v, coded(N, c).iter().map(|v| v * factor).collect::<Vec<_>>(), "component {c}");
    }
    // A magnetic field alone.
    let path = with_density(3);
    let own = InputSpec { magnetic: names(&["bx", "by", "bz"]), density: Some("rho".into()), ..raw(l.clone()) };
    let got = opened(&path, &own);
    assert_eq!(got.source.fields(), Fields { magnetic: true, compressible: true, ..Fields::default() });
    // A velocity alone: the density only tells that the flow is compressible.
    let own = InputSpec { velocity: names(&["flow"]), density: Some("rho".into()), ..raw(l.clone()) };
    let got = opened(&path, &own);
    assert_eq!(got.source.fields(), Fields { velocity: true, compressible: true, ..Fields::default() });
    assert_eq!(got.notes, ["the density is not read: only the magnetic field is divided by its root"]);
    check(&path, &own, 3);
}

#[test]
fn one_file_a_component() {
    let dir = tempfile::tempdir().unwrap();
    let l = layout(true, true, 5, Some(4));
    for (c, name) in ["ux", "uy", "uz", "bx", "by", "bz", "theta"].into_iter().enumerate() {
        write(dir.path(), &format!("{name}_0010.bin"), &[vec![0; 5], record(bytes(&coded(N, c), &l), &l)].concat());
    }
    let path = dir.path().join("{field}_0010.bin");
    let got = opened(&path, &raw(l.clone()));
    assert_eq!(got.name, "0010");
    assert_eq!(got.datasets, ["ux", "uy", "uz", "bx", "by", "bz"].map(|n| format!("{n}_0010.bin")));
    check(&path, &raw(l.clone()), 6);
    check(&path, &InputSpec { buoyancy: Some("theta".into()), ..raw(l.clone()) }, 7);
    let own = InputSpec { velocity: names(&["ux", "uy", "uz"]), ..raw(l.clone()) };
    check(&path, &own, 3);
    // A file that holds a whole field.
    let all: Vec<u8> = (0..3).flat_map(|c| record(bytes(&coded(N, c), &l), &l)).collect();
    write(dir.path(), "velocity.7", &[vec![0; 5], all].concat());
    let path = dir.path().join("{field}.7");
    assert_eq!(opened(&path, &raw(l.clone())).datasets, ["velocity.7:velocity[0]", "velocity.7:velocity[1]", "velocity.7:velocity[2]"]);
    check(&path, &raw(l), 3);
}

#[test]
fn planes_and_other_orders() {
    let dir = tempfile::tempdir().unwrap();
    let n = [5, 4, 1];
    let l = |shape: &[usize]| RawLayout { shape: shape.to_vec(), ..layout(true, false, 0, None) };
    let two: Vec<f64> = (0..2).flat_map(|c| coded(n, c)).collect();
    let path = write(dir.path(), "p.dat", &doubles(&two, false));
    let own = InputSpec { velocity: names(&["u", "v"]), ..raw(l(&[4, 5])) };
    let got = opened(&path, &own);
    assert_eq!((got.source.grid().n, &got.notes[..]), (n, &["the velocity has two components: the third is taken as 0".to_string()][..]));
    assert_eq!(values(&path, &own), [coded(n, 0), coded(n, 1), vec![0.0; 20]]);
    // Nothing named: two components are a velocity in a plane.
    assert_eq!(values(&path, &raw(l(&[4, 5]))), [coded(n, 0), coded(n, 1), vec![0.0; 20]]);
    // x slowest.
    let turned: Vec<f64> = (0..3).flat_map(|c| (0..60).map(move |i| code(c, i / 12, i / 3 % 4, i % 3))).collect();
    let path = write(dir.path(), "x.dat", &doubles(&turned, false));
    check(&path, &InputSpec { order: "xyz".into(), ..raw(l(&[5, 4, 3])) }, 3);
}

#[test]
fn sizes_that_do_not_fit() {
    let dir = tempfile::tempdir().unwrap();
    let check = |l: RawLayout, bytes: usize, text: &str| {
        let path = write(dir.path(), "f.dat", &vec![0; bytes]);
        let want = format!("cannot read the file without a header: DIR/f.dat: expected {text}");
        assert_eq!(fault(dir.path(), &path.into(), &raw(l)), (Kind::Input, want));
    };
    // 60 samples: 240 bytes a component in f32, 480 in f64.
    let single = layout(false, false, 0, None);
    let wanted = "720 or 1440 bytes (3 or 6 components of 3x4x5 float32 values), found";
    check(single.clone(), 2880, &format!("{wanted} 2880; hint: float64 would fit"));
    check(single.clone(), 728, &format!("{wanted} 728; hint: 4-byte record markers would fit"));
    check(single.clone(), 744, &format!("{wanted} 744; hint: 4-byte record markers would fit"));
    check(single.clone(), 768, &format!("{wanted} 768; hint: 8-byte record markers would fit"));
    check(single.clone(), 240, &format!("{wanted} 240; hint: 1 component would fit"));
    check(single.clone(), 960, &format!("{wanted} 960; hint: 4 components would fit"));
    check(single.clone(), 733, &format!("{wanted} 733; hint: an offset of 13 bytes would fit"));
    check(single.clone(), 700, &format!("{wanted} 700; hint: check shape, precision and offset"));
    check(
        layout(true, false, 16, None),
        736,
        "1456 or 2896 bytes (3 or 6 components of 3x4x5 float64 values), found 736; hint: float32 would fit",
    );
    let named = InputSpec { velocity: names(&["u", "v", "w"]), ..raw(single.clone()) };
    let path = write(dir.path(), "f.dat", &[0; 1440]);
    assert_eq!(
        fault(dir.path(), &path.into(), &named).1,
        "cannot read the file without a header: DIR/f.dat: expected 720 bytes (3 components of 3x4x5 float32 values), found 1440; \
         hint: 6 components would fit"
    );
}

#[test]
fn records_that_do_not_fit() {
    let dir = tempfile::tempdir().unwrap();
    let check = |l: &RawLayout, bytes: &[u8], text: &str| {
        let path = write(dir.path(), "f.dat", bytes);
        assert_eq!(fault(dir.path(), &path.into(), &raw(l.clone())), (Kind::Input, format!("cannot read the records: DIR/f.dat: {text}")));
    };
    let little = layout(false, false, 0, Some(4));
    let big = layout(false, true, 0, Some(4));
    let three = |l: &RawLayout| -> Vec<u8> { (0..3).flat_map(|c| record(bytes(&coded(N, c), l), l)).collect() };
    check(
        &little,
        &three(&big),
        "record 1 at byte 0: expected a length of 240 or 720 or 1440 bytes, as the shape says, found -268435456; \
         hint: the markers fit big-endian values",
    );
    check(
        &little,
        &three(&layout(false, false, 0, Some(8)))[8..],
        "record 1 at byte 0: expected a length of 240 or 720 or 1440 bytes, as the shape says, found 1056964608; \
         hint: check shape, precision, byte order and width of the markers",
    );
    let mut damaged = three(&little);
    damaged[244] = 241;
    check(
        &little,
        &damaged,
        "record 1 at byte 0: expected the marker 240 behind the record, found 241; hint: the file is damaged, or has no records",
    );
    // A record that was not cut has a positive marker behind it.
    let mut damaged = three(&little);
    damaged[244..248].copy_from_slice(&(-240i32).to_le_bytes());
    check(
        &little,
        &damaged,
        "record 1 at byte 0: expected the marker 240 behind the record, found -240; hint: the file is damaged, or has no records",
    );
    let plain: Vec<u8> = (0..3).flat_map(|c| bytes(&coded(N, c), &little)).collect();
    check(
        &little,
        &plain,
        "record 1 at byte 0: expected a length of 240 or 720 or 1440 bytes, as the shape says, found 1056964608; \
         hint: its size fits a file without record markers",
    );
    // Two records where three belong.
    let path = write(dir.path(), "f.dat", &three(&little)[..496]);
    assert_eq!(
        fault(dir.path(), &path.into(), &raw(little)).1,
        "cannot read the file without a header: DIR/f.dat: expected 720 or 1440 bytes and record markers (3 or 6 components of 3x4x5 \
         float32 values), found 496; hint: 2 components would fit"
    );
}

#[test]
fn layouts_that_make_no_sense() {
    let dir = tempfile::tempdir().unwrap();
    let path = write(dir.path(), "f.dat", &[0; 720]);
    let check = |own: InputSpec, text: &str| {
        let want = format!("cannot use the layout of a file without a header: {text}");
        assert_eq!(fault(dir.path(), &path.clone().into(), &own), (Kind::Usage, want));
    };
    let with = |shape: &[usize]| raw(RawLayout { shape: shape.to_vec(), ..layout(false, false, 0, None) });
    check(with(&[]), "shape: expected 3 numbers of samples, as --order zyx names the axes, found none; hint: a plane has two");
    check(with(&[5, 4, 3, 3]), "shape: expected 3 numbers of samples, as --order zyx names the axes, found 5,4,3,3; hint: a plane has two");
    check(with(&[0, 4, 3]), "shape: expected possible numbers of samples, found 0,4,3");
    check(with(&[1 << 40, 1 << 40, 3]), "shape: expected possible numbers of samples, found 1099511627776,1099511627776,3");
    check(raw(layout(false, false, 0, Some(2))), "record markers: expected 4 or 8 bytes, found 2");
    assert_eq!(
        fault(dir.path(), &dir.path().to_path_buf().into(), &with(&[3, 4, 5])).1,
        "cannot read the file without a header: DIR: expected a file, found a folder; \
         hint: for one file a component write {field} for its name in the path"
    );
    let l = layout(false, false, 0, Some(4));
    let each: Vec<u8> = (0..3).flat_map(|c| record(bytes(&coded(N, c), &l), &l)).collect();
    let path = write(dir.path(), "r.dat", &each);
    assert_eq!(
        fault(dir.path(), &path.into(), &InputSpec { order: "zyxc".into(), ..raw(l.clone()) }),
        (
            Kind::Usage,
            "cannot read the file without a header: DIR/r.dat: --order: expected components in one record where c comes last, found 3 \
             records; hint: every component has a record of its own: drop the c"
                .into()
        )
    );
    assert_eq!(
        fault(dir.path(), &dir.path().join("none_{field}.dat").into(), &raw(l.clone())).1,
        "cannot find a velocity or magnetic field: DIR/none_{field}.dat: expected files with u,v,w | ux,uy,uz | vx,vy,vz | velocity | \
         bx,by,bz | magnetic | b in place of {field}, found none of them; hint: --velocity U,V,W or --magnetic BX,BY,BZ names them (or \
         one name of an array with a component axis)"
    );
    let own = InputSpec { velocity: names(&["u", "v", "w"]), ..raw(l) };
    assert_eq!(
        fault(dir.path(), &dir.path().join("none_{field}.dat").into(), &own).1,
        "cannot find the file: DIR/none_u.dat: found nothing; hint: --velocity U,V,W or --magnetic BX,BY,BZ names them (or one name of \
         an array with a component axis)"
    );
}
