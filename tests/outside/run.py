"""Runs every check of this folder: functions named check_* in the modules below. Usage: run.py PROGRAM"""

import shutil
import sys
import time
import traceback

import derivatives
import frame
import labels
import layouts
import meshes
import outputs
import peaks
import quantities
import readme

import support
import tables
import totals


def main():
    passed, failed = 0, []
    for module in (tables, layouts, labels, derivatives, totals, frame, peaks, quantities, meshes, outputs, readme):
        for name, check in sorted(vars(module).items()):
            if not name.startswith("check_"):
                continue
            start = time.perf_counter()
            try:
                check()
                passed += 1
                verdict = "ok"
            except Exception:
                failed.append(name)
                verdict = "FAILED\n" + traceback.format_exc()
            print(f"outside {module.__name__}.{name} ... {verdict} ({time.perf_counter() - start:.1f} s)", flush=True)
    shutil.rmtree(support.WORK, ignore_errors=True)
    print(f"\noutside: {passed} passed, {len(failed)} failed")
    sys.exit(1 if failed or not passed else 0)


if __name__ == "__main__":
    main()
