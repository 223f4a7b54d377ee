"""Time as ratios within one run to scikit-image's route through the whole page, and the peak memory of one trace in a child process."""

import json
import os
import subprocess
import sys
import tempfile
import time
from collections.abc import Callable
from pathlib import Path
from typing import Any

import numpy as np

from curvebank import sheet, trace
from curvebank.errors import TraceError

from .cases import Case, Line, at_most
from .traces import panel_map

LARGE_PX = 7_000_000
HUGE_PX = 30_000_000
MOVED_ROWS = 16
"""How far along the true line (about 1.6 px a row) the moved click goes."""


def route_seconds(page: sheet.Sheet, clicks: np.ndarray) -> float:
    """scikit-image's ``route_through_array`` from the first to the last click over the whole page (float32 cost .02 + (1 - ink)^2)."""
    from skimage.graph import route_through_array

    grey = page.pixels if page.pixels.ndim == 2 else page.pixels.min(axis=2)
    cost = (0.02 + (grey.astype(np.float32) / 255) ** 2).astype(np.float32)
    a, b = (tuple(int(round(v)) for v in clicks[k][::-1]) for k in (0, -1))
    return timed(lambda: route_through_array(cost, a, b, fully_connected=True, geometric=True))


def timed(work: Callable[[], Any]) -> float:
    """Process time of one call [s]."""
    start = time.process_time()
    work()
    return time.process_time() - start


class Times:
    """Per curve of sheets of 7 Mpx and more: trace, re-trace after one moved click, preparation, each over the route's time."""

    name = "time"

    def __init__(self, curves: int, least_px: int = LARGE_PX) -> None:
        self.curves, self.least_px = curves, least_px
        self.rows: list[dict[str, Any]] = []
        self.sheets: list[dict[str, Any]] = []

    def visit(self, case: Case) -> None:
        if case.pixels < self.least_px:
            return
        case.page  # noqa: B018 - decoded before the clock starts
        preparing = timed(lambda: sheet.prepare(case.page))
        routes = []
        open_ones = [c for c in case.truth["curves"] if not c["closed"]]
        step = max(len(open_ones) // self.curves, 1)
        for c in open_ones[::step][: self.curves]:
            panel = next(p for p in case.truth["panels"] if p["id"] == c["panel"])
            placed = panel_map(case, panel)
            asked = trace.Clicks(id=c["id"], points=c["clicks"]["3"], closed=False)
            kept: list[Any] = []
            seconds = timed(lambda placed=placed, asked=asked, kept=kept: kept.append(trace.trace_panel(case.prepared, placed, [asked])[0]))
            route = route_seconds(case.page, np.asarray(asked.points, float))
            routes.append(route)
            row = {"sheet": case.name, "curve": c["id"], "trace": seconds, "route": route, "ratio": seconds / route}
            if hasattr(trace, "again") and not isinstance(kept[0], TraceError):
                points = np.array(asked.points, float)
                line = np.asarray(c["line"], float)[:, :2]
                k = int(np.argmin(np.hypot(*(line - points[1]).T)))
                points[1] = line[min(k + MOVED_ROWS, len(line) - 1)] + (1.0, -1.0)
                moved = trace.Clicks(id=c["id"], points=points.tolist(), closed=False)
                row["again"] = timed(
                    lambda placed=placed, moved=moved, asked=asked, kept=kept: trace.again(case.prepared, placed, moved, asked, kept[0])
                )
            self.rows.append(row)
        if routes:
            ratio = preparing / float(np.median(routes))
            self.sheets.append({"sheet": case.name, "pixels": case.pixels, "prepare": preparing, "ratio": ratio})

    def lines(self) -> list[Line]:
        def middle(values: list[float]) -> float | None:
            return float(np.median(values)) if values else None

        traces, again = [r["ratio"] for r in self.rows], [r["again"] / r["route"] for r in self.rows if "again" in r]
        prepare = [s["ratio"] for s in self.sheets]
        return [
            at_most("trace / route over the whole page, median per curve", middle(traces), len(traces), 1 / 12),
            at_most("re-trace after one moved click / route, median per curve", middle(again), len(again), 1 / 30),
            at_most("preparation / route, median per sheet", middle(prepare), len(prepare), 1 / 2),
        ]

    def table(self) -> list[str]:
        out = [
            f"{s['sheet']:20s} {s['pixels'] / 1e6:5.1f} Mpx prepare {s['prepare']:.2f} s, over route {s['ratio']:.2f}" for s in self.sheets
        ]
        for r in self.rows:
            again = f" again 1/{r['route'] / r['again']:.1f}" if "again" in r else ""
            out.append(
                f"{r['sheet']:20s} {r['curve']} route {r['route']:.2f} s, trace {1000 * r['trace']:.0f} ms = 1/{1 / r['ratio']:.1f}{again}"
            )
        return out


class Memory:
    """Rise of the peak of resident memory while one curve is traced on a sheet of 30 Mpx and more, in a process that only does that."""

    name = "memory"

    def __init__(self) -> None:
        self.rows: list[dict[str, Any]] = []

    def visit(self, case: Case) -> None:
        if case.pixels < HUGE_PX:
            return
        with tempfile.TemporaryDirectory() as folder:
            for key, array in case.prepared.arrays().items():
                np.save(Path(folder) / f"{key}.npy", array)
            for c in case.truth["curves"][:3]:
                panel = next(p for p in case.truth["panels"] if p["id"] == c["panel"])
                job = {"points": c["clicks"]["3"], "closed": c["closed"], "polygon": panel["polygon"], "folder": folder}
                root = str(Path(__file__).resolve().parents[3])
                env = os.environ | {
                    "PYTHONPATH": os.pathsep.join([root, str(Path(__file__).resolve().parents[1]), os.environ.get("PYTHONPATH", "")])
                }
                child = subprocess.run(
                    [sys.executable, "-m", "yardstick.one_trace"],
                    input=json.dumps(job),
                    capture_output=True,
                    text=True,
                    check=True,
                    env=env,
                )
                self.rows.append({"sheet": case.name, "curve": c["id"], **json.loads(child.stdout)})

    def lines(self) -> list[Line]:
        rises = [r["rise_mb"] for r in self.rows]
        return [at_most("peak memory rise of one trace on 35 Mpx, MB, worst", max(rises) if rises else None, len(rises), 400)]

    def table(self) -> list[str]:
        return [f"{r['sheet']:20s} {r['curve']} before {r['before_mb']:.0f} MB, rise {r['rise_mb']:.0f} MB" for r in self.rows]
