"""Where the line ends: a trace is carried on along its own curvature while its ink goes on, and cut back where it has none."""

import numpy as np

from ..records import FloatArray
from ..sheet import Prepared
from ..sheet.prepare import unit_of
from .axis import Axis, from_polyline
from .clicks import PanelMap
from .presence import CROSSED, EMPTY, HIDDEN, INKED, Presence, Rhythm, presence, rhythm
from .profile import Shape, pixels_near, read_blocks

CHUNK_PX = 30.0
FADED = 1.6
"""A solid line near its end may be gone for this many times its usual gap, if enough of it comes back."""


def to_ink(prepared: Prepared, panel: PanelMap, axis: Axis, shape: Shape, fixed_ends: tuple[bool, bool] = (False, False)) -> Axis:
    """The axis with each end where the ink stops (an end in ``fixed_ends`` stays). Open axes only."""
    unit = max(unit_of(shape.width), 0.6)
    inside = presence(prepared, axis, shape, np.arange(0.0, axis.length + 0.5, 1.0))
    beat = rhythm(inside, unit)
    for end in (0, 1):
        if fixed_ends[end]:
            continue
        outward = axis if end else _reversed(axis)
        outward = _carry_on(prepared, panel, outward, shape, beat, unit)
        axis = outward if end else _reversed(outward)
    return axis


def _reversed(axis: Axis) -> Axis:
    return Axis(axis.points[::-1], axis.s[-1] - axis.s[::-1], -axis.tangents[::-1], axis.closed)


def _carry_on(prepared: Prepared, panel: PanelMap, axis: Axis, shape: Shape, beat: Rhythm, unit: float) -> Axis:
    """Extend beyond the last point chunk by chunk, then cut at the last ink."""
    points = axis.points
    chunk = CHUNK_PX * unit + _longest_gap(beat)
    original = len(points)
    for _ in range(60):
        grown = _one_chunk(prepared, panel, points, shape, chunk, beat, unit)
        if grown is None:
            break
        candidate = from_polyline(np.vstack([points, grown]), False)
        stop = _last_ink(prepared, candidate, shape, beat, unit, from_s=max(_length(points) - 5.0, 0.0))
        points = np.vstack([points, grown])
        if stop < _length(points) - _longest_gap(beat) - 3.0 * unit:
            break
    whole = from_polyline(points, False)
    stop = _last_ink(prepared, whole, shape, beat, unit, from_s=min(_length(axis.points), whole.length))
    if len(points) == original and stop >= whole.length - 1.0:
        return axis
    return cut(whole, 0.0, stop)


def cut(axis: Axis, first: float, last: float) -> Axis:
    """The part of an open axis between two arc lengths."""
    last = min(last, axis.length)
    s = np.linspace(first, last, max(int(round(last - first)), 8) + 1)
    return from_polyline(axis.at(s)[0], False)


def _longest_gap(beat: Rhythm) -> float:
    return beat.gap_px if beat.dashed else FADED * beat.gap_px


def _length(points: FloatArray) -> float:
    return float(np.hypot(*np.diff(points, axis=0).T).sum())


def _one_chunk(
    prepared: Prepared, panel: PanelMap, points: FloatArray, shape: Shape, chunk: float, beat: Rhythm, unit: float
) -> FloatArray | None:
    """The next points along the local parabola, moved onto the ink where there is some; None beyond the panel."""
    s = np.r_[0.0, np.cumsum(np.hypot(*np.diff(points, axis=0).T))]
    reach = float(np.clip(80.0 * unit, 20.0, max(0.25 * s[-1], 20.0)))
    tail = s >= s[-1] - reach
    u = (s[tail] - s[-1]) / reach
    degree = 2 if tail.sum() > 25 else 1
    basis = np.polynomial.polynomial.polyvander(u, degree)
    # Points near the end count most: they steer the continuation.
    w = np.exp(1.5 * u)[:, None]
    c = np.linalg.lstsq(basis * w, points[tail] * w, rcond=None)[0]
    ahead = np.arange(1.0, chunk + 0.5)
    predicted = np.polynomial.polynomial.polyvander(ahead / reach, degree) @ c
    predicted += points[-1] - c[0]
    height, width = prepared.shape
    ok = (
        np.asarray(panel.inside(predicted), bool)
        & (predicted > 1).all(axis=1)
        & (predicted[:, 0] < width - 2)
        & (predicted[:, 1] < height - 2)
    )
    if not ok.all():
        predicted = predicted[: int(np.argmin(ok))]
    if len(predicted) < 4:
        return None
    if len(predicted) >= 9:
        local = from_polyline(np.vstack([points[-1:], predicted]), False)
        blocks = read_blocks(pixels := pixels_near(prepared, local, shape.half_extent + 6.0), pixels.d, shape, local.length, 3.0 * unit)
        good = blocks.good & (np.abs(blocks.shift) < 2.5)
        # Readings behind the first real gap are not this line's: a label often stands just behind its end.
        lost = max(int(np.ceil((beat.gap_px if beat.dashed else 4.0 * unit) / (3.0 * unit))), 2)
        failing = np.convolve(~good, np.ones(lost), "full")[: len(good)] >= lost
        if failing.any():
            good[max(int(np.argmax(failing)) - lost + 1, 0) :] = False
        if good.sum() >= 3:
            # A straight correction that starts at zero: the continuation may bend a little, never jump.
            v = blocks.s[good] / local.length
            weight = 1.0 / (blocks.sigma[good] ** 2 + 0.05**2)
            slope = float((weight * v * blocks.shift[good]).sum() / (weight * v * v).sum())
            predicted = (local.points + local.normals * (slope * local.s / local.length)[:, None])[1:]
    return predicted


def _last_ink(prepared: Prepared, axis: Axis, shape: Shape, beat: Rhythm, unit: float, from_s: float) -> float:
    """Arc length at which the line's ink stops, walking outward from the last ink at or before ``from_s``."""
    s = np.arange(0.0, axis.length + 0.5, 1.0)
    look_back = max(0.0, from_s - 120.0 * unit - 2 * beat.gap_px)
    s = s[s >= look_back]
    seen = presence(prepared, axis, shape, s)
    return walk(seen, beat, unit, int(np.searchsorted(s, from_s)))


def walk(seen: Presence, beat: Rhythm, unit: float, begin: int) -> float:
    """Walk outward over rows from ``begin``: gaps up to the line's own are crossed when enough ink follows, hidden rows are free."""
    state = seen.state
    begin = min(begin, len(state) - 1)
    need = max(int(round(3 * unit)), 2)
    row = begin
    # Inwards first, to solid ground: a run of ink at or before the start.
    while row > 0 and not (state[max(row - need + 1, 0) : row + 1] == INKED).all():
        row -= 1
    last = row
    gap = hidden = 0
    longest = _longest_gap(beat)
    row += 1
    while row < len(state):
        if state[row] == INKED:
            vouched = last < begin and row - begin <= 10 * max(unit, 1.0) and (state[row : row + need] == INKED).all()
            if gap > 1.5 * unit and not vouched and not _resumes(seen, row, beat, gap):
                break
            last, gap, hidden = row, 0, 0
        elif state[row] == EMPTY:
            # A faded stretch that holds the click is the line's: the gap counts from the click on.
            gap += row > begin
            if gap > longest:
                break
        elif row <= begin:
            last = row  # up to the click the user vouches for the line, even where others lie on it
        else:
            hidden += 1
            if hidden > 24 * unit:
                break
        row += 1
    meeting = _meeting(seen, last, unit)
    if meeting is not None and meeting > seen.s[begin] - 12 * unit:
        return meeting
    # An end against a printed line (an axis) lies within that line: half way through it.
    after = last + 1
    stop = after
    while stop < len(state) and state[stop] in (HIDDEN, CROSSED) and stop - after < 12 * unit:
        stop += 1
    extra = 0.5 * (stop - after) if stop - after < 12 * unit else 0.0
    return float(min(seen.s[last] + 0.5 + extra, seen.s[-1]))


def _meeting(seen: Presence, last: int, unit: float) -> float | None:
    """Where the path meets the middle of another line that it ends on, or None.

    The other line darkens the left flank before the meeting point and the right flank as far behind it (or the other way round),
    so the point lies half way between the middles of the two dark runs, whatever the angle.
    """
    low, high = max(last - int(45 * unit), 0), min(last + int(30 * unit), len(seen.s))
    middles: list[float] = []
    reach = 0.0
    for side in (seen.left, seen.right):
        dark = side[low:high] > 0.4
        edge = np.flatnonzero(np.diff(np.r_[0, dark.astype(np.int8), 0])).reshape(-1, 2)
        edge = edge[(edge[:, 1] - edge[:, 0] >= 2) & (edge[:, 0] > 0) & (edge[:, 1] < high - low)]
        if not len(edge):
            return None
        centre = edge.mean(axis=1) - 0.5 + low
        nearest = int(np.argmin(np.abs(centre - last)))
        middles.append(float(centre[nearest]))
        reach = max(reach, 0.5 * float(edge[nearest, 1] - edge[nearest, 0]))
    point = 0.5 * (middles[0] + middles[1])
    # Ink goes on behind the meeting point as far as the other line is cut by the path, no further; else the lines cross.
    if not -3.0 * unit <= last - point <= 1.15 * reach + 1.5 * unit:
        return None
    # The line must stop there: no ink of its own beyond the other line's.
    beyond = int(max(max(middles), last)) + int(8 * unit)
    if beyond < len(seen.s) and (seen.state[beyond : beyond + int(8 * unit)] == INKED).mean() > 0.5:
        return None
    return float(np.interp(point, np.arange(len(seen.s)), seen.s))


def _resumes(seen: Presence, row: int, beat: Rhythm, gap: float) -> bool:
    """Enough ink after a gap, and lying straight along the path, to be the line again and not a stroke of a letter."""
    rest = seen.state[row:]
    run = int(np.argmax(rest == EMPTY)) if (rest == EMPTY).any() else len(rest)
    # The longer a solid line has been away, the more of it must follow.
    enough = beat.ink_px if beat.dashed else max(beat.ink_px, 1.6 * gap)
    if run < enough and run < len(rest):
        return False
    ahead = slice(row, row + min(run, max(int(round(beat.ink_px)), 8)))
    state, lean = seen.state[ahead], seen.lean[ahead]
    inked = state == INKED
    touched = np.maximum(seen.left[ahead], seen.right[ahead]) > 0.35
    if inked.mean() < 0.5 or touched.mean() > 0.25:
        return False
    drift = float(np.polyfit(np.arange(len(lean))[inked], lean[inked], 1)[0]) if inked.sum() >= 3 else 0.0
    return abs(drift) < 0.2 and abs(float(lean[inked].mean())) < 0.8
