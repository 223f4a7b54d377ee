"""Calibration from the printed grid: lines found on the sheet get their values from the marks, then the lines place the axes.

Each line with a value is a row of linear equations for a low-order bend of the marks' plane (robust least squares, no
intersections needed). The degree is chosen by leaving lines out. A direction with too few lines, with lines that do not sit on
round values, or with marks that contradict them stays as the marks have it, and the report says why.
"""

from dataclasses import dataclass

import numpy as np

from ..records import FloatArray
from . import plane
from .layout import Layout
from .lines import PLACES, measure
from .solve import CLICK_SIGMA_PX, Solution
from .warp import REACH, terms

MATCH_SIGMA_PX = 1.5
LEAST_PITCH_PX = 7.0
FEWEST_LINES = 3
SHORTEST_SHARE = 0.5
"""A line counts where it covers this share of the panel across."""
READINGS_A_LINE = 3.0
"""A printed line is this many independent readings: its own waviness is common to long stretches."""
LEAST_SIGMA_PX = 0.08
WORST_RMS_PX = 0.6
LEAST_LOG_ODDS = 8.0
"""Chance that lines fall on some round step by accident: e^-8, with about twenty steps tried 1 in 150."""
DEGREES = (1, 2, 3)
LEAST_GAIN_PX = 0.06
"""A higher degree must bring left-out lines closer by this much, and by three tenths."""


@dataclass(frozen=True, slots=True, eq=False)
class Line:
    """A printed line of one direction: base coordinates ``uv`` [n, 2], its middle ``c`` and its value's coordinate ``target``."""

    uv: FloatArray
    c: float
    target: float


@dataclass(frozen=True, slots=True, eq=False)
class Bend:
    """The bend of one direction from its lines: ``coefficients`` and ``covariance`` in `warp.terms`, residual over the lines [px]."""

    degree: int
    coefficients: FloatArray
    covariance: FloatArray
    centre: FloatArray
    half: FloatArray
    lines: tuple[Line, ...]
    rms_px: float
    px: float

    def at(self, uv: FloatArray) -> FloatArray:
        return terms(np.clip((uv - self.centre) / self.half, -REACH, REACH), self.degree) @ self.coefficients


def bend_of(d: int, layout: Layout, solution: Solution, printed: tuple, ink: np.ndarray) -> Bend | str:
    """The bend of direction d (0: flow, 1: values), or the reason why the lines do not give one."""
    at = (layout.at - layout.shift) / layout.size
    marks_uv = plane.coordinates(solution.theta, at)
    low, high = marks_uv.min(0), marks_uv.max(0)
    centre, half = (low + high) / 2, np.maximum((high - low) / 2, 1e-9)
    px = np.array([np.hypot(*solution.theta[2:4]), np.hypot(*solution.theta[4:6])]) * layout.size
    name, slot = next((n, s) for n, s in layout.slots.items() if s.marks.direction == d and s.own is None and s.twin is None)
    rows = [i for i, pair in enumerate(layout.terms) if pair[d][0] == name]
    axis_at = float(np.mean(marks_uv[rows, 1 - d]))
    found = _lines_along(d, layout, solution, printed, ink, centre, half, px, axis_at)
    if len(found) < FEWEST_LINES:
        return f"{'no' if not found else 'only ' + str(len(found))} printed lines cross the panel"
    found = _corrected(found, marks_uv[rows, d], np.array([layout.terms[i][d][1] for i in rows]), float(px[d]))
    lines = _valued(found, slot.centre, slot.half, slot.marks.log, px[d], slot.marks.typed)
    if len(lines) < FEWEST_LINES:
        return "the printed lines do not sit on round values of the marks"
    reach = max(line.c for line in lines) - min(line.c for line in lines)
    if reach < 1.2 * half[d]:
        return "the printed lines cover only a part of the panel"
    marks = (marks_uv[rows], np.array([layout.terms[i][d][1] for i in rows]))
    bend = _best_degree(d, lines, marks, centre, half, float(px[d]))
    if bend is None:
        return "the printed lines do not agree with each other"
    miss = (marks[0][:, d] + bend.at(marks[0]) - marks[1]) * px[d]
    if np.sqrt(np.mean(miss**2)) > 2.2 * CLICK_SIGMA_PX or np.abs(miss).max() > 4.5:
        return f"the marks miss the printed lines by up to {np.abs(miss).max():.1f} px"
    return bend


def _lines_along(
    d: int,
    layout: Layout,
    solution: Solution,
    printed: tuple,
    ink: np.ndarray,
    centre: FloatArray,
    half: FloatArray,
    px: FloatArray,
    axis_at: float,
) -> list[tuple[FloatArray, float]]:
    """Printed lines on which coordinate d stays: base coordinates inside the marked area, and the coordinate where they meet the marks.

    Where the marks stand the marks' map is good; on a photo taken at an angle it may be several lines off at the far side.
    """
    out: list[tuple[FloatArray, float]] = []
    e = 1 - d
    for line in printed:
        uv = plane.coordinates(solution.theta, (line.points() - layout.shift) / layout.size)
        if np.ptp(uv[:, d]) * px[d] > 0.25 * np.ptp(uv[:, e]) * px[e]:
            continue
        if abs(_meets(uv, d, axis_at) - centre[d]) > half[d] + 6 / px[d]:
            continue
        inside = np.abs(uv[:, e] - centre[e]) <= half[e] - 2 / px[e]
        if inside.sum() < 4 or np.ptp(uv[inside, e]) < SHORTEST_SHARE * 2 * half[e]:
            continue
        points = measure(line.points()[inside], ink)
        if len(points) < 4:
            continue
        uv = plane.coordinates(solution.theta, (points - layout.shift) / layout.size)
        c = _meets(uv, d, axis_at)
        if abs(c - centre[d]) <= half[d] + 4 / px[d]:
            out.append((uv, c))
    return sorted(out, key=lambda pair: pair[1])


def _corrected(found: list[tuple[FloatArray, float]], marked: FloatArray, typed: FloatArray, px: float) -> list[tuple[FloatArray, float]]:
    """Lines with their meeting places carried through three or more marks where a straight scale misses those by more than a click."""
    miss = typed - marked
    if len(np.unique(np.round(typed, 9))) < 3 or np.abs(miss).max() * px <= 2 * CLICK_SIGMA_PX:
        return found
    bow = np.polyfit(marked, miss, 2)
    return [(uv, c + float(np.polyval(bow, c))) for uv, c in found]


def _meets(uv: FloatArray, d: int, axis_at: float) -> float:
    """Coordinate d of a line where the other coordinate is ``axis_at``: straight on from its nearer half."""
    e = uv[:, 1 - d]
    near = np.argsort(np.abs(e - axis_at))[: max(len(e) // 2, min(len(e), 4))]
    if np.ptp(e[near]) <= 0:
        return float(np.median(uv[near, d]))
    slope, level = np.polyfit(e[near] - axis_at, uv[near, d], 1)
    return float(level)


def _valued(found: list[tuple[FloatArray, float]], centre: float, half: float, log: bool, px: float, typed: FloatArray) -> list[Line]:
    """Lines with the coordinate of the round value they stand for; lines between ticks are left out."""
    c = np.array([pair[1] for pair in found])
    level = centre + half * c
    if log:
        tick = _log_ticks(level)
        gap = float(np.median(np.diff(np.unique(tick)))) if len(np.unique(tick)) > 1 else 0.0
        if _odds((level - tick) / (half / px), gap * px / abs(half)).sum() < LEAST_LOG_ODDS:
            return []
    else:
        per_px = half / px
        best, tick = -np.inf, level
        for step in _steps(typed, abs(half) * 2, abs(per_px) * LEAST_PITCH_PX):
            off = (level - np.round(level / step) * step) / per_px
            odds = _odds(off, step / abs(per_px))
            if odds.sum() > best:
                best, tick = float(odds.sum()), np.round(level / step) * step
        if best < LEAST_LOG_ODDS:
            return []
    target = (tick - centre) / half
    off = np.abs(c - target) * px
    gap = np.min(np.abs(np.diff(np.unique(np.round(target, 9)))), initial=np.inf) * px
    lines: dict[float, tuple[float, Line]] = {}
    for k, (uv, middle) in enumerate(found):
        if off[k] <= min(5.0, 0.3 * gap):
            key = round(float(target[k]), 9)
            if key not in lines or off[k] < lines[key][0]:
                lines[key] = (off[k], Line(uv, middle, float(target[k])))
    return [pair[1] for pair in lines.values()]


def _odds(off_px: FloatArray, pitch_px: float) -> FloatArray:
    """Log odds of each line: on a tick with a click-sized miss, against anywhere within the pitch."""
    return np.log(0.95 * pitch_px / (MATCH_SIGMA_PX * 2.5066) * np.exp(-0.5 * (off_px / MATCH_SIGMA_PX) ** 2) + 0.05)


def _steps(typed: FloatArray, span: float, least: float) -> list[float]:
    """Grid steps to try: round numbers, and decimal parts of the marks' common step (8 m may be drawn as 20 mm)."""
    common = 0.0
    for value in typed:
        a, b = abs(float(value)), common
        while a > 1e-6 * span:
            a, b = (b % a if b % a < a * (1 - 1e-9) else 0.0), a
        common = b
    round_steps = [
        h * 10.0**p for p in range(int(np.floor(np.log10(span))) + 1, int(np.floor(np.log10(span))) - 4, -1) for h in (5.0, 2.5, 2.0, 1.0)
    ]
    parts = [common / n for n in (1, 2, 4, 5, 8, 10, 16, 20, 25, 40, 50, 80, 100, 200)]
    return sorted({float(f"{s:.9g}") for s in (*round_steps, *parts) if least <= s <= span}, reverse=True)


def _log_ticks(level: FloatArray) -> FloatArray:
    whole = np.floor(level)
    digits = np.log10(np.array([1.0, 1.5, 2, 2.5, 3, 4, 5, 6, 7, 8, 9, 10]))
    return whole + digits[np.argmin(np.abs((level - whole)[:, None] - digits), axis=1)]


def _best_degree(
    d: int, lines: list[Line], marks: tuple[FloatArray, FloatArray], centre: FloatArray, half: FloatArray, px: float
) -> Bend | None:
    """The bend whose degree does best on lines it has not seen; None where the lines do not agree with each other."""
    best: tuple[float, _System] | None = None
    for degree in DEGREES:
        if len(lines) < degree + 2:
            break
        system = _System(d, lines, marks, centre, half, px, degree)
        score = system.left_out()
        if best is None or (score < 0.7 * best[0] and score < best[0] - LEAST_GAIN_PX):
            best = (score, system)
    if best is None:
        return None
    system = best[1]
    kept = system.line_weight > 0.3
    used = tuple(line for line, keep in zip(lines, kept, strict=True) if keep)
    rms = float(np.sqrt(np.mean(system.line_miss_px[kept] ** 2))) if kept.any() else np.inf
    if len(used) < max(FEWEST_LINES, 0.7 * len(lines)) or rms > WORST_RMS_PX:
        return None
    sigma = np.hypot(rms, LEAST_SIGMA_PX) / px
    covariance = np.linalg.pinv(system.information(), hermitian=True) * sigma**2 * (PLACES / READINGS_A_LINE)
    return Bend(system.degree, system.coefficients, covariance, centre, half, used, rms, px)


class _System:
    """The linear equations of all lines of one direction for one degree, solved robustly over points and over whole lines.

    Points stand in arrays [lines, places] padded to one length, so that every step is one array operation. The marks join with a small
    weight: they hold the bend where lines are few.
    """

    MARK_WEIGHT = 0.1
    ROUNDS = 8
    FOLDS = 12

    def __init__(
        self, d: int, lines: list[Line], marks: tuple[FloatArray, FloatArray], centre: FloatArray, half: FloatArray, px: float, degree: int
    ):
        self.degree, self.px = degree, px
        count = np.array([len(line.uv) for line in lines])
        self.there = np.arange(count.max()) < count[:, None]
        uv = np.zeros((*self.there.shape, 2)) + centre
        uv[self.there] = np.concatenate([line.uv for line in lines])
        self.rows = terms(((uv - centre) / half).reshape(-1, 2), degree).reshape(*self.there.shape, -1)
        self.miss = np.array([line.target for line in lines])[:, None] - uv[..., d]
        self.mark_rows = terms((marks[0] - centre) / half, degree) * self.MARK_WEIGHT
        self.mark_miss = (marks[1] - marks[0][:, d]) * self.MARK_WEIGHT
        self.line_weight = np.ones(len(lines))
        self.point_weight = self.there.astype(np.float64)
        for _ in range(self.ROUNDS):
            self.coefficients = self._solve(self.line_weight)
            off = self._off_px(self.coefficients)
            self.line_miss_px = 1.4826 * _medians(off, self.there)
            scale = max(float(np.median(self.line_miss_px)), 0.1)
            self.line_weight = np.maximum(1 - (self.line_miss_px / (6 * scale)) ** 2, 0.0) ** 2
            self.point_weight = np.maximum(1 - (off / (6 * scale)) ** 2, 0.0) ** 2 * self.there

    def _solve(self, line_weight: FloatArray) -> FloatArray:
        w = np.sqrt(line_weight[:, None] * self.point_weight)
        use = w > 0
        rows = np.concatenate([self.rows[use] * w[use][:, None], self.mark_rows])
        return np.linalg.lstsq(rows, np.concatenate([self.miss[use] * w[use], self.mark_miss]), rcond=1e-10)[0]

    def _off_px(self, coefficients: FloatArray) -> FloatArray:
        return np.abs(self.miss - self.rows @ coefficients) * self.px

    def left_out(self) -> float:
        """Miss of lines left out in turn [px rms]. The worst tenth is not counted: a line that is none must not decide."""
        n = len(self.line_weight)
        fold = np.arange(n) % min(n, self.FOLDS)
        misses = np.zeros(n)
        for k in range(fold.max() + 1):
            out = fold == k
            off = self._off_px(self._solve(np.where(out, 0.0, self.line_weight)))[out]
            there = self.there[out]
            misses[out] = np.sqrt((off**2 * there).sum(axis=1) / there.sum(axis=1))
        return float(np.sqrt(np.mean(np.sort(misses)[: max(n - n // 10, 1)] ** 2)))

    def information(self) -> FloatArray:
        """Information on the coefficients for unit variance of a point."""
        w = self.line_weight[:, None] * self.point_weight
        return np.asarray(np.einsum("lpi,lp,lpj->ij", self.rows, w, self.rows))


def _medians(values: FloatArray, there: np.ndarray) -> FloatArray:
    """Root of the median square of each row's present values [lines]."""
    order = np.sort(np.where(there, values, np.inf), axis=1)
    n = there.sum(axis=1)
    i = np.arange(len(values))
    return np.sqrt((order[i, (n - 1) // 2] ** 2 + order[i, n // 2] ** 2) / 2)
