"""How far a trace may be believed: stretches without support, confidence, a flag with its reason in words, the click that would help."""

from dataclasses import dataclass, field

import numpy as np
from scipy.spatial import cKDTree

from ..records import FloatArray, Notice, Trace, frozen
from ..sheet import Prepared
from .axis import Axis
from .follow import Followed
from .presence import EMPTY, INKED, Presence, Rhythm, presence, rhythm
from .profile import Refined

FLAG_BELOW = 0.8
"""A trace whose confidence is lower than this is flagged."""
SHARED = 0.12
"""Share of a trace's length that may run on another trace of the panel (crossings, a common end) before both are flagged."""


@dataclass(slots=True, eq=False)
class Doubt:
    """What was found wrong with a trace: unsupported rows, reasons, and a logit that the confidence comes from."""

    logit: float = 4.5
    stretches: list[tuple[int, int, str]] = field(default_factory=list)
    notices: list[Notice] = field(default_factory=list)
    hint: int | None = None


def sigma_of(fine: Refined, unit: float) -> FloatArray:
    """Standard uncertainty across the line [px]: of the spline, plus what sampling and the print's shape add (from drawn sheets)."""
    return np.sqrt((1.6 * fine.sigma) ** 2 + (0.005 * max(unit, 0.7)) ** 2)


def support(prepared: Prepared, axis: Axis, fine: Refined) -> tuple[Presence, Rhythm]:
    """The line's presence along the final axis, one row a sample of it."""
    seen = presence(prepared, axis, fine.shape, axis.s)
    return seen, rhythm(seen, max(prepared.unit, 0.6))


def unsupported(seen: Presence, beat: Rhythm) -> list[tuple[int, int]]:
    """Runs of rows without the line, longer than its own gaps. Ink crossing a gap (letters) does not end the run."""
    own = (seen.state == INKED) & (np.abs(seen.lean) < 1.2)
    # Short islands of ink inside a gap are letters.
    island = max(int(beat.ink_px if not beat.dashed else 0.8 * beat.ink_px), 2)
    for first, last in seen.runs(own):
        if last - first < island and 0 < first and last < len(own):
            own[first:last] = False
    free = ~own & (seen.state != EMPTY)
    out = []
    for first, last in seen.runs(~own):
        if last - first > beat.gap_px + 2 and (last - first) - 0.7 * free[first:last].sum() > beat.gap_px:
            out.append((int(first), int(last - 1)))
    return out


def doubt_of(prepared: Prepared, found: Followed, fine: Refined) -> Doubt:
    """Judge one trace by itself."""
    unit = max(prepared.unit, 0.6)
    doubt = Doubt()
    axis = fine.axis
    seen, beat = support(prepared, axis, fine)
    total = len(axis.s)
    gaps = unsupported(seen, beat)
    for first, last in gaps:
        doubt.stretches.append((first, last, f"no line to see over {last - first + 1} px: a label, or the line is broken"))
    share = sum(b - a + 1 for a, b in gaps) / total
    longest = max((b - a + 1 for a, b in gaps), default=0) / total
    doubt.logit -= 14.0 * max(0.0, share - 0.10) + 14.0 * max(0.0, longest - 0.12)
    # Along merged lines only one flank is free, or none: nothing but the curve's own bend tells which line is which there.
    beside = np.convolve((np.maximum(seen.left, seen.right) > 0.5).astype(float), np.ones(7) / 7, "same") > 0.5
    merged = [(int(a), int(b - 1)) for a, b in seen.runs(beside) if b - a > 25 * unit]
    together = sum(b - a + 1 for a, b in merged) / total
    for first, last in merged:
        doubt.stretches.append((first, last, f"another line lies against it over {last - first + 1} px"))
    if together > 0.05:
        widest = max(merged, key=lambda g: g[1] - g[0])
        doubt.logit -= 30.0 * (together - 0.05) + 1.5
        doubt.hint = (widest[0] + widest[1]) // 2
        doubt.notices.append(
            Notice(
                code="merged",
                message=f"Another line lies against {100 * together:.0f} % of its length; one click there would settle it",
                stretch=widest,
            )
        )
    good = fine.blocks.good
    doubt.logit -= 5.0 * max(0.0, found.cost - 0.05)
    rough = fine.scatter / max(0.25 * unit, 1e-6)
    doubt.logit -= 1.5 * max(0.0, rough - 1.0)
    if good.mean() < 0.35 and not beat.dashed:
        doubt.logit -= 4.0 * (0.35 - float(good.mean())) / 0.35
    if gaps:
        widest = max(gaps, key=lambda g: g[1] - g[0])
        doubt.hint = (widest[0] + widest[1]) // 2
    if share > 0.10 or longest > 0.12:
        doubt.notices.append(
            Notice(
                code="unsupported",
                message=f"{100 * share:.0f} % of the line's length shows no ink of its own",
                stretch=max(gaps, key=lambda g: g[1] - g[0]),
            )
        )
    return doubt


def settle(trace: Trace, doubt: Doubt) -> Trace:
    """The trace with its confidence, flag and reasons."""
    confidence = float(1.0 / (1.0 + np.exp(-np.clip(doubt.logit, -30, 30))))
    flagged = confidence < FLAG_BELOW
    hint = None
    if flagged and doubt.hint is not None:
        hint = (float(trace.pixels[doubt.hint, 0]), float(trace.pixels[doubt.hint, 1]))
    return Trace(
        pixels=trace.pixels,
        sigma_px=trace.sigma_px,
        closed=trace.closed,
        confidence=confidence,
        flagged=flagged,
        stretches=tuple(doubt.stretches),
        warnings=tuple(doubt.notices),
        hint_click=hint,
        source=trace.source,
        line_width_px=trace.line_width_px,
    )


def overlap(a: FloatArray, b: FloatArray, within: float) -> list[tuple[int, int]]:
    """Runs of rows of ``a`` that lie within ``within`` px of ``b``."""
    near = ((a >= b.min(axis=0) - within) & (a <= b.max(axis=0) + within)).all(axis=1)
    if near.any():
        near[near] = cKDTree(b).query(a[near], distance_upper_bound=within)[0] <= within
    edge = np.flatnonzero(np.diff(np.r_[0, near.astype(np.int8), 0])).reshape(-1, 2)
    return [(int(p), int(q - 1)) for p, q in edge]


def pair_test(names: list[str], traces: list[Trace | None], doubts: list[Doubt | None], fixed: list[Trace]) -> None:
    """Two traces that share ink over more than a crossing: doubt both, and point at the middle of what they share."""
    for i, a in enumerate(traces):
        mine = doubts[i]
        if a is None or mine is None:
            continue
        others = [(names[j], b) for j, b in enumerate(traces) if j != i and b is not None] + [("a fixed trace", b) for b in fixed]
        for name, b in others:
            within = 0.4 * ((a.line_width_px or 3.0) + (b.line_width_px or 3.0)) / 1.0
            runs = overlap(a.pixels, b.pixels, within)
            length = sum(q - p + 1 for p, q in runs)
            least = min(len(a.pixels), len(b.pixels))
            if length / least > SHARED:
                first, last = max(runs, key=lambda r: r[1] - r[0])
                mine.stretches.append((first, last, f"runs on the same ink as {name}"))
                mine.notices.append(
                    Notice(
                        code="shared-ink",
                        message=f"Shares {length} px of its length with {name}: one of the two may have left its line",
                        stretch=(first, last),
                    )
                )
                mine.logit = min(mine.logit, 1.0) - 4.0 * min(length / least - SHARED, 0.5)
                mine.hint = (first + last) // 2


def as_trace(axis: Axis, sigma: FloatArray, closed: bool, width_px: float | None, source: str = "ink") -> Trace:
    """A bare trace record."""
    return Trace(pixels=frozen(axis.points), sigma_px=frozen(sigma), closed=closed, line_width_px=width_px, source=source)
