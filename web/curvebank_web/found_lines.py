"""The printed lines of a page for the browser: what a mark may hold to, and what is drawn over the paper."""

from typing import Any

import numpy as np


def serialise(prepared: Any) -> dict[str, Any]:
    """``{level, upright}``: lists of ``{points: [[x, y], ...], sigma_px}`` in sheet pixels, points in rising x (level) or y (upright)."""
    out: dict[str, list[dict[str, Any]]] = {"level": [], "upright": []}
    for line in prepared.lines:
        points = line.points()
        if len(points) < 2 or not np.isfinite(points).all():
            continue
        order = np.argsort(line.along, kind="stable")
        out["level" if line.horizontal else "upright"].append(
            {"points": np.round(points[order], 2).tolist(), "sigma_px": round(float(line.sigma_px), 3)}
        )
    return out
