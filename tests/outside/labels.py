"""Objects and their sums recomputed with numpy from the same file and labelled with scipy.ndimage."""

import flows
import h5py
import numpy as np
import scipy.ndimage
import scipy.sparse
import support

# Central differences of order 8 (Fornberg 1988, Math. Comp. 51, 699, table 1).
WEIGHTS = (4 / 5, -1 / 5, 4 / 105, -1 / 280)
STRUCTURES = {6: 1, 18: 2, 26: 3}
COSINES = (("u_vorticity", "u", "w"), ("current_b", "j", "b"), ("u_b", "u", "b"))


def derivative(f, axis, h):
    """Along x, y, z = axis 0, 1, 2 of an array (nz, ny, nx)."""
    a = 2 - axis
    return sum(c * (np.roll(f, -k, a) - np.roll(f, k, a)) for k, c in enumerate(WEIGHTS, 1)) / h


class Flow:
    """Derived fields of a periodic snapshot in double precision."""

    def __init__(self, path, lengths, frame="box"):
        with h5py.File(path) as f:
            read = lambda names: np.array([f[n][...].astype(float) for n in names])
            self.u = read("uvw")
            self.b = read(("bx", "by", "bz")) if "bx" in f else None
        if frame == "box":
            self.u -= self.u.mean((1, 2, 3), keepdims=True)
        self.n = np.array(self.u.shape[:0:-1])
        self.h = np.array(lengths) / self.n
        gradient = np.array([[derivative(c, a, self.h[a]) for a in range(3)] for c in self.u])
        strain = 0.5 * (gradient + gradient.transpose(1, 0, 2, 3, 4))
        self.strain2 = (strain**2).sum((0, 1))
        self.w = curl(gradient)
        if self.b is not None:
            self.j = curl(np.array([[derivative(c, a, self.h[a]) for a in range(3)] for c in self.b]))

    def indicator(self, name):
        if name == "vorticity":
            return norm(self.w)
        if name == "current":
            return norm(self.j)
        if name == "q":
            return 0.25 * (self.w**2).sum(0) - 0.5 * self.strain2
        if name == "strain":
            return np.sqrt(self.strain2)
        if name == "helicity":
            return (self.u * self.w).sum(0)
        if name == "speed":
            return norm(self.u)
        if name == "lorentz":
            return norm(np.cross(self.j, self.b, axis=0))
        raise ValueError(name)

    def vectors(self, cells):
        """Velocity, vorticity, field and current density, by letter, in cells given by their flat indices."""
        whole = {"u": self.u, "w": self.w} | ({} if self.b is None else {"b": self.b, "j": self.j})
        return {letter: field.reshape(3, -1)[:, cells] for letter, field in whole.items()}


def curl(g):
    return np.array([g[2, 1] - g[1, 2], g[0, 2] - g[2, 0], g[1, 0] - g[0, 1]])


def norm(v):
    return np.sqrt((v**2).sum(0))


def cosine(p, q):
    return (p * q).sum(0) / norm(p) / norm(q)


def squared_sine(vectors, p, q):
    """Of the angle between two vectors, weighted by their squares."""
    p, q = vectors[p], vectors[q]
    return (np.cross(p, q, axis=0) ** 2).sum() / ((p**2).sum(0) * (q**2).sum(0)).sum()


def compare_cosine(mean, magnitude, aligned, counts, wanted, tolerance, tag):
    """What the program tells of a cosine against its values in the cells."""
    support.close(mean, wanted.mean(), tolerance, f"{tag}: mean", tolerance)
    support.close(magnitude, np.abs(wanted).mean(), tolerance, f"{tag}: mean magnitude", tolerance)
    # A cosine within rounding of a bin's edge may count on either side.
    edges = np.linspace(-1, 1, 21)
    unsure = sum((np.abs(wanted - edge) < tolerance).sum() for edge in edges[1:-1])
    assert counts.sum() == len(wanted), f"{tag}: {counts.sum()} cells in the histogram, wanted {len(wanted)}"
    moved = np.abs(counts - np.histogram(wanted, edges)[0]).sum()
    assert moved <= 2 * unsure, f"{tag}: {moved} cells elsewhere in the histogram"
    unsure = (np.abs(np.abs(wanted) - 0.9) < tolerance).sum()
    off = abs(aligned * len(wanted) - (np.abs(wanted) > 0.9).sum())
    assert off <= unsure + 1e-6, f"{tag}: {off} cells more or less aligned"


def level_in_a_gap(values, wanted, rounding):
    """A level near the wanted one that no cell is near to, so that rounding cannot move a cell across it."""
    s = np.sort(values, axis=None)
    at = int(np.searchsorted(s, wanted))
    near = s[max(at - 40, 0) : at + 40]
    k = int(np.argmax(np.diff(near)))
    low, high = near[k], near[k + 1]
    level = float(f"{0.5 * (low + high):.9g}")
    assert min(level - low, high - level) > rounding * max(abs(level), np.sqrt(np.mean(values**2))), "no gap around the level"
    return level


def label(mask, connectivity):
    """scipy.ndimage.label, then labels that touch across periodic faces joined as components of a graph."""
    structure = scipy.ndimage.generate_binary_structure(3, STRUCTURES[connectivity])
    labels, count = scipy.ndimage.label(mask, structure)
    pairs = []
    for shift in np.argwhere(structure) - 1:
        other = np.roll(labels, shift, (0, 1, 2))
        both = (labels > 0) & (other > 0) & (labels != other)
        pairs.append(np.stack([labels[both], other[both]]))
    a, b = np.concatenate(pairs, 1)
    graph = scipy.sparse.coo_matrix((np.ones(len(a)), (a, b)), shape=(count + 1, count + 1))
    _, joined = scipy.sparse.csgraph.connected_components(graph, directed=False)
    return np.where(mask, joined[labels], -1)


def objects(mask, connectivity):
    """Arrays of flat cell indices, in the order of their smallest cell."""
    labels = label(mask, connectivity).ravel()
    cells = np.flatnonzero(labels >= 0)
    order = np.argsort(labels[cells], kind="stable")
    groups = np.split(cells[order], np.flatnonzero(np.diff(labels[cells][order])) + 1) if len(cells) else []
    return sorted(groups, key=lambda g: g[0])


def wraps(mask, connectivity, cells):
    """Axes along which an object closes on itself: in the box doubled along such an axis its two images are one."""
    out = []
    only = np.zeros(mask.shape, bool)
    only.ravel()[cells] = True
    for axis in range(3):
        if not only.any(tuple({0, 1, 2} - {2 - axis})).all():
            # A plane without a cell of it: it cannot close along this axis.
            continue
        doubled = np.concatenate([only, only], 2 - axis)
        if len(objects(doubled, connectivity)) == 1:
            out.append("xyz"[axis])
    return " ".join(out)


def compare_row(row, flow, values, cells, axes, tolerance, tag):
    """All columns that are sums over cells."""
    z, y, x = np.unravel_index(cells, values.shape)
    inside = values.ravel()[cells]
    extreme = cells[np.argmax(inside) if row["below"] == "" else np.argmin(inside)]
    number = lambda name: float(row[name])
    scale = np.sqrt(np.mean(values**2))
    same = lambda name, wanted, absolute=0.0: support.close(number(name), wanted, tolerance, f"{tag} {name}", absolute)
    assert int(row["cells"]) == len(cells), f"{tag}: {row['cells']} cells, wanted {len(cells)}"
    same("volume", len(cells) * flow.h.prod())
    same("peak", values.ravel()[extreme], tolerance * scale)
    same("indicator_mean", inside.mean(), tolerance * scale)
    peak = np.array(np.unravel_index(extreme, values.shape))[::-1] * flow.h
    support.close([number(f"peak_{a}") for a in "xyz"], peak, 1e-12, f"{tag} peak position", 1e-12)
    same("viscous_share", flow.strain2.ravel()[cells].sum() / flow.strain2.sum())
    vectors = flow.vectors(cells)
    same("lamb_sin2", squared_sine(vectors, "u", "w"), tolerance)
    if flow.b is not None:
        same("ohmic_share", (vectors["j"] ** 2).sum() / (flow.j**2).sum())
        same("lorentz_sin2", squared_sine(vectors, "j", "b"), tolerance)
    for name, p, q in COSINES:
        if p not in vectors or q not in vectors:
            assert row[f"cos_{name}"] == "", f"{tag}: cos_{name} should be missing"
            continue
        counts = np.array(row[f"histogram_{name}"].split(), int)
        told = [number(f"{kind}_{name}") for kind in ("cos", "abs_cos", "aligned")]
        compare_cosine(*told, counts, cosine(vectors[p], vectors[q]), tolerance, f"{tag} {name}")
    assert row["wraps"] == axes, f"{tag}: wraps {row['wraps']!r}, wanted {axes!r}"
    compare_moments(row, flow, np.stack([x, y, z]), axes, tag)


def compare_moments(row, flow, index, axes, tag):
    """Centroid, extents and axes of an object that has an empty plane along every axis, cut open there."""
    place = []
    for a in range(3):
        free = np.setdiff1d(np.arange(flow.n[a]), index[a])
        if "xyz"[a] in axes.split():
            assert row[f"centroid_{'xyz'[a]}"] == "", f"{tag}: centroid along {a}"
            return
        if len(free) == 0:
            return
        unwrapped = (index[a] - free[0]) % flow.n[a] + free[0]
        place.append(unwrapped * flow.h[a])
        length = flow.n[a] * flow.h[a]
        off = (float(row[f"centroid_{'xyz'[a]}"]) - place[a].mean() + 0.5 * length) % length - 0.5 * length
        assert abs(off) < 1e-9 * length, f"{tag}: centroid_{'xyz'[a]} off by {off}"
    # Each cell is a solid box: its own second moment is h^2 / 12.
    covariance = np.cov(np.array(place), bias=True) + np.diag(flow.h**2 / 12)
    values, vectors = np.linalg.eigh(covariance)
    values, vectors = values[::-1], vectors.T[::-1]
    support.close([float(row[f"extent_{k}"]) for k in (1, 2, 3)], np.sqrt(12 * values), 1e-9, f"{tag} extents")
    for k in range(3):
        apart = min(abs(values[k] / values[m] - 1) for m in range(3) if m != k)
        axis = np.array([float(row[f"axis_{k + 1}_{a}"]) for a in "xyz"])
        if apart > 1e-3:
            assert abs(abs(axis @ vectors[k]) - 1) < 1e-8, f"{tag} axis_{k + 1}"


def compare(path, lengths, wanted, connectivity, min_cells, tolerance, frame="box"):
    """wanted: (indicator, sign, fraction of the box). Returns how many objects were compared, and how many wrapped."""
    flow = Flow(path, lengths, frame)
    specs, plan = [], []
    for number, (indicator, sign, fraction) in enumerate(wanted):
        values = flow.indicator(indicator)
        quantile = np.quantile(values, 1 - fraction if sign == ">" else fraction)
        level = level_in_a_gap(values, quantile, 10 * np.finfo(np.float32).eps if tolerance > 1e-8 else 1e-12)
        specs.append(f"f{number}: {indicator} {sign} {level!r}")
        plan.append((f"f{number}", values, sign, level))
    options = ["--lengths", ",".join(repr(float(v)) for v in lengths), "--connectivity", connectivity, "--min-cells", min_cells]
    folder = support.run(path, *options, "--frame", frame, "--surfaces", "none", *support.families(specs))
    table = support.rows(folder)
    told = support.results(folder)["snapshots"][0]["families"]
    compared = closed = 0
    for (name, values, sign, level), family in zip(plan, told):
        tag = f"{path.name} {connectivity} {family['definition']}"
        mask = values > level if sign == ">" else values < level
        every = objects(mask, connectivity)
        listed = [c for c in every if len(c) >= min_cells]
        found = [r | {"below": "" if sign == ">" else "<"} for r in table if r["family"] == name]
        assert [int(r["cells"]) for r in found] == [len(c) for c in listed], f"{tag}: cells of the objects"
        assert [int(r["id"]) for r in found] == list(range(1, len(listed) + 1)), f"{tag}: ids"
        assert family["dropped_objects"] == len(every) - len(listed), f"{tag}: dropped objects"
        assert family["dropped_cells"] == mask.sum() - sum(map(len, listed)), f"{tag}: dropped cells"
        support.close(family["volume_fraction"], mask.mean(), 1e-14, f"{tag} volume_fraction")
        support.close(family["indicator_rms"], np.sqrt(np.mean(values**2)), tolerance, f"{tag} indicator_rms")
        for row, cells in zip(found, listed):
            axes = wraps(mask, connectivity, cells)
            compare_row(row, flow, values, cells, axes, tolerance, f"{tag} id {row['id']}")
            compared += 1
            closed += axes != ""
    return compared, closed


def check_demo_data():
    """Single precision, three connectivities, several levels; numpy and scipy.ndimage.label."""
    wanted = [(i, ">", f) for i in ("vorticity", "current") for f in (0.005, 0.02, 0.06)]
    total = 0
    for connectivity in (6, 18, 26):
        total += compare(support.DEMO / "mhd_0002.h5", (2 * np.pi,) * 3, wanted, connectivity, 27, 1e-5)[0]
    assert total > 150, f"only {total} objects compared"


def check_hydrodynamic_demo_data():
    """Velocity alone: magnetic columns stay empty; numpy and scipy.ndimage.label."""
    wanted = [("vorticity", ">", 0.01), ("q", ">", 0.03)]
    total, _ = compare(support.DEMO / "hydro_0001.h5", (2 * np.pi,) * 3, wanted, 26, 27, 1e-5)
    assert total > 20, f"only {total} objects compared"


def random_snapshot(dtype):
    lengths, shape = (3.0, 2.0, 4.5), (48, 32, 40)
    path = support.WORK / f"random_{dtype}.h5"
    if not path.exists():
        flows.write(path, flows.solenoidal(11, shape, lengths, 9.0), 0.7 * flows.solenoidal(12, shape, lengths, 9.0), dtype)
    return path, lengths


def check_random_field_in_double_precision():
    """Unequal spacing, no cube; both sides of levels; objects that close on themselves; numpy and scipy.ndimage.label."""
    path, lengths = random_snapshot("f8")
    wanted = [
        ("vorticity", ">", 0.03),
        ("vorticity", ">", 0.25),
        ("vorticity", "<", 0.05),
        ("current", ">", 0.05),
        ("q", "<", 0.04),
        ("strain", ">", 0.03),
        ("helicity", ">", 0.05),
        ("helicity", "<", 0.05),
        ("lorentz", ">", 0.04),
    ]
    total = closed = 0
    for connectivity in (6, 18, 26):
        # Exact sums and one rounding a term: 1e-10 leaves room for numpy's own.
        some, wrapped = compare(path, lengths, wanted, connectivity, 8, 1e-10)
        total, closed = total + some, closed + wrapped
    assert total > 300 and closed > 0, f"{total} objects compared, {closed} of them closed on themselves"


def check_random_field_in_single_precision():
    """As above in single precision; numpy and scipy.ndimage.label."""
    path, lengths = random_snapshot("f4")
    total, _ = compare(path, lengths, [("vorticity", ">", 0.05), ("current", ">", 0.02)], 26, 8, 1e-5)
    assert total > 20, f"only {total} objects compared"


def check_levels_in_rms_mean_and_volume():
    """Against numpy's own mean, root mean square and quantile."""
    path, lengths = random_snapshot("f8")
    values = Flow(path, lengths).indicator("vorticity")
    specs = ["a: vorticity > 2 rms", "b: vorticity > 1.5 mean", "c: vorticity > 0.02 volume", "d: vorticity < 0.1 volume"]
    options = ["--lengths", ",".join(map(str, lengths)), "--surfaces", "none"]
    told = {f["family"]: f for f in support.results(support.run(path, *options, *support.families(specs)))["snapshots"][0]["families"]}
    support.close(told["a"]["level"], 2 * np.sqrt(np.mean(values**2)), 1e-12, "rms level")
    support.close(told["b"]["level"], 1.5 * values.mean(), 1e-12, "mean level")
    # Levels by volume are read from bins a relative 2^-12 wide.
    support.close(told["c"]["level"], np.quantile(values, 0.98), 2**-11, "volume level")
    support.close(told["d"]["level"], np.quantile(values, 0.1), 2**-11, "volume level below")
