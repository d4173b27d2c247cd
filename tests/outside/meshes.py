"""Surface meshes as trimesh reads and measures them, against the catalogue."""

import flows
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


def compare(folder, snapshot, family):
    """Every mesh of a family against its row. Returns the numbers of closed and of open meshes."""
    told = next(f for f in support.results(folder)["snapshots"][0]["families"] if f["family"] == family)
    level = told["level"]
    table = {int(r["id"]): r for r in support.rows(folder) if r["family"] == family}
    meshes = {id: (mesh, vertices) for id, mesh, vertices in parts(folder / "surfaces" / f"{snapshot}_{family}.ply")}
    assert sorted(meshes) == sorted(table), f"{family}: meshes {sorted(meshes)}, rows {sorted(table)}"
    closed = 0
    for id, row in table.items():
        mesh, vertices = meshes[id]
        tag = f"{snapshot} {family} {id}"
        # Vertices keep 1e-4 of a cell's distance from cell centres, over which the indicator changes by less than its range.
        rounding = 1e-6 * abs(level) + 1e-4 * (told["indicator_max"] - told["indicator_min"])
        support.close(vertices["indicator"], np.full(len(vertices), level), 0.0, f"{tag}: indicator at the vertices", rounding)
        length = np.sqrt(vertices["nx"] ** 2 + vertices["ny"] ** 2 + vertices["nz"] ** 2)
        support.close(length, np.ones(len(length)), 1e-5, f"{tag}: lengths of the normals")
        for cosine in [n for n in vertices.dtype.names if n.startswith("cos_")]:
            assert (np.abs(vertices[cosine]) <= 1 + 1e-6).all(), f"{tag}: {cosine}"
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
        normals = np.stack([vertices["nx"], vertices["ny"], vertices["nz"]], 1)
        outward = (mesh.vertex_normals * normals).sum(1)
        assert (outward > 0).mean() > 0.999, f"{tag}: normals against trimesh's, {(outward <= 0).sum()} of {len(outward)} turned"
    return closed, len(table) - closed


def check_demo_data():
    """Against trimesh: closed, genus, area, volume, mean curvature of every object of the demo data."""
    specs = ["vorticity: vorticity > 2.5 rms", "current: current > 2 rms"]
    folder = support.run(support.DEMO / "mhd_0001.h5", "--lengths", "2pi", *support.families(specs))
    for family, least in (("vorticity", 5), ("current", 15)):
        closed, _ = compare(folder, "mhd_0001", family)
        assert closed >= least, f"{family}: {closed} closed meshes"


def check_random_field_with_periodic_and_open_faces():
    """Against trimesh, unequal spacing: objects across periodic faces are whole, objects at open faces are cut."""
    lengths, shape = (3.0, 2.0, 4.5), (48, 32, 40)
    path = support.WORK / "meshes.h5"
    flows.write(path, flows.solenoidal(21, shape, lengths, 7.0))
    options = ["--lengths", ",".join(map(str, lengths)), "--min-cells", "8"]
    specs = support.families(["some: vorticity > 0.03 volume", "below: q < 0.03 volume", "most: vorticity > 0.3 volume"])
    folder = support.run(path, *options, *specs)
    counts = [compare(folder, "meshes", f) for f in ("some", "below", "most")]
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
    for id, mesh, _ in parts(together / "surfaces" / "mhd_0001_current.ply"):
        alone = trimesh.load(each / "surfaces" / f"mhd_0001_current_{id:06}.ply", process=False)
        assert (alone.vertices == mesh.vertices).all() and (alone.faces == mesh.faces).all(), id
        count += 1
    assert count == len(list((each / "surfaces").iterdir())) > 5
