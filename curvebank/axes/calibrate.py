"""Marks to panel map: the one entry of this package."""

from typing import Any

import numpy as np

from ..errors import CalibrationError
from ..records import FloatArray, GridReport, Notice
from . import outline as outlines
from . import plane
from . import suspects as doubts
from .layout import Layout, arrange
from .marks import AxisMarks, get, read_axes
from .panelmap import PanelMap, Scale
from .solve import CLICK_SIGMA_PX, Solution, solve
from .ties import find_ties

EVIDENCE_FOR_PROJECTIVE = 7.0
"""Natural logarithm of the odds the projective plane must win by (about 1000 to 1): flat scans are the rule."""
TILT_PRIOR = 0.15
"""Expected size of the perspective terms of a hand-held photo: relative change of scale over half the panel."""


def calibrate(panel: Any, prepared: Any = None, *, path: str | None = None, page_size: tuple[int, int] | None = None) -> PanelMap:
    """The map of one panel from its marks.

    Parameters
    ----------
    panel : object or mapping
        ``id``, ``axes`` (``quantity unit scale marks multiplier density_kgm3``), ``grid``, ``outline``.
    prepared : curvebank.sheet.Prepared, optional
        The page; gives its size and the shape of its pixels.
    path : str, optional
        JSON path of the panel for error messages.
    page_size : (int, int), optional
        Width and height of the page [px], where ``prepared`` is not at hand.

    Raises
    ------
    CalibrationError
        The marks cannot place the axes; ``path`` names the axis or mark.

    Notes
    -----
    All marks of all axes are fitted together by least squares in pixels, see `curvebank.axes.solve`. The plane is
    projective only where the marks speak for it by a Bayes factor (Laplace form; Kass and Raftery 1995,
    doi:10.1080/01621459.1995.10476572), else affine. Lines that two axes share are found by `curvebank.axes.ties`.
    """
    panel_id = str(get(panel, "id", "panel"))
    path = path or f"$.panels[{panel_id}]"
    axes = read_axes(panel, path)
    aspect = _pixel_aspect(prepared)

    def free(marks: dict[str, AxisMarks]) -> tuple[Layout, Solution]:
        layout = arrange(marks, path)
        return layout, _best_plane(layout, aspect)

    found, used = doubts.find_suspects(axes, free, _level_at)
    layout, solution = free(used)
    ties = find_ties(layout, solution)
    if ties:
        tied = _again(layout, solution, ties, aspect)
        if tied.chi2 - solution.chi2 <= 9 + 3 * len(ties):
            solution = tied
    residuals = _mark_residuals(axes, used, layout, solution)
    notices = [Notice(code=c, message=m) for c, m in layout.notices + doubts.describe(found, axes)]
    notices += _scatter_notice(used, residuals, found)
    page = page_size or _page_size(prepared)
    given = get(panel, "outline")
    parameters, covariance, scales = _scales(layout, solution)
    return PanelMap(
        panel_id,
        parameters,
        covariance,
        scales,
        plane_size=solution.plane_size,
        shift=layout.shift,
        size=layout.size,
        outline=outlines.given(given, path) if given else outlines.derive(layout, solution, page),
        mark_residuals=residuals,
        click_sigma_px=solution.sigma_px,
        grid=_grid_report(panel),
        notices=tuple(notices),
        suspects=[s.as_dict() for s in found],
    )


def _best_plane(layout: Layout, aspect: float) -> Solution:
    flat = solve(layout, aspect=aspect)
    if not _may_be_projective(layout):
        return flat
    loose = solve(layout, square=None)
    tilted = solve(layout, projective=True, start=loose.x, square=None, tilt_sigma=TILT_PRIOR)
    if not np.all(1 + _coordinates(layout, tilted) @ tilted.theta[6:8] > 0.2):
        return flat
    gain = (loose.chi2 - tilted.chi2) / 2 / max(1.0, (tilted.sigma_px / CLICK_SIGMA_PX) ** 2)
    # Laplace evidence of the two extra parameters, prior N(0, TILT_PRIOR^2) each.
    occam = -0.5 * (np.linalg.slogdet(tilted.information)[1] - np.linalg.slogdet(loose.information)[1]) - 2 * np.log(TILT_PRIOR)
    return tilted if gain + occam > EVIDENCE_FOR_PROJECTIVE else flat


def _may_be_projective(layout: Layout) -> bool:
    """Whether converging lines could be told: two lines of marks in one direction, or four and more crossings."""
    lines = [layout.open_direction[k] for k, lined in enumerate(layout.lined_up) if lined]
    both = sum(layout.axis[0][i] is not None and layout.axis[1][i] is not None for i in range(len(layout.at)))
    return lines.count(0) >= 2 or lines.count(1) >= 2 or both >= 4


def _coordinates(layout: Layout, solution: Solution) -> FloatArray:
    return plane.coordinates(solution.theta, (layout.at - layout.shift) / layout.size)


def _again(layout: Layout, solution: Solution, ties: tuple, aspect: float) -> Solution:
    if solution.plane_size == 8:
        return solve(layout, projective=True, start=solution.x, ties=ties, square=None, tilt_sigma=TILT_PRIOR)
    return solve(layout, start=solution.x, ties=ties, aspect=aspect)


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


def _level_at(layout: Layout, solution: Solution, name: str, place: np.ndarray) -> float:
    parameters, _, scales = _scales(layout, solution)
    scale = scales[name]
    uv = plane.coordinates(solution.theta, ((place - layout.shift) / layout.size)[None])
    return float(scale.level(uv[:, scale.direction], parameters)[0])


def _mark_residuals(axes: dict[str, AxisMarks], used: dict[str, AxisMarks], layout: Layout, solution: Solution) -> dict[str, FloatArray]:
    """Distance [px] from each click to where the map puts its mark; for a mark left out, along its axis only."""
    p = solution.plane_size
    out: dict[str, FloatArray] = {}
    scales = _scales(layout, solution)
    for name, marks in axes.items():
        uv = plane.coordinates(solution.theta, (marks.at - layout.shift) / layout.size)
        if len(used[name].typed) == len(marks.typed) and np.array_equal(used[name].typed, marks.typed):
            rows = layout.marks_of[name]
            out[name] = np.hypot(*solution.residuals_px[rows].T)
            continue
        scale = scales[2][name]
        wanted = uv.copy()
        wanted[:, scale.direction] = scale.coordinate(marks.factor * marks.typed, scales[0])
        there = plane.pixels(solution.x[:p], wanted) * layout.size + layout.shift
        out[name] = np.hypot(*(there - marks.at).T)
    return out


def _scatter_notice(used: dict[str, AxisMarks], residuals: dict[str, FloatArray], found: list[doubts.Suspect]) -> list[Notice]:
    named = {s.axis for s in found}
    out: list[Notice] = []
    for name, r in residuals.items():
        worst = float(r.max())
        if name not in named and worst > max(4.0, doubts.limit_px(used[name]) / 2):
            text = (
                f"The {name} marks miss the map by up to {worst:.1f} px: a click is off, a value is wrong or the paper is warped. "
                "Check them with the magnifier, or add marks."
            )
            out.append(Notice(code="calibration-scatter", message=text))
    return out


def _grid_report(panel: Any) -> GridReport:
    if (get(panel, "grid", None) or "auto") == "off":
        return GridReport(
            used=False, lines=0, residual_px=None, why="The grid is switched off for this panel; the marks alone place the axes."
        )
    return GridReport(used=False, lines=0, residual_px=None, why="Printed lines are not used yet; the marks alone place the axes.")


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
