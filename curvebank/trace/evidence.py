"""What speaks against a trace, as a few numbers, each with the stretch it comes from.

Everything here looks at the finished trace and the page, not at how the trace was found, so that it holds whatever the way.
"""

from dataclasses import dataclass, field

import numpy as np
import numpy.typing as npt

from ..records import FloatArray
from ..sheet import Prepared
from . import local
from .axis import Axis
from .presence import CROSSED, EMPTY, INKED, Presence, Rhythm, presence, rhythm
from .profile import Refined

NAMES = (
    "unsupported",
    "longest_gap",
    "bare",
    "click_off",
    "clicks_off",
    "misfit",
    "jump",
    "straight_on",
    "both_on",
    "goes_on",
    "loose_end",
    "merged",
    "cost",
    "scatter",
    "two_clicks",
    "colour_step",
    "shared",
)
"""The numbers, in the order of the model's weights.

unsupported  share of the length without ink of its own, beyond the line's own gaps
longest_gap  the longest such stretch, as a share of the length
bare         share of rows without ink on a line that is drawn solid
click_off    distance of the farthest click from the trace [units], beyond what a hand's click is off
clicks_off   share of the clicks that are farther off than that
misfit       largest distance from a local cubic [units]: a smooth line has none, a change to another line has
jump         the same where the line shows no ink: the bridge over a gap does not fit both its sides
straight_on  share of ink straight ahead (or straight back) where the trace turns off
both_on      the same both ways at one place: two lines cross and the trace went round the corner
goes_on      share of ink straight on behind an end, against the line's own share
loose_end    length of an end without ink [units]
merged       share of the length with another line against it
cost         the path search's cost a segment, above a fully inked line
scatter      scatter of the readings across the line [units]
two_clicks   1 with two clicks: nothing between the ends speaks for the line
colour_step  change of the ink's colour along the trace
shared       share of the length on the same ink as another trace
A unit is a third of a line width of a common line: 1 px where lines are 3 px wide.
"""


@dataclass(slots=True, eq=False)
class Evidence:
    """The numbers and where along the trace (first row, last row) each is worst; ``seen`` and ``beat`` are the line's presence.

    ``click`` is a click that the trace does not pass, ``clicks_at`` the rows of all of them; ``goes`` tells where another line goes
    straight on: 1 ahead of ``where["straight_on"]``, -1 behind it.
    """

    numbers: dict[str, float]
    where: dict[str, tuple[int, int]]
    seen: Presence
    beat: Rhythm
    gaps: list[tuple[int, int]] = field(default_factory=list)
    merged: list[tuple[int, int]] = field(default_factory=list)
    click: FloatArray | None = None
    clicks_at: FloatArray = field(default_factory=lambda: np.zeros(0))
    goes: int = 1

    def vector(self) -> FloatArray:
        """The model's inputs [len(NAMES)]: shares and distances on a log scale, all growing with doubt."""
        n = self.numbers
        grown = {
            "unsupported": np.log1p(n["unsupported"] / 0.03),
            "longest_gap": np.log1p(n["longest_gap"] / 0.03),
            "click_off": np.log1p(n["click_off"] / 2.0),
            "loose_end": np.log1p(n["loose_end"] / 2.0),
            "misfit": np.log1p(n["misfit"] / 0.03),
            "jump": np.log1p(n["jump"] / 0.03),
            "scatter": np.log1p(n["scatter"] / 0.1),
        }
        return np.array([grown.get(name, n[name]) for name in NAMES], dtype=np.float64)


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


def gather(prepared: Prepared, fine: Refined, points: FloatArray, closed: bool, on_ink: bool, cost: float) -> Evidence:
    """All evidence of one trace by itself. ``points`` are its clicks [n, 2], ``on_ink`` whether its ends are where the ink ends."""
    unit = max(prepared.unit, 0.6)
    axis = fine.axis
    seen = presence(prepared, axis, fine.shape, axis.s)
    beat = rhythm(seen, unit)
    total = len(axis.s)
    out = Evidence(dict.fromkeys(NAMES, 0.0), {}, seen, beat, unsupported(seen, beat))
    n = out.numbers
    own = float(((seen.state == INKED) | (seen.state == CROSSED)).mean())
    if out.gaps:
        worst = max(out.gaps, key=lambda g: g[1] - g[0])
        n["unsupported"] = sum(b - a + 1 for a, b in out.gaps) / total
        n["longest_gap"] = (worst[1] - worst[0] + 1) / total
        out.where["unsupported"] = out.where["longest_gap"] = worst
    n["bare"] = 0.0 if beat.dashed else 1.0 - own
    n["cost"] = max(cost, -0.08) + 0.08
    n["scatter"] = fine.scatter / unit
    n["two_clicks"] = float(len(points) == 2)
    _clicks(out, axis, points, unit)
    _turns(out, prepared, fine, own, unit)
    if on_ink and not closed:
        _ends(out, prepared, fine, own, unit)
    _beside(out, unit)
    if prepared.colour is not None:
        _colour(out, prepared.colour, fine)
    return out


def _clicks(out: Evidence, axis: Axis, points: FloatArray, unit: float) -> None:
    gap = np.sqrt(((points[:, None, :] - axis.points[None, :, :]) ** 2).sum(axis=2))
    off = gap.min(axis=1)
    k = int(np.argmax(off))
    out.clicks_at = np.sort(gap.argmin(axis=1))
    # A careful click is up to some 4 px off, on a coarse sheet and on a fine one.
    usual = max(4.0 * unit, 4.5)
    out.numbers["click_off"] = max(float(off[k]) - usual, 0.0) / max(unit, 0.75)
    out.numbers["clicks_off"] = float((off > usual + 2.0 * unit).mean())
    row = int(np.argmin(gap[k]))
    out.where["click_off"] = (max(row - 20, 0), min(row + 20, len(axis.s) - 1))
    if out.numbers["click_off"] > 0:
        out.click = points[k]


def _turns(out: Evidence, prepared: Prepared, fine: Refined, own: float, unit: float) -> None:
    axis = fine.axis
    around = local.windows(axis, 60.0 * unit, 8.0 * unit)
    if around is None:
        return
    step = axis.length / (len(axis.s) - 1)
    reach = around.reach

    def rows(k: int, half: float) -> tuple[int, int]:
        return max(int((around.s[k] - half) / step), 0), min(int((around.s[k] + half) / step), len(axis.s) - 1)

    off = local.misfit(around) / unit
    k = int(np.argmax(off))
    out.numbers["misfit"], out.where["misfit"] = float(off[k]), rows(k, 0.6 * reach)
    for first, last in out.gaps:
        near = np.flatnonzero((around.s > first * step - reach) & (around.s < last * step + reach))
        if len(near) and off[near].max() > out.numbers["jump"]:
            out.numbers["jump"], out.where["jump"] = float(off[near].max()), (first, last)
    width = 2 * max(int(0.7 * reach / (8.0 * unit)), 1) + 1
    # Where the trace bends nowhere there is nothing it could have turned off from; looking is the dear part.
    doubtful = np.flatnonzero(_widest(off, width) > 0.02)
    if not len(doubtful):
        return
    on = local.straight_on(prepared, local.Windows(around.s[doubtful], reach, around.points[doubtful]), fine.shape, own, unit)
    ahead, back = np.zeros(len(off)), np.zeros(len(off))
    ahead[doubtful], back[doubtful] = on.ahead, on.back
    most = np.maximum(ahead, back)
    k = int(np.argmax(most))
    out.goes = 1 if ahead[k] >= back[k] else -1
    out.numbers["straight_on"], out.where["straight_on"] = float(most[k]), rows(k, reach)
    # Both within a window of each other: the corner of a crossing lies between them.
    both = np.minimum(_widest(ahead, width), _widest(back, width))
    k = int(np.argmax(both))
    out.numbers["both_on"], out.where["both_on"] = float(both[k]), rows(k, reach)


def _widest(values: FloatArray, width: int) -> FloatArray:
    """Largest value within an odd window round each one."""
    return np.lib.stride_tricks.sliding_window_view(np.pad(values, width // 2), width).max(axis=1)


def _ends(out: Evidence, prepared: Prepared, fine: Refined, own: float, unit: float) -> None:
    last = len(fine.axis.s) - 1
    held = out.seen.state == INKED
    # Ink that holds an end: a run as long as a few line widths, in the line's own measure of dashes.
    need = max(int(4 * unit), 3)
    firm = np.flatnonzero(np.convolve(held, np.ones(need), "valid") >= need - 0.5)
    bare = (int(firm[0]), int(last - firm[-1] - need + 1)) if len(firm) else (last, last)
    for way, where, loose in ((-1, (0, min(30, last)), bare[0]), (1, (max(last - 30, 0), last), bare[1])):
        share = max(local.beyond(prepared, fine.axis, fine.shape, unit, way) / max(own, 0.4) - 0.4, 0.0)
        if share > out.numbers["goes_on"]:
            out.numbers["goes_on"], out.where["goes_on"] = share, where
        over = max(loose - (out.beat.gap_px if out.beat.dashed else 0.0) - 2.5 * unit, 0.0) / unit
        if over > out.numbers["loose_end"]:
            out.numbers["loose_end"] = over
            out.where["loose_end"] = (0, loose) if way < 0 else (last - loose, last)


def _beside(out: Evidence, unit: float) -> None:
    """Along merged lines only one flank is free, or none: nothing but the curve's own bend tells which line is which there."""
    seen = out.seen
    close = np.convolve((np.maximum(seen.left, seen.right) > 0.5).astype(float), np.ones(7) / 7, "same") > 0.5
    out.merged = [(int(a), int(b - 1)) for a, b in seen.runs(close) if b - a > 25 * unit]
    if out.merged:
        out.numbers["merged"] = sum(b - a + 1 for a, b in out.merged) / len(close)
        out.where["merged"] = max(out.merged, key=lambda g: g[1] - g[0])


def _colour(out: Evidence, colour: npt.NDArray[np.uint8], fine: Refined, window: int = 12) -> None:
    """Step of the ink's hue between neighbouring runs of readings."""
    good = fine.blocks.good
    s = fine.blocks.s[good]
    if len(s) < 2 * window + 4:
        return
    xy, _ = fine.axis.at(s)
    ink = np.stack([local.ink_at(np.ascontiguousarray(colour[..., c]), xy) for c in range(3)], axis=1)
    hue = ink / np.maximum(ink.max(axis=1, keepdims=True), 0.15)
    middle = np.median(np.lib.stride_tricks.sliding_window_view(hue, window, axis=0), axis=2)
    step = np.abs(middle[window:] - middle[:-window]).max(axis=1)
    k = int(np.argmax(step))
    out.numbers["colour_step"] = max(float(step[k]) - 0.15, 0.0)
    row = int(s[k + window] / fine.axis.length * (len(fine.axis.s) - 1))
    out.where["colour_step"] = (max(row - 40, 0), min(row + 40, len(fine.axis.s) - 1))
