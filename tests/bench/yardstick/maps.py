"""Panel maps against the true grid, values end to end, and whether the stated calibration uncertainty covers the truth."""

import json
from typing import Any

import measures
import numpy as np

from curvebank import digitise, recipe, units

from .cases import Case, Line, at_least, at_most, between, calibrated

MARK_PX = 1.5


def axis_names(case: Case, panel: dict[str, Any]) -> list[tuple[int, str]]:
    """(index in the truth's value axes, axis id in the recipe), found by the curves that use them, else by order."""
    entry = next(p for p in case.recipe["panels"] if p["id"] == panel["id"])
    found: dict[int, str] = {}
    for true, wanted in zip(case.truth["curves"], case.recipe["curves"], strict=True):
        if true["panel"] == panel["id"]:
            found.setdefault(true["y_axis"], wanted["y"])
    return [(i, name) for i, name in found.items() if name in entry["axes"]]


def true_grid(case: Case, panel: dict[str, Any], index: int, name: str) -> tuple[np.ndarray, np.ndarray]:
    """True pixels [n, 2] and canonical (flow, value) [n, 2] of the 25 points."""
    entry = next(p for p in case.recipe["panels"] if p["id"] == panel["id"])["axes"]
    px = np.array([g["px"] for g in panel["true_grid"]], float)
    q = np.array([g["x"] for g in panel["true_grid"]], float)
    v = np.array([g["y"][index] for g in panel["true_grid"]], float)
    values = [units.to_canonical(a, entry[k]["quantity"], entry[k]["unit"]) for a, k in ((q, "flow"), (v, name))]
    return px, np.stack([np.asarray(x, float) for x in values], 1)


class Maps:
    """RMS [px] of the map over the true grid, with the printed grid and by the marks alone."""

    name = "maps"

    def __init__(self) -> None:
        self.rows: list[dict[str, Any]] = []

    def visit(self, case: Case) -> None:
        for panel in case.truth["panels"]:
            row: dict[str, Any] = {
                "sheet": case.name,
                "panel": panel["id"],
                "class": case.map_class,
                "grid": case.truth.get("grid", "light"),
            }
            for grid in ("auto", "off"):
                placed = case.maps(grid).get(panel["id"])
                if placed is None:
                    row[grid] = None
                    continue
                misses = []
                for index, name in axis_names(case, panel):
                    px, values = true_grid(case, panel, index, name)
                    misses.append(np.hypot(*(placed.to_pixels(values, ("flow", name)) - px).T))
                miss = np.concatenate(misses)
                row[grid], row[f"{grid}_worst"] = float(np.sqrt((miss**2).mean())), float(miss.max())
                if grid == "auto":
                    row["used"], row["lines"], row["why"] = placed.grid.used, placed.grid.lines, placed.grid.why
            self.rows.append(row)

    def lines(self) -> list[Line]:
        out = []
        printed = [r for r in self.rows if r["grid"] not in ("ticks", "none") and r["auto"] is not None]
        for name, limit in (("plain", 0.1), ("photocopy", 0.3)):
            mine = [r["auto"] for r in printed if r["class"] == name]
            out.append(
                at_most(f"map, {name} sheets with a grid: rms px, median", float(np.median(mine)) if mine else None, len(mine), limit)
            )
            out.append(
                at_most(f"map, {name} sheets with a grid: rms px, 90 %", float(np.percentile(mine, 90)) if mine else None, len(mine), limit)
            )
        bent = [r["off"] / max(r["auto"], 1e-6) for r in printed if r["class"] == "distorted" and r["off"] is not None]
        out.append(
            at_least("map, distorted sheets: marks alone / with grid, median", float(np.median(bent)) if bent else None, len(bent), 10)
        )
        alone = [r["auto"] for r in self.rows if r["grid"] in ("ticks", "none") and r["auto"] is not None]
        out.append(Line("map, ticks only: rms px, median", float(np.median(alone)) if alone else None, len(alone)))
        lost = [r for r in self.rows if r["auto"] is None]
        out.append(at_most("panels that could not be placed", float(len(lost)), len(self.rows), 0))
        return out

    def table(self) -> list[str]:
        out = []
        for r in sorted(self.rows, key=lambda r: -(r["auto"] or 1e9)):
            auto, off = (f"{r[k]:8.3f}" if r.get(k) is not None else "       -" for k in ("auto", "off"))
            name = f"{r['sheet']:20s} {r['panel']} {r['class']:10s} {r['grid']:12s}"
            out.append(f"{name} rms {auto} alone {off} lines {r.get('lines', 0)} {r.get('why') or ''}")
        return out


class Values:
    """Value error of curves through the whole chain [% of axis], with the grid and, from the same traces, without."""

    name = "values"

    def __init__(self) -> None:
        self.rows: list[dict[str, Any]] = []

    def visit(self, case: Case) -> None:
        done = digitise.run(json.dumps(case.document("auto")).encode(), case.data, {}, prepared=case.prepared, page=case.page.info)
        if done.error is not None:
            case.faults.append(str(done.error["message"]))
            return
        alone = case.maps("off")
        for true, wanted, curve in zip(case.truth["curves"], case.recipe["curves"], done.curves, strict=True):
            panel = next(p for p in case.truth["panels"] if p["id"] == true["panel"])
            scale = panel["y"][true["y_axis"]]
            entry = next(p for p in case.recipe["panels"] if p["id"] == true["panel"])["axes"]
            if curve.error is not None or scale["scale"] != "linear" or true["quantity"] == "efficiency_iso":
                continue
            if measures.score(np.asarray(true["line"], float), true["closed"], curve.trace.pixels)["failed"]:
                continue
            row: dict[str, Any] = {"sheet": case.name, "curve": true["id"], "hard": case.hard, "grid": case.truth.get("grid", "light")}
            pairs = {"auto": np.asarray(curve.points)}
            if true["panel"] in alone:
                pairs["off"] = alone[true["panel"]].from_pixels(curve.trace.pixels, (wanted["x"], wanted["y"]))
            for key, points in pairs.items():
                q, v = (
                    np.asarray(units.from_canonical(points[:, k], entry[a]["quantity"], entry[a]["unit"]))
                    for k, a in ((0, wanted["x"]), (1, wanted["y"]))
                )
                row[key] = measures.value_error_pct(np.asarray(true["line"], float), q, v, scale["max"] - scale["min"])
            self.rows.append(row)

    def lines(self) -> list[Line]:
        out = []
        for key, words, limit in (("auto", "with the grid", 0.03), ("off", "grid: off", 0.07)):
            for hard in (False, True):
                mine = [r[key] for r in self.rows if r.get(key) is not None and r["hard"] == hard and r["grid"] not in ("ticks", "none")]
                value = float(np.median(mine)) if mine else None
                text = f"value error end to end, {words}, {'hard' if hard else 'ordinary'} sheets: % of axis, median"
                out.append(at_most(text, value, len(mine), limit) if not hard else Line(text, value, len(mine)))
        return out

    def table(self) -> list[str]:
        return []


class Reclicks:
    """Random re-clickings of the marks: how often the true value lies within one and two stated calibration uncertainties."""

    name = "reclicks"

    def __init__(self, count: int, with_grid: int) -> None:
        self.counts = {"off": count, "auto": with_grid}
        self.rows: list[dict[str, Any]] = []

    def visit(self, case: Case) -> None:
        ticks = _true_marks(case)
        for grid, count in self.counts.items():
            rng = np.random.default_rng([41, sum(map(ord, case.name))])
            for _ in range(count):
                doc = case.document(grid)
                for panel in doc["panels"]:
                    for name, axis in panel["axes"].items():
                        for mark in axis["marks"]:
                            at = ticks.get((panel["id"], name, round(float(mark["value"]), 6)))
                            if at is not None:
                                mark["at"] = (at + rng.uniform(-MARK_PX, MARK_PX, 2)).tolist()
                placed = calibrated(recipe.parse(json.dumps(doc).encode()).panels, case.prepared, [])
                self.rows += [self._row(case, grid, p, placed[p["id"]]) for p in case.truth["panels"] if p["id"] in placed]

    def _row(self, case: Case, grid: str, panel: dict[str, Any], placed: Any) -> dict[str, Any]:
        inside = np.zeros((0,))
        for index, name in axis_names(case, panel):
            px, values = true_grid(case, panel, index, name)
            got = placed.from_pixels(px, ("flow", name))
            spread = np.sqrt(np.einsum("naa->na", placed.covariance(px, ("flow", name))))
            inside = np.r_[inside, (np.abs(got - values) / np.maximum(spread, 1e-12)).ravel()]
        return {
            "sheet": case.name, "class": case.map_class, "grid": grid, "n": len(inside),
            "one": int((inside <= 1).sum()), "two": int((inside <= 2).sum()),
        }  # fmt: skip

    def lines(self) -> list[Line]:
        out = []
        for grid, words in (("off", "marks alone, flat sheets"), ("auto", "with the grid")):
            mine = [r for r in self.rows if r["grid"] == grid and (grid == "auto" or r["class"] == "plain")]
            total = sum(r["n"] for r in mine)
            for key, name, low, high in (("one", "one", 0.60, 0.76), ("two", "two", 0.91, 0.98)):
                share = sum(r[key] for r in mine) / total if total else None
                out.append(between(f"calibration, {words}: within {name} (n: re-clickings)", share, len(mine), low, high))
        return out

    def table(self) -> list[str]:
        out = []
        for key in sorted({(r["sheet"], r["grid"]) for r in self.rows}):
            mine = [r for r in self.rows if (r["sheet"], r["grid"]) == key]
            total = sum(r["n"] for r in mine)
            one, two = (sum(r[k] for r in mine) / total for k in ("one", "two"))
            out.append(f"{key[0]:20s} grid {key[1]:5s} within one {one:.3f} two {two:.3f} of {len(mine)} re-clickings")
        return out


def _true_marks(case: Case) -> dict[tuple[str, str, float], np.ndarray]:
    """Exact places of the recipe's marks: the tick of the truth's axis whose click the mark is."""
    out = {}
    for panel in case.truth["panels"]:
        entry = next(p for p in case.recipe["panels"] if p["id"] == panel["id"])["axes"]
        scales = [panel["x"], *panel["y"], *(panel.get("secondary_x") or [])]
        for name, axis in entry.items():
            for mark in axis["marks"]:
                near = min(
                    (t for s in scales for t in s["ticks"] if abs(t["value"] - mark["value"]) < 1e-9),
                    key=lambda t: float(np.hypot(*(np.array(t["px"]) - mark["at"]))),
                    default=None,
                )
                if near is not None and np.hypot(*(np.array(near["px"]) - mark["at"])) < 4:
                    out[panel["id"], name, round(float(mark["value"]), 6)] = np.array(near["px"], float)
    return out
