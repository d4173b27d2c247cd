#!/usr/bin/env python3
"""Writes a large periodic snapshot from a smaller one, plane by plane.

    python3 benches/make_large.py f512.h5 f1024.h5                       # twice as long in every direction, contiguous
    python3 benches/make_large.py f512.h5 f1024.h5 --chunks 64,64,64 --gzip 4

The small box is repeated along every axis and multiplied by a factor that varies slowly over the large box,
m^2 = 1 + 2 a (cos X + cos Y + cos Z) / 3 with one wave along each axis: no two repetitions are alike, the mean square of every
component is that of the small box, and what the factor adds to gradients is of the order of a over the length of the box. A few
planes are held at a time. Lengths of the box grow with the number of cells. Needs numpy and h5py.
"""
import argparse
import os

import h5py
import numpy as np


def main():
    p = argparse.ArgumentParser(description=__doc__, formatter_class=argparse.RawDescriptionHelpFormatter)
    p.add_argument("small", help="HDF5 file with one array [z][y][x] a component, periodic along every axis")
    p.add_argument("large", help="file to write; must not be there")
    p.add_argument("--times", type=int, default=2, help="repetitions along every axis")
    p.add_argument("--datasets", default="u,v,w")
    p.add_argument("--variation", type=float, default=0.05, help="a above, at most 0.5")
    p.add_argument("--chunks", help="shape of a chunk, z,y,x; contiguous without")
    p.add_argument("--gzip", type=int, help="compression, 1 to 9; needs --chunks")
    a = p.parse_args()
    if a.gzip is not None and not a.chunks:
        p.error("--gzip needs --chunks")
    if not 0 <= a.variation <= 0.5:
        p.error("--variation must be from 0 to 0.5")
    names = a.datasets.split(",")
    chunks = tuple(int(c) for c in a.chunks.split(",")) if a.chunks else None
    unfinished = a.large + ".unfinished"
    if os.path.exists(a.large):
        p.error(f"{a.large} is there")
    with h5py.File(a.small, "r") as small, h5py.File(unfinished, "w") as large:
        shape = small[names[0]].shape
        size = tuple(n * a.times for n in shape)
        waves = [np.cos(2 * np.pi * (np.arange(n) + 0.5) / n) for n in size]
        options = dict(chunks=chunks, compression="gzip" if a.gzip else None, compression_opts=a.gzip) if chunks else {}
        out = {name: large.create_dataset(name, size, small[name].dtype, **options) for name in names}
        depth = chunks[0] if chunks else 1
        for z0 in range(0, size[0], depth):
            planes = range(z0, min(z0 + depth, size[0]))
            for name in names:
                slab = np.empty((len(planes),) + size[1:], small[name].dtype)
                for k, z in enumerate(planes):
                    factor = np.sqrt(1 + 2 * a.variation / 3 * (waves[0][z] + waves[1][:, None] + waves[2][None, :]))
                    plane = small[name][z % shape[0]]
                    slab[k] = np.tile(plane, (a.times, a.times)) * factor.astype(slab.dtype)
                out[name][planes.start:planes.stop] = slab
    os.rename(unfinished, a.large)


if __name__ == "__main__":
    main()
