"""What must be reached, and what is: one table over folders of sheets with truth.

    python tests/bench/limits.py [FOLDER ...] [--sections traces maps values reclicks time memory bound] [--only NAME ...] [--json FILE]

FOLDERs hold NAME.recipe.json, NAME.truth.json and scans (default: samples/; ``pool.py`` writes others). Curves are classed by their truth:
a loop is closed; a merging curve runs within a line width of another for more than 5 % of its length; a contour is an open line of
constant efficiency; a sheet is hard when its truth says so. Times are process time, one thread, ratios within this run.
"""

import argparse
import json
import os
import sys
import time
from pathlib import Path

for name in ("OMP_NUM_THREADS", "OPENBLAS_NUM_THREADS", "MKL_NUM_THREADS"):
    os.environ.setdefault(name, "1")

HERE = Path(__file__).resolve().parent
sys.path.insert(0, str(HERE))
sys.path.insert(0, str(HERE.parents[1]))

from yardstick import cases, maps, speed, theory, traces  # noqa: E402

from curvebank.errors import CurvebankError  # noqa: E402

SECTIONS = ("traces", "maps", "values", "reclicks", "time", "memory", "bound")


def main() -> int:
    ask = argparse.ArgumentParser(description=__doc__, formatter_class=argparse.RawDescriptionHelpFormatter)
    ask.add_argument("folders", type=Path, nargs="*", default=[HERE.parents[1] / "samples"])
    ask.add_argument("--sections", nargs="*", choices=SECTIONS, default=list(SECTIONS))
    ask.add_argument("--only", nargs="*", help="sheets whose name contains one of these")
    ask.add_argument("--clicks", nargs="*", choices=("2", "3", "5"), default=["2", "3", "5"])
    ask.add_argument("--reclicks", type=int, default=200, help="re-clickings a sheet, marks alone")
    ask.add_argument("--reclicks-grid", type=int, default=20, help="re-clickings a sheet with the printed grid")
    ask.add_argument("--timed-curves", type=int, default=4, help="curves a sheet for the time ratios")
    ask.add_argument("--seeds", type=int, default=400, help="seeds of each line for the Cramer-Rao bound")
    ask.add_argument("--quiet", action="store_true", help="the targets alone")
    ask.add_argument("--json", type=Path)
    asked = ask.parse_args()
    makers = {
        "traces": lambda: traces.Traces(asked.clicks),
        "maps": maps.Maps,
        "values": maps.Values,
        "reclicks": lambda: maps.Reclicks(asked.reclicks, asked.reclicks_grid),
        "time": lambda: speed.Times(asked.timed_curves),
        "memory": speed.Memory,
        "bound": lambda: theory.Bound(asked.seeds),
    }
    parts = [makers[s]() for s in asked.sections]
    breaks, sheets = 0, cases.find(asked.folders, asked.only)
    for case in sheets:
        start = time.process_time()
        for part in parts:
            try:
                part.visit(case)
            except CurvebankError as fault:
                case.faults.append(f"{part.name}: {fault}")
            except (ValueError, ArithmeticError, LookupError) as broken:
                # One sheet that breaks the engine must not cost the figures of the others; it is counted.
                case.faults.append(f"{part.name} BROKE: {type(broken).__name__}: {broken}")
                breaks += 1
        if not asked.quiet:
            print(f"{case.name:20s} {time.process_time() - start:6.1f} s {'; '.join(dict.fromkeys(case.faults))}", flush=True)
    for part in parts:
        if not asked.quiet:
            print(f"\n-- {part.name}")
            print("\n".join(part.table()))
            if isinstance(part, traces.Traces):
                print("\n".join(part.failures()))
    print(f"\n{'target':74s} {'measured':>10s} {'n':>6s}  {'limit':12s} reached")
    lines = [line for part in parts for line in part.lines()]
    lines.append(cases.at_most("sheets and parts that broke the engine", float(breaks), len(sheets), 0))
    print("\n".join(line.words() for line in lines))
    if asked.json:
        kept = {part.name: part.rows for part in parts}
        asked.json.write_text(json.dumps({"targets": [line.__dict__ for line in lines], "rows": kept}, indent=1))
    return 0


if __name__ == "__main__":
    sys.exit(main())
