"""A quick look while the user still clicks: one panel's calibration and one curve, nothing stored, nothing judged."""

import json
import threading
from collections import OrderedDict
from collections.abc import Sequence
from dataclasses import replace
from typing import Any

from .. import axes, sheet
from ..errors import CurvebankError
from ..jsonable import clean
from ..recipe import CurveModel, MaskModel, PanelModel, Recipe, validate_part
from ..records import PageInfo
from . import curves as curve_maker
from . import masking
from .live import Before
from .result import curve_json, panel_json
from .run import clicks, pump_info
from .threads import one_thread

KEPT = 16
_kept: OrderedDict[tuple[int, str], tuple[Any, Any]] = OrderedDict()
KEPT_MASKED = 2
_covered: OrderedDict[tuple[int, str], tuple[Any, Any]] = OrderedDict()
_guard = threading.Lock()


def _masked(prepared: Any, masks: Sequence[dict[str, Any]]) -> Any:
    """The sheet under its masks, remembered while they stay as they are."""
    if not masks:
        return prepared
    at = (id(prepared), json.dumps(masks, sort_keys=True))
    with _guard:
        if at in _covered:
            _covered.move_to_end(at)
            return _covered[at][1]
    covered = sheet.mask(prepared, [validate_part(MaskModel, m, f"$.sheet.masks[{i}]") for i, m in enumerate(masks)])
    with _guard:
        _covered[at] = (prepared, covered)
        while len(_covered) > KEPT_MASKED:
            _covered.popitem(last=False)
    return covered


def _placed(area: PanelModel, key: str, prepared: Any) -> Any:
    """The panel's map, remembered while its marks stay as they are: between two clicks on a curve only the curve changes."""
    at = (id(prepared), key)  # the sheet is kept beside the map, so its id cannot pass to another
    with _guard:
        if at in _kept:
            _kept.move_to_end(at)
            return _kept[at][1]
    panel_map = axes.calibrate(area, prepared)
    with _guard:
        _kept[at] = (prepared, panel_map)
        while len(_kept) > KEPT:
            _kept.popitem(last=False)
    return panel_map


@one_thread
def preview(
    panel: dict[str, Any],
    curve: dict[str, Any] | None,
    prepared: Any,
    page: PageInfo | None,
    pump: dict[str, Any] | None = None,
    *,
    masks: Sequence[dict[str, Any]] = (),
    before: Before | None = None,
    live: bool = False,
) -> dict[str, Any]:
    """Calibrate one panel and, if asked, trace one curve on it.

    Parameters
    ----------
    panel, curve : dict
        Parts of a recipe; ``curve`` may be None to see the axes alone.
    prepared : Prepared
        The prepared sheet.
    pump : dict, optional
        The recipe's pump, for stages and speed.
    masks : sequence of dict
        The recipe's ``sheet.masks``.
    before : Before, optional
        The curve's trace of the question before, brought up to date here.
    live : bool
        Let stay what the change since then does not touch. The answer is for the eye: a trace of the whole line may differ by a hair.

    Returns
    -------
    dict
        ``{panel, curve}`` in the form of the result document, the panel with ``mark_residuals`` {axis: [px, …]} and ``suspects``.

    Raises
    ------
    RecipeError, CalibrationError, SheetError
        The panel or a mask cannot be used; the path is relative to the panel, or begins ``$.sheet.masks``. Errors of the curve stay
        in the curve.
    """
    area = validate_part(PanelModel, panel, "$.panel")
    prepared = _masked(prepared, masks)
    panel_map = _placed(area, json.dumps(panel, sort_keys=True), prepared)
    out: dict[str, Any] = {
        "panel": panel_json(panel_map.panel_result())
        | {
            "mark_residuals": {k: [float(r) for r in v] for k, v in panel_map.mark_residuals.items()},
            "suspects": list(panel_map.suspects),
        },
        "curve": None,
    }
    if curve is None:
        return clean(out)
    line = validate_part(CurveModel, curve, "$.curve")
    info = pump_info(Recipe.model_validate({"recipe": 1, "pump": {"maker": "-", "model": "-", **(pump or {})}}))
    try:
        for axis in (line.x, line.y):
            if axis not in area.axes:
                raise CurvebankError(f"Panel “{area.id}” has no axis “{axis}”.", code="recipe", path="$.curve")
        got = (before or Before()).traced(prepared, panel_map, clicks(line), live=live)
        if isinstance(got, CurvebankError):
            raise got
        made = curve_maker.from_trace(line, area.axes, got, panel_map, info, prepared.width_px)
        made = replace(made, warnings=made.warnings + masking.on_curve(line, got, prepared))
    except CurvebankError as e:
        made = curve_maker.failed(line, info, e, "$.curve.clicks")
    out["curve"] = curve_json(made)
    return clean(out)
