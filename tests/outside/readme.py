"""The README's commands and Python code, run as written on data that fits them."""

import os
import re
import shutil
import subprocess
import sys

import flows
import h5py
import numpy as np
import support

TEXT = (support.ROOT / "README.md").read_text()


def blocks(language):
    """Code blocks, list indentation removed."""
    for indent, body in re.findall(rf"^( *)```{language}\n(.*?)^ *```", TEXT, re.M | re.S):
        yield re.sub(rf"^{indent}", "", body, flags=re.M)


def check_every_ropewalk_command():
    """Each on files of the names and layouts that the README speaks of."""
    place = support.WORK / "commands"
    (place / "folder").mkdir(parents=True)
    (place / "run").mkdir()
    shape, lengths = (16, 16, 16), (1.0, 1.0, 1.0)
    u, b = (flows.solenoidal(seed, shape, lengths, 12.0).astype("f4") for seed in (1, 2))
    for path in ("snapshot.h5", "run/a.h5", "run/b.h5"):
        flows.write(place / path, u, b, "f4")
    with h5py.File(place / "snapshot.h5", "a") as f:
        for name, values in zip(("ux", "uy", "uz"), u):
            f[f"flow/{name}"] = values
        f["flow/B"] = b
    for name, values in zip("uvw", u):
        np.save(place / "folder" / name, values)
    (place / "raw").mkdir()
    for name, values in zip("uvw", u):
        marker = np.uint32(values.nbytes).tobytes()
        (place / "raw" / f"{name}.raw").write_bytes(marker + values.tobytes() + marker)
    with h5py.File(place / "steps.h5", "w") as f:
        for step in (1, 2):
            for name, values in zip("uvw", u):
                f[f"step_{step}/{name}"] = values * step
    with h5py.File(place / "channel.h5", "w") as f:
        f["grid/y"] = np.tanh(1.5 * (np.arange(16) / 7.5 - 1.0))
        for name, values in zip("uvw", u):
            f[name] = values
    with h5py.File(place / "plane.h5", "w") as f:
        for name, values in zip("uv", u):
            f[name] = values[0]
    np.save(place / "velocity", np.ascontiguousarray(np.moveaxis(u, 0, -1)))
    (place / "bin").mkdir()
    (place / "bin" / "ropewalk").symlink_to(support.PROGRAM)
    environment = os.environ | {"PATH": f"{place / 'bin'}:{os.environ['PATH']}"}
    commands = [c for block in blocks("sh") for c in block.replace("\\\n", " ").splitlines() if c.startswith("ropewalk")]
    assert len(commands) >= 7, commands
    for command in commands:
        done = subprocess.run(f"{command} --replace", shell=True, cwd=place, env=environment, capture_output=True, text=True, check=False)
        assert done.returncode == 0, f"{command}: {done.stderr}"


def check_every_python_example():
    """Each beside the results of the demo command; any error fails."""
    place = support.WORK / "examples"
    place.mkdir()
    subprocess.run([support.PROGRAM, "demo", "-q", "--data", support.DEMO], cwd=place, check=True)
    examples = list(blocks("python"))
    assert len(examples) == 4
    for code in examples:
        done = subprocess.run([sys.executable, "-W", "error::SyntaxWarning", "-c", code], cwd=place, capture_output=True, text=True, check=False)
        assert done.returncode == 0 and done.stdout, f"{code}\n{done.stderr}"
    shutil.rmtree(place)


def check_named_files_are_there():
    """Links and scripts that the README names."""
    named = re.findall(r"\]\(([^)#:]+)\)", TEXT) + re.findall(r"^(scripts/\S+)$", TEXT, re.M)
    assert len(named) > 5
    for name in named:
        assert (support.ROOT / name).exists(), name
