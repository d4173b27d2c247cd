"""Label volumes against scipy.ndimage and numpy, and cut-outs against the snapshot they come from; read with h5py."""

import flows
import h5py
import labels
import numpy as np
import support

TWO_PI = (2 * np.pi,) * 3


def snapshots():
    """A demo snapshot, and one whose shape is no multiple of a chunk in any direction."""
    shape, lengths = (70, 30, 66), (3.3, 1.5, 3.5)
    path = support.WORK / "odd.h5"
    if not path.exists():
        flows.write(path, flows.solenoidal(5, shape, lengths, 14.0), flows.solenoidal(6, shape, lengths, 14.0))
    return (support.DEMO / "mhd_0002.h5", TWO_PI, 1e-5), (path, lengths, 1e-10)


def size(lengths):
    return ["--lengths", ",".join(repr(float(v)) for v in lengths)]


def check_label_volumes():
    """scipy.ndimage.label, joined through periodic faces; ids by smallest cell, objects below the smallest size left out."""
    for path, lengths, rounding in snapshots():
        flow = labels.Flow(path, lengths)
        specs, masks = [], {}
        for indicator, sign, fraction in (("vorticity", ">", 0.03), ("current", ">", 0.2), ("q", "<", 0.05)):
            values = flow.indicator(indicator)
            wanted = np.quantile(values, 1 - fraction if sign == ">" else fraction)
            level = labels.level_in_a_gap(values, wanted, 10 * np.finfo(np.float32).eps if rounding > 1e-8 else 1e-12)
            specs.append(f"{indicator}: {indicator} {sign} {level!r}")
            masks[indicator] = (values > level if sign == ">" else values < level, level)
        folder = support.run(path, *size(lengths), "--min-cells", 27, "--surfaces", "none", "--labels", *support.families(specs))
        counted = 0
        for name, (mask, level) in masks.items():
            wanted = np.zeros(mask.size, int)
            listed = [c for c in labels.objects(mask, 26) if len(c) >= 27]
            for number, cells in enumerate(listed, 1):
                wanted[cells] = number
            with h5py.File(folder / "labels" / path.stem / f"{name}.h5") as f:
                data = f["labels"]
                assert data.compression == "gzip" and data.shuffle and data.chunks == tuple(min(n, 64) for n in mask.shape), data.chunks
                assert data.dtype == np.uint32, data.dtype
                np.testing.assert_array_equal(data[...], wanted.reshape(mask.shape), name)
                support.close(f.attrs["level"], level, 1e-7, f"{name} level")
                support.close(f.attrs["spacing"], flow.h, 1e-15, f"{name} spacing")
                assert f.attrs["periodic"] == "xyz" and f.attrs["order"] == "zyx", dict(f.attrs)
                assert f.attrs["family"].startswith(f"{name}: {name} "), f.attrs["family"]
            counted += len(listed)
        assert counted > 30, f"only {counted} objects in {path.name}"


def wrapped(array, start, shape):
    """Part of a periodic array that may lie across faces; start and shape z first."""
    for axis, (first, n) in enumerate(zip(start, shape)):
        array = np.take(array, np.arange(first, first + n), axis, mode="wrap")
    return array


def check_cut_outs_hold_the_snapshot():
    """Every field to the bit, the mask as the label volume has it, positions; objects across faces and one that fills the box."""
    across, whole = 0, 0
    for path, lengths, _ in snapshots():
        specs = ["v: vorticity > 2.5 rms", "c: current > 2 rms", "web: vorticity > 0.9 rms", "p: vorticity > 0.6 peak"]
        # More than are held open at a time.
        options = ["--min-cells", 12, "--surfaces", "none", "--labels", "--cut-outs", "largest:30", "--cut-out-margin", 5]
        folder = support.run(path, *size(lengths), *options, *support.families(specs))
        with h5py.File(path) as f:
            snapshot = {name: f[name][...] for name in ("u", "v", "w", "bx", "by", "bz")}
            time = f.attrs.get("time")
        flow = labels.Flow(path, lengths)
        rows = {(r["family"], int(r["id"])): r for r in support.rows(folder)}
        for family in ("v", "c", "web", "p"):
            with h5py.File(folder / "labels" / path.stem / f"{family}.h5") as f:
                volume = f["labels"][...]
            files = sorted((folder / "cutouts" / path.stem / family).glob("*.h5"))
            sizes = sorted((int(r["cells"]) for (name, _), r in rows.items() if name == family), reverse=True)
            assert len(files) == min(30, len(sizes)), files
            told = []
            for file in files:
                number = int(file.stem)
                tag = f"{path.name} {family} {number}"
                with h5py.File(file) as f:
                    shape = f["u"].shape
                    start = np.rint(f.attrs["origin"] / flow.h).astype(int)[::-1]
                    support.close(f.attrs["origin"], start[::-1] * flow.h, 1e-12, f"{tag} origin", 1e-12)
                    support.close(f.attrs["lengths"], np.array(shape[::-1]) * flow.h, 1e-12, f"{tag} lengths")
                    assert f.attrs.get("time") == time and f.attrs["id"] == number, dict(f.attrs)
                    for name, values in snapshot.items():
                        assert f[name].dtype == values.dtype, name
                        np.testing.assert_array_equal(f[name][...], wrapped(values, start, shape), f"{tag} {name}")
                    mask = f["mask"][...]
                    np.testing.assert_array_equal(mask, wrapped(volume == number, start, shape), f"{tag} mask")
                    assert mask.sum() == int(rows[family, number]["cells"]), f"{tag}: {mask.sum()} cells"
                    support.close(f["indicator"][...].max(where=mask > 0, initial=0), float(rows[family, number]["peak"]), 1e-15, tag)
                    periodic = f.attrs["periodic"]
                full = "".join("xyz"[a] for a in range(3) if shape[2 - a] == flow.n[a])
                assert periodic == (full or "none"), f"{tag}: periodic {periodic}, full {full}"
                for a in range(3):
                    if shape[2 - a] < flow.n[a]:
                        # Five cells of margin on both sides, or as many more as make nine samples.
                        inside = np.flatnonzero(mask.any(tuple({0, 1, 2} - {2 - a})))
                        margins = inside[0], shape[2 - a] - 1 - inside[-1]
                        assert margins == (5, 5), f"{tag}: margins {margins} along {'xyz'[a]}"
                across += any(start < 0) or any(start + shape > flow.n[::-1])
                whole += full == "xyz"
                told.append(int(mask.sum()))
            assert sorted(told, reverse=True) == sizes[: len(told)], f"{family}: {told} are not the largest"
    assert across >= 4 and whole >= 1, f"{across} across faces, {whole} that fill the box"


def check_a_cut_out_is_a_snapshot():
    """The program finds the same object in its cut-out: as many cells, the same peak at the same place, to the bit."""
    for path, lengths, _ in snapshots():
        specs = ["v: vorticity > 2.5 rms", "c: current > 2 rms"]
        folder = support.run(path, *size(lengths), "--surfaces", "none", "--cut-outs", "largest:2", *support.families(specs))
        rows = {(r["family"], int(r["id"])): r for r in support.rows(folder)}
        for file in sorted((folder / "cutouts").rglob("*.h5")):
            with h5py.File(file) as f:
                triple = lambda name: ",".join(repr(float(v)) for v in f.attrs[name])
                options = ["--spacing", triple("spacing"), f"--origin={triple('origin')}", "--periodic", f.attrs["periodic"]]
                family, number, indicator = f.attrs["family"], int(f.attrs["id"]), f.attrs["indicator"]
                level = float(f.attrs["level"])
            again = support.rows(support.run(file, *options, "--surfaces", "none", "--family", f"again: {indicator} > {level!r}"))
            wanted = rows[family, number]
            same = [r for r in again if all(r[name] == wanted[name] for name in ("cells", "peak", "time", "level"))]
            assert len(same) == 1, f"{file}: {[(r['cells'], r['peak']) for r in again]}, wanted {wanted['cells']}, {wanted['peak']}"
            for a, name in enumerate("xyz"):
                length = lengths[a]
                for kind in ("peak", "centroid"):
                    off = float(same[0][f"{kind}_{name}"]) - float(wanted[f"{kind}_{name}"])
                    off = (off + 0.5 * length) % length - 0.5 * length
                    assert abs(off) < 1e-9 * length, f"{file}: {kind}_{name} off by {off}"


def check_named_cut_outs():
    """Ids of every family and of one; what is not there is told."""
    path, lengths, _ = snapshots()[0]
    specs = ["v: vorticity > 2.5 rms", "c: current > 2 rms"]
    folder = support.run(path, *size(lengths), "--surfaces", "none", "--cut-outs", "3,v:1,c:9999", *support.families(specs))
    found = sorted(str(f.relative_to(folder / "cutouts" / path.stem)) for f in (folder / "cutouts").rglob("*.h5"))
    assert found == ["c/000003.h5", "v/000001.h5", "v/000003.h5"], found
    warnings = support.results(folder)["snapshots"][0]["warnings"]
    assert "no cut-out, for want of a listed object: c:9999" in warnings, warnings
