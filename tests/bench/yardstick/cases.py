"""Sheets with truth, prepared and calibrated once each, and the classes of their curves, decided from the truth alone."""

import copy
import json
from dataclasses import dataclass, field
from functools import cached_property
from pathlib import Path
from typing import Any

import numpy as np
from scipy.spatial import cKDTree

from curvebank import axes, recipe, sheet
from curvebank.errors import CurvebankError

MERGED_SHARE = 0.05
"""A curve that runs within one line width of another for more than this share of its length merges with it (crossings alone stay below)."""


@dataclass
class Line:
    """One line of the report: what is asked, what was measured on ``n`` cases, the limit, and whether it is reached (None: no limit)."""

    target: str
    measured: float | None
    n: int
    limit: str = ""
    reached: bool | None = None

    def words(self) -> str:
        value = "-" if self.measured is None else f"{self.measured:.4g}"
        verdict = {True: "yes", False: "NO", None: "" if self.measured is not None else "not measured"}[self.reached]
        return f"{self.target:74s} {value:>10s} {self.n:6d}  {self.limit:12s} {verdict}"


def at_most(target: str, value: float | None, n: int, limit: float) -> Line:
    return Line(target, value, n, f"<= {limit:g}", None if value is None else bool(value <= limit))


def at_least(target: str, value: float | None, n: int, limit: float) -> Line:
    return Line(target, value, n, f">= {limit:g}", None if value is None else bool(value >= limit))


def between(target: str, value: float | None, n: int, low: float, high: float) -> Line:
    return Line(target, value, n, f"{low:g}..{high:g}", None if value is None else bool(low <= value <= high))


@dataclass
class Case:
    """One sheet of a folder."""

    folder: Path
    name: str
    faults: list[str] = field(default_factory=list)

    @cached_property
    def truth(self) -> dict[str, Any]:
        return json.loads((self.folder / f"{self.name}.truth.json").read_text())

    @cached_property
    def recipe(self) -> dict[str, Any]:
        return json.loads((self.folder / f"{self.name}.recipe.json").read_text())

    @cached_property
    def data(self) -> bytes:
        return (self.folder / self.recipe["sheet"]["file"]).read_bytes()

    @cached_property
    def page(self) -> sheet.Sheet:
        about = self.recipe["sheet"]
        return sheet.load(self.data, **{key: about[key] for key in ("page", "dpi", "turn") if key in about})

    @cached_property
    def prepared(self) -> sheet.Prepared:
        return sheet.prepare(self.page)

    @property
    def pixels(self) -> int:
        return int(self.truth["width"]) * int(self.truth["height"])

    @property
    def hard(self) -> bool:
        """Old paper or a poor scan; named by the drawn sheets, else the fax of the development sheets."""
        return bool(self.truth.get("hard", False))

    @property
    def map_class(self) -> str:
        """ "plain", "photocopy" or "distorted"."""
        return str(self.truth.get("class", "photocopy" if self.truth.get("mode") == "bit" else "plain"))

    def document(self, grid: str, clicks: str | None = None, marks: dict[str, Any] | None = None) -> dict[str, Any]:
        """The recipe with the printed grid used or not, the truth's own clicks of a number, and marks moved."""
        doc = copy.deepcopy(self.recipe)
        for panel in doc["panels"]:
            panel["grid"] = grid
        if clicks is not None:
            own = {c["id"]: c["clicks"].get(clicks) for c in self.truth["curves"]}
            for c in doc["curves"]:
                c["clicks"] = own.get(c["id"]) or c["clicks"]
        return doc

    def maps(self, grid: str) -> dict[str, Any]:
        """Calibrated panels by id; a panel that cannot be placed is left out and named in ``faults``."""
        if grid not in self._maps:
            self._maps[grid] = calibrated(recipe.parse(json.dumps(self.document(grid)).encode()).panels, self.prepared, self.faults)
        return self._maps[grid]

    @cached_property
    def _maps(self) -> dict[str, dict[str, Any]]:
        return {}

    def classes(self) -> dict[str, str]:
        """Curve id -> "loop", "merging", "contour" (an open line of constant efficiency) or "ordinary"."""
        lines = {c["id"]: np.asarray(c["line"], float)[:, :2] for c in self.truth["curves"]}
        out = {}
        for c in self.truth["curves"]:
            others = [o for o in self.truth["curves"] if o["panel"] == c["panel"] and o["id"] != c["id"]]
            near = np.zeros(len(lines[c["id"]]), bool)
            for o in others:
                reach = 0.5 * (c["width_px"] + o["width_px"])
                near |= cKDTree(lines[o["id"]]).query(lines[c["id"]])[0] <= reach
            kind = "loop" if c["closed"] else "merging" if near.mean() > MERGED_SHARE else None
            out[c["id"]] = kind or ("contour" if c["quantity"] == "efficiency_iso" else "ordinary")
        return out


def calibrated(panels: Any, prepared: Any, faults: list[str]) -> dict[str, Any]:
    """Panel maps as the whole chain makes them: together where the axes layer can."""
    if hasattr(axes, "calibrate_all"):
        found = axes.calibrate_all(panels, prepared)
        faults += [f"{k}: {v}" for k, v in found.items() if isinstance(v, CurvebankError)]
        return {k: v for k, v in found.items() if not isinstance(v, CurvebankError)}
    out = {}
    for p in panels:
        try:
            out[p.id] = axes.calibrate(p, prepared)
        except CurvebankError as fault:
            faults.append(f"{p.id}: {fault}")
    return out


def find(folders: list[Path], names: list[str] | None = None) -> list[Case]:
    """All sheets with truth and recipe in folders (not below them), by name."""
    out = [Case(folder, f.name.removesuffix(".truth.json")) for folder in folders for f in sorted(folder.glob("*.truth.json"))]
    out = [c for c in out if (c.folder / f"{c.name}.recipe.json").exists()]
    return [c for c in out if not names or any(n in c.name for n in names)]
