"""What the masks of a draft cover, told at once, without tracing: areas, marks and clicks that lie under them."""

from typing import Any

from .. import sheet
from ..errors import CurvebankError
from ..jsonable import clean
from ..recipe import MaskModel, validate_part


def look(doc: dict[str, Any], prepared: Any) -> dict[str, Any]:
    """Masks, and what they hide, of a draft that may be unfinished.

    Parameters
    ----------
    doc : dict
        The recipe as it stands.
    prepared : Prepared
        The prepared sheet without masks.

    Returns
    -------
    dict
        ``masks`` [{area_px, box [x0, y0, x1, y1] or None, error or None}], ``marks`` [{panel, axis, mark, message}], ``clicks``
        [{curve, click, message}] (counted from 0), ``share`` of the page that is hidden.
    """
    masks = (doc.get("sheet") or {}).get("masks") or []
    told, good = [], []
    for i, mask in enumerate(masks):
        try:
            model = validate_part(MaskModel, mask, f"$.sheet.masks[{i}]")
            told.append(sheet.mask_extent(prepared, model, i))
            good.append(model)
        except CurvebankError as e:
            told.append({"area_px": 0, "box": None, "error": e.to_dict()})
    covered = sheet.mask(prepared, good)
    marks, clicks = [], []
    for panel in doc.get("panels") or []:
        for name, axis in (panel.get("axes") or {}).items():
            for k, mark in enumerate(axis.get("marks") or []):
                if _hidden(covered, mark.get("at")):
                    message = f"A mask lies over mark {k + 1} of the {name} axis: it counts, but cannot be checked against its line."
                    marks.append({"panel": panel.get("id"), "axis": name, "mark": k, "message": message})
    for curve in doc.get("curves") or []:
        for k, click in enumerate(curve.get("clicks") or []):
            if _hidden(covered, click):
                clicks.append({"curve": curve.get("id"), "click": k, "message": f"A mask lies over click {k + 1}: no ink can confirm it."})
    share = float(covered.masked.mean()) if covered.masked is not None else 0.0
    return clean({"masks": told, "marks": marks, "clicks": clicks, "share": share})  # type: ignore[no-any-return]


def _hidden(prepared: Any, at: Any) -> bool:
    """True for a pair of numbers under a mask; a draft may hold anything."""
    pair = isinstance(at, (list, tuple)) and len(at) == 2 and all(isinstance(v, (int, float)) and not isinstance(v, bool) for v in at)
    return bool(pair and sheet.under_mask(prepared, [at])[0])
