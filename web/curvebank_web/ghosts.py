"""The family picture of a result, with each ghost placed on the paper: the values come from the checks, the pixels from the panel maps."""

from collections.abc import Mapping
from typing import Any

import numpy as np

from curvebank import axes, checks, recipe
from curvebank.digitise.curves import value_scale
from curvebank.errors import CurvebankError
from curvebank.records import Digitised


def family_picture(made: Digitised, doc: recipe.Recipe, prepared: Any, settings: Mapping[str, Any] | None) -> dict[str, Any]:
    """``checks.family_picture`` of a result, each ghost with the ``pixels`` of its points on the axes of the curve it should cover.

    Parameters
    ----------
    made : Digitised
        The result.
    doc : Recipe
        The recipe it came from.
    prepared : Prepared or None
        The prepared sheet, so that ghosts lie on the very map the curves were read with.
    """
    picture = checks.family_picture(made.curves, settings, pump=made.pump)
    maps: dict[str, Any] = {}
    for family in picture.values():
        for curve in family["curves"]:
            for ghost in curve["ghosts"]:
                ghost.update(_placed(ghost["points"], ghost["to_id"], doc, prepared, maps))
    return picture


def _placed(points: list[list[float]], curve_id: str, doc: recipe.Recipe, prepared: Any, maps: dict[str, Any]) -> dict[str, Any]:
    """Points that can be drawn on the axes of a curve, and their pixels; no pixels for a curve that is on no paper (a typed table)."""
    model = next((c for c in doc.curves if c.id == curve_id), None)
    panel = doc.panel(model.panel) if model else None
    if model is None or panel is None or model.x is None or model.y is None:
        return {"points": points, "pixels": []}
    try:
        if panel.id not in maps:
            maps[panel.id] = axes.calibrate(panel, prepared)
    except CurvebankError:
        return {"points": points, "pixels": []}
    scale, _ = value_scale(model, panel.axes[model.y], doc.pump.stages)
    values = np.array(points, dtype=np.float64).reshape(-1, 2)
    with np.errstate(all="ignore"):
        pixels = np.asarray(maps[panel.id].to_pixels(values / (1.0, scale), (model.x, model.y)), dtype=np.float64)
    seen = np.isfinite(pixels).all(axis=1)
    return {"points": values[seen].tolist(), "pixels": np.round(pixels[seen], 2).tolist()}
