"""One tilted vortex written by h5py and numpy in many layouts is read to one and the same catalogue."""

import csv

import flows
import h5py
import numpy as np
import support

LENGTHS = (2.0, 3.0, 2.5)
SHAPE = (36, 40, 24)  # nz, ny, nx
FAMILY = support.families(["vortex: vorticity > 0.3 volume", "core: q > 1 rms"])


def catalogue(path, *options):
    folder = support.run(path, "--lengths", ",".join(map(str, LENGTHS)), *options, *FAMILY)
    return (folder / "catalogue.csv").read_text(), support.results(folder)["snapshots"][0]["digest"]


def place(layout):
    folder = support.WORK / "layouts" / layout
    folder.mkdir(parents=True)
    return folder


def single():
    return np.ascontiguousarray(flows.ellipsoid(SHAPE, LENGTHS), "f4")


def canonical():
    path = place("canonical") / "vortex.h5"
    flows.write(path, single(), dtype="f4")
    text, digest = catalogue(path)
    assert text.count("\n") >= 3, text
    return text, digest


def check_every_layout_gives_the_same_catalogue():
    """Against h5py and numpy.save as writers."""
    field, wanted = single(), canonical()
    seen = []

    def same(path, *options):
        assert catalogue(path, *options) == wanted, f"{path.parent.name} {options}"
        seen.append(path.parent.name)

    def hdf5(layout, *options, **datasets):
        path = place(layout) / "vortex.h5"
        with h5py.File(path, "w") as f:
            for name, (values, settings) in datasets.items():
                f.create_dataset(name.replace("__", "/"), data=values, **settings)
        same(path, *options)

    names = ("u", "v", "w")
    packed = {"chunks": (7, 11, 24), "compression": "gzip", "shuffle": True}
    hdf5("chunked", **{n: (c, packed) for n, c in zip(names, field)})
    hdf5("big-endian", **{n: (c.astype(">f4"), {}) for n, c in zip(names, field)})
    hdf5("grouped", "--velocity", "flow/ux,flow/uy,flow/uz", **{f"flow__u{a}": (c, {}) for a, c in zip("xyz", field)})
    for order in ("xyz", "xzy", "yxz", "yzx", "zxy"):
        turned = [c.transpose(["zyx".index(a) for a in order]) for c in field]
        hdf5(f"order-{order}", "--order", order, **{n: (c, {}) for n, c in zip(names, turned)})
    hdf5("components-first", velocity=(field, {}))
    hdf5("components-last", "--order", "zyxc", velocity=(np.moveaxis(field, 0, -1), {}))
    hdf5("components-last-turned", "--order", "xyzc", velocity=(field.transpose(3, 2, 1, 0), {"compression": "gzip"}))

    folder = place("npy") / "vortex"
    folder.mkdir()
    for n, c in zip(names, field):
        np.save(folder / n, c)
    same(folder)
    folder = place("npy-fortran") / "vortex"
    folder.mkdir()
    for n, c in zip(names, field):
        # Indexed (x, y, z) in Fortran order: x is fastest in the file, which is the canonical order.
        np.save(folder / n, np.asfortranarray(c.transpose(2, 1, 0)))
    same(folder)
    path = place("npy-single") / "vortex.npy"
    np.save(path, np.ascontiguousarray(field.transpose(0, 3, 2, 1)))
    same(path, "--order", "cxyz")
    assert len(set(seen)) == 14, seen


def check_double_precision_reads_the_same_values():
    """Single-precision values stored in double are another precision with the same objects."""
    tables = []
    for dtype in ("f4", "f8"):
        path = place(f"precision-{dtype}") / "vortex.h5"
        flows.write(path, single(), dtype=dtype)
        tables.append(list(csv.DictReader(catalogue(path)[0].splitlines())))
    assert len(tables[0]) == len(tables[1]) > 1
    for one, two in zip(*tables):
        assert (one["family"], one["id"], one["class"]) == (two["family"], two["id"], two["class"])
        for name in ("volume", "peak", "surface_area", "viscous_share", "lamb_sin2"):
            # The volume family's level comes from bins a relative 2^-12 wide: a cell may cross it.
            support.close(float(one[name]), float(two[name]), 2e-3, f"{one['family']} {name}")


def check_the_vortex_is_found_where_it_was_put():
    """Against the closed form: the vortex is centred at 0.53 of the box, less half a cell for samples at cell corners."""
    path = place("position") / "vortex.h5"
    flows.write(path, flows.ellipsoid(SHAPE, LENGTHS), dtype="f8")
    folder = support.run(path, "--lengths", ",".join(map(str, LENGTHS)), "--family", "core: vorticity > 0.03 volume")
    found = support.rows(folder)
    assert len(found) == 1, found
    for axis, n, length in zip("xyz", SHAPE[::-1], LENGTHS):
        centre = 0.53 * length - 0.5 * length / n
        # The mask is symmetric about the centre to within one cell.
        support.close(float(found[0][f"centroid_{axis}"]), centre, 0.0, f"centroid_{axis}", absolute=0.5 * length / n)
