"""Benchmark: how well marks and printed grid place the axes, over sheets with known truth.

    python tests/bench/placing.py [--sheets DIR] [--clicks N] [--slips N] [--only NAME] [--json FILE]

DIR (default: samples/) holds NAME.recipe.json, the scan and NAME.truth.json with a ``true_grid`` for each panel. For each panel the marks
are clicked anew N times, each within 1.5 px of its true tick in x and y, with the grid and without: rms of the map over the panel [px],
value error [% of the axis], and how often the stated sigma covers the error (one and two sigma). Then one mark is given the value of
another tick, or is clicked a line too far: is it named with the value that fits, asked about, or missed? And how often is a right mark
accused? Truth is read here and nowhere else.
"""

import argparse
import json
import sys
import time
from collections import Counter
from pathlib import Path
from typing import Any

import numpy as np
from scipy.interpolate import RBFInterpolator

sys.path.insert(0, str(Path(__file__).resolve().parents[2]))

from curvebank import axes, sheet, units  # noqa: E402
from curvebank.errors import CurvebankError  # noqa: E402

CLICK_PX = 1.5
MARKS = 3


class Panel:
    """One panel of a sheet: its true map, and marks clicked on it."""

    def __init__(self, recipe: dict[str, Any], truth: dict[str, Any]) -> None:
        self.recipe = recipe
        self.grid = truth["true_grid"]
        self.at = np.array([g["px"] for g in self.grid])
        self.names = [n for n in recipe["axes"]]
        self.flow = next(n for n in self.names if recipe["axes"][n]["quantity"] == "flow")
        self.others = [n for n in self.names if n != self.flow]
        self.true_axis = {self.flow: (truth["x"], -1)}
        for n in self.others:
            marks = recipe["axes"][n]["marks"]
            j = next((j for j, t in enumerate(truth["y"]) if self._is(t, marks)), 0)
            self.true_axis[n] = (truth["y"][j], j)
        level = np.stack([self._level(self.flow), self._level(self.others[0])], 1)
        self.low, self.high = level.min(0), level.max(0)
        self.to_px = RBFInterpolator((level - self.low) / (self.high - self.low), self.at, kernel="cubic", degree=2)

    def _is(self, t: dict[str, Any], marks: list[dict[str, Any]]) -> bool:
        return any(
            abs(m["value"] - c["value"]) < 1e-9 and m["at"] == c["px"] for m in marks[-1:] for k in t["clicks"] for c in t["clicks"][k]
        )

    def log(self, name: str) -> bool:
        return bool(self.recipe["axes"][name].get("scale") == "log10")

    def _level(self, name: str) -> np.ndarray:
        _, j = self.true_axis[name]
        v = np.array([g["x"] if j < 0 else g["y"][j] for g in self.grid], float)
        return np.log10(v) if self.log(name) else v

    def tick_px(self, name: str, value: float) -> np.ndarray:
        """True pixel of a tick on its own axis line: the bottom for flow, left for the first value axis, right for others."""
        level = self._level(name)
        share = ((np.log10(value) if self.log(name) else value) - level.min()) / (level.max() - level.min())
        at = [share, 0.0] if name == self.flow else [0.0 if name == self.others[0] else 1.0, share]
        return np.asarray(self.to_px(np.array([at]))[0])

    def ticks(self, name: str) -> list[float]:
        t, _ = self.true_axis[name]
        level = self._level(name)
        low, high = (10.0 ** level.min(), 10.0 ** level.max()) if self.log(name) else (level.min(), level.max())
        pad = 1e-9 * (high - low)
        return [k["value"] for k in t["ticks"] if low - pad <= k["value"] <= high + pad]

    def clicked(self, rng: np.random.Generator, marks: int = MARKS) -> dict[str, Any]:
        """The panel with marks on random ticks, the outer ones always, clicked with noise."""
        out = json.loads(json.dumps(self.recipe))
        for n in self.names:
            ticks = sorted(self.ticks(n))
            inner = ticks[1:-1]
            picked = sorted([ticks[0], ticks[-1], *rng.choice(inner, min(marks - 2, len(inner)), replace=False)])
            out["axes"][n]["marks"] = [
                {"at": [float(v) for v in self.tick_px(n, t) + rng.uniform(-CLICK_PX, CLICK_PX, 2)], "value": float(t)} for t in picked
            ]
        return out

    def errors(self, m: Any) -> dict[str, tuple[np.ndarray, np.ndarray, float]]:
        """For each axis: error [px] at the true points, error over stated sigma, rms error in % of the axis (linear axes)."""
        out = {}
        for n in self.names:
            axis = self.recipe["axes"][n]
            other = self.flow if n != self.flow else self.others[0]
            factor = units.factor(axis["quantity"], axis["unit"], density_kgm3=axis.get("density_kgm3")) * (axis.get("multiplier") or 1)
            level = self._level(n)
            want = (10.0**level if self.log(n) else level) * factor
            got = m.from_pixels(self.at, (n, other))[:, 0]
            slope = np.hypot(*m.pixel_size(self.at, (n, other))[:, 0].T)
            sigma = np.sqrt(m.covariance(self.at, (n, other))[:, 0, 0])
            pct = 100 * np.sqrt(np.mean((got - want) ** 2)) / np.ptp(want) if not self.log(n) else np.nan
            out[n] = ((got - want) / slope, (got - want) / np.maximum(sigma, 1e-300), float(pct))
        return out


def reclick(panel: Panel, prepared: Any, n: int, rng: np.random.Generator) -> dict[str, Any]:
    """Figures of one panel over n re-clickings, with the grid and with marks alone."""
    rms: dict[str, list[float]] = {"auto": [], "off": []}
    pct: dict[str, list[float]] = {"auto": [], "off": []}
    z: dict[str, list[np.ndarray]] = {"auto": [], "off": []}
    used, accused, doubts, spent = 0, 0, 0, 0.0
    for _ in range(n):
        clicked = panel.clicked(rng)
        for grid in ("auto", "off"):
            start = time.process_time()
            m = axes.calibrate({**clicked, "grid": grid}, prepared)
            if grid == "auto":
                spent += time.process_time() - start
                used += bool(m.grid.used)
                accused += bool(m.suspects)
                doubts += any(w.code == "grid-one-off" for w in m.notices)
            for e, over, p in panel.errors(m).values():
                rms[grid].append(float(np.sqrt(np.mean(e**2))))
                z[grid].append(np.abs(over))
                pct[grid].append(p)
    out: dict[str, Any] = {"used": used / n, "accused": accused / n, "asked": doubts / n, "ms": 1e3 * spent / n}
    for grid, key in (("auto", "grid"), ("off", "marks")):
        every = np.concatenate(z[grid])
        linear = [p for p in pct[grid] if np.isfinite(p)]
        out[key] = {
            "rms_px": float(np.median(rms[grid])), "worst_px": float(np.max(rms[grid])), "pct": float(np.median(linear or [0.0])),
            "within_1": float((every <= 1).mean()), "within_2": float((every <= 2).mean()),
        }  # fmt: skip
    return out


def slips(panel: Panel, prepared: Any, n: int, rng: np.random.Generator) -> tuple[Counter[str], Counter[str]]:
    """What becomes of a wrong value (three or four marks) and of a mark clicked one line too far (two to four marks)."""
    wrong: Counter[str] = Counter()
    off: Counter[str] = Counter()
    for k in range(n):
        for kind, tally in (("value", wrong), ("line", off)):
            marks = 3 + k % 2 if kind == "value" else 2 + k % 3
            clicked = panel.clicked(rng, marks)
            name = str(rng.choice(panel.names))
            ticks = sorted(panel.ticks(name))
            mine = clicked["axes"][name]["marks"]
            i = int(rng.integers(len(mine)))
            true = mine[i]["value"]
            have = [m["value"] for m in mine]
            if kind == "value":
                choice = [t for t in ticks if t not in have] + [v for v in (true * 10, true / 10) if true and v not in have]
                if not choice:
                    continue
                mine[i]["value"], fits = float(rng.choice(choice)), true
            else:
                at = ticks.index(true)
                near = [ticks[j] for j in (at - 1, at + 1) if 0 <= j < len(ticks) and ticks[j] not in have]
                if not near:
                    continue
                fits = float(rng.choice(near))
                mine[i]["at"] = [float(v) for v in panel.tick_px(name, fits) + rng.uniform(-CLICK_PX, CLICK_PX, 2)]
            try:
                m = axes.calibrate(clicked, prepared)
            except CurvebankError as error:
                tally[f"refused ({error.code})"] += 1
                continue
            hit = [s for s in m.suspects if s["axis"] == name and s["mark"] == i]
            if any(abs(s["fits"] - fits) <= 1e-6 * abs(fits) + 1e-9 for s in hit) and all(s["axis"] == name for s in m.suspects):
                tally["named" if len(m.suspects) == 1 else "named among others"] += 1
            elif any(w.code == "grid-one-off" for w in m.notices):
                tally["asked"] += 1
            elif m.suspects:
                tally["another accused"] += 1
            elif m.notices:
                tally["warned"] += 1
            else:
                tally["missed"] += 1
    return wrong, off


def _line(r: dict[str, float], worst: bool = False) -> str:
    return (
        f"{r['rms_px']:8.3f} " + (f"{r['worst_px']:6.2f} " if worst else "") + f"{r['pct']:7.4f} {r['within_1']:5.2f} {r['within_2']:5.2f}"
    )


def main() -> int:
    a = argparse.ArgumentParser(description=__doc__, formatter_class=argparse.RawDescriptionHelpFormatter)
    a.add_argument("--sheets", type=Path, default=Path(__file__).resolve().parents[2] / "samples")
    a.add_argument("--clicks", type=int, default=200)
    a.add_argument("--slips", type=int, default=12)
    a.add_argument("--only", default="")
    a.add_argument("--json", type=Path)
    a = a.parse_args()
    rows: dict[str, Any] = {}
    wrong: Counter[str] = Counter()
    off: Counter[str] = Counter()
    print(print("panel                         grid px  worst       %    1s    2s | marks px       %    1s    2s | used   ms"))
    for file in sorted(a.sheets.glob("*.recipe.json")):
        name = file.name[: -len(".recipe.json")]
        truth_file = file.with_name(f"{name}.truth.json")
        if a.only not in name or not truth_file.exists():
            continue
        recipe, truth = json.loads(file.read_text()), json.loads(truth_file.read_text())
        about = recipe["sheet"]
        data = (a.sheets / about["file"]).read_bytes()
        page = sheet.load(data, page=about.get("page", 1), dpi=about.get("dpi", 300), turn=about.get("turn", 0))
        prepared = sheet.prepare(page)
        for part in recipe["panels"]:
            panel = Panel(part, next(p for p in truth["panels"] if p["id"] == part["id"]))
            rng = np.random.default_rng(20)
            r = rows[f"{name}/{part['id']}"] = reclick(panel, prepared, a.clicks, rng)
            w, o = slips(panel, prepared, a.slips, rng)
            wrong += w
            off += o
            more = "".join(f" {key} {r[key]:.2f}" for key in ("accused", "asked") if r[key])
            print(
                f"{name + '/' + part['id']:28s} {_line(r['grid'], True)} | {_line(r['marks'])} | {r['used']:.2f} {r['ms']:4.0f}{more}",
                flush=True,
            )
    every = list(rows.values())
    summary = {
        key: {k: float(np.mean([r[key][k] for r in every]) if k.startswith("within") else np.median([r[key][k] for r in every]))
              for k in ("rms_px", "pct", "within_1", "within_2")}
        for key in ("grid", "marks")
    }  # fmt: skip
    print("over panels (median; cover: mean)", json.dumps(summary))
    print("wrong value:", dict(wrong), " a line too far:", dict(off))
    if a.json:
        a.json.write_text(json.dumps({"panels": rows, "summary": summary, "wrong": dict(wrong), "off": dict(off)}, indent=1))
    return 0


if __name__ == "__main__":
    raise SystemExit(main())
