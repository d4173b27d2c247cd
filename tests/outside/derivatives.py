"""Every derivative scheme and the point criteria recomputed with numpy.fft, numpy.linalg and least squares from the same files."""

import flows
import numpy as np
import support

LENGTHS = (3.0, 2.0, 4.5)
SHAPE = (40, 28, 33)
# Fornberg 1988, Math. Comp. 51, 699, table 1.
CENTRAL = {
    "fd2": (1 / 2,),
    "fd4": (2 / 3, -1 / 12),
    "fd6": (3 / 4, -3 / 20, 1 / 60),
    "fd8": (4 / 5, -1 / 5, 4 / 105, -1 / 280),
}
INDICATORS = (
    "vorticity", "q", "delta", "lambda2", "swirling", "strain", "pressure_laplacian", "lamb_sin", "lorentz_sin", "elsasser_plus",
    "elsasser_minus", "current",
)  # fmt: skip


def optimised(up_to=1.43):
    """Nine-point weights of order 4 whose modified wavenumber is nearest to the wavenumber up to `up_to`, in the mean square:
    least squares over Gauss-Legendre nodes in the two directions that keep the order."""
    x, weight = np.polynomial.legendre.leggauss(40)
    t, root = 0.5 * up_to * (x + 1), np.sqrt(0.5 * up_to * weight)
    k = np.arange(1, 5)
    constraints = np.array([2.0 * k, k**3])
    particular = np.linalg.lstsq(constraints, np.array([1.0, 0.0]), rcond=None)[0]
    free = np.linalg.svd(constraints)[2][2:].T
    sines = 2 * np.sin(np.outer(t, k))
    best = np.linalg.lstsq(root[:, None] * (sines @ free), root * (t - sines @ particular), rcond=None)[0]
    return particular + free @ best


def central(f, weights, a, h):
    return sum(c * (np.roll(f, -k, a) - np.roll(f, k, a)) for k, c in enumerate(weights, 1)) / h


def spectral(f, a, length):
    n = f.shape[a]
    k = 2j * np.pi * np.fft.fftfreq(n, length / n)
    if n % 2 == 0:
        k[n // 2] = 0
    return np.fft.ifft(np.fft.fft(f, axis=a) * k.reshape([-1 if b == a else 1 for b in range(3)]), axis=a).real


def one_sided(f, weights, a, h):
    """Central inside; beside the faces the derivative of the polynomial through the nearest 2 len(weights) + 1 samples."""
    out = np.moveaxis(central(f, weights, a, h), a, 0).copy()
    g = np.moveaxis(f, a, 0)
    n, half = len(g), len(weights)
    for i in [*range(half), *range(n - half, n)]:
        first = 0 if i < half else n - 2 * half - 1
        nodes = np.arange(first, first + 2 * half + 1) - i
        powers = np.vander(nodes.astype(float), increasing=True).T
        w = np.linalg.solve(powers, np.eye(len(nodes))[1]) / h
        out[i] = np.tensordot(w, g[first : first + len(nodes)], 1)
    return np.moveaxis(out, 0, a)


def derivative(f, axis, scheme, periodic):
    a, length = 2 - axis, LENGTHS[axis]
    h = length / f.shape[a]
    if "xyz"[axis] not in periodic:
        return one_sided(f, CENTRAL["fd8" if scheme == "spectral" else scheme], a, h)
    if scheme == "spectral":
        return spectral(f, a, length)
    return central(f, optimised() if scheme == "opt" else CENTRAL[scheme], a, h)


def curl(g):
    return np.array([g[2, 1] - g[1, 2], g[0, 2] - g[2, 0], g[1, 0] - g[0, 1]])


def norm(v):
    return np.sqrt((v**2).sum(0))


def sine(p, q):
    return norm(np.cross(p, q, axis=0)) / (norm(p) * norm(q))


def indicators(u, b, scheme, periodic):
    gradient = lambda v: np.array([[derivative(c, axis, scheme, periodic) for axis in range(3)] for c in v])
    a = gradient(u)
    w, j = curl(a), curl(gradient(b))
    matrices = np.moveaxis(a.reshape(3, 3, -1), -1, 0)
    s = 0.5 * (matrices + matrices.transpose(0, 2, 1))
    o = 0.5 * (matrices - matrices.transpose(0, 2, 1))
    strain2 = (s**2).sum((1, 2))
    q = 0.5 * ((o**2).sum((1, 2)) - strain2)
    # Of the gradient without its trace: its eigenvalues' sums of products.
    free = np.linalg.eigvals(matrices - np.trace(matrices, axis1=1, axis2=2)[:, None, None] / 3 * np.eye(3))
    x, y, z = free.T
    second, third = (x * y + y * z + z * x).real, -(x * y * z).real
    return {
        "vorticity": norm(w).ravel(),
        "current": norm(j).ravel(),
        "q": q,
        "pressure_laplacian": 2 * q,
        "delta": (second / 3) ** 3 + (third / 2) ** 2,
        "lambda2": np.linalg.eigvalsh(s @ s + o @ o)[:, 1],
        "swirling": np.abs(free.imag).max(1),
        "strain": np.sqrt(strain2),
        "lamb_sin": sine(u, w).ravel(),
        "lorentz_sin": sine(j, b).ravel(),
        "elsasser_plus": norm(w + j).ravel(),
        "elsasser_minus": norm(w - j).ravel(),
    }


def compare(dtype, scheme, tolerance, periodic="xyz"):
    path = support.WORK / f"derivatives_{dtype}.h5"
    u, b = (flows.solenoidal(seed, SHAPE, LENGTHS, 9.0) for seed in (11, 12))
    if not path.exists():
        flows.write(path, u, b, dtype)
    u, b = u.astype(dtype).astype(float), b.astype(dtype).astype(float)
    specs = [f"{name}: {name} > 2 rms" for name in INDICATORS]
    options = ["--lengths", ",".join(map(str, LENGTHS)), "--derivative", scheme, "--frame", "stored", "--surfaces", "none"]
    folder = support.run(path, *options, "--periodic", periodic, *support.families(specs))
    results = support.results(folder)
    assert results["request"]["derivative"] == scheme
    computed = indicators(u, b, scheme, periodic)
    for family in results["snapshots"][0]["families"]:
        values = computed[family["indicator"]]
        rms = np.sqrt(np.mean(values**2))
        tag = f"{dtype} {scheme} {periodic} {family['indicator']}"
        for name, wanted in (("mean", values.mean()), ("rms", rms), ("min", values.min()), ("max", values.max())):
            support.close(family[f"indicator_{name}"], wanted, tolerance, f"{tag} {name}", tolerance * rms)


def check_transforms():
    """numpy.fft along each axis, the Nyquist wave left out; numpy.linalg.eigvals and eigvalsh for the criteria."""
    compare("f8", "spectral", 1e-9)
    compare("f4", "spectral", 3e-5)


def check_differences():
    """Every central stencil, the optimised one by least squares with numpy.linalg.lstsq."""
    for scheme in (*CENTRAL, "opt"):
        compare("f8", scheme, 1e-9)


def check_open_faces():
    """One-sided stencils by solving Vandermonde's equations; transforms only along the periodic axes."""
    for scheme in ("fd2", "fd6", "fd8"):
        compare("f8", scheme, 1e-9, "xz")
    compare("f8", "spectral", 1e-9, "y")
