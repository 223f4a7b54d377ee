"""A better scan of the same paper: the recipe moves over by registration, both are digitised, and the change is shown curve by curve."""

import copy
import json
from collections.abc import Callable
from dataclasses import dataclass
from pathlib import Path
from typing import Any

import numpy as np
from scipy.spatial import cKDTree

from .. import digitise, recipe, sheet, units
from ..digitise.curves import value_scale
from ..errors import CurvebankError, OutputError, RecipeError, SheetError
from ..jsonable import clean, digits, places
from ..recipe import Recipe
from ..records import Curve, Digitised, FloatArray, PageInfo
from ..sheet.register import Registration, match
from . import files

Progress = Callable[[float, str], Any]
ELSEWHERE_PX = 5.0
"""Two traces of one line lie within this of each other (at 3 px lines); a curve further off is not the one the old scan has."""


@dataclass(frozen=True, kw_only=True, slots=True, eq=False)
class Carried:
    """A recipe carried to another scan: the new ``recipe``, the results on the old scan (``before``) and on the new one (``made``)."""

    recipe: dict[str, Any]
    registration: Registration
    before: Digitised
    made: Digitised
    dropped: tuple[str, ...]
    unit: float

    def report(self) -> dict[str, Any]:
        """What changed, as plain JSON: registration, curves in the recipe's order with both traces in px of the new scan, panels."""
        parsed = recipe.parse(self.recipe)
        curves = [self._curve(parsed, a, b) for a, b in zip(self.before.curves, self.made.curves, strict=True)]
        r = self.registration
        told = {
            "residual_px": r.residual_px, "sigma_px": r.sigma_px, "coverage": r.coverage, "scale": r.scale, "turn_deg": r.turn_deg,
            "matches": r.blocks, "message": registration_words(r),
        }  # fmt: skip
        before = {p.id: p.residual_px for p in self.before.panels}
        now = {p.id: p.residual_px for p in self.made.panels}
        panels = [
            {"id": p.id, "residual_before_px": before.get(p.id), "residual_now_px": now.get(p.id), "error_now": self._panel_error(p.id)}
            for p in parsed.panels
        ]
        out: dict[str, Any] = {
            "carry": 1,
            "registration": told,
            "curves": curves,
            "panels": panels,
            "dropped": list(self.dropped),
            "error": self.made.error,
            "message": summary(curves, self.made.error),
        }
        return clean(out)  # type: ignore[no-any-return]

    def _panel_error(self, panel: str) -> str | None:
        if any(p.id == panel for p in self.made.panels):
            return None
        failed = (c.error["message"] for c in self.made.curves if c.panel == panel and c.error)
        return next(failed, (self.made.error or {}).get("message", "The axes of this panel could not be placed."))

    def _curve(self, parsed: Recipe, before: Curve, now: Curve) -> dict[str, Any]:
        first, second = _flags(before), _flags(now)
        out: dict[str, Any] = {
            "id": now.id, "quantity": now.quantity, "unit": "m" if now.is_contour else units.CANONICAL[now.quantity],
            "error_before": before.error["message"] if before.error else None, "error_now": now.error["message"] if now.error else None,
            "flagged_before": bool(before.trace and before.trace.flagged), "flagged_now": bool(now.trace and now.trace.flagged),
            "flags_gone": [first[k] for k in first if k not in second], "flags_new": [second[k] for k in second if k not in first],
            "largest": None, "mean": None, "largest_pct": None, "mean_pct": None, "largest_u": None, "mean_u": None,
            "at": None, "apart_px": None, "elsewhere": False, "before_pixels": [], "now_pixels": [],
        }  # fmt: skip
        old = self.registration(before.trace.pixels) if before.trace is not None else np.zeros((0, 2))
        new = np.asarray(now.trace.pixels) if now.trace is not None else np.zeros((0, 2))
        out |= {"before_pixels": places(old, 2), "now_pixels": places(new, 2)}
        if now.kind == "table" or before.error or now.error or not len(old) or not len(new):
            return out
        apart = float(np.sqrt(np.mean(cKDTree(old).query(new)[0] ** 2)))
        out |= {"apart_px": round(apart, 2), "elsewhere": apart > ELSEWHERE_PX * self.unit * max(self.registration.scale, 1.0)}
        change = change_of(before, now, _range(parsed, self.made, now))
        if change is not None:
            out |= {k: v if v is None else float(digits(v, 4)) for k, v in change.figures.items()}
            out["at"] = places(new[change.worst], 1)
        return out


@dataclass(frozen=True, slots=True, eq=False)
class Change:
    """Largest and mean change in the curve's unit, in % of its axis and in standard uncertainties; ``worst`` is the new trace's index."""

    figures: dict[str, float | None]
    worst: int


def change_of(before: Curve, now: Curve, spans: tuple[float, float] | None) -> Change | None:
    """How far a curve moved: its value at equal flow where flow only grows along both, else the distance between the lines with flow
    and value each measured by its axis. ``spans`` are the flow and value ranges of the panel. None where the two have no flow in common."""
    p, q = before.points, now.points
    if not len(p) or not len(q):
        return None
    span = spans[1] if spans else None
    if not now.is_contour and _rising(p) and _rising(q):
        p, q_sorted = (a if a[0, 0] <= a[-1, 0] else a[::-1] for a in (p, q))
        common = (q[:, 0] >= p[0, 0]) & (q[:, 0] <= p[-1, 0])
        if not common.any():
            return None
        moved = np.where(common, np.abs(q[:, 1] - np.interp(q[:, 0], p[:, 0], p[:, 1])), 0.0)
        used = np.flatnonzero(common)
    elif spans is not None:
        size = np.array(spans)
        moved = cKDTree(_dense(p / size)).query(q / size)[0] * size[1]
        used = np.arange(len(q))
    else:
        return None
    sigma = np.maximum(now.sigma, 1e-12)
    worst = int(used[np.argmax(moved[used])])
    in_u = moved[used] / sigma[used]
    largest, mean = float(moved[worst]), float(moved[used].mean())
    figures: dict[str, float | None] = {
        "largest": largest, "mean": mean, "largest_u": float(in_u.max()), "mean_u": float(in_u.mean()),
        "largest_pct": 100 * largest / span if span else None, "mean_pct": 100 * mean / span if span else None,
    }  # fmt: skip
    return Change(figures, worst)


def _rising(points: FloatArray) -> bool:
    step = np.diff(points[:, 0])
    return len(step) > 0 and bool((step > 0).all() or (step < 0).all())


def _dense(points: FloatArray, parts: int = 8) -> FloatArray:
    """A polyline with more points between its own."""
    at = np.arange(len(points), dtype=float)
    fine = np.linspace(0, len(points) - 1, parts * (len(points) - 1) + 1)
    return np.stack([np.interp(fine, at, points[:, k]) for k in (0, 1)], axis=1)


def _range(parsed: Recipe, made: Digitised, curve: Curve) -> tuple[float, float] | None:
    """The ranges of the curve's flow and value axes over its panel, in its own units."""
    panel = next((p for p in made.panels if p.id == curve.panel), None)
    model = next(c for c in parsed.curves if c.id == curve.id)
    area = parsed.panel(model.panel)
    if panel is None or area is None or model.x is None or model.y is None:
        return None
    scale, _ = value_scale(model, area.axes[model.y], parsed.pump.stages)
    flow, value = (float(np.ptp(panel.map_values[name])) for name in (model.x, model.y))
    return (flow, abs(value * scale)) if flow > 0 and value > 0 else None


def _flags(curve: Curve) -> dict[str, str]:
    """What is said against a curve, by code."""
    found = {w.code: w.message for w in curve.warnings}
    if curve.trace is not None:
        found |= {why.rstrip("0123456789. px"): why for _, _, why in curve.trace.stretches}
    return found


def moved(doc: dict[str, Any], to: Registration, page: PageInfo, file: str, dpi: float) -> tuple[dict[str, Any], tuple[str, ...]]:
    """A recipe with every place on the sheet carried over, and words on what could not come along."""
    out = copy.deepcopy(doc)
    dropped: list[str] = []

    def carried(points: Any) -> list[list[float]]:
        return places(to(points), 3) if len(points) else []  # type: ignore[no-any-return]

    old_sheet = out.get("sheet") or {}
    kept = {k: v for k, v in old_sheet.items() if k not in ("file", "page", "dpi", "turn", "sha256", "masks")}
    fresh: dict[str, Any] = {"file": file, "page": page.page, "sha256": page.sha256}
    if page.media == "application/pdf":
        fresh["dpi"] = dpi
    if page.turn:
        fresh["turn"] = page.turn
    out["sheet"] = fresh | kept
    masks = []
    for i, mask in enumerate(old_sheet.get("masks") or []):
        key = "brush" if "brush" in mask else "outline"
        points = carried(mask[key])
        xy = np.array(points)
        if (xy.max(axis=0) < 0).any() or (xy.min(axis=0) > [page.width, page.height]).any():
            dropped.append(f"Mask {i + 1} lies off the new scan and was left behind.")
            continue
        new = mask | {key: np.clip(xy, 0, [page.width - 1, page.height - 1]).tolist()}
        if key == "brush":
            new["width_px"] = round(float(mask["width_px"] * np.mean(to.local_scale(mask[key]))), 2)
        masks.append(new)
    if masks:
        out["sheet"]["masks"] = masks
    for panel in out.get("panels") or []:
        for axis in panel["axes"].values():
            for mark in axis.get("marks") or []:
                mark["at"] = carried([mark["at"]])[0]
        if panel.get("outline"):
            panel["outline"] = carried(panel["outline"])
    for curve in out.get("curves") or []:
        for key in ("clicks", "guides"):
            if curve.get(key):
                curve[key] = carried(curve[key])
        for part in curve.get("locked") or []:
            scale = float(np.mean(to.local_scale(part["pixels"])))
            part["pixels"] = carried(part["pixels"])
            if part.get("sigma_px") is not None:
                # The place of the locked pixels on the new scan is known no better than the registration.
                part["sigma_px"] = round(float(np.hypot(part["sigma_px"] * scale, to.sigma_px)), 4)
    return out, tuple(dropped)


def carry(
    doc: dict[str, Any] | bytes,
    old_bytes: bytes | None,
    new_bytes: bytes | None,
    *,
    file: str,
    page: int = 1,
    dpi: float = 300,
    turn: int = 0,
    settings: dict[str, Any] | None = None,
    progress: Progress | None = None,
    old_prepared: Any = None,
    old_page: PageInfo | None = None,
    new_prepared: Any = None,
    new_page: PageInfo | None = None,
) -> Carried:
    """Carry a recipe to another scan of the same paper and digitise both.

    Parameters
    ----------
    doc : dict or bytes
        The recipe of the old scan.
    old_bytes, new_bytes : bytes or None
        The two files; None only where the prepared sheet and its page are given.
    file : str
        Name of the new scan, as the new recipe will give it.
    page, dpi, turn : optional
        Of the new scan.
    old_prepared, old_page, new_prepared, new_page : optional
        Prepared sheets and their pages from a cache, without masks.

    Raises
    ------
    RecipeError
        The recipe is not valid, or has no sheet.
    SheetError
        A scan cannot be read, is not the one of the recipe (``sha256-mismatch``), or the two are not of one paper
        (``not-the-same-paper``, ``ambiguous-paper``).
    """
    tell = progress or (lambda share, text: None)
    parsed = recipe.parse(doc)
    plain: dict[str, Any] = recipe.load_json(doc) if isinstance(doc, bytes) else json.loads(recipe.to_bytes(doc))
    if parsed.sheet is None:
        raise RecipeError("This recipe is of typed tables alone: there is no scan to replace.", path="$.sheet", code="no-sheet")
    of = parsed.sheet
    old_prepared, old_page = _ready(
        old_bytes, old_prepared, old_page, of.page, of.dpi, of.turn, lambda s, t: tell(0.20 * s, f"Old scan: {t}")
    )
    if of.sha256 and of.sha256.lower() != old_page.sha256:
        raise SheetError(
            f"{of.file} is not the scan this recipe was made on. Use the original scan to carry it over.",
            path="$.sheet.sha256",
            code="sha256-mismatch",
        )
    new_prepared, new_page = _ready(new_bytes, new_prepared, new_page, page, dpi, turn, lambda s, t: tell(0.2 + 0.2 * s, f"New scan: {t}"))
    masked = sheet.mask(old_prepared, of.masks)
    registration = match(masked, new_prepared, progress=lambda s, t: tell(0.4 + 0.2 * s, t))
    fresh, dropped = moved(plain, registration, new_page, file, dpi)
    before = digitise.run(
        doc, None, settings, progress=lambda s, t: tell(0.6 + 0.2 * s, f"Old scan: {t}"), prepared=old_prepared, page=old_page
    )
    made = digitise.run(
        fresh, None, settings, progress=lambda s, t: tell(0.8 + 0.2 * s, f"New scan: {t}"), prepared=new_prepared, page=new_page
    )
    return Carried(
        recipe=fresh, registration=registration, before=before, made=made, dropped=dropped, unit=max(float(new_prepared.unit), 0.7)
    )


def _ready(
    data: bytes | None, prepared: Any, info: PageInfo | None, page: int, dpi: float, turn: int, tell: Progress
) -> tuple[Any, PageInfo]:
    """A prepared sheet and its page, from the cache or made now."""
    if prepared is not None and info is not None:
        return prepared, info
    if data is None:
        raise SheetError("The scan is not here. Add its file again.", code="no-such-file", path="$.sheet.file")
    loaded = sheet.load(data, page=page, dpi=dpi, turn=turn)
    return (prepared if prepared is not None else sheet.prepare(loaded, progress=tell)), loaded.info


@dataclass(frozen=True, kw_only=True, slots=True, eq=False)
class Written:
    """Files of a recipe carried over: the new recipe beside a copy of its scan, and its result."""

    carried: Carried
    recipe: Path
    scan: Path
    result: Path


def carry_file(
    path: Path, scan: Path, out: Path, *, page: int = 1, dpi: float = 300, turn: int = 0, progress: Progress | None = None
) -> Written:
    """Carry a recipe file to another scan: NAME.recipe.json and NAME.result.json, NAME that of the new scan, in the folder ``out``.

    Raises
    ------
    CurvebankError
        As `carry`; OutputError where a file cannot be written, or the recipe would overwrite the one it came from.
    """
    doc = _bytes_of(path, RecipeError, "The recipe", "$")
    parsed = recipe.parse(doc)
    name = parsed.sheet.file if parsed.sheet else ""
    old = _bytes_of(path.parent / name, SheetError, "The scan", "$.sheet.file") if name else None
    new = _bytes_of(scan, SheetError, "The new scan", None)
    target = out / (scan.stem + files.RECIPE_SUFFIX)
    copy_of_scan = out / scan.name
    if target.exists() and target.samefile(path):
        raise OutputError(f"{target} is the recipe itself. Give another --out folder, or the new scan another name.", code="same-file")
    if copy_of_scan.exists() and copy_of_scan.read_bytes() != new:
        raise OutputError(f"{copy_of_scan} is there already and is another file. Give another --out folder.", code="same-name")
    done = carry(doc, old, new, file=scan.name, page=page, dpi=dpi, turn=turn, progress=progress)
    result = out / (scan.stem + files.RESULT_SUFFIX)
    files.write_text(target, json.dumps(done.recipe, ensure_ascii=False, indent=1, allow_nan=False) + "\n")
    files.write_text(result, digitise.dumps(done.made))
    if not copy_of_scan.exists():
        files.write_bytes(copy_of_scan, new)
    return Written(carried=done, recipe=target, scan=copy_of_scan, result=result)


def _bytes_of(path: Path, kind: type[CurvebankError], what: str, place: str | None) -> bytes:
    try:
        return path.read_bytes()
    except OSError as e:
        raise kind(f"{what} {path.name} cannot be read: {e.strerror or e}.", path=place, code="no-such-file") from None


def registration_words(r: Registration) -> str:
    """The registration in one sentence."""
    turn = f", turned by {r.turn_deg:.1f}°" if abs(r.turn_deg) >= 0.05 else ""
    return (
        f"{100 * r.coverage:.0f} % of the old scan's print is found on the new one, at {r.scale:.3g} times its resolution{turn}; "
        f"{r.blocks} places agree within {r.residual_px:.2f} px."
    )


def summary(curves: list[dict[str, Any]], error: dict[str, Any] | None) -> str:
    """The outcome in a few sentences."""
    if error:
        return f"The new scan could not be digitised. {error['message']}"
    compared = [c for c in curves if c["largest"] is not None]
    text = f"{len(compared)} of {len(curves)} curve{'s' if len(curves) != 1 else ''} compared."
    if compared:
        worst = max(compared, key=lambda c: c["largest_pct"] or 0.0)
        share = f" ({worst['largest_pct']:.2g} % of its axis, {worst['largest_u']:.2g} u)" if worst["largest_pct"] is not None else ""
        unit = "" if worst["unit"] == "1" else f" {worst['unit']}"
        text += f" Largest change: {worst['id']}, {worst['largest']:.3g}{unit}{share}."
    lost = [c["id"] for c in curves if c["error_now"] and not c["error_before"]]
    if lost:
        text += f" Traced on the old scan only: {', '.join(lost)}."
    gone = sum(c["flagged_before"] and not c["flagged_now"] for c in curves)
    if gone:
        text += f" {gone} curve{'s' if gone != 1 else ''} no longer need{'s' if gone == 1 else ''} a look."
    away = [c["id"] for c in curves if c["elsewhere"]]
    if away:
        text += f" Not where the old scan has {'it' if len(away) == 1 else 'them'}: {', '.join(away)}. Is this another issue of the sheet?"
    return text
