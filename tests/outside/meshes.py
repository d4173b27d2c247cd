"""Surface meshes as trimesh reads and measures them, against the catalogue."""

import flows
import labels
import numpy as np
import support
import trimesh


def parts(path):
    """The objects of a PLY file: id, mesh, the file's vertex records."""
    whole = trimesh.load(path, process=False)
    vertices = whole.metadata["_ply_raw"]["vertex"]["data"]
    owner = np.asarray(vertices["object"])
    assert (owner[whole.faces] == owner[whole.faces][:, :1]).all(), f"{path.name}: a face joins two objects"
    for id in np.unique(owner):
        own = np.flatnonzero(owner == id)
        faces = np.searchsorted(own, whole.faces[owner[whole.faces[:, 0]] == id])
        yield int(id), trimesh.Trimesh(whole.vertices[own], faces, process=False), vertices[own]


# Vertices keep this part of a cell from the cell centres.
CLEARANCE = 1e-4


def on_edges(vertices, flow):
    """Vertices that lie on an edge between neighbouring cell centres: which ones, the flat cell indices of both ends, and
    the position between them. The others are centres of loops of such vertices, or too near a cell centre to tell."""
    place = np.stack([vertices[a] for a in "xyz"], 1).astype(float) / flow.h
    nearest = np.rint(place)
    # Single precision keeps positions up to twice the box to a tenth of this.
    along = np.abs(place - nearest) > 0.5 * CLEARANCE
    which = np.flatnonzero(along.sum(1) == 1)
    along, place, nearest = along[which], place[which], nearest[which]
    lower = np.where(along, np.floor(place), nearest).astype(int)
    flat = lambda index: np.ravel_multi_index((index % flow.n).T[::-1], flow.n[::-1])
    return which, flat(lower), flat(lower + along), (place - lower)[along]


def compare_values(vertices, flow, values, level, tag):
    """Vertex values against numpy's fields, interpolated linearly along the edge of the grid. Returns how many were compared."""
    which, a, b, t = on_edges(vertices, flow)
    assert len(which) > 0.8 * len(vertices), f"{tag}: {len(which)} of {len(vertices)} vertices on edges"
    found = vertices[which]
    kept = (t > 1.5 * CLEARANCE) & (t < 1 - 1.5 * CLEARANCE)
    support.close(found["indicator"][kept], np.full(kept.sum(), level), 1e-5, f"{tag}: indicator away from cell centres")
    between = lambda at_a, at_b: (1 - t) * at_a + t * at_b
    ends = values.ravel()[a], values.ravel()[b]
    # The position is known to single precision, over which the indicator changes by its difference along the edge.
    off = np.abs(found["indicator"] - between(*ends)) - 1e-5 * abs(level) - 3e-5 * np.abs(ends[1] - ends[0])
    assert (off <= 0).all(), f"{tag}: indicator against numpy's, {(off > 0).sum()} of {len(off)} off"
    at_a, at_b = flow.vectors(a), flow.vectors(b)
    vectors = {letter: between(at_a[letter], at_b[letter]) for letter in at_a}
    speed = labels.norm(vectors["u"])
    support.close(found["speed"], speed, 1e-4, f"{tag}: speed", 1e-4 * np.sqrt((flow.u**2).sum(0).mean()))
    names = {f"cos_{name}": (p, q) for name, p, q in labels.COSINES if p in vectors and q in vectors}
    told = [n for n in vertices.dtype.names if n.startswith("cos_")]
    assert told == list(names), f"{tag}: vertex values {told}, wanted {list(names)}"
    for name, (p, q) in names.items():
        support.close(found[name], labels.cosine(vectors[p], vectors[q]), 0.0, f"{tag}: {name}", 1e-4)
    return len(which)


def compare_pieces(row, mesh, tag):
    """Width and length of an object: of its whole surface, or where that is in several pieces of the largest one."""
    pieces = mesh.split(only_watertight=False)
    bodies = [p for p in pieces if p.volume > 0]
    fragmented = "fragmented" in row["flags"].split()
    assert fragmented == (len(bodies) > 1), f"{tag}: {len(bodies)} pieces, flags {row['flags']!r}"
    part = max(bodies, key=lambda p: p.volume) if fragmented else mesh
    if fragmented and ("under_resolved" in row["flags"].split() or part.volume < 0.9 * mesh.volume):
        assert row["shapefinder_width"] == row["shapefinder_length"] == row["planarity"] == "", f"{tag}: shapefinders of fragments"
        return
    curvature = part.integral_mean_curvature
    if curvature > 0:
        support.close(float(row["shapefinder_width"]), part.area / curvature, 2e-4, f"{tag}: width")
        support.close(float(row["shapefinder_length"]), curvature / (4 * np.pi), 2e-4, f"{tag}: length")


def compare(folder, snapshot, family, flow=None):
    """Every mesh of a family against its row, and against numpy's fields where given. Returns the numbers of closed and of
    open meshes."""
    told = next(f for f in support.results(folder)["snapshots"][0]["families"] if f["family"] == family)
    level = told["level"]
    table = {int(r["id"]): r for r in support.rows(folder) if r["family"] == family}
    meshes = {id: (mesh, vertices) for id, mesh, vertices in parts(support.surface(folder, snapshot, family))}
    assert sorted(meshes) == sorted(table), f"{family}: meshes {sorted(meshes)}, rows {sorted(table)}"
    closed = 0
    values = None if flow is None else flow.indicator(told["indicator"])
    for id, row in table.items():
        mesh, vertices = meshes[id]
        tag = f"{snapshot} {family} {id}"
        # Next to a cell centre the indicator is off by what it changes over the clearance: less than its range.
        rounding = 1e-6 * abs(level) + CLEARANCE * (told["indicator_max"] - told["indicator_min"])
        support.close(vertices["indicator"], np.full(len(vertices), level), 0.0, f"{tag}: indicator at the vertices", rounding)
        length = np.sqrt(vertices["nx"] ** 2 + vertices["ny"] ** 2 + vertices["nz"] ** 2)
        support.close(length, np.ones(len(length)), 1e-5, f"{tag}: lengths of the normals")
        for cosine in [n for n in vertices.dtype.names if n.startswith("cos_")]:
            assert (np.abs(vertices[cosine]) <= 1 + 1e-6).all(), f"{tag}: {cosine}"
        if flow is not None:
            compare_values(vertices, flow, values, level, tag)
        if row["wraps"] or row["open_faces"]:
            assert not mesh.is_watertight, f"{tag}: closed, though it meets {row['wraps']} {row['open_faces']}"
            if row["open_faces"]:
                assert row["surface_area"] == "" and row["euler"] == "", f"{tag}: an open surface has measures"
            else:
                support.close(mesh.area, float(row["surface_area"]), 1e-4, f"{tag}: area")
            continue
        closed += 1
        number = lambda name: float(row[name])
        assert mesh.is_watertight and mesh.is_winding_consistent, f"{tag}: not closed"
        assert mesh.euler_number == 2 * number("euler"), f"{tag}: Euler number {mesh.euler_number}, euler {row['euler']}"
        support.close(mesh.area, number("surface_area"), 1e-4, f"{tag}: area")
        support.close(mesh.volume, number("shapefinder_thickness") * number("surface_area") / 3, 1e-4, f"{tag}: volume")
        # trimesh's integral is over the same edges, times signed angles, halved.
        support.close(mesh.integral_mean_curvature, number("mean_curvature_integral"), 1e-4, f"{tag}: mean curvature", 1e-6)
        compare_pieces(row, mesh, tag)
        normals = np.stack([vertices["nx"], vertices["ny"], vertices["nz"]], 1)
        outward = (mesh.vertex_normals * normals).sum(1)
        assert (outward > 0).mean() > 0.999, f"{tag}: normals against trimesh's, {(outward <= 0).sum()} of {len(outward)} turned"
    return closed, len(table) - closed


def check_demo_data():
    """Against trimesh: closed, genus, area, volume, mean curvature of every object of the demo data; numpy's vertex values."""
    specs = ["vorticity: vorticity > 2.5 rms", "current: current > 2 rms"]
    path = support.DEMO / "mhd_0001.h5"
    folder = support.run(path, "--lengths", "2pi", *support.families(specs))
    flow = labels.Flow(path, (2 * np.pi,) * 3)
    for family, least in (("vorticity", 5), ("current", 15)):
        closed, _ = compare(folder, "mhd_0001", family, flow)
        assert closed >= least, f"{family}: {closed} closed meshes"


def check_random_field_with_periodic_and_open_faces():
    """Against trimesh, unequal spacing: objects across periodic faces are whole, objects at open faces are cut; numpy's
    vertex values."""
    lengths, shape = (3.0, 2.0, 4.5), (48, 32, 40)
    path = support.WORK / "meshes.h5"
    # A mean velocity, which the frame of the box takes out of the vertex values.
    velocity = flows.solenoidal(21, shape, lengths, 7.0) + np.array([0.6, -0.4, 0.5]).reshape(3, 1, 1, 1)
    flows.write(path, velocity, 0.7 * flows.solenoidal(22, shape, lengths, 7.0))
    options = ["--lengths", ",".join(map(str, lengths)), "--min-cells", "8"]
    specs = support.families(["some: vorticity > 0.03 volume", "below: q < 0.03 volume", "most: vorticity > 0.3 volume", "sheets: current > 0.03 volume"])
    folder = support.run(path, *options, *specs)
    flow = labels.Flow(path, lengths)
    counts = [compare(folder, "meshes", f, flow) for f in ("some", "below", "most", "sheets")]
    assert counts[0][0] > 10 and counts[1][0] > 10, counts
    assert counts[2][1] > 0, f"no object closes on itself: {counts}"
    folder = support.run(path, *options, "--periodic", "xy", *specs)
    closed, cut = compare(folder, "meshes", "some")
    assert closed > 5 and cut > 0, f"{closed} closed, {cut} cut"


def check_one_file_an_object():
    """Against trimesh: files of single objects hold what the common file holds."""
    spec = support.families(["current: current > 2.5 rms"])
    path = support.DEMO / "mhd_0001.h5"
    together = support.run(path, "--lengths", "2pi", *spec)
    each = support.run(path, "--lengths", "2pi", "--surfaces", "each", *spec)
    count = 0
    for id, mesh, _ in parts(support.surface(together, "mhd_0001", "current")):
        alone = trimesh.load(support.surface(each, "mhd_0001", "current", id), process=False)
        assert (alone.vertices == mesh.vertices).all() and (alone.faces == mesh.faces).all(), id
        count += 1
    assert count == len(list((each / "surfaces").rglob("*.ply"))) > 5
