"""How far a trace may be believed: confidence, a flag with its reasons in words and their stretches, the click that would settle it."""

from collections.abc import Callable
from dataclasses import dataclass, field, replace

import numpy as np
from scipy.spatial import cKDTree

from ..records import FloatArray, Notice, Trace, frozen
from ..sheet import Prepared
from .axis import Axis
from .confidence import FLAG_BELOW, chance, doubts
from .evidence import NAMES, Evidence, gather
from .presence import style_change
from .profile import Refined

SHARED = 0.12
"""Share of a trace's length that may run on another trace of the panel (crossings, a common end) before both say so."""
ONE_LINE = 0.9
"""Share from which two traces are one line."""
USUAL_SHARED = 0.09
"""Share that lines of a family have in common without any being wrong."""
SAYS = 0.8
"""Log-odds that a piece of evidence must add to be said; a flagged trace always says its two strongest."""

Words = Callable[[Evidence, int], str]
REASONS: dict[str, tuple[str, Words]] = {
    "unsupported": ("unsupported", lambda e, n: f"{100 * e.numbers['unsupported']:.0f} % of the line's length shows no ink of its own"),
    "longest_gap": ("unsupported", lambda e, n: f"{100 * e.numbers['unsupported']:.0f} % of the line's length shows no ink of its own"),
    "bare": ("faint", lambda e, n: f"The line is missing on {100 * e.numbers['bare']:.0f} % of its way, in many small pieces"),
    "click_off": ("click-off", lambda e, n: _of_click(e)),
    "clicks_off": ("click-off", lambda e, n: _of_click(e)),
    "misfit": ("turns-off", lambda e, n: f"The trace bends over {n} px as a smooth line does not; it may have changed lines there"),
    "jump": ("turns-off", lambda e, n: f"The trace has no ink over {n} px, and what lies before and behind does not make one smooth line"),
    "straight_on": ("straight-on", lambda e, n: f"A line goes straight on where the trace turns off, within {n} px"),
    "both_on": ("straight-on", lambda e, n: f"Two lines cross and both go straight on where the trace turns, within {n} px"),
    "goes_on": ("goes-on", lambda e, n: "Ink goes on behind an end of the trace"),
    "loose_end": ("loose-end", lambda e, n: f"The last {n} px at an end have no ink; the click there may lie off the line"),
    "merged": ("merged", lambda e, n: f"Another line lies against {100 * e.numbers['merged']:.0f} % of its length"),
    "cost": ("weak-path", lambda e, n: "Much of the way shows little that looks like a line"),
    "scatter": ("rough", lambda e, n: "The line's edges scatter more than a drawn line's do"),
    "two_clicks": ("two-clicks", lambda e, n: "Only its ends were clicked; nothing between them says which line is meant"),
    "colour_step": ("colour-change", lambda e, n: f"The ink changes its colour within {n} px"),
}


@dataclass(slots=True, eq=False)
class Doubt:
    """The evidence against a trace, and what was found about it with other traces of the panel."""

    evidence: Evidence
    stretches: list[tuple[int, int, str]] = field(default_factory=list)
    notices: list[Notice] = field(default_factory=list)
    shared: tuple[int, int] | None = None


def doubt_of(prepared: Prepared, fine: Refined, points: FloatArray, closed: bool, on_ink: bool, cost: float) -> Doubt:
    """Judge one trace by itself: its clicks ``points`` [n, 2], whether its ends are where the ink ends, the cost of its path."""
    evidence = gather(prepared, fine, points, closed, on_ink, cost)
    doubt = Doubt(evidence)
    for first, last in evidence.gaps:
        doubt.stretches.append((first, last, f"no line to see over {last - first + 1} px: a label, or the line is broken"))
    for first, last in evidence.merged:
        doubt.stretches.append((first, last, f"another line lies against it over {last - first + 1} px"))
    change = style_change(evidence.seen, max(prepared.unit, 0.6))
    if change is not None:
        row, solid_first = change
        x, y = fine.axis.points[row]
        text = f"The line is {'solid, then dashed' if solid_first else 'dashed, then solid'} from ({x:.0f}, {y:.0f}) on."
        stretch = (row, len(fine.axis.s) - 1)
        doubt.notices.append(Notice(code="style-change", message=text, stretch=stretch))
    return doubt


def _of_click(evidence: Evidence) -> str:
    if evidence.click is None:
        return "A click lies off the trace"
    x, y = evidence.click
    return f"The click at ({x:.0f}, {y:.0f}) is not on the trace; move it onto the line that is meant, or take it away"


def settle(trace: Trace, doubt: Doubt) -> Trace:
    """The trace with its confidence, flag, reasons in words, their stretches and the click that would help most."""
    evidence, last = doubt.evidence, len(trace.pixels) - 1
    vector = evidence.vector()
    confidence = chance(vector)
    if evidence.numbers["shared"] > ONE_LINE - USUAL_SHARED or any(n.code == "same-clicks" for n in doubt.notices):
        confidence = min(confidence, 0.5)  # one line cannot be two curves: at most one of the two is right
    flagged = confidence < FLAG_BELOW
    weights = dict(zip(NAMES, doubts(vector), strict=True))
    ranked = sorted((name for name in REASONS if weights[name] > 0), key=lambda name: -weights[name])
    stretches, notices = list(doubt.stretches), list(doubt.notices)
    said = {n.code for n in notices}
    for place, name in enumerate(ranked):
        code, words = REASONS[name]
        if code in said or not (weights[name] > SAYS or (flagged and place < 2 and weights[name] > 0.3)):
            continue
        said.add(code)
        where = evidence.where.get(name)
        text = words(evidence, where[1] - where[0] + 1 if where else 0)
        notices.append(Notice(code=code, message=text + ".", stretch=where))
        if where is not None and name not in ("unsupported", "longest_gap", "merged"):
            stretches.append((*where, text[0].lower() + text[1:]))
    clip = lambda a, b: (min(a, last), min(b, last))  # noqa: E731
    row = min(_hint(evidence, doubt, weights, last), last) if flagged else None
    return replace(
        trace,
        confidence=confidence,
        flagged=flagged,
        stretches=tuple((*clip(a, b), why) for a, b, why in stretches),
        warnings=tuple(n if n.stretch is None else replace(n, stretch=clip(*n.stretch)) for n in notices),
        hint_click=None if row is None else (float(trace.pixels[row, 0]), float(trace.pixels[row, 1])),
    )


def _hint(evidence: Evidence, doubt: Doubt, weights: dict[str, float], last: int) -> int:
    """The row where one more click tells most: where the strongest evidence lies, but between clicks, where the lines have parted."""
    marks = evidence.clicks_at if len(evidence.clicks_at) else np.array([0, last])
    widest = int(np.argmax(np.diff(marks))) if len(marks) > 1 else 0
    middle = int(0.5 * (marks[widest] + marks[min(widest + 1, len(marks) - 1)]))
    places = {name: weights[name] for name in ("unsupported", "misfit", "jump", "straight_on", "both_on", "merged", "shared")}
    places["unsupported"] += weights["longest_gap"]
    best = max(places, key=lambda name: places[name])
    if places[best] < 0.5:
        return middle
    if best == "shared":
        return sum(doubt.shared) // 2 if doubt.shared else middle
    first, end = evidence.where[best]
    row = (first + end) // 2
    if best in ("unsupported", "merged"):
        return row
    # A turn lies where the wrong way begins: the click belongs half way to the next one, on the side where another line goes on.
    before, after = marks[marks < row - 10], marks[marks > row + 10]
    low, high = int(before[-1]) if len(before) else 0, int(after[0]) if len(after) else last
    ahead = high - row >= row - low if best in ("misfit", "jump") else evidence.goes > 0
    return (row + high) // 2 if ahead else (low + row) // 2


def overlap(a: FloatArray, b: FloatArray, within: float) -> list[tuple[int, int]]:
    """Runs of rows of ``a`` that lie within ``within`` px of ``b``."""
    near = ((a >= b.min(axis=0) - within) & (a <= b.max(axis=0) + within)).all(axis=1)
    if near.any():
        near[near] = cKDTree(b).query(a[near], distance_upper_bound=within)[0] <= within
    edge = np.flatnonzero(np.diff(np.r_[0, near.astype(np.int8), 0])).reshape(-1, 2)
    return [(int(p), int(q - 1)) for p, q in edge]


def pair_test(names: list[str], traces: list[Trace | None], doubts: list[Doubt | None], fixed: list[Trace], unit: float = 1.0) -> None:
    """Two traces that share ink over more than crossings: both are doubted, each with one warning that names the other lines."""
    for i, a in enumerate(traces):
        mine = doubts[i]
        if a is None or mine is None:
            continue
        others = [(names[j], b) for j, b in enumerate(traces) if j != i and b is not None] + [("a line traced before", b) for b in fixed]
        found = []
        for name, b in others:
            within = max(0.4 * ((a.line_width_px or 3.0) + (b.line_width_px or 3.0)), 2.5 * max(unit, 0.6))
            runs = overlap(a.pixels, b.pixels, within)
            length = sum(q - p + 1 for p, q in runs)
            share = length / min(len(a.pixels), len(b.pixels))
            if runs and share > USUAL_SHARED:
                found.append((share, length, name, max(runs, key=lambda r: r[1] - r[0])))
        if not found:
            continue
        found.sort(key=lambda f: -f[0])
        share, length, name, where = found[0]
        mine.evidence.numbers["shared"], mine.evidence.where["shared"], mine.shared = share - USUAL_SHARED, where, where
        if share > SHARED:
            too = ", ".join(dict.fromkeys(f[2] for f in found[1:] if f[0] > SHARED and f[2] != name))
            also = f" (and less with {too})" if too else ""
            text = (
                f"Shares {length} px of its length with {name}{also}: one of them may have left its line; one click there would settle it."
            )
            mine.stretches.append((*where, f"runs on the same ink as {name}"))
            mine.notices.append(Notice(code="shared-ink", message=text, stretch=where))


def as_trace(axis: Axis, sigma: FloatArray, closed: bool, width_px: float | None, source: str = "ink") -> Trace:
    """A bare trace record."""
    return Trace(pixels=frozen(axis.points), sigma_px=frozen(sigma), closed=closed, line_width_px=width_px, source=source)
