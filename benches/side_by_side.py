#!/usr/bin/env python3
"""Runs two commands alternately and prints medians of wall time, CPU time and peak memory, and their ratios, as Markdown.

    python3 benches/side_by_side.py -n 5 --ours "COMMAND" --baseline "COMMAND"

Each command runs once before counting begins (file cache, compiled kernels). Noise: run on an idle machine and trust ratios
of one run, not figures of two.
"""
import argparse
import os
import shlex
import statistics
import subprocess
import sys
import time


def once(command):
    start = time.perf_counter()
    child = subprocess.Popen(shlex.split(command), stdout=subprocess.DEVNULL)
    _, status, usage = os.wait4(child.pid, 0)
    wall = time.perf_counter() - start
    if status != 0:
        sys.exit(f"failed: {command}")
    return wall, usage.ru_utime + usage.ru_stime, usage.ru_maxrss / 1024


def main():
    p = argparse.ArgumentParser(description=__doc__, formatter_class=argparse.RawDescriptionHelpFormatter)
    p.add_argument("-n", type=int, default=5)
    p.add_argument("--ours", required=True)
    p.add_argument("--baseline", required=True)
    a = p.parse_args()
    commands = {"ropewalk": a.ours, "baseline": a.baseline}
    for c in commands.values():
        once(c)
    runs = {name: [] for name in commands}
    for _ in range(a.n):
        for name, c in commands.items():
            runs[name].append(once(c))
    medians = {name: [statistics.median(x) for x in zip(*r)] for name, r in runs.items()}
    print("| | wall s | CPU s | peak MiB |\n|---|---|---|---|")
    for name, (wall, cpu, peak) in medians.items():
        print(f"| {name} | {wall:.2f} | {cpu:.2f} | {peak:.0f} |")
    ratio = [b / o for o, b in zip(medians["ropewalk"], medians["baseline"])]
    print(f"| baseline / ropewalk | {ratio[0]:.1f} | {ratio[1]:.1f} | {ratio[2]:.1f} |")


if __name__ == "__main__":
    main()
