#!/usr/bin/env python3
"""Repeats the benchmark table and prints it as Markdown. Builds nothing; needs only Python's own library.

    cargo build --release && cargo bench --no-run
    python3 benches/table.py --program target/release/ropewalk --bench target/release/deps/table-... --data DIR \\
        --python PYTHON --baseline-folder FOLDER

FOLDER holds the baseline: peer_pipeline.py (read, detect, measure, mesh, write), bench_parts.py (single building blocks),
limits.py (bandwidth of the machine), make_field.py (the fields). PYTHON runs them. Without them only our own figures are taken,
from data that are already there. Missing data are made in DIR (f256.h5, f512.h5, f1024.h5 and so on).

Programs run alternately after one uncounted run of each; every figure is a median. Wall and processor time and peak resident memory
of a program are what the operating system says of the finished process (wait4).
"""
import argparse
import json
import os
import platform
import shutil
import statistics
import subprocess
import sys
import tempfile
import time

HERE = os.path.dirname(os.path.abspath(__file__))
LINES = ["limits", "256u", "256u-memory", "256ub", "spectral", "512u", "sweep", "labels", "isosurface", "1024", "giant", "threads"]
LEVEL = 1.6
MIN_CELLS = 30


def stop(text):
    sys.exit(f"table.py: {text}")


def say(text):
    print(text, file=sys.stderr, flush=True)


# ------------------------------------------------------------------ running programs
def once(command):
    """Wall s, CPU s, peak MiB and standard output of a command."""
    with tempfile.TemporaryFile("w+") as errors:
        start = time.perf_counter()
        child = subprocess.Popen(command, stdout=subprocess.PIPE, stderr=errors, text=True)
        out = child.stdout.read()
        _, status, usage = os.wait4(child.pid, 0)
        wall = time.perf_counter() - start
        child.returncode = os.waitstatus_to_exitcode(status)
        if child.returncode != 0:
            errors.seek(0)
            stop(f"exit code {child.returncode} of {' '.join(command)}\n{errors.read()}")
    return {"wall": wall, "cpu": usage.ru_utime + usage.ru_stime, "peak": usage.ru_maxrss / 1024, "out": out}


def threads(line):
    return f"{line['threads']} thread" + "s" * (line["threads"] != 1)


class Case:
    """A command, and what is taken from each of its runs besides time and memory."""

    def __init__(self, command, more=lambda run: {}):
        self.command, self.more = command, more


def alternately(cases, runs, warm=True):
    """Medians of all figures of every case."""
    taken = {name: [] for name in cases}
    for k in range(runs + warm):
        for name, case in cases.items():
            run = once(case.command)
            run.update(case.more(run))
            del run["out"]
            counted = k > 0 or not warm
            figures = ", ".join(f"{key} {value:.3g}" for key, value in run.items())
            say(f"  {name}: {figures}{'' if counted else ' (not counted)'}")
            if counted:
                taken[name].append(run)
    RAW.append({name: runs for name, runs in taken.items()})
    return {name: {key: statistics.median(r[key] for r in rows) for key in rows[0]} for name, rows in taken.items()}


RAW = []


# ------------------------------------------------------------------ the two programs
class Bench:
    def __init__(self, a):
        self.a = a
        self.rows = []
        self.own = {}

    def field(self, n):
        """A field of n cells along each axis, made where it is missing."""
        path = os.path.join(self.a.data, f"f{n}.h5")
        if os.path.exists(path):
            return path
        say(f"making {path}")
        if n > self.a.largest_made:
            small = self.field(n // 2)
            python = self.a.python or sys.executable
            subprocess.run([python, os.path.join(HERE, "make_large.py"), small, path], check=True)
        else:
            subprocess.run([self.python(), self.script("make_field.py"), "-n", str(n), path], check=True)
        return path

    def python(self):
        return self.a.python or stop("this needs --python and --baseline-folder")

    def script(self, name):
        if not self.a.baseline_folder:
            stop(f"this needs --baseline-folder with {name}")
        return os.path.join(self.a.baseline_folder, name)

    def has_baseline(self):
        return bool(self.a.python and self.a.baseline_folder)

    def ours(self, n, *more, magnetic=False, scheme="fd8"):
        out = os.path.join(self.a.data, "ours")
        turns = 2 * max(1, n // self.a.largest_made)
        command = [self.a.program, "catalogue", self.field(n), "--velocity", "u,v,w", "--lengths", f"{turns}pi"]
        command += ["--family", f"vorticity: vorticity > {LEVEL} rms"]
        if magnetic:
            command += ["--magnetic", "bx,by,bz", "--family", f"current: current > {LEVEL} rms"]
        command += ["--min-cells", str(MIN_CELLS), "--derivative", scheme, "--connectivity", "26", "--replace", "-o", out, *more]

        def timing(_):
            with open(os.path.join(out, "timing.json")) as f:
                told = json.load(f)
            figures = {f"{s['stage']} s": s["seconds"] for s in told["stages"]}
            numbers = {key: value for key, value in told.items() if isinstance(value, (int, float))}
            figures.update({key: value for key, value in numbers.items() if key.startswith("bytes_")})
            return figures

        return Case(command, timing)

    def baseline(self, n, scheme="fd8", magnetic=False):
        command = [self.python(), self.script("peer_pipeline.py"), self.field(n), "--out", os.path.join(self.a.data, "baseline")]
        command += ["--derivative", scheme, "--fields", "needed", "--overlap"]
        command += ["--threshold-rms", str(LEVEL), "--min-voxels", str(MIN_CELLS)]
        command += [] if magnetic else ["--no-b"]

        def stages(run):
            told = json.loads(run["out"].strip().splitlines()[-1])
            return {"stages": told["total_wall_s"], "objects": told["summary"]["objects_kept"]}

        return Case(command, stages)

    def inside(self, binary, *words):
        """Lines of JSON of a bench binary."""
        if not binary:
            stop("this line needs --bench (or --bench-isosurface)")
        run = once([binary, *words])
        RAW.append({"bench": words, "lines": run["out"]})
        return [json.loads(line) for line in run["out"].splitlines() if line.startswith("{")]

    def indicator(self, n):
        """|curl u| by transforms, as little-endian f32, x fastest."""
        path = os.path.join(self.a.data, f"vorticity{n}.f32")
        if not os.path.exists(path):
            say(f"making {path}")
            subprocess.run([self.python(), "-c", VORTICITY, self.field(n), path], check=True)
        return path

    # -------------------------------------------------------------- rows of the table
    def row(self, what, measure, ours, theirs="", ratio="", goal=""):
        self.rows.append((what, measure, ours, theirs, ratio, goal))
        say("| " + " | ".join(self.rows[-1]) + " |")

    def against(self, what, figures, ours, speed, memory=None, counted=""):
        """Rows that compare one of our cases with the baseline."""
        o, b = figures[ours], figures.get("baseline")
        self.row(what, "wall", f"{o['wall']:.3f} s", *(self.two(b, "wall", o["wall"]) if b else ("", "")), speed)
        if b:
            self.row("", "wall against its stages", f"{o['wall']:.3f} s", *self.two(b, "stages", o["wall"]))
        self.row("", "processor time", f"{o['cpu']:.3f} s", *(self.two(b, "cpu", o["cpu"]) if b else ("", "")))
        theirs = (f"{b['peak']:.0f} MiB", f"{b['peak'] / o['peak']:.1f}") if b else ("", "")
        self.row("", "peak memory", f"{o['peak']:.0f} MiB", *theirs, memory or "")

    @staticmethod
    def two(b, key, ours):
        return f"{b[key]:.3f} s", f"{b[key] / ours:.1f}"

    def compare(self, cases, n, **how):
        if self.has_baseline():
            cases["baseline"] = self.baseline(n, **how)
        return alternately(cases, self.a.runs)

    # -------------------------------------------------------------- the lines
    def line_limits(self):
        out = json.loads(once([self.python(), self.script("limits.py")])["out"])["GB_per_s"]
        for key in ("copy", "triad", "pagecache_read"):
            self.row(f"this machine: {key}", "1, 2 threads", f"{out[key + '_1']:.1f}, {out[key + '_2']:.1f} GB/s")

    def line_256u(self):
        n = self.a.small
        figures = self.compare({"ours": self.ours(n)}, n)
        self.own[n] = figures["ours"]["wall"]
        self.against(f"{n}^3, u, order 8", figures, "ours", "9x")

    def line_256u_memory(self):
        n, limit = self.a.small, self.a.small_memory
        figures = self.compare({"unlimited": self.ours(n), "limited": self.ours(n, "--memory", limit)}, n)
        self.against(f"{n}^3, u, order 8, --memory {limit}", figures, "limited", "", "7x less")
        slower = figures["limited"]["wall"] / figures["unlimited"]["wall"]
        both = [f"{figures[name]['wall']:.3f} s" for name in ("limited", "unlimited")]
        self.row("", "over unlimited time", *both, f"{slower:.2f}", "at most 1.3")

    def line_256ub(self):
        n = self.a.small
        figures = self.compare({"ours": self.ours(n, magnetic=True)}, n, magnetic=True)
        self.against(f"{n}^3, u and b, both families (baseline: one)", figures, "ours", "8x", "8x less")

    def line_spectral(self):
        n = self.a.small
        figures = self.compare({"ours": self.ours(n, scheme="spectral")}, n, scheme="spectral")
        self.against(f"{n}^3, u, spectral", figures, "ours", "7x")

    def line_512u(self):
        n, limit = 2 * self.a.small, self.a.middle_memory
        cases = {"ours": self.ours(n), "limited": self.ours(n, "--memory", limit), "half": self.ours(n // 2)}
        figures = self.compare(cases, n)
        self.own[n] = figures["ours"]["wall"]
        self.against(f"{n}^3, u, order 8", figures, "ours", "9x")
        self.against(f"the same, --memory {limit}", figures, "limited", "", "under it")
        ratio = figures["ours"]["wall"] / figures["half"]["wall"]
        both = [f"{figures[name]['wall']:.3f} s" for name in ("ours", "half")]
        self.row("", f"over our time at {n // 2}^3", *both, f"{ratio:.2f}", "at most 8.5")

    def line_1024(self):
        n, limit = 4 * self.a.small, self.a.large_memory
        cases = {"ours": self.ours(n, "--memory", limit), "half": self.ours(n // 2, "--memory", limit)}
        figures = alternately(cases, self.a.large_runs, warm=False)
        o, half = figures["ours"], figures["half"]
        self.row(f"{n}^3, u, order 8, --memory {limit}", "wall", f"{o['wall']:.1f} s")
        self.row("", "peak memory", f"{o['peak']:.0f} MiB", "", "", "completes")
        both = [f"{x['wall']:.1f} s" for x in (o, half)]
        self.row("", f"over our time at {n // 2}^3", *both, f"{o['wall'] / half['wall']:.2f}", "at most 8.5")
        read = o.get("bytes_read")
        size = os.path.getsize(self.field(n))
        told = f"{size / o['wall'] / 1e9:.2f} GB/s of input"
        if read:
            told = f"{read / o['wall'] / 1e9:.2f} GB/s ({read / size:.2f} times the file)"
        self.row("", "read rate over the whole run", told, "", "", "stated")

    def line_sweep(self):
        words = ["--field", self.field(self.a.small), "--runs", str(self.a.runs), "--level", str(LEVEL)]
        for t in self.inside(self.a.bench, "sweep", *words):
            what = f"{t['line']}: {t['what']}, {threads(t)}"
            if t["line"] == "copy":
                self.row(what, "wall", f"{t['seconds']:.4f} s, {t['read_and_written_gb_per_s']:.1f} GB/s")
            else:
                goal = "at most 4" if t["threads"] == 2 else ""
                self.row(what, "over one copy", f"{t['seconds']:.4f} s", "", f"{t['times_a_copy']:.1f}", goal)

    def parts(self):
        if not self.has_baseline():
            return None
        command = [self.python(), self.script("bench_parts.py"), self.field(self.a.small)]
        command += ["--reps", str(self.a.runs), "--levels", "2", "--skip-slow"]
        return json.loads(once(command)["out"].strip().splitlines()[-1])

    def line_labels(self):
        n = self.a.small
        words = ["labels", "--indicator", self.indicator(n), "--level", str(LEVEL), "--runs", str(self.a.runs)]
        before = self.inside(self.a.bench, *words)
        parts = self.parts()
        after = self.inside(self.a.bench, *words)
        for p, q in zip(before, after):
            ours = (p["seconds"] + q["seconds"]) / 2
            theirs, ratio = "", ""
            if parts:
                stages = [parts["times"][k]["wall_median"] for k in ("label_cc3d", "periodic_merge", "sizes_bincount")]
                theirs, ratio = f"{sum(stages):.3f} s ({' + '.join(f'{s:.3f}' for s in stages)})", f"{sum(stages) / ours:.1f}"
            goal = {1: "1x", 2: "3x"}.get(p["threads"], "")
            self.row(f"labels and counts, {n}^3, {threads(p)}", "wall", f"{ours:.4f} s", theirs, ratio, goal)
        if parts:
            self.row("", "objects", str(before[0]["objects"]), str(parts["periodic_count"]), "", "the same but for rounding of the level")

    def line_isosurface(self):
        words = ["--indicator", self.indicator(self.a.small), "--level", str(LEVEL), "--runs", str(self.a.runs)]
        before = self.inside(self.a.bench_isosurface, *words)
        parts = self.parts()
        for t in before:
            theirs, ratio = "", ""
            if parts:
                s = parts["times"]["marching_cubes_lewiner"]["wall_median"]
                theirs, ratio = f"{s:.3f} s, {parts['mesh_size']['vertices']} vertices", f"{s / t['seconds']:.1f}"
            more = "".join(f", {t[key]} {key}" for key in ("vertices", "triangles", "open_edges") if key in t)
            self.row(f"isosurfaces, {t.get('what', '')}, {threads(t)}", "wall", f"{t['seconds']:.4f} s{more}", theirs, ratio, "5x, closed")

    def line_giant(self):
        lines = self.inside(self.a.bench, "giant", "--runs", str(self.a.runs), "--size", str(self.a.small))
        for many, one in zip(lines[::2], lines[1::2]):
            what = f"{one['what']}{', with meshes' if one.get('meshes') else ''}, {threads(one)}"
            cells = lambda x: f"{x['objects']} objects, {x['cells']:.0f} cells, largest {100 * x['largest_holds']:.1f} %"
            said = [f"{x['seconds']:.3f} s ({cells(x)})" for x in (one, many)]
            said[1] = "ours: " + said[1]
            self.row(what, "wall over many objects", *said, f"{one['seconds'] / many['seconds']:.2f}", "at most 1.5")
            self.row("", "shape pass alone", f"{one['shapes_seconds']:.3f} s", f"{many['shapes_seconds']:.3f} s",
                     f"{one['shapes_seconds'] / many['shapes_seconds']:.2f}")

    def line_threads(self):
        n = self.a.small
        loop = lambda run: {"loop": json.loads(run["out"].splitlines()[-1])["seconds"]}
        bench = self.a.bench or stop("threads need --bench")
        cases = {}
        for threads in ("1", "2"):
            cases[f"loop {threads}"] = Case([bench, "compute", "--runs", "1", "--threads", threads], loop)
            cases[f"ours {threads}"] = self.ours(n, "--threads", threads)
        f = alternately(cases, self.a.runs)
        loop, ours = f["loop 1"]["loop"] / f["loop 2"]["loop"], f["ours 1"]["wall"] / f["ours 2"]["wall"]
        told = f"{ours:.2f} ({f['ours 1']['wall']:.3f} s, {f['ours 2']['wall']:.3f} s)"
        share = f"{100 * ours / loop:.0f} %"
        self.row(f"2 threads over 1, {n}^3, u, order 8", "speed-up", told, f"{loop:.2f} (loop without memory)", share, "90 %")


VORTICITY = """
import sys, h5py, numpy as np
with h5py.File(sys.argv[1]) as f:
    u = [f[k][...] for k in ("u", "v", "w")]
n = u[0].shape
k = [np.fft.fftfreq(n[0], 1 / n[0]), np.fft.fftfreq(n[1], 1 / n[1]), np.fft.rfftfreq(n[2], 1 / n[2])]
for a in range(3):
    k[a][np.abs(k[a]) == n[a] / 2] = 0
hat = [np.fft.rfftn(c) for c in u]
at = lambda a: k[a].reshape([-1 if b == a else 1 for b in range(3)])
d = lambda c, a: np.fft.irfftn(1j * at(a) * hat[c], s=n)
square = (d(2, 1) - d(1, 0)) ** 2
square += (d(0, 0) - d(2, 2)) ** 2
square += (d(1, 2) - d(0, 1)) ** 2
np.sqrt(square).astype("<f4").tofile(sys.argv[2])
"""


# ------------------------------------------------------------------ the machine
def machine(a):
    def first(command):
        try:
            return subprocess.run(command, capture_output=True, text=True, check=True).stdout.strip().splitlines()[0]
        except (OSError, subprocess.CalledProcessError, IndexError):
            return "unknown"

    cpu, flags = platform.processor(), ""
    with open("/proc/cpuinfo") as f:
        for line in f:
            if line.startswith("model name"):
                cpu = line.split(":", 1)[1].strip()
            if line.startswith("flags"):
                flags = ", ".join(x for x in ("avx2", "avx512f") if x in line.split())
    with open("/proc/meminfo") as f:
        memory = int(f.readline().split()[1]) / 2**20
    out = [
        f"{time.strftime('%Y-%m-%d %H:%M', time.gmtime())} UTC, {cpu} ({flags}), {len(os.sched_getaffinity(0))} cores, "
        f"{memory:.1f} GiB, {platform.system()} {platform.release()}, load {os.getloadavg()[0]:.2f} at the end",
        f"{first([a.program, '--version'])}; medians of {a.runs} (of {a.large_runs} for the largest), "
        "programs alternately, page cache warm",
    ]
    if a.python:
        names = "numpy scipy scikit-image h5py connected-components-3d edt numba pandas"
        ask = "import sys, importlib.metadata as m\n"
        ask += "print('Python', sys.version.split()[0], *[f'{n} {m.version(n)}' for n in sys.argv[1].split()])"
        out.append("baseline: " + first([a.python, "-c", ask, names]))
    return out


def main():
    p = argparse.ArgumentParser(description=__doc__, formatter_class=argparse.RawDescriptionHelpFormatter)
    p.add_argument("--program", required=True, help="the ropewalk binary")
    p.add_argument("--bench", help="the built bench binary `table`")
    p.add_argument("--bench-isosurface", help="the built bench binary `isosurface`")
    p.add_argument("--data", required=True, help="folder for fields and results")
    p.add_argument("--python", help="interpreter of the baseline")
    p.add_argument("--baseline-folder", help="where the baseline's scripts are")
    p.add_argument("--lines", default=",".join(LINES), help="which lines, separated by commas")
    p.add_argument("--runs", "-n", type=int, default=5)
    p.add_argument("--large-runs", type=int, default=3, help="of the largest field, which is not warmed up")
    p.add_argument("--small", type=int, default=256, help="cells along an axis of the small field; the others have twice and four times")
    p.add_argument("--largest-made", type=int, default=512, help="fields up to this are made by make_field.py, larger ones from smaller")
    p.add_argument("--small-memory", default="160MiB")
    p.add_argument("--middle-memory", default="1GiB")
    p.add_argument("--large-memory", default="2GiB")
    p.add_argument("--json", help="file for every single figure")
    a = p.parse_args()
    lines = a.lines.split(",")
    for line in lines:
        if line not in LINES:
            p.error(f"{line} is none of {', '.join(LINES)}")
    if not shutil.which(a.program):
        p.error(f"{a.program} is no program")
    os.makedirs(a.data, exist_ok=True)
    bench = Bench(a)
    for line in lines:
        say(f"{line}:")
        getattr(bench, "line_" + line.replace("-", "_"))()
    print("\n".join(machine(a)))
    print("\n| what | measure | ropewalk | baseline | ratio | to reach |\n|---|---|---|---|---|---|")
    for row in bench.rows:
        print("| " + " | ".join(row) + " |")
    if a.json:
        with open(a.json, "w") as f:
            json.dump(RAW, f, indent=1)


if __name__ == "__main__":
    main()
