"""The frame of the velocity: a snapshot seen from a moving frame against the same at rest, and against numpy."""

import flows
import h5py
import labels
import numpy as np
import support

MEAN = np.array([0.8, -1.1, 0.5])
DIRECTED = [f"{kind}_{name}" for kind in ("cos", "abs_cos", "aligned") for name in ("u_vorticity", "u_b")] + ["lamb_sin2"]


def moving():
    """The random snapshot at rest, and the same with a constant vector added to the velocity."""
    rest, lengths = labels.random_snapshot("f8")
    path = support.WORK / "moving.h5"
    with h5py.File(rest) as f:
        read = lambda names: np.array([f[n][...] for n in names])
        flows.write(path, read("uvw") + MEAN.reshape(3, 1, 1, 1), read(("bx", "by", "bz")))
    return rest, path, lengths


def check_frame_of_the_box_takes_the_mean_out():
    """The catalogue stays as it is at rest (Galilean invariance); in the stored frame the mean velocity shows."""
    rest, path, lengths = moving()
    speed = labels.Flow(rest, lengths).indicator("speed")
    level = labels.level_in_a_gap(speed, np.quantile(speed, 0.93), 1e-12)
    specs = support.families(["vortices: vorticity > 2 rms", f"jets: speed > {level!r}"])
    options = ["--lengths", ",".join(map(str, lengths)), "--min-cells", 8, "--surfaces", "none", *specs]
    still = support.rows(support.run(rest, *options))
    for frame in ("box", "stored"):
        folder = support.run(path, *options, "--frame", frame)
        told = support.results(folder)["snapshots"][0]["frame_velocity"]
        support.close(told, MEAN if frame == "box" else np.zeros(3), 1e-12, f"frame_velocity, {frame}")
        rows = support.rows(folder)
        key = lambda row: (row["family"], row["id"], row["cells"])
        if frame == "box":
            assert [key(r) for r in rows] == [key(r) for r in still], "other objects than at rest"
            assert {r["family"] for r in rows} == {"vortices", "jets"} and len(rows) > 20, len(rows)
            for a, b in zip(rows, still):
                for name in DIRECTED + ["peak", "indicator_mean", "viscous_share"]:
                    support.close(float(a[name]), float(b[name]), 1e-9, f"{key(a)} {name}", 1e-9)
        else:
            pairs = [(a, b) for a, b in zip(rows, still) if a["family"] == b["family"] == "vortices"]
            off = np.array([[abs(float(a[n]) - float(b[n])) for n in DIRECTED] for a, b in pairs])
            assert (off.max(0) > 0.01).all(), f"the mean velocity changes nothing: {off.max(0)}"


def check_either_frame_against_numpy():
    """All sums of the moving snapshot in both frames; numpy and scipy.ndimage.label."""
    _, path, lengths = moving()
    wanted = [("vorticity", ">", 0.05), ("speed", ">", 0.04), ("speed", "<", 0.05), ("helicity", ">", 0.05)]
    for frame in ("box", "stored"):
        total, _ = labels.compare(path, lengths, wanted, 26, 8, 1e-10, frame)
        assert total > 40, f"{frame}: only {total} objects compared"
