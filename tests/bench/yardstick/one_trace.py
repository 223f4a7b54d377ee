"""One trace in a process of its own: reads a job from standard input, prints the peak memory before and the rise during the trace [MB]."""

import json
import resource
import sys
from pathlib import Path

import numpy as np

from curvebank import sheet, trace

from .traces import Box


def peak_mb() -> float:
    """High-water mark of this process's resident memory [MB]."""
    status = Path("/proc/self/status")
    if status.exists():  # getrusage would still count what the parent held when it forked
        return int(next(line for line in status.read_text().splitlines() if line.startswith("VmHWM")).split()[1]) / 1024
    peak = resource.getrusage(resource.RUSAGE_SELF).ru_maxrss
    return peak / (1024 * 1024 if sys.platform == "darwin" else 1024)


def main() -> None:
    job = json.load(sys.stdin)
    arrays = {f.stem: np.load(f) for f in Path(job["folder"]).glob("*.npy")}
    prepared = sheet.Prepared.from_arrays(arrays)
    asked = trace.Clicks(id="c", points=job["points"], closed=job["closed"])
    before = peak_mb()
    got = trace.trace_panel(prepared, Box(job["polygon"]), [asked])
    print(json.dumps({"before_mb": before, "rise_mb": peak_mb() - before, "traced": not isinstance(got[0], Exception)}))


if __name__ == "__main__":
    main()
