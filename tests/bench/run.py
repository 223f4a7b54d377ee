"""Benchmark: how true and how fast are the traces, over sheets with known truth.

    python tests/bench/run.py [--sheets DIR] [--clicks 2|3|5] [--drawn SEEDS] [--no-speed] [--json FILE]

DIR (default: samples/) holds NAME.recipe.json, the scan and NAME.truth.json. ``--drawn N`` draws N sheets of each kind instead
(tests/bench/drawn.py). Speed is one thread, process time, with scikit-image's ``route_through_array`` over the whole page in the same run
(float32 cost .02 + (1 - ink)^2, fully connected, first to last click). Prints a table, writes JSON. Truth is read here and nowhere else.
"""

import argparse
import importlib.util
import json
import os
import sys
import time
from pathlib import Path
from typing import Any

for name in ("OMP_NUM_THREADS", "OPENBLAS_NUM_THREADS", "MKL_NUM_THREADS"):
    os.environ.setdefault(name, "1")

import numpy as np  # noqa: E402

HERE = Path(__file__).resolve().parent
sys.path.insert(0, str(HERE))
sys.path.insert(0, str(HERE.parents[1]))

import drawn  # noqa: E402
import measures  # noqa: E402

from curvebank import sheet, trace  # noqa: E402
from curvebank.errors import CurvebankError, TraceError  # noqa: E402


class Outline:
    """A stand-in for a calibrated panel: a box, with a margin."""

    def __init__(self, points: Any, margin: float) -> None:
        box = np.asarray(points, float)
        low, high = box.min(axis=0), box.max(axis=0)
        pad = margin * (high - low) + 12
        self.low, self.high = low - pad, high + pad
        self.outline = np.array([self.low, [self.high[0], self.low[1]], self.high, [self.low[0], self.high[1]]])

    def inside(self, xy: Any) -> np.ndarray:
        xy = np.asarray(xy, float)
        return ((xy >= self.low) & (xy <= self.high)).all(axis=1)


def panel_of(truth: dict[str, Any], panel_id: str, recipe: dict[str, Any] | None) -> Any:
    """The calibrated panel when the axes can be had, else a box around the marks."""
    entry = next(p for p in truth["panels"] if p["id"] == panel_id)
    if recipe is not None:
        found = next(p for p in recipe["panels"] if p["id"] == panel_id)
        marks = [m["at"] for a in found["axes"].values() for m in a["marks"]]
        return Outline(marks, 0.2)
    return Outline(entry["polygon"], 0.0)


def page_of(path: Path | None, picture: np.ndarray | None, about: dict[str, Any]) -> tuple[sheet.Sheet, bytes]:
    """The page that ``about`` (a recipe's "sheet") names, from a file or from a drawn picture."""
    if path is not None:
        data = path.read_bytes()
    else:
        import io

        from PIL import Image

        buffer = io.BytesIO()
        Image.fromarray(picture).save(buffer, "PNG")
        data = buffer.getvalue()
    return sheet.load(data, **{key: about[key] for key in ("page", "dpi", "turn") if key in about}), data


def shortest_path_seconds(page: sheet.Sheet, clicks: np.ndarray) -> float:
    """scikit-image's route through the whole page."""
    from skimage.graph import route_through_array

    grey = page.pixels if page.pixels.ndim == 2 else page.pixels.min(axis=2)
    ink = 1 - grey.astype(np.float32) / 255
    cost = (0.02 + (1 - ink) ** 2).astype(np.float32)
    a, b = (tuple(int(round(v)) for v in clicks[k][::-1]) for k in (0, -1))
    start = time.process_time()
    route_through_array(cost, a, b, fully_connected=True, geometric=True)
    return time.process_time() - start


def run_sheet(
    name: str, page: sheet.Sheet, truth: dict[str, Any], recipe: dict[str, Any] | None, clicks: str, speed: bool
) -> tuple[list[dict[str, Any]], dict[str, Any]]:
    start = time.process_time()
    prepared = sheet.prepare(page)
    preparing = time.process_time() - start
    rows = []
    given = {c["id"]: c for c in recipe["curves"]} if recipe is not None else {}
    for panel in truth["panels"]:
        mine = [c for c in truth["curves"] if c["panel"] == panel["id"]]
        wanted = []
        for c in mine:
            points = (
                given[c["id"]]["clicks"]
                if clicks == "recipe" and c["id"] in given
                else c["clicks"].get("3" if clicks == "recipe" else clicks)
            )
            if points is not None and not (c["closed"] and len(points) < 3):
                wanted.append(trace.Clicks(id=c["id"], points=points, closed=c["closed"]))
        if not wanted:
            continue
        outline = panel_of(truth, panel["id"], recipe)
        start = time.process_time()
        results = trace.trace_panel(prepared, outline, wanted)
        each = (time.process_time() - start) / len(wanted)
        by_id = {w.id: (w, r) for w, r in zip(wanted, results, strict=True)}
        first = True
        for c in mine:
            if c["id"] not in by_id:
                continue
            asked, got = by_id[c["id"]]
            line = np.asarray(c["line"], float)
            bad = isinstance(got, TraceError)
            row = measures.score(line, c["closed"], np.zeros((0, 2)) if bad else got.pixels)
            row.update(
                sheet=name, curve=c["id"], quantity=c["quantity"], style=c["style"], width_px=c["width_px"], closed=c["closed"],
                seconds=each, flagged=bad or got.flagged, confidence=0.0 if bad else got.confidence, error=str(got) if bad else None,
                sigma=None if bad else float(np.sqrt((got.sigma_px**2).mean())),
            )  # fmt: skip
            if not bad and not row["failed"]:
                z = measures.signed_over_sigma(line, got.pixels, got.sigma_px)
                row["within_1"], row["within_2"], row["rows"] = int((z <= 1).sum()), int((z <= 2).sum()), len(z)
            if speed and first:
                row["route_seconds"] = shortest_path_seconds(page, np.asarray(asked.points, float))
                single = time.process_time()
                trace.trace_panel(prepared, outline, [asked])
                row["single_seconds"] = time.process_time() - single
                first = False
            rows.append(row)
    return rows, {"sheet": name, "prepare_seconds": preparing, "width": page.info.width, "height": page.info.height}


def values_end_to_end(folder: Path, name: str, truth: dict[str, Any], recipe: dict[str, Any], data: bytes) -> list[float]:
    """Value errors [% of axis] through recipe, axes and traces; empty while the whole chain is not installed."""
    if importlib.util.find_spec("curvebank.digitise") is None:
        return []
    from curvebank import digitise

    if not hasattr(digitise, "run"):
        return []
    done = digitise.run((folder / f"{name}.recipe.json").read_bytes(), data, {})
    if done.error is not None:
        print(f"    end to end: {done.error['message']}")
        return []
    out = []
    for true, wanted, curve in zip(truth["curves"], recipe["curves"], done.curves, strict=True):
        panel = next(p for p in truth["panels"] if p["id"] == true["panel"])
        axis = panel["y"][true["y_axis"]]
        axes = next(p for p in recipe["panels"] if p["id"] == true["panel"])["axes"]
        if curve.error is not None or axis["scale"] != "linear":
            continue
        from curvebank import units

        q, v = axes[wanted["x"]], axes[wanted["y"]]
        flow = units.from_canonical(np.asarray(curve.points)[:, 0], q["quantity"], q["unit"])
        value = units.from_canonical(np.asarray(curve.points)[:, 1], v["quantity"], v["unit"])
        miss = measures.value_error_pct(np.asarray(true["line"], float), np.asarray(flow), np.asarray(value), axis["max"] - axis["min"])
        out += [miss] if miss is not None else []
    return out


def summary(rows: list[dict[str, Any]]) -> dict[str, Any]:
    good = [r["rms"] for r in rows if not r["failed"]]
    ends = [e for r in rows if not r["failed"] and r["ends"] for e in r["ends"]]
    counted = sum(r.get("rows", 0) for r in rows)
    routes = [r["route_seconds"] / r["single_seconds"] for r in rows if "route_seconds" in r]
    failed = [r for r in rows if r["failed"]]
    return {
        "curves": len(rows), "good": len(good) / max(len(rows), 1), "rms_median": float(np.median(good)) if good else None,
        "rms_p90": float(np.percentile(good, 90)) if good else None, "rms_p99": float(np.percentile(good, 99)) if good else None,
        "ends_within_3px": float(np.mean(np.array(ends) <= 3)) if ends else None,
        "within_1_sigma": sum(r.get("within_1", 0) for r in rows) / max(counted, 1),
        "within_2_sigma": sum(r.get("within_2", 0) for r in rows) / max(counted, 1),
        "failed_and_flagged": sum(r["flagged"] for r in failed), "failed": len(failed),
        "good_but_flagged": sum(r["flagged"] and not r["failed"] for r in rows),
        "trace_seconds_median": float(np.median([r["seconds"] for r in rows])) if rows else None,
        "times_faster_than_route_median": float(np.median(routes)) if routes else None,
    }  # fmt: skip


def main() -> int:
    ask = argparse.ArgumentParser(description=__doc__, formatter_class=argparse.RawDescriptionHelpFormatter)
    ask.add_argument("--sheets", type=Path, default=HERE.parents[1] / "samples")
    ask.add_argument(
        "--clicks", choices=("recipe", "2", "3", "5"), default="recipe", help="recipe: as the recipe has them; else the truth's own"
    )
    ask.add_argument("--drawn", type=int, default=0, help="draw this many sheets of each kind instead of reading a folder")
    ask.add_argument("--kinds", nargs="*", default=list(drawn.KINDS))
    ask.add_argument("--no-speed", action="store_true")
    ask.add_argument("--curves", action="store_true", help="print every curve, not only the failed ones")
    ask.add_argument("--json", type=Path)
    asked = ask.parse_args()
    rows: list[dict[str, Any]] = []
    pages, values = [], []
    print(f"{'sheet':16s} curves failed  rms median   worst  ms/curve  route/trace  prepare s")
    jobs: list[tuple[str, Path | None]] = [(f.name.removesuffix(".truth.json"), f) for f in sorted(asked.sheets.rglob("*.truth.json"))]
    if asked.drawn:
        jobs = [(f"{kind}-{seed}", None) for kind in asked.kinds for seed in range(asked.drawn)]
    for name, file in jobs:
        recipe = None
        if file is None:
            kind, seed = name.rsplit("-", 1)
            picture, truth = drawn.draw(kind, int(seed))
            page, data = page_of(None, picture, {})
        else:
            truth = json.loads(file.read_text())
            recipe = json.loads(file.with_name(f"{name}.recipe.json").read_text())
            page, data = page_of(file.with_name(recipe["sheet"]["file"]), None, recipe["sheet"])
        try:
            mine, about = run_sheet(name, page, truth, recipe, asked.clicks, not asked.no_speed)
        except CurvebankError as fault:
            print(f"{name:16s} {fault}")
            return 1
        if recipe is not None and file is not None:
            values += values_end_to_end(file.parent, name, truth, recipe, data)
        rows += mine
        pages.append(about)
        good = [r["rms"] for r in mine if not r["failed"]] or [float("nan")]
        ratio = [r["route_seconds"] / r["single_seconds"] for r in mine if "route_seconds" in r]
        print(
            f"{name:16s} {len(mine):6d} {sum(r['failed'] for r in mine):6d}  {np.median(good):10.4f} {max(good):7.4f}"
            f" {1000 * mine[0]['seconds']:9.0f}  {np.median(ratio) if ratio else float('nan'):11.1f}  {about['prepare_seconds']:9.2f}"
        )
        for r in mine:
            if r["failed"] or asked.curves:
                marks = "".join(f" {word}" for word in ("switched", "failed", "flagged") if r[word])
                rms = float("nan") if r["rms"] is None else r["rms"]
                print(
                    f"    {r['curve']} {r['quantity']:14s} {r['style']:8s} rms {rms:.3f} coverage {r['coverage']:.3f}"
                    f" over {r['over']:.1f}{marks} {r['error'] or ''}"
                )
    total = summary(rows)
    total["value_error_pct_median"] = float(np.median(values)) if values else None
    print(json.dumps(total, indent=1))
    if asked.json:
        asked.json.write_text(json.dumps({"summary": total, "pages": pages, "curves": rows}, indent=1))
    return 0


if __name__ == "__main__":
    sys.exit(main())
