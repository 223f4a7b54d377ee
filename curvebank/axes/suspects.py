"""What the marks say when they contradict each other: a mistyped value, two swapped values, a photo, or warped paper.

Each reading of the marks is scored like a model (log posterior up to a constant): how well the plane fits with it, how likely
its values are as printed ticks (round numbers on a common step), and how rare such a slip is. The best reading is taken; a
second one nearly as good is reported as well ("one of these").
"""

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from .. import units
from ..records import FloatArray
from .layout import Layout
from .marks import AxisMarks
from .solve import CLICK_SIGMA_PX, TILT_SIGMA, Solution, solve

LOG_PRIOR_TYPO = float(np.log(0.003))
LOG_PRIOR_SWAP = float(np.log(0.001))
LOG_PRIOR_PHOTO = float(np.log(0.02))
"""How often a value is mistyped, two are swapped, a sheet is a photo taken at an angle (our own estimates, no source)."""
LOG_ODDS_UPRIGHT = 4.0
WARP_SIGMAS_PX = ((CLICK_SIGMA_PX, float(np.log(0.88))), (2.0, float(np.log(0.08))), (4.0, float(np.log(0.03))), (8.0, float(np.log(0.01))))
"""Scatter of marks about a flat plane, with log prior: good paper, and paper that is warped by so much."""
NEARLY_AS_GOOD = 3.0
"""Readings within this of the best (odds of 20 to 1) cannot be told apart."""
LEAST_MISS_PX = 6.0
"""A value that fits this well is not called mistyped."""
FEWEST_TICKS, MOST_TICKS = 6.0, 400.0
"""An axis has about this many ticks at least, and no scale is finer than the other."""
STEPS = (5.0, 2.5, 2.0, 1.0)


@dataclass(frozen=True, slots=True)
class Suspect:
    """A mark that may be mistyped: ``typed`` sits where ``fits`` belongs; ``sure`` when no other reading explains the marks as well."""

    axis: str
    mark: int
    typed: float
    fits: float
    sure: bool
    swapped_with: int | None = None

    def as_dict(self) -> dict[str, object]:
        return {
            "axis": self.axis,
            "mark": self.mark,
            "typed": self.typed,
            "fits": self.fits,
            "sure": self.sure,
            "swapped_with": self.swapped_with,
        }


@dataclass(frozen=True, slots=True, eq=False)
class Reading:
    """One way to read the marks: the layout with its values, its plane, its score, and the values it changes [(axis, mark, value)]."""

    layout: Layout
    solution: Solution
    score: float
    changes: tuple[tuple[str, int, float], ...] = ()

    @property
    def projective(self) -> bool:
        return self.solution.plane_size == 8


@dataclass(frozen=True, slots=True, eq=False)
class Verdict:
    """The reading to use, with what to tell: suspects, and whether a photo is assumed from uneven spacing alone."""

    reading: Reading
    suspects: tuple[Suspect, ...]
    photo_doubtful: bool


def judge(layout: Layout, axes: dict[str, AxisMarks], aspect: float) -> Verdict:
    """Find the best reading of the marks; plain when nothing is wrong."""
    plain = read(layout, axes, (), False, aspect)
    if plain.solution.chi2 <= max(plain.solution.dof, 0.0) + 3.5 * np.sqrt(2 * max(plain.solution.dof, 1.0)):
        return Verdict(plain, (), False)
    readings = [plain, read(layout, axes, (), True, aspect)]
    readings += _with_slips(readings[0], axes, aspect)
    best = max(readings, key=lambda r: r.score)
    if best.score < readings[1].score + 12 and best.changes:
        readings += _with_slips(readings[1], axes, aspect)
        best = max(readings, key=lambda r: r.score)
    if not best.changes:
        near = [r for r in readings if r.changes and r.score > best.score - NEARLY_AS_GOOD]
        return Verdict(best, (), best.projective and (bool(near) or not _lines_converge(best.layout)))
    rivals = [
        r
        for r in readings
        if r.changes and r is not best and r.score > best.score - NEARLY_AS_GOOD and r.changes[0][0] == best.changes[0][0]
    ]
    suspects = _suspects(best, axes, sure=not rivals)
    for r in rivals:
        suspects += _suspects(r, axes, sure=False)
    if not rivals:
        # A second slip is looked for only where the first one is clear.
        again = [best, *_with_slips(best, axes, aspect)]
        second = max(again, key=lambda r: r.score)
        if second is not best:
            close = [r for r in again if r is not second and r is not best and r.score > second.score - NEARLY_AS_GOOD]
            suspects += _suspects(second, axes, sure=not close)
            best = best if close else second
    return Verdict(best, tuple(dict.fromkeys(suspects)), False)


def read(
    layout: Layout,
    axes: dict[str, AxisMarks],
    changes: tuple[tuple[str, int, float], ...],
    projective: bool,
    aspect: float,
    x: FloatArray | None = None,
) -> Reading:
    if projective and x is None:
        x = solve(layout, square=False, robust=False, aspect=aspect).x
    solution = solve(layout, projective=projective, start=x, robust=False, aspect=aspect)
    score = _fit_score(solution)
    for name, a in axes.items():
        level = a.level.copy()
        for axis, mark, value in changes:
            if axis == name:
                level[mark] = np.log10(value) if a.log else value
        score -= tick_cost(a.printed(level), a.log)
    # Flow grows to the right and values grow upwards on nearly every chart.
    score -= LOG_ODDS_UPRIGHT * (float(solution.x[2] < 0) + float(solution.x[5] > 0))
    for slot in layout.slots.values():
        if slot.own is not None:
            score -= LOG_ODDS_UPRIGHT * float(solution.x[solution.plane_size + slot.own + 1] < 0)
    if projective:
        score += LOG_PRIOR_PHOTO
    if (
        len(changes) == 2
        and {changes[0][2], changes[1][2]} == {float(axes[c[0]].typed[c[1]]) for c in changes}
        and changes[0][0] == changes[1][0]
    ):
        score += LOG_PRIOR_SWAP
    else:
        score += LOG_PRIOR_TYPO * len(changes)
    return Reading(layout, solution, score, changes)


def _fit_score(solution: Solution) -> float:
    """Log likelihood over the scatter levels; for a photo with the Laplace factor of its two extra parameters
    (Kass and Raftery 1995, doi:10.1080/01621459.1995.10476572)."""
    dof = max(solution.dof, 1.0)
    levels = [
        log_prior - 0.5 * solution.chi2 * (CLICK_SIGMA_PX / sigma) ** 2 - dof * np.log(sigma / CLICK_SIGMA_PX)
        for sigma, log_prior in WARP_SIGMAS_PX
    ]
    score = float(np.logaddexp.reduce(levels))
    if solution.plane_size == 8:
        covariance = solution.known_covariance[6:8, 6:8]
        score += 0.5 * float(np.linalg.slogdet(covariance)[1]) - 2 * float(np.log(TILT_SIGMA))
    return score


def _with_slips(base: Reading, axes: dict[str, AxisMarks], aspect: float) -> list[Reading]:
    out: list[Reading] = []
    layout = base.layout
    done = {(axis, mark) for axis, mark, _ in base.changes}
    for name, a in axes.items():
        slot = layout.slots[name]
        if len(a.typed) < 3 or slot.twin is not None:
            continue
        for mark in range(len(a.typed)):
            if (name, mark) not in done:
                value, rest = _fitting_value(base, axes, name, mark, aspect)
                if value is not None:
                    changed = layout.with_value(name, mark, float(np.log10(value)) if a.log else value)
                    out.append(read(changed, axes, (*base.changes, (name, mark, value)), base.projective, aspect, rest))
        for i in range(len(a.typed)):
            for j in range(i):
                if not base.changes and a.typed[i] != a.typed[j]:
                    swapped = layout.with_value(name, i, float(a.level[j])).with_value(name, j, float(a.level[i]))
                    changes = ((name, j, float(a.typed[i])), (name, i, float(a.typed[j])))
                    out.append(read(swapped, axes, changes, base.projective, aspect))
    return out


def _fitting_value(base: Reading, axes: dict[str, AxisMarks], name: str, mark: int, aspect: float) -> tuple[float | None, FloatArray]:
    """The most tick-like printed value at a mark's place as the other marks see it (None where the typed one does), and their plane."""
    a, slot = axes[name], base.layout.slots[name]
    opened = base.layout.with_open(name, mark)
    found = solve(opened, projective=base.projective, robust=False, aspect=aspect)
    p, size = found.plane_size, len(found.x)
    scale = np.zeros(size)
    if slot.own is not None:
        alpha, beta = found.x[p + slot.own], found.x[p + slot.own + 1]
        z = float((found.x[-1] - alpha) / beta)
        scale[-1], scale[p + slot.own], scale[p + slot.own + 1] = 1 / beta, -1 / beta, -z / beta
    else:
        z = float(found.x[-1])
        scale[-1] = 1.0
    level = slot.centre + slot.half * z
    sigma = abs(slot.half) * np.sqrt(max(float(scale @ found.known_covariance @ scale), 0.0))
    px = (
        np.hypot(*found.x[2 + 2 * a.direction : 4 + 2 * a.direction])
        * base.layout.size
        * (abs(beta) if slot.own is not None else 1.0)
        / abs(slot.half)
    )
    if abs(level - a.level[mark]) * px < LEAST_MISS_PX or abs(level - a.level[mark]) < 2.5 * sigma or not np.isfinite(sigma):
        return None, found.x[:-1]
    low, high = float(a.printed(level - 3 * sigma)), float(a.printed(level + 3 * sigma))
    others = np.delete(a.typed, mark)
    best, best_score = None, -np.inf
    for value in round_values(low, high, float(a.printed(level))):
        if value in others or (a.log and value <= 0):
            continue
        at = np.log10(value) if a.log else value
        score = -0.5 * ((at - level) / sigma) ** 2 - tick_cost(np.append(others, value), a.log)
        if score > best_score:
            best, best_score = value, score
    return best, found.x[:-1]


def round_values(low: float, high: float, value: float) -> list[float]:
    """Numbers in [low, high] from the roundest down: multiples of 5, 2.5, 2 and 1 x 10^k near ``value``.

    Examples
    --------
    >>> round_values(19.7, 20.4, 20.1)
    [20.0, 20.1]
    >>> round_values(62.2, 62.8, 62.6)
    [62.5, 62.6]
    """
    top = int(np.ceil(np.log10(max(abs(low), abs(high), 1e-300)))) + 1
    bottom = int(np.floor(np.log10(max(high - low, 1e-300))))
    out: list[float] = [0.0] if low <= 0 <= high else []
    for power in range(top, bottom - 1, -1):
        for head in STEPS:
            step = head * 10.0**power
            number = float(f"{round(value / step) * step:.12g}")
            if low <= number <= high and number not in out:
                out.append(number)
    return out


def tick_cost(values: Sequence[float] | np.ndarray, log: bool) -> float:
    """Minus log probability that an axis's printed ticks are these: k ln(number of ticks of the coarsest common step).

    More than ten labelled ticks get rarer quickly, and a lone value below zero is rare. On a log scale ticks have one
    leading digit, some two.
    """
    values = np.asarray(values, dtype=np.float64)
    if log:
        lead = values / 10.0 ** np.floor(np.log10(values) + 1e-12)
        digits = [0 if _whole(v) else 1 if _whole(v * 10) or _whole(v * 4) else 2 for v in lead]
        return float(len(digits) * np.log(12.0) + 4.0 * sum(digits))
    span = float(np.ptp(values)) or 1.0
    lone = 3.0 if np.sum(values < 0) == 1 and len(values) > 2 else 0.0
    for power in range(int(np.ceil(np.log10(span))), int(np.floor(np.log10(span))) - 5, -1):
        for head in STEPS:
            step = head * 10.0**power
            if step <= span * (1 + 1e-9) and all(_whole(v / step) for v in values):
                ticks = float(min(max(span / step, FEWEST_TICKS), MOST_TICKS))
                return lone + len(values) * float(np.log(ticks)) + 4 * max(float(np.log(ticks / 10)), 0.0)
    return lone + len(values) * float(np.log(MOST_TICKS)) + 4 * float(np.log(MOST_TICKS / 10))


def _whole(x: float) -> bool:
    return bool(abs(x - round(x)) <= 1e-6 * max(1.0, abs(x)))


def _lines_converge(layout: Layout) -> bool:
    """Whether two lines of marks in one direction, or many crossings, speak for a photo beside the spacing of values."""
    directions = [d for d, lined in zip(layout.open_direction, layout.lined_up, strict=True) if lined]
    both = sum(bool(u[0]) and bool(v[0]) for u, v in layout.terms)
    return directions.count(0) >= 2 or directions.count(1) >= 2 or both >= 4


def _suspects(reading: Reading, axes: dict[str, AxisMarks], *, sure: bool) -> list[Suspect]:
    changes = reading.changes
    if len(changes) >= 2 and changes[-1][0] == changes[-2][0]:
        (name, i, fits), (_, j, other) = changes[-2:]
        if fits == axes[name].typed[j] and other == axes[name].typed[i]:
            return [Suspect(name, i, float(axes[name].typed[i]), fits, sure, j)]
    name, mark, fits = changes[-1]
    return [Suspect(name, mark, float(axes[name].typed[mark]), fits, sure)]


def describe(suspects: Sequence[Suspect], axes: dict[str, AxisMarks]) -> list[tuple[str, str]]:
    """One sentence (code, message) for each axis that has suspects."""
    out: list[tuple[str, str]] = []
    for name in dict.fromkeys(s.axis for s in suspects):
        mine = [s for s in suspects if s.axis == name]
        unit = "" if axes[name].unit == "1" else f" {units.shown(axes[name].unit)}"
        if all(s.sure for s in mine):
            out += [_sure_message(s, name, unit) for s in mine]
        else:
            each = " or ".join(
                f"{s.typed:g} and {s.fits:g} swapped"
                if s.swapped_with is not None
                else f"{s.typed:g} (would fit as {_shown(s.fits)}{unit})"
                for s in mine
            )
            text = f"The {name} marks contradict each other. One of these is mistyped: {each}. Check them, or add a fourth mark."
            out.append(("calibration-mistyped", text))
    return out


def _sure_message(s: Suspect, name: str, unit: str) -> tuple[str, str]:
    if s.swapped_with is not None:
        return "calibration-swapped", (
            f"The {name} marks typed {s.typed:g} and {s.fits:g} have each other's place. "
            "The map reads them the other way round until you correct them."
        )
    return "calibration-mistyped", (
        f"The {name} mark typed {s.typed:g} sits where {_shown(s.fits)}{unit} belongs. Correct it; the map leaves this mark out until then."
    )


def _shown(value: float) -> str:
    text = f"{value:.6g}"
    return text if "." in text or "e" in text else text + ".0"
