"""From bends to a panel map: parameters, covariance and scales where printed lines place one or both directions."""

from typing import Any

import numpy as np

from ..records import FloatArray, GridReport
from . import plane
from .grid import Bend, bend_of
from .layout import Layout
from .panelmap import Scale
from .solve import CLICK_SIGMA_PX, Solution
from .warp import Warp

SNAP_PX = 3.0
SNAP_SIGMA_PX = 0.15
"""A mark this near a line that is in use is a click on it; the line's place is then better than the click."""
DIRECTION_NAMES = ("flow", "value")


def bends(layout: Layout, solution: Solution, prepared: Any, wanted: str) -> tuple[dict[int, Bend], GridReport]:
    """Bends of the directions that the printed grid places, and the report on it."""
    if wanted == "off":
        return {}, GridReport(
            used=False, lines=0, residual_px=None, why="The grid is switched off for this panel; the marks alone place the axes."
        )
    printed, ink = getattr(prepared, "lines", None), getattr(prepared, "ink", None)
    if not printed or ink is None:
        return {}, GridReport(
            used=False, lines=0, residual_px=None, why="No printed lines were found on the sheet; the marks alone place the axes."
        )
    found = {d: bend_of(d, layout, solution, printed, ink) for d in (0, 1)}
    used = {d: b for d, b in found.items() if not isinstance(b, str)}
    reasons = [f"{DIRECTION_NAMES[d]} axis from the marks: {b}" for d, b in found.items() if isinstance(b, str)]
    if not used:
        return {}, GridReport(used=False, lines=0, residual_px=None, why=f"The marks alone place the axes ({'; '.join(reasons)}).")
    lines = sum(len(b.lines) for b in used.values())
    rms = float(np.sqrt(np.mean([b.rms_px**2 for b in used.values()])))
    what = " and ".join(DIRECTION_NAMES[d] for d in used)
    why = f"{lines} printed lines on round values place the {what} {'axes' if len(used) > 1 else 'axis'}"
    return used, GridReport(used=True, lines=lines, residual_px=rms, why="; ".join([why, *reasons]) + ".")


def with_bends(
    layout: Layout,
    solution: Solution,
    used: dict[int, Bend],
    parameters: FloatArray,
    covariance: FloatArray,
    scales: dict[str, Scale],
) -> tuple[FloatArray, FloatArray, dict[int, Warp]]:
    """Parameters and covariance with the bends appended; scales of further axes are placed anew on the bent directions."""
    p = solution.plane_size
    parameters, covariance = parameters.copy(), covariance.copy()
    uv = plane.coordinates(solution.theta, (layout.at - layout.shift) / layout.size)
    if len(used) == 2:
        covariance[:p, :] = covariance[:, :p] = 0.0
    for name, slot in layout.slots.items():
        d = slot.marks.direction
        if slot.own is None or d not in used:
            continue
        rows = [i for i, pair in enumerate(layout.terms) if pair[d][0] == name]
        z = np.array([layout.terms[i][d][1] for i in rows])
        pair, block = _place_scale(used[d], uv[rows, d] + used[d].at(uv[rows]), z)
        k = p + slot.own
        parameters[k : k + 2] = pair
        covariance[k : k + 2, :] = covariance[:, k : k + 2] = 0.0
        covariance[k : k + 2, k : k + 2] = block
    warps: dict[int, Warp] = {}
    for d, b in used.items():
        n = len(parameters)
        warps[d] = Warp(b.degree, n, b.centre, b.half)
        parameters = np.concatenate([parameters, b.coefficients])
        larger = np.zeros((len(parameters), len(parameters)))
        larger[:n, :n], larger[n:, n:] = covariance, b.covariance
        covariance = larger
    return parameters, covariance, warps


def _place_scale(bend: Bend, c: FloatArray, z: FloatArray) -> tuple[np.ndarray, np.ndarray]:
    """(alpha, beta) of a further axis and their covariance, from its marks snapped to the lines they stand on."""
    targets = np.array([line.target for line in bend.lines])
    near = targets[np.argmin(np.abs(c[:, None] - targets), axis=1)]
    snapped = np.abs(near - c) * bend.px <= SNAP_PX
    for use in (snapped, np.zeros(len(c), dtype=bool)):
        y = np.where(use, near, c)
        sigma = np.where(use, SNAP_SIGMA_PX, CLICK_SIGMA_PX) / bend.px
        rows = np.stack([np.ones(len(z)), z], -1) / sigma[:, None]
        pair = np.linalg.lstsq(rows, y / sigma, rcond=None)[0]
        miss = np.abs(y - pair[0] - pair[1] * z) * bend.px
        # Snapped marks must agree with each other: ticks of this scale need not be lines of the grid.
        if not use.any() or np.all(miss[use] < 3 * SNAP_SIGMA_PX):
            break
    return pair, np.linalg.inv(rows.T @ rows)


def mark_misses(
    residuals: dict[str, FloatArray],
    layout: Layout,
    solution: Solution,
    used: dict[int, Bend],
    scales: dict[str, Scale],
    parameters: FloatArray,
) -> dict[str, FloatArray]:
    """Residuals with those of the bent directions replaced: how far each click is from its value's line [px]."""
    out = dict(residuals)
    for name, scale in scales.items():
        if scale.direction in used:
            b, marks = used[scale.direction], layout.slots[name].marks
            uv = plane.coordinates(solution.theta, (marks.at - layout.shift) / layout.size)
            c = uv[:, scale.direction] + b.at(uv)
            out[name] = np.abs(c - scale.coordinate(marks.factor * marks.typed, parameters)) * b.px
    return out
