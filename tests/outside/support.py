"""Runs the program for the checks and holds what several of them use."""

import csv
import itertools
import json
import subprocess
import sys
import tempfile
from pathlib import Path

import numpy as np

PROGRAM = Path(sys.argv[1] if len(sys.argv) > 1 else "target/debug/ropewalk").resolve()
ROOT = Path(__file__).resolve().parents[2]
DEMO = ROOT / "demo-data"
WORK = Path(tempfile.mkdtemp(prefix="ropewalk-outside-"))
_numbers = itertools.count()


def run(snapshot, *options):
    """Catalogues one snapshot into a new folder and returns the folder."""
    folder = WORK / f"run{next(_numbers)}"
    line = [PROGRAM, "catalogue", snapshot, "-o", folder, "-q", *options]
    done = subprocess.run([str(word) for word in line], capture_output=True, text=True, check=False)
    assert done.returncode == 0, f"{line}: {done.stderr}"
    return folder


def families(specs):
    """The options that ask for these families."""
    return [word for spec in specs for word in ("--family", spec)]


def rows(folder):
    """The catalogue as dictionaries of text."""
    with open(folder / "catalogue.csv", newline="") as f:
        return list(csv.DictReader(f))


def results(folder):
    """run.json."""
    return json.loads((folder / "run.json").read_text())


def surface(folder, snapshot, family, id=None):
    """The mesh file of a family, or of one object of it where every object has a file of its own."""
    place = Path(folder) / "surfaces" / snapshot
    if id is None:
        return place / f"{family}.ply"
    [path] = [p for p in (place / family).glob("*.ply") if int(p.stem) == id]
    return path


def close(found, wanted, relative, what, absolute=0.0):
    """Fails loudly when two numbers or arrays differ by more than allowed."""
    found, wanted = np.asarray(found, float), np.asarray(wanted, float)
    assert found.shape == wanted.shape, f"{what}: shapes {found.shape} and {wanted.shape}"
    off = np.abs(found - wanted) - relative * np.abs(wanted) - absolute
    bad = ~(off <= 0.0)
    assert not bad.any(), f"{what}: found {found[bad][:5]}, wanted {wanted[bad][:5]}, {bad.sum()} of {found.size} off"
