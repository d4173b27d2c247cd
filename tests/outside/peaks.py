"""Objects grown from peaks, by their definition instead of the program's order of cells: numpy and scipy.ndimage."""

import h5py
import labels
import numpy as np
import support

NEIGHBOURS = [s for s in np.ndindex(3, 3, 3) if s != (1, 1, 1)]


def slopes(values):
    """For every cell the flat index of the peak that steepest ascent over 26 neighbours of a periodic box ends at."""
    index = np.arange(values.size).reshape(values.shape)
    best, goal = values.copy(), index.copy()
    for shift in NEIGHBOURS:
        step = tuple(np.array(shift) - 1)
        v, i = np.roll(values, step, (0, 1, 2)), np.roll(index, step, (0, 1, 2))
        higher = v > best
        best[higher], goal[higher] = v[higher], i[higher]
    goal = goal.ravel()
    while True:
        further = goal[goal]
        if (further == goal).all():
            return goal.reshape(values.shape)
        goal = further


def grown(values, inner, fraction):
    """Sets of cells: a lower peak joins a higher one where a path beyond the fraction of the higher leads to it over slopes that
    belong to neither a higher object nor one apart from it."""
    goal = slopes(values)
    peaks = np.unique(goal)
    peaks = peaks[np.argsort(-values.ravel()[peaks], kind="stable")]
    owner = {}
    free = np.ones(values.shape, bool)
    found = []
    for peak in peaks:
        height = values.ravel()[peak]
        if height <= inner:
            break
        if peak in owner:
            continue
        beyond = free & (values > fraction * height)
        region = labels.label(beyond, 26)
        here = region == region.ravel()[peak]
        joined = np.unique(goal[here & (goal == np.arange(values.size).reshape(values.shape))])
        mine = np.isin(goal, joined)
        owner.update((p, peak) for p in joined)
        free &= ~mine
        found.append((fraction * height, np.flatnonzero(mine & (values > fraction * height))))
    return found


def check_objects_grown_from_peaks():
    path, lengths = labels.random_snapshot("f8")
    with h5py.File(path) as f:
        u = np.array([f[n][...] for n in "uvw"])
    values = np.sqrt((u**2).sum(0))
    box = ["--lengths", ",".join(repr(float(v)) for v in lengths), "--frame", "stored", "--min-cells", 1, "--surfaces", "none"]
    for factor, fraction in ((1.6, 0.5), (1.4, 0.7), (1.2, 0.9)):
        spec = f"s: speed > {factor} rms down to {fraction} peak"
        wanted = grown(values, factor * np.sqrt((values**2).mean()), fraction)
        wanted = sorted((int(cells[0]), len(cells), level) for level, cells in wanted)
        table = support.rows(support.run(path, *box, "--family", spec))
        assert len(table) == len(wanted) > 3, f"{spec}: {len(table)} objects, wanted {len(wanted)}"
        # Numbered by smallest cell, as `wanted` is sorted.
        assert [int(r["cells"]) for r in table] == [n for _, n, _ in wanted], f"{spec}: cells"
        support.close([float(r["level"]) for r in table], [level for _, _, level in wanted], 1e-14, f"{spec}: levels")
        assert any("wall" in r["flags"] for r in table), f"{spec}: no object touches another"


def check_two_levels():
    """Components of the weaker level that hold a cell beyond the stronger one; scipy.ndimage.label."""
    path, lengths = labels.random_snapshot("f8")
    flow = labels.Flow(path, lengths)
    values = flow.indicator("vorticity")
    rms = np.sqrt((values**2).mean())
    inner, outer = (labels.level_in_a_gap(values, factor * rms, 1e-12) for factor in (2.0, 1.5))
    wanted = [cells for cells in labels.objects(values > outer, 26) if values.ravel()[cells].max() > inner]
    box = ["--lengths", ",".join(repr(float(v)) for v in lengths), "--min-cells", 1, "--surfaces", "none"]
    table = support.rows(support.run(path, *box, "--family", f"w: vorticity > {inner!r} down to {outer!r}"))
    assert [int(r["cells"]) for r in table] == [len(c) for c in wanted] and len(wanted) > 3
    assert len(wanted) < len(labels.objects(values > outer, 26))
