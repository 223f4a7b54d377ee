"""Marks to panel map: the one entry of this package."""

from typing import Any

import numpy as np

from ..errors import CalibrationError
from ..records import FloatArray, Notice
from . import against, gridmap, plane, scales
from . import outline as outlines
from . import suspects as doubts
from .grid import Placed
from .layout import Layout, arrange
from .marks import AxisMarks, get, read_axes
from .panelmap import PanelMap, Scale
from .solve import Solution, solve
from .ties import find_ties


def calibrate(panel: Any, prepared: Any = None, *, path: str | None = None, page_size: tuple[int, int] | None = None) -> PanelMap:
    """The map of one panel from its marks.

    Parameters
    ----------
    panel : object or mapping
        ``id``, ``axes`` (``quantity unit scale marks multiplier density_kgm3``), ``grid``, ``outline``.
    prepared : curvebank.sheet.Prepared, optional
        The page; gives its size and the shape of its pixels.
    path : str, optional
        JSON path of the panel for error messages; by default paths are relative to the panel.
    page_size : (int, int), optional
        Width and height of the page [px], where ``prepared`` is not at hand.

    Raises
    ------
    CalibrationError
        The marks cannot place the axes; ``path`` names the axis or mark.

    Notes
    -----
    All marks of all axes are fitted together by least squares in pixels (`curvebank.axes.solve`). Where they contradict each
    other, a mistyped value, a photo and warped paper are weighed against each other (`curvebank.axes.suspects`); the plane is
    projective only where the marks speak for it. Lines that two axes share tie them together (`curvebank.axes.ties`).
    """
    panel_id = str(get(panel, "id", "panel"))
    path = path or "$"
    axes = read_axes(panel, path)
    aspect = _pixel_aspect(prepared)

    return _calibrated(panel, panel_id, axes, list(axes), prepared, path, aspect, page_size)


def _calibrated(
    panel: Any,
    panel_id: str,
    axes: dict[str, AxisMarks],
    order: list[str],
    prepared: Any,
    path: str,
    aspect: float,
    page_size: tuple[int, int] | None,
) -> PanelMap:
    """The map with the first axis of each direction as its reference; where the lines are another one's, that one comes first."""
    layout = arrange(axes, path)
    verdict = doubts.judge(layout, axes, aspect)
    solution = _final(_opened(verdict), verdict.reading, aspect)
    wanted = get(panel, "grid", None) or "auto"
    placed = gridmap.look(_opened(verdict), solution, prepared, wanted)
    ruled = against.overruled(verdict, placed, layout, axes, aspect)
    if ruled is not None:
        # The lines know better than the marks among themselves which value is wrong: the plane is placed anew without it.
        verdict = ruled
        solution = _final(_opened(verdict), verdict.reading, aspect)
        placed = gridmap.look(_opened(verdict), solution, prepared, wanted)
    if not isinstance(placed, str) and placed.read_by and list(axes) == order:
        first = list(placed.read_by.values())
        axes = {name: axes[name] for name in (*first, *(n for n in order if n not in first))}
        return _calibrated(panel, panel_id, axes, order, prepared, path, aspect, page_size)
    layout = _opened(verdict)
    notices = [Notice(code=c, message=m) for c, m in (*layout.notices, *doubts.describe(verdict.suspects, axes))]
    notices += against.doubted(placed, axes)
    notices += against.hidden(axes, prepared)
    together = scales.compare(layout, solution)
    notices += together.notices
    residuals = _mark_residuals(axes, layout, solution)
    page = page_size or _page_size(prepared)
    given = get(panel, "outline")
    parameters, covariance, rulers = _scales(layout, solution)
    warps, plane_size = None, solution.plane_size
    if not isinstance(placed, str) and placed.bends:
        placed.scales.update(together.exact)
        parameters, covariance, rulers, warps = gridmap.with_bends(layout, solution, placed, parameters, covariance, rulers)
        residuals = gridmap.mark_misses(residuals, layout, placed, rulers, parameters)
        plane_size = len(placed.theta)
    notices += _scatter_notices(axes, residuals, verdict, placed)
    return PanelMap(
        panel_id,
        parameters,
        covariance,
        {name: rulers[name] for name in order},
        plane_size=plane_size,
        shift=layout.shift,
        size=layout.size,
        outline=outlines.given(given, path) if given else outlines.derive(layout, solution, page),
        mark_residuals=residuals,
        click_sigma_px=solution.sigma_px,
        grid=gridmap.report(placed),
        notices=tuple(notices),
        suspects=[s.as_dict() for s in verdict.suspects],
        warps=warps,
    )


def _opened(verdict: doubts.Verdict) -> Layout:
    """The layout of the best reading, with the values it changes left open."""
    layout = verdict.reading.layout
    for name, mark, _ in verdict.reading.changes:
        if not any(s.swapped_with is not None and s.axis == name for s in verdict.suspects):
            layout = layout.with_open(name, mark)
    return layout


def _final(layout: Layout, reading: doubts.Reading, aspect: float) -> Solution:
    """The plane with Huber's loss and with the ties that the marks support."""
    same = len(reading.solution.x) == reading.solution.plane_size + layout.scales + len(layout.open_direction)
    free = solve(layout, projective=reading.projective, start=reading.solution.x if same else None, aspect=aspect)
    ties = (*find_ties(layout, free), *scales.compare(layout, free).ties)
    if not ties:
        return free
    tied = solve(layout, projective=reading.projective, start=free.x, ties=ties, aspect=aspect)
    return tied if tied.chi2 - free.chi2 <= 9 + 3 * len(ties) else free


def _scales(layout: Layout, solution: Solution) -> tuple[FloatArray, FloatArray, dict[str, Scale]]:
    """Parameters of the map (open coordinates dropped, their part of the uncertainty kept) and the scale of each axis."""
    p = solution.plane_size
    keep = p + sum(2 for s in layout.slots.values() if s.own is not None)
    scales: dict[str, Scale] = {}
    for name, slot in layout.slots.items():
        if slot.twin is None:
            scales[name] = Scale(slot.marks, slot.marks.direction, slot.centre, slot.half, None if slot.own is None else p + slot.own)
    for name, slot in layout.slots.items():
        if slot.twin is not None:
            other = scales[slot.twin]
            # The same clicks carry both scales: their relation is exact.
            order_a, order_b = np.lexsort(other.marks.at.T), np.lexsort(slot.marks.at.T)
            a, b = other.marks.level[order_a], slot.marks.level[order_b]
            zero, slope = np.polynomial.polynomial.polyfit((a - other.centre) / other.half, b, 1)
            scales[name] = Scale(slot.marks, slot.marks.direction, float(zero), float(slope), other.own)
    return solution.x[:keep], solution.covariance[:keep, :keep], {name: scales[name] for name in layout.slots}


def _mark_residuals(axes: dict[str, AxisMarks], layout: Layout, solution: Solution) -> dict[str, FloatArray]:
    """Distance [px] from each click to where the map puts its mark as typed; how far along its axis for a mark read otherwise."""
    parameters, _, scales = _scales(layout, solution)
    out: dict[str, FloatArray] = {}
    for name, marks in axes.items():
        scale, rows = scales[name], list(layout.rows_of[name])
        out[name] = np.hypot(*solution.misses_px[rows].T)
        uv = plane.coordinates(solution.theta, (marks.at - layout.shift) / layout.size)
        uv[:, scale.direction] = scale.coordinate(marks.factor * marks.typed, parameters)
        along = np.hypot(*(plane.pixels(solution.theta, uv) * layout.size + layout.shift - marks.at).T)
        for i, row in enumerate(rows):
            typed = (name, float((marks.level[i] - layout.slots[name].centre) / layout.slots[name].half))
            if layout.slots[name].twin is None and layout.terms[row][scale.direction] != typed:
                out[name][i] = along[i]
    return out


def _scatter_notices(
    axes: dict[str, AxisMarks], residuals: dict[str, FloatArray], verdict: doubts.Verdict, placed: Placed | str
) -> list[Notice]:
    named = {s.axis for s in verdict.suspects}
    bent = set() if isinstance(placed, str) else set(placed.bends)
    out: list[Notice] = []
    for name, r in residuals.items():
        worst = float(r.max())
        # Where lines place the axis a mark's miss is the click's own; warped paper has no part in it.
        allowed = 4.0 if axes[name].direction in bent else max(4.0, 0.004 * float(np.hypot(*np.ptp(axes[name].at, axis=0))))
        if name not in named and worst > allowed:
            text = (
                f"The {name} marks miss the map by up to {worst:.1f} px: a click is off, a value is wrong or the paper is warped. "
                "Check them with the magnifier, or add marks."
            )
            if axes[name].direction in bent:
                text = (
                    f"Mark {int(r.argmax()) + 1} of the {name} axis is {worst:.1f} px off the printed line of its value. "
                    "The lines place the axis; click the mark anew to be sure that it means this line."
                )
            out.append(Notice(code="calibration-scatter", message=text))
    if verdict.photo_doubtful and len(bent) < 2:
        text = (
            "The marks are spaced unevenly, as on a photo taken at an angle, and the map follows that. On a flat scan a value is mistyped. "
            "Marks on the far side of the panel would settle it."
        )
        out.append(Notice(code="calibration-perspective", message=text))
    return out


def _page_size(prepared: Any) -> tuple[int, int] | None:
    for name in ("ink", "pixels"):
        array = get(prepared, name) if prepared is not None else None
        if array is not None:
            return int(array.shape[1]), int(array.shape[0])
    return None


def _pixel_aspect(prepared: Any) -> float:
    """Height of a pixel over its width where the file states its resolution (fax: 204 x 98 dpi), else 1."""
    info = get(prepared, "info") if prepared is not None else None
    dpi_x, dpi_y = get(info, "dpi_x") if info is not None else None, get(info, "dpi_y") if info is not None else None
    return float(dpi_x / dpi_y) if dpi_x and dpi_y else 1.0


__all__ = ["CalibrationError", "calibrate"]
