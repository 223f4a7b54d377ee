"""How often the stated uncertainty of a trace covers: rows within one and two sigma of the true line, by what makes them hard."""

from typing import Any

import numpy as np
from measures import distance, resample
from scipy.spatial import cKDTree

from curvebank.records import Trace
from curvebank.sheet import Prepared

BANDS = ((0.60, 0.76), (0.91, 0.98))


def paper_of(prepared: Prepared) -> str:
    """1-bit, copied (a tenth of its ink pixels are broken or the paper is noisy) or clean, from the page alone."""
    some = prepared.ink[::3, ::3]
    if len(np.unique(some)) < 12:
        return "1-bit"
    grain = np.abs(prepared.ink[1:-1:5, 1:-1:5].astype(int) - prepared.ink[1:-1:5, 2::5][:, : prepared.ink[1:-1:5, 1:-1:5].shape[1]])
    return "noisy" if float(np.percentile(grain, 75)) > 8 else "clean"


class Cover:
    """Counts of rows by class: [rows, within one, within two] and the curves that went in."""

    def __init__(self) -> None:
        self.counts: dict[str, np.ndarray] = {}
        self.curves: dict[str, int] = {}

    def add(self, label: str, z: np.ndarray) -> None:
        if len(z):
            self.counts[label] = self.counts.get(label, np.zeros(3)) + (len(z), (z <= 1).sum(), (z <= 2).sum())
            self.curves[label] = self.curves.get(label, 0) + 1

    def trace(self, got: Trace, curve: dict[str, Any], others: list[np.ndarray], paper: str, unit: float) -> None:
        """One good trace. Rows at the true line's very ends, and rows 3 px or more off it, say nothing of sigma across the line."""
        line = np.asarray(curve["line"], float)[:, :2]
        d, i = distance(got.pixels, line)
        keep = (i > 3) & (i < len(line) - 4) & (d < 3.0) if not curve["closed"] else d < 3.0
        z = d / np.maximum(got.sigma_px, 1e-9)
        near = np.zeros(len(z), bool)
        for other in others:
            near |= cKDTree(resample(other, 1.0)).query(got.pixels, distance_upper_bound=8.0 * unit)[0] < 8.0 * unit
        row = np.arange(len(z))
        ends = (np.minimum(row, len(z) - 1 - row) < 40) & (not curve["closed"])
        dashed = curve.get("style", "solid") not in ("solid", "")
        self.add("all", z[keep])
        self.add(f"paper {paper}", z[keep])
        self.add("dashed" if dashed else "solid", z[keep])
        self.add("near other lines", z[keep & near])
        self.add("ends", z[keep & ends])
        self.add("loops" if curve["closed"] else "open", z[keep])
        self.add("plain rows", z[keep & ~near & ~ends])

    def table(self, title: str) -> None:
        print(f"\n{title:24s} curves     rows  within 1  within 2")
        for label in sorted(self.counts):
            n, one, two = self.counts[label]
            inside = all(low <= v / n <= high for v, (low, high) in zip((one, two), BANDS, strict=True))
            print(f"  {label:22s} {self.curves[label]:6d} {int(n):8d}  {one / n:8.3f}  {two / n:8.3f}{'' if inside else '  out'}")
