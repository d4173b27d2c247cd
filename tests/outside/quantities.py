"""Every indicator as a companion column, the low-pass filter, levels by the run's rms, and the loss of the scheme: numpy, scipy.ndimage."""

import shutil

import h5py
import labels
import numpy as np
import scipy.ndimage
import support

NU, ETA = 0.02, 0.03


def box(lengths):
    return ["--lengths", ",".join(repr(float(v)) for v in lengths)]


def with_buoyancy():
    """The random snapshot with a scalar of its own."""
    path, lengths = labels.random_snapshot("f8")
    path = shutil.copy(path, support.WORK / "buoyant.h5")
    with h5py.File(path, "a") as f:
        if "theta" not in f:
            nz, ny, nx = f["u"].shape
            z, y, x = np.meshgrid(*(np.arange(n) * 2 * np.pi / n for n in (nz, ny, nx)), indexing="ij")
            f["theta"] = np.sin(x + 2 * y) + 0.5 * np.cos(2 * z - y)
    return path, lengths


def indicators(path, lengths):
    """All of them in every cell, from central differences of order 8."""
    flow = labels.Flow(path, lengths)
    with h5py.File(path) as f:
        theta = f["theta"][...]
    grad = np.array([[labels.derivative(c, a, flow.h[a]) for a in range(3)] for c in flow.u])
    a = np.moveaxis(grad, (0, 1), (-2, -1))
    s, w = 0.5 * (a + np.swapaxes(a, -1, -2)), 0.5 * (a - np.swapaxes(a, -1, -2))
    # Second and third invariants of the trace-free gradient (Chong, Perry & Cantwell 1990).
    free = a - np.trace(a, axis1=-2, axis2=-1)[..., None, None] * np.eye(3) / 3
    q_free, r_free = -0.5 * np.trace(free @ free, axis1=-2, axis2=-1), -np.linalg.det(free)
    u, b, om, j = flow.u, flow.b, flow.w, flow.j
    lamb, lorentz = labels.norm(np.cross(u, om, axis=0)), labels.norm(np.cross(j, b, axis=0))
    q = flow.indicator("q")
    return {
        "vorticity": labels.norm(om),
        "enstrophy": (om**2).sum(0),
        "current": labels.norm(j),
        "q": q,
        "delta": (q_free / 3) ** 3 + (r_free / 2) ** 2,
        "lambda2": np.linalg.eigvalsh(s @ s + w @ w)[..., 1],
        "swirling": np.abs(np.linalg.eigvals(a).imag).max(-1),
        "strain": np.sqrt(flow.strain2),
        "dissipation_viscous": 2 * NU * flow.strain2,
        "dissipation_ohmic": ETA * (j**2).sum(0),
        "helicity": (u * om).sum(0),
        "relative_helicity": labels.cosine(u, om),
        "cross_helicity": (u * b).sum(0),
        "current_helicity": (j * b).sum(0),
        "lamb": lamb,
        "lamb_sin": lamb / labels.norm(u) / labels.norm(om),
        "lorentz": lorentz,
        "lorentz_sin": lorentz / labels.norm(j) / labels.norm(b),
        "elsasser_plus": labels.norm(om + j),
        "elsasser_minus": labels.norm(om - j),
        "speed": labels.norm(u),
        "field": labels.norm(b),
        "buoyancy": theta,
        "buoyancy_gradient": np.sqrt(sum(labels.derivative(theta, k, flow.h[k]) ** 2 for k in range(3))),
        "pressure_laplacian": 2 * q,
    }


def check_every_indicator_as_a_companion():
    path, lengths = with_buoyancy()
    wanted = indicators(path, lengths)
    options = [*box(lengths), "--velocity", "u,v,w", "--magnetic", "bx,by,bz", "--buoyancy", "theta", "--viscosity", NU, "--resistivity", ETA]
    folder = support.run(
        path, *options, "--companions", ",".join(wanted), "--labels", "--surfaces", "none", "--min-cells", 5, "--family", "w: vorticity > 1.5 rms"
    )
    table = support.rows(folder)
    assert len(table) > 5
    with h5py.File(folder / "labels" / "buoyant" / "w.h5") as f:
        where = f["labels"][...]
    ids = [int(r["id"]) for r in table]
    for name, values in wanted.items():
        # Swirling strength is the square root of a difference near real eigenvalues; its own scale counts.
        scale = 1e-6 if name == "swirling" else 1e-10
        for end, of in (("mean", scipy.ndimage.mean), ("min", scipy.ndimage.minimum), ("max", scipy.ndimage.maximum)):
            got = [float(r[f"{name}_{end}"]) for r in table]
            support.close(got, of(values, where, ids), scale, f"{name}_{end}", scale * np.abs(values).max())


def check_every_indicator_as_a_family():
    path, lengths = with_buoyancy()
    options = [*box(lengths), "--velocity", "u,v,w", "--magnetic", "bx,by,bz", "--buoyancy", "theta", "--viscosity", NU, "--resistivity", ETA]
    specs, cells = [], {}
    for name, values in indicators(path, lengths).items():
        below = name in ("lambda2",)
        level = labels.level_in_a_gap(values, np.quantile(values, 0.05 if below else 0.95), 1e-9)
        specs.append(f"{name}: {name} {'<' if below else '>'} {level!r}")
        cells[name] = [len(c) for c in labels.objects(values < level if below else values > level, 26)]
    table = support.rows(support.run(path, *options, "--surfaces", "none", "--min-cells", 1, *support.families(specs)))
    for name, wanted in cells.items():
        got = [int(r["cells"]) for r in table if r["family"] == name]
        assert got == wanted and wanted, f"{name}: {len(got)} objects, wanted {len(wanted)}"


def check_filters_against_numpy():
    """exp(-k^2 w^2 / 24) and a sphere of radius pi / w (Pope, Turbulent Flows, table 13.2) applied with numpy.fft."""
    path, lengths = labels.random_snapshot("f8")
    for shape, width in (("gaussian", 0.4), ("sharp", 0.3)):
        other = support.WORK / f"{shape}.h5"
        with h5py.File(path) as f, h5py.File(other, "w") as g:
            for name in ("u", "v", "w", "bx", "by", "bz"):
                values = f[name][...]
                k = np.meshgrid(*(2 * np.pi * np.fft.fftfreq(n, l / n) for n, l in zip(values.shape, lengths[::-1])), indexing="ij")
                k2 = sum(c**2 for c in k)
                factor = np.exp(-k2 * width**2 / 24) if shape == "gaussian" else k2 <= (np.pi / width) ** 2
                g[name] = np.fft.ifftn(np.fft.fftn(values) * factor).real
        specs = support.families(["w: vorticity > 1.3 rms", "j: current > 1.3 rms"])
        filtered = support.rows(support.run(path, *box(lengths), *specs, "--filter", f"{shape} {width}"))
        wanted = support.rows(support.run(other, *box(lengths), *specs))
        assert len(filtered) == len(wanted) > 3
        for a, b in zip(filtered, wanted):
            for name in ("cells", "peak", "surface_area", "lamb_sin2", "ohmic_share"):
                if a[name] or b[name]:
                    support.close(float(a[name]), float(b[name]), 1e-9, f"{shape} {name}")


def check_one_level_for_a_run():
    paths = [support.DEMO / f"mhd_000{i}.h5" for i in (1, 2, 3)]
    flows = [labels.Flow(p, (2 * np.pi,) * 3) for p in paths]
    rms = np.sqrt(np.mean([(f.w**2).sum(0).mean() for f in flows]))
    folder = support.run(support.DEMO / "mhd_*.h5", "--lengths", "2pi", "--surfaces", "none", "--family", "w: vorticity > 2 run-rms")
    told = support.results(folder)
    support.close(told["request"]["run_rms"]["w"], rms, 1e-6, "run_rms")
    for snapshot in told["snapshots"]:
        support.close(snapshot["families"][0]["level"], 2 * rms, 1e-6, "level")


def check_loss_of_gradient_variance():
    """Sum of (k^2 - k'^2) E over sum of k^2 E from all lines of every component and axis; the program samples lines."""
    path, lengths = labels.random_snapshot("f8")
    with h5py.File(path) as f:
        u = [f[n][...] for n in "uvw"]
    weights = {"fd2": (1 / 2,), "fd8": labels.WEIGHTS}
    for scheme, c in weights.items():
        lost = total = 0.0
        for values in u:
            for axis in range(3):
                a, h = 2 - axis, lengths[axis] / values.shape[2 - axis]
                kh = 2 * np.pi * np.abs(np.fft.fftfreq(values.shape[a]))
                energy = (np.abs(np.fft.fft(values, axis=a)) ** 2).sum(tuple({0, 1, 2} - {a})) / values.shape[a]
                modified = 2 * sum(w * np.sin(m * kh) for m, w in enumerate(c, 1))
                lost += ((kh**2 - modified**2) * energy).sum() / h**2
                total += (kh**2 * energy).sum() / h**2
        folder = support.run(path, *box(lengths), "--derivative", scheme, "--surfaces", "none", "--family", "w: vorticity > 1.5 rms")
        told = support.results(folder)["snapshots"][0]["velocity"]["gradient_variance_lost"]
        support.close(told, lost / total, 0.1, f"{scheme}: share lost")
