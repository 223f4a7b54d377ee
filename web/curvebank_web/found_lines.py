"""The printed lines of a page for the browser: what a mark may hold to, and what is drawn over the paper."""

from contextlib import suppress
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


def snap(prepared: Any, masks: list[dict[str, Any]], at: tuple[float, float], radius_px: float) -> dict[str, Any] | None:
    """The nearest place a mark can mean, measured in the ink; None where nothing printed is near, or a mask hides it."""
    from curvebank import axes, sheet
    from curvebank.errors import CurvebankError

    with suppress(CurvebankError):  # a mask that is none is said where the panel is looked at
        prepared = sheet.mask(prepared, masks)
    found = axes.snap(prepared, at, radius_px)
    return None if found is None else {"at": [round(v, 3) for v in found.at], "kind": found.kind, "sigma_px": round(found.sigma_px, 4)}
