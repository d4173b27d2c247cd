"""Snapshots made here, with numpy.fft and h5py alone."""

import h5py
import numpy as np


def solenoidal(seed, shape, lengths, cutoff):
    """A random divergence-free field (3, nz, ny, nx): the curl, taken in Fourier space, of a random vector potential."""
    random = np.random.default_rng(seed)
    axes = [2 * np.pi * np.fft.fftfreq(n, l / n) for n, l in zip(shape, lengths[::-1])]
    kz, ky, kx = np.meshgrid(*axes, indexing="ij")
    k2 = kx**2 + ky**2 + kz**2
    # Fewer than half the Nyquist wavenumber, so that differences see a resolved field.
    envelope = np.exp(-k2 / cutoff**2) * (k2 < (2.5 * cutoff) ** 2)
    ax, ay, az = (np.fft.fftn(random.standard_normal(shape)) * envelope for _ in range(3))
    curl = (1j * (ky * az - kz * ay), 1j * (kz * ax - kx * az), 1j * (kx * ay - ky * ax))
    field = np.array([np.fft.ifftn(c).real for c in curl])
    return field / np.sqrt((field**2).sum(0).mean())


def ellipsoid(shape, lengths):
    """Flow of a single vortex, tilted and flattened: the curl of a Gaussian potential along a fixed direction."""
    z, y, x = np.meshgrid(*[(np.arange(n) + 0.5) * l / n - 0.53 * l for n, l in zip(shape, lengths[::-1])], indexing="ij")
    place = np.stack([x, y, z], -1)
    long, mid = np.array([2.0, 1.0, 1.0]) / 6**0.5, np.array([0.0, 1.0, -1.0]) / 2**0.5
    short = np.cross(long, mid)
    scales = np.array([0.30, 0.18, 0.12]) * min(lengths)
    inverse = sum(np.outer(e, e) / s**2 for e, s in zip((long, mid, short), scales))
    potential = np.exp(-0.5 * np.einsum("...i,ij,...j", place, inverse, place))
    gradient = -np.einsum("ij,...j->...i", inverse, place) * potential[..., None]
    return np.moveaxis(np.cross(gradient, long), -1, 0)


def write(path, velocity, magnetic=None, dtype="f8"):
    """Canonical HDF5: u, v, w (and bx, by, bz), z slowest."""
    with h5py.File(path, "w") as f:
        for name, values in zip(("u", "v", "w"), velocity):
            f[name] = values.astype(dtype)
        for name, values in zip(("bx", "by", "bz"), magnetic if magnetic is not None else ()):
            f[name] = values.astype(dtype)
