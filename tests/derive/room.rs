//! What does not fit in memory goes through files: the same bits for any room, nothing left behind, refusals with figures.

use std::path::Path;

use ropewalk::base::error::Kind;
use ropewalk::base::observe::Silent;
use ropewalk::base::real::Real;
use ropewalk::derive::filter::{filter_needs, filtered};
use ropewalk::derive::{Needs, Room, z_lines, z_lines_needs};
use ropewalk::model::request::{Filter, FilterShape, Indicator as I, Scheme};
use ropewalk::model::rows::Need;
use ropewalk::model::source::{Fields, MemorySource, PlaneSource};
use ropewalk::space::grid::Grid;

use crate::common::{ALL_ROOM, Vector, each_row_within, plan, sampled};

/// The rooms between the least that a folder makes do and the last byte before everything fits in memory.
fn rooms(needs: Needs) -> Vec<u64> {
    assert!(needs.memory_with_scratch < needs.memory, "{needs:?}");
    let span = needs.memory - needs.memory_with_scratch;
    let mut all: Vec<u64> = (0..=6).map(|k| needs.memory_with_scratch + span * k / 7).collect();
    all.push(needs.memory - 1);
    all
}

fn nothing_left(folder: &Path) {
    assert_eq!(std::fs::read_dir(folder).unwrap().count(), 0, "files are left in {}", folder.display());
}

/// Nothing smooth and nothing alike in any two components.
fn rough([x, y, z]: Vector) -> [f64; 7] {
    let f = |c: f64| ((3.0 + c) * x + z).sin() * (y * c).exp() + (y * 5.0 + c * x).cos() + z * z;
    [f(0.1), f(0.2), f(0.3), f(0.4), f(0.5), f(0.6), f(0.7)]
}

fn bits<T: Real>(source: &mut MemorySource<T>, list: &[I], room: &Room<'_>, planes: usize) -> Vec<u64> {
    let need = Need { strain: true, divergence: true, truncation: true, ..Need::default() };
    let mut bits = Vec::new();
    each_row_within(source, &plan(Scheme::Spectral, list), need, planes, room, |_, _, r| {
        for row in [&r.w2, &r.strain2, &r.div_u, &r.div_u_miss, &r.j2, &r.indicators[0]] {
            bits.extend(row.iter().map(|v| v.wide().to_bits()));
        }
    });
    bits
}

fn z_lines_are_the_same<T: Real>(list: &[I]) {
    let grid = Grid::periodic([19, 11, 14], [1.0, 0.8, 1.2]);
    let fields = Fields { buoyancy: true, ..Fields::BOTH };
    let mut source = sampled::<T, 7>(&grid, fields, rough);
    let in_memory = bits(&mut source, list, &ALL_ROOM, 5);
    assert!(in_memory.iter().any(|b| *b != 0));
    let folder = tempfile::tempdir().unwrap();
    for (k, bytes) in rooms(z_lines_needs(&grid, fields, size_of::<T>(), 1)).into_iter().enumerate() {
        let room = Room { bytes, scratch: Some(folder.path()) };
        let lines = z_lines(&mut source, &[true; 7], &room, &Silent).unwrap();
        assert!(!lines.is_in_memory(), "{bytes}");
        if cfg!(unix) {
            nothing_left(folder.path());
        }
        drop(lines);
        assert!(bits(&mut source, list, &room, k + 1) == in_memory, "{} {bytes} bytes", T::NAME);
        nothing_left(folder.path());
    }
}

#[test]
fn derivatives_along_z_are_the_same_bits_for_any_room() {
    z_lines_are_the_same::<f32>(&[I::BuoyancyGradient]);
    // Where buoyancy is not derived, its planes pass by.
    z_lines_are_the_same::<f64>(&[I::Lambda2]);
}

fn filtered_values<T: Real>(grid: &Grid, filter: &Filter, room: &Room<'_>) -> Vec<u64> {
    let mut source = sampled::<T, 7>(grid, Fields { buoyancy: true, ..Fields::BOTH }, rough);
    let mut out = filtered(&mut source, filter, room, &Silent).unwrap();
    assert_eq!((out.grid(), out.fields()), (grid, source.fields()));
    let cells = grid.plane_cells() * grid.n[2];
    let mut values = vec![T::ZERO; 7 * cells];
    // In parts, the last one first.
    for z in [grid.n[2] / 2..grid.n[2], 0..grid.n[2] / 2] {
        let planes = z.start * grid.plane_cells()..z.end * grid.plane_cells();
        out.read(z.start, z.end, &mut values.chunks_exact_mut(cells).map(|c| &mut c[planes.clone()]).collect::<Vec<_>>()).unwrap();
    }
    values.into_iter().map(|v| v.wide().to_bits()).collect()
}

fn filters_are_the_same<T: Real>(grid: &Grid) {
    let folder = tempfile::tempdir().unwrap();
    let fields = Fields { buoyancy: true, ..Fields::BOTH };
    for shape in [FilterShape::Sharp, FilterShape::Gaussian] {
        let filter = Filter { shape, width: 0.23 };
        let in_memory = filtered_values::<T>(grid, &filter, &ALL_ROOM);
        assert!(in_memory.iter().any(|b| *b != 0));
        for bytes in rooms(filter_needs(grid, fields, size_of::<T>(), 1)) {
            let room = Room { bytes, scratch: Some(folder.path()) };
            assert!(filtered_values::<T>(grid, &filter, &room) == in_memory, "{filter} {} {bytes} bytes", T::NAME);
            nothing_left(folder.path());
        }
    }
}

#[test]
fn filtered_fields_are_the_same_bits_for_any_room() {
    for grid in [Grid::periodic([19, 11, 14], [1.0, 0.8, 1.2]), Grid::periodic([12, 37, 5], [1.0, 2.0, 0.9])] {
        filters_are_the_same::<f32>(&grid);
        filters_are_the_same::<f64>(&grid);
    }
}

#[test]
fn what_fits_nowhere_is_refused_with_figures_and_what_else_there_is() {
    let grid = Grid::periodic([20, 16, 32], [1.0; 3]);
    let mut source = sampled::<f32, 3>(&grid, Fields::VELOCITY, |p| p);
    // Three components of 10240 cells in four bytes; a row of all planes, which is more than a plane of all components.
    let needs = z_lines_needs(&grid, Fields::VELOCITY, 4, 1);
    assert_eq!(needs, Needs { memory: 122_880, memory_with_scratch: 3840, disk: 122_880 });
    let folder = tempfile::tempdir().unwrap();
    let mut refused = |bytes, scratch| {
        let e = z_lines(&mut source, &[true; 3], &Room { bytes, scratch }, &Silent).unwrap_err();
        assert_eq!(e.kind(), Kind::Limit);
        e.to_string()
    };
    let told = refused(122_879, None);
    for part in [
        "spectral derivatives along z: expected at most 120.0 KiB, found a need of 120.0 KiB; hint: a --memory that is larger by 1MiB",
        "a folder for what does not fit, with which 3.8 KiB of memory do and 120.0 KiB of disk are filled",
        "--derivative fd8, which derives waves up to k dx = 1.34 within 1 % and leaves out 35 % of the gradient variance",
        "run.json of such a run states the share of the snapshot itself",
    ] {
        assert!(told.contains(part), "{told}");
    }
    let told = refused(3839, Some(folder.path()));
    assert!(told.contains("expected at most 3.7 KiB, found a need of 3.8 KiB") && told.contains("fd8"), "{told}");

    let filter = Filter { shape: FilterShape::Sharp, width: 0.3 };
    // The components, and 11 coefficients of 16 bytes for every row; with a folder a plane of both.
    let needs = filter_needs(&grid, Fields::VELOCITY, 4, 1);
    assert_eq!(needs, Needs { memory: 122_880 + 90_112, memory_with_scratch: 5632, disk: 122_880 + 90_112 });
    let e = filtered(&mut source, &filter, &Room { bytes: needs.memory - 1, scratch: None }, &Silent).err().unwrap();
    assert_eq!(e.kind(), Kind::Limit);
    assert!(e.to_string().contains("a low-pass filter: expected at most 208.0 KiB, found a need of 208.0 KiB"), "{e}");
    let missing = folder.path().join("missing");
    let e = filtered(&mut source, &filter, &Room { bytes: 10_000, scratch: Some(&missing) }, &Silent).err().unwrap();
    assert_eq!(e.kind(), Kind::Output);
    assert!(e.to_string().contains("missing: filtered fields: expected a folder to write 120.0 KiB in"), "{e}");
}
