"""From bends to a panel map: parameters, covariance and scales where printed lines place one or both directions."""

from typing import Any

import numpy as np

from ..records import FloatArray, GridReport
from . import plane
from .bend import Bend
from .grid import Placed, place
from .layout import Layout
from .panelmap import Scale
from .solve import CLICK_SIGMA_PX, Solution
from .warp import Warp

SNAP_PX = 3.0
SNAP_SIGMA_PX = 0.05
"""A mark this near a line that is in use is a click on it; the line's place is then better than the click."""
EXACT_PX = 1e-4
DIRECTION_NAMES = ("flow", "value")


def look(layout: Layout, solution: Solution, prepared: Any, wanted: str) -> Placed | str:
    """What the printed grid says, or the sentence why it is not asked."""
    if wanted == "off":
        return "The grid is switched off for this panel; the marks alone place the axes."
    if getattr(prepared, "ink", None) is None or getattr(prepared, "lines", None) is None:
        return "No printed lines were found on the sheet; the marks alone place the axes."
    width = float(getattr(prepared, "width_px", 3.0))
    return place(layout, solution, prepared, width, float(getattr(prepared, "unit", 1.0)))


def report(placed: Placed | str) -> GridReport:
    """Which lines place which axis, how well, and why not where they do not."""
    if isinstance(placed, str):
        return GridReport(used=False, lines=0, residual_px=None, why=placed)
    reasons = [f"{DIRECTION_NAMES[d]} axis from the marks: {why}" for d, why in sorted(placed.reasons.items())]
    if not placed.bends:
        return GridReport(used=False, lines=0, residual_px=None, why=f"The marks alone place the axes ({'; '.join(reasons)}).")
    every = list(placed.bends.values())
    lines = sum(not line.tick for b in every for line in b.lines)
    ticks = sum(line.tick for b in every for line in b.lines)
    rms = float(np.sqrt(np.mean([b.rms_px**2 for b in every])))
    worst = max(b.worst_px for b in every)
    share = max(100 * b.worst_px / (2 * float(b.half[d]) * b.px) for d, b in placed.bends.items())
    what = " and ".join(DIRECTION_NAMES[d] for d in sorted(placed.bends))
    which = " and ".join(f"{n} {name}{'' if n == 1 else 's'}" for n, name in ((lines, "printed line"), (ticks, "tick")) if n)
    why = f"{which} on round values place the {what} {'axes' if len(every) > 1 else 'axis'}"
    how = f"residual {rms:.2f} px rms, {worst:.2f} px worst ({share:.3f} % of the axis)"
    bent = [f"{DIRECTION_NAMES[d]} bent by {b.basis.name}" for d, b in sorted(placed.bends.items()) if b.basis.cells or b.basis.degree > 1]
    return GridReport(used=True, lines=lines + ticks, residual_px=rms, why="; ".join([why, how, *bent, *reasons]) + ".")


def with_bends(
    layout: Layout,
    solution: Solution,
    placed: Placed,
    parameters: FloatArray,
    covariance: FloatArray,
    scales: dict[str, Scale],
) -> tuple[FloatArray, FloatArray, dict[str, Scale], dict[int, Warp]]:
    """Parameters and covariance on the base plane with the bends appended, further axes' scales placed anew on them."""
    used, theta = placed.bends, placed.theta
    p, q = solution.plane_size, len(theta)
    n = len(parameters) - p + q
    fresh, spread = np.zeros(n), np.zeros((n, n))
    fresh[:q], fresh[q:] = theta, parameters[p:]
    if theta is solution.theta or np.array_equal(theta, solution.theta):
        spread[:] = covariance
    if len(used) == 2:
        spread[:q, :] = spread[:, :q] = 0.0
    parameters, covariance = fresh, spread
    moved = {name: Scale(s.marks, s.direction, s.centre, s.half, None if s.own is None else s.own - p + q) for name, s in scales.items()}
    uv = plane.coordinates(theta, (layout.at - layout.shift) / layout.size)
    for name, slot in layout.slots.items():
        d = slot.marks.direction
        if slot.own is None or d not in used:
            continue
        rows = [i for i, pair in enumerate(layout.terms) if pair[d][0] == name]
        z = np.array([layout.terms[i][d][1] for i in rows])
        known = placed.scales.get(name)
        if known is not None:
            pair, block = known, np.eye(2) * (EXACT_PX / used[d].px) ** 2
        else:
            pair, block = _place_scale(used[d], uv[rows, d] + used[d].at(uv[rows]), z)
        k = q + slot.own
        parameters[k : k + 2] = pair
        covariance[k : k + 2, :] = covariance[:, k : k + 2] = 0.0
        covariance[k : k + 2, k : k + 2] = block
    warps: dict[int, Warp] = {}
    for d, b in used.items():
        n = len(parameters)
        warps[d] = Warp(b.basis, n, b.centre, b.half)
        parameters = np.concatenate([parameters, b.coefficients])
        larger = np.zeros((len(parameters), len(parameters)))
        larger[:n, :n], larger[n:, n:] = covariance, b.covariance
        covariance = larger
    return parameters, covariance, moved, warps


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
    return pair, np.linalg.pinv(rows.T @ rows, hermitian=True)


def mark_misses(
    residuals: dict[str, FloatArray],
    layout: Layout,
    placed: Placed,
    scales: dict[str, Scale],
    parameters: FloatArray,
) -> dict[str, FloatArray]:
    """Residuals with those of the bent directions replaced: how far each click is from its value's line [px]."""
    out = dict(residuals)
    for name, scale in scales.items():
        if scale.direction in placed.bends:
            b, marks = placed.bends[scale.direction], layout.slots[name].marks
            uv = plane.coordinates(placed.theta, (marks.at - layout.shift) / layout.size)
            c = uv[:, scale.direction] + b.at(uv)
            out[name] = np.abs(c - scale.coordinate(marks.factor * marks.typed, parameters)) * b.px
    return out
