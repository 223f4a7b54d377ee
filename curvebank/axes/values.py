"""Which value each printed line stands for, and which marks contradict the lines.

Along one direction this is a question of one dimension: lines at places c, marks at places with typed values. A reading is a scale
``level = A + B c`` (bent a little where the lines ask for it) on which the lines fall on round values. Readings come from all marks, from
all but one, from pairs, and from pairs in which one mark was read a line too far. Each is scored like a model: how well lines and marks
fit, how round the step is, how rare a wrong mark is. The best is taken where no other comes near.
"""

from dataclasses import dataclass, replace

import numpy as np

from ..records import FloatArray
from .suspects import round_values, tick_cost

LINE_SIGMA_PX = 1.5
"""How far a line may be off its value's place while the reading is only rough, and afterwards."""
FINE_SIGMA_PX = 0.7
MARK_SIGMA_PX = 1.1
LOG_PRIOR_WRONG = -7.0
"""A mark is clicked or typed wrong once in a thousand."""
LEAST_PITCH_PX = 5.0
LEAST_LOG_ODDS = 8.0
"""Against lines that have nothing to do with this scale: they fall on some round step by accident once in e^8, with twenty steps tried
1 in 150."""
NEARLY_AS_GOOD = 3.5
"""Readings within this of the best (odds of 30 to 1) cannot be told apart."""
ON_A_LINE_PX = 3.5
FURTHEST = 6
"""A mark read too far is at most this many lines off: a labelled tick's distance on most grids."""
LOG_DIGITS = np.log10(np.array([1.0, 1.2, 1.4, 1.5, 1.6, 1.8, 2, 2.5, 3, 3.5, 4, 4.5, 5, 6, 7, 8, 9, 10]))
LOG_COST = np.array([0, 3.0, 3, 1, 3, 3, 0, 2, 0, 3, 0, 3, 0, 0, 0, 0, 0, 0])


@dataclass(frozen=True, slots=True, eq=False)
class Reading:
    """One way to read the lines: ``level = polynomial(c)``, the level of each line (NaN where it stands on none), misses of the marks.

    ``wrong`` lists the marks that contradict it; ``oddness`` is how rare a grid of this step is (`roundness`).
    """

    polynomial: FloatArray
    levels: FloatArray
    step: float
    score: float
    odds: float
    wrong: tuple[int, ...]
    marks_px: FloatArray
    oddness: float = 0.0

    def level(self, c: FloatArray | float) -> FloatArray:
        return _value(np.asarray(c, dtype=np.float64), self.polynomial)

    def slope(self, c: float) -> float:
        """Level per unit of c."""
        return float(sum(k * a * c ** (k - 1) for k, a in enumerate(self.polynomial) if k))


@dataclass(frozen=True, slots=True, eq=False)
class Readings:
    """The best reading, or None, and another one that is nearly as good and puts other values on the lines."""

    best: Reading | None
    rival: Reading | None = None


def read(c: FloatArray, marks_c: FloatArray, marks_level: FloatArray, log: bool, px: float) -> Readings:
    """Read lines at ``c`` [n] by marks at ``marks_c`` [k] that say ``marks_level`` [k]; ``px`` pixels are one unit of c."""
    order = np.argsort(c, kind="stable")
    if np.any(np.diff(order) < 0):
        got = read(c[order], marks_c, marks_level, log, px)
        back = np.argsort(order, kind="stable")
        best, rival = (None if r is None else replace(r, levels=r.levels[back]) for r in (got.best, got.rival))
        return Readings(best, rival)
    if len(c) < 2 or len(marks_c) < 2:
        return Readings(None)
    found: list[Reading] = []
    tried: list[tuple[float, float]] = []
    for a, b, base in _scales(c, marks_c, marks_level, log, px):
        # Scales that put both ends within half a pixel of each other are one.
        if any(max(abs(a - x + (b - y) * c[0]), abs(a - x + (b - y) * c[-1])) < 0.5 * abs(b) / px for x, y in tried):
            continue
        tried.append((a, b))
        found += _valued(c, a, b, base, marks_c, marks_level, log, px)
        first = max(found, key=lambda r: r.score, default=None)
        # All marks agree with the lines, on a common step: any other reading costs a wrong mark more.
        if len(tried) == 1 and first is not None and first.score >= LEAST_LOG_ODDS and not first.wrong and _settled(first):
            return Readings(first)
    # Most marks are right: a reading that few of them share is none (of two marks one may be wrong, and is then asked about).
    most = max(len(marks_c) // 3, 1)
    found = [r for r in found if r.score >= LEAST_LOG_ODDS and len(r.wrong) <= most]
    if not found:
        return Readings(None)
    best = max(found, key=lambda r: r.score)
    ends = np.array([min(c[0], marks_c.min()), max(c[-1], marks_c.max())])

    def apart(other: Reading) -> float:
        slope = abs(best.slope(ends.mean())) or 1.0
        return float(np.abs(other.level(ends) - best.level(ends)).max() / slope * px)

    rivals = [r for r in found if r.score > best.score - NEARLY_AS_GOOD and apart(r) > 3.0]
    if not rivals and len(marks_c) == 2 and (best.wrong or (not log and best.oddness >= 7.0)):
        # Two marks fit any even grid; such a step says that the lines belong to something else, or that a mark does.
        return Readings(None)
    return Readings(best, max(rivals, key=lambda r: r.score) if rivals else None)


def _settled(r: Reading) -> bool:
    return r.oddness <= 1.0 and float(r.marks_px.max()) < 2.5 * MARK_SIGMA_PX


def _scales(c: FloatArray, at: FloatArray, level: FloatArray, log: bool, px: float) -> list[tuple[float, float, tuple[float, float]]]:
    """Scales (A, B) to try, and the stretch between the marks they come from."""
    n = len(at)
    out: list[tuple[float, float, tuple[float, float]]] = []

    def add(rows: list[int], levels: FloatArray) -> None:
        if np.ptp(at[rows]) * px < 20 or np.ptp(levels) == 0:
            return
        b, a = np.polyfit(at[rows], levels, 1)
        out.append((float(a), float(b), (float(at[rows].min()), float(at[rows].max()))))

    everything = list(range(n))
    add(everything, level)
    pairs = [(i, j) for j in range(n) for i in range(j)]
    if n >= 4:
        for k in everything:
            rows = [i for i in everything if i != k]
            add(rows, level[rows])
    if n >= 3:
        for i, j in pairs[:21]:
            add([i, j], level[[i, j]])
    if log and len(c) >= 3:
        near = np.abs(c[None, :] - at[:, None]).min(axis=1) * px <= ON_A_LINE_PX
        for i, j in pairs[:21]:
            if near[i] and near[j]:
                for k, other in ((i, j), (j, i)):
                    for slipped in _log_neighbours(float(level[k])):
                        add([k, other], np.array([slipped, level[other]]))
    if not log and len(c) >= 3:
        gap = float(np.median(np.diff(c)))
        near = np.abs(c[None, :] - at[:, None]).min(axis=1) * px <= ON_A_LINE_PX
        for i, j in pairs[:21]:
            fields = int(round(abs(float(at[j] - at[i])) / gap))
            if not (near[i] and near[j]) or fields < 2 or fields > 60:
                continue
            rise = float(level[j] - level[i])
            for n_read in range(max(fields - FURTHEST, 1), fields + FURTHEST + 1):
                step = rise / n_read
                if n_read != fields and roundness(step) <= 1.0:
                    slip = step * (fields - n_read)
                    add([i, j], np.array([level[i], level[j] + slip]))
                    add([i, j], np.array([level[i] - slip, level[j]]))
    return out


def _log_neighbours(level: float) -> list[float]:
    """Levels of the whole digits next to a level."""
    digits = np.log10(np.arange(1.0, 10.0))
    ladder = np.concatenate([digits + k for k in (-1, 0, 1)]) + np.floor(level)
    order = np.argsort(np.abs(ladder - level), kind="stable")[:7]
    return [float(v) for v in ladder[order] if abs(v - level) > 1e-6]


def _valued(
    c: FloatArray, a: float, b: float, base: tuple[float, float], at: FloatArray, level: FloatArray, log: bool, px: float
) -> list[Reading]:
    """Readings at this scale: the best step, its lines, the scale refined by them.

    Two marks close together know the far side poorly: the scale is carried outwards line by line.
    """
    poly = np.array([a, b])
    per_px = abs(b) / px
    if per_px == 0 or not np.isfinite(per_px):
        return []
    span = abs(b) * max(float(np.ptp(c)), float(np.ptp(at)))
    steps = [0.0] if log else _steps(level, span, per_px * LEAST_PITCH_PX)
    scored = []
    middle, reach = 0.5 * (base[0] + base[1]), 0.5 * (base[1] - base[0])
    near = np.abs(c - middle) <= 1.6 * reach
    short = near.sum() >= 3 and reach < 0.3 * float(np.ptp(c))
    local = c[near] if short else c
    for step in steps:
        tick, pitch = _ticks(a + b * local, step, log)
        odds = _odds((a + b * local - tick) / per_px, pitch / per_px, LINE_SIGMA_PX).sum() - _cost(step, log)
        scored.append((float(odds), step))
    scored.sort(reverse=True)
    out = []
    for _, step in scored[:3]:
        poly = np.array([a, b])
        sigma = LINE_SIGMA_PX
        if short:
            poly = _carried(c, poly, middle, reach, step, log, per_px, at)
        start = poly
        for degree in (1, 1, 2, 3):
            values = _value(c, poly)
            tick, pitch = _ticks(values, step, log)
            off = (values - tick) / per_px
            on = np.abs(off) < np.minimum(3.5 * sigma, 0.35 * pitch / per_px)
            if on.sum() < degree + 2:
                break
            fitted = _polynomial(c[on], tick[on], degree, start, per_px, at)
            sigma = FINE_SIGMA_PX
            poly = fitted
        values = _value(c, poly)
        tick, pitch = _ticks(values, step, log)
        off = (values - tick) / per_px
        odds = _odds(off, pitch / per_px, FINE_SIGMA_PX)
        on = np.abs(off) < np.minimum(4 * FINE_SIGMA_PX, 0.35 * pitch / per_px)
        cost = max(_cost(step, log), _cost(_every(tick[on], step), log)) if on.any() and not log else _cost(step, log)
        miss = (_value(at, poly) - level) / per_px
        marks = np.logaddexp(-0.5 * (miss / MARK_SIGMA_PX) ** 2, LOG_PRIOR_WRONG)
        wrong = tuple(int(i) for i in np.flatnonzero(0.5 * (miss / MARK_SIGMA_PX) ** 2 > -LOG_PRIOR_WRONG))
        score = float(odds.sum() + marks.sum()) - cost
        if wrong:
            lines_off = np.array([abs(miss[i]) * per_px / step for i in wrong]) if step else np.ones(1)
            score -= float(np.log(np.clip(lines_off, 1.0, 7.0)).sum())
            score -= _odder(at, level, poly, step, wrong, per_px, log)
        out.append(Reading(poly, np.where(on, tick, np.nan), step, score, float(odds.sum()), wrong, np.abs(miss), cost))
    return out


def _every(tick: FloatArray, step: float) -> float:
    """The step that the lines really have: where only each sixth multiple of 3 has a line, the grid is one of 18."""
    return step * max(int(np.gcd.reduce(np.diff(np.rint(np.sort(tick) / step).astype(np.int64)))), 1) if len(tick) > 2 else step


def _carried(
    c: FloatArray, poly: FloatArray, middle: float, reach: float, step: float, log: bool, per_px: float, at: FloatArray
) -> FloatArray:
    """A scale known between two marks, refined by the lines there, then by those around them, and so on to the ends."""
    widest = float(np.abs(c - middle).max())
    reach *= 1.2
    while True:
        some = c[np.abs(c - middle) <= reach]
        values = _value(some, poly)
        tick, pitch = _ticks(values, step, log)
        on = np.abs(values - tick) < 0.3 * pitch
        if on.sum() >= 3:
            poly = _polynomial(some[on], tick[on], 1, poly, per_px, at)
        if reach >= widest:
            return poly
        reach *= 1.3


def _odder(at: FloatArray, level: FloatArray, poly: FloatArray, step: float, wrong: tuple[int, ...], per_px: float, log: bool) -> float:
    """How much rarer the axis's labels are with the values that fit in place of those typed: 0, 20, 50 is likelier than 0, 25, 62.5."""
    typed = 10.0**level if log else level
    fits = typed.copy()
    for i in wrong:
        fits[i] = fitting(float(_value(at[i : i + 1], poly)[0]), step, per_px, log)
    return max(tick_cost(fits, log) - tick_cost(typed, log), -2.0)


def _value(c: FloatArray, polynomial: FloatArray) -> FloatArray:
    out = np.full(np.shape(c), polynomial[-1])
    for a in polynomial[-2::-1]:
        out = out * c + a
    return out


def _polynomial(c: FloatArray, tick: FloatArray, degree: int, start: FloatArray, per_px: float, at: FloatArray) -> FloatArray:
    """Level as a polynomial of place through lines, with the scale tried as weak knowledge where lines are few."""
    ends = np.linspace(min(c.min(), at.min()), max(c.max(), at.max()), 3)
    rows = np.concatenate([c, ends])[:, None] ** np.arange(degree + 1)
    right = np.concatenate([tick, _value(ends, start)])
    weak = np.concatenate([np.ones(len(c)), np.full(3, 0.1)])
    weight = np.ones(len(right))
    out = start
    for _ in range(4):
        w = (weak * weight) ** 2
        out = np.linalg.solve((rows * w[:, None]).T @ rows + 1e-12 * np.eye(degree + 1), rows.T @ (w * right))
        weight = 1 / np.maximum(np.sqrt(np.abs(right - rows @ out) / per_px), 0.7)
    return out


def _ticks(level: FloatArray, step: float, log: bool) -> tuple[FloatArray, FloatArray]:
    """The nearest round level of each line and the distance between such levels there."""
    if not log:
        return np.round(level / step) * step, np.full(len(level), step)
    whole = np.floor(level)
    k = np.argmin(np.abs((level - whole)[:, None] - LOG_DIGITS) + 0.004 * LOG_COST, axis=1)
    width = np.maximum(np.gradient(LOG_DIGITS)[k], 0.04)
    return whole + LOG_DIGITS[k], width


def _odds(off_px: FloatArray, pitch_px: FloatArray, sigma_px: float) -> FloatArray:
    """Log odds of each line: on a tick with a small miss, against anywhere within the pitch."""
    return np.log(0.95 * pitch_px / (sigma_px * 2.5066) * np.exp(-0.5 * (off_px / sigma_px) ** 2) + 0.05)


def _cost(step: float, log: bool) -> float:
    return 0.0 if log else roundness(step)


def roundness(step: float) -> float:
    """How rare a grid step is: minus its log probability against the common 1, 2 and 5.

    Examples
    --------
    >>> roundness(20.0), roundness(2.5), roundness(4.0), roundness(11.0)
    (0.0, 1.0, 4.0, 7.0)
    """
    step = abs(step)
    if step == 0:
        return 7.0
    head = float(f"{step / 10.0 ** np.floor(np.log10(step) + 1e-9):.6g}")
    if head in (1.0, 2.0, 5.0, 10.0):
        return 0.0
    if head == 2.5:
        return 1.0
    return 4.0 if head in (4.0, 3.0, 6.0, 8.0, 1.5, 1.2, 1.25, 7.5) else 7.0


def _steps(typed: FloatArray, span: float, least: float) -> list[float]:
    """Grid steps to try: round numbers, and decimal parts of the marks' common step (8 m may be drawn as 20 mm)."""
    common = 0.0
    for value in typed:
        a, b = abs(float(value)), common
        while a > 1e-6 * span:
            a, b = (b % a if b % a < a * (1 - 1e-9) else 0.0), a
        common = b
    top = int(np.floor(np.log10(span)))
    round_steps = [h * 10.0**p for p in range(top + 1, top - 4, -1) for h in (5.0, 2.5, 2.0, 1.0, 4.0, 3.0)]
    parts = [common / n for n in (1, 2, 3, 4, 5, 6, 8, 10, 12, 15, 16, 20, 25, 30, 40, 50, 80, 100, 200)]
    return sorted({float(f"{s:.9g}") for s in (*round_steps, *parts) if least <= s <= span}, reverse=True)


def fitting(level: float, step: float, per_px: float, log: bool) -> float:
    """The printed value that belongs at a level: the roundest within a click's reach, else the grid's own."""
    low, high = sorted((level - 2.2 * per_px, level + 2.2 * per_px))
    tick = float(_ticks(np.array([level]), step, log)[0][0])
    if log:
        low, high, level, tick = 10.0**low, 10.0**high, 10.0**level, 10.0**tick
    return next(iter(round_values(low, high, level)), float(f"{tick:.10g}"))
