"""Where lines run into one stroke: it is wider than the line, and each of its two edges belongs to one of them.

A line's own half width from an edge lies the middle of the line that makes this edge. Which edge is this line's, smoothness tells:
the readings are followed into the stroke from both sides, each next one being what the last ones lead to.
"""

from dataclasses import replace

import numpy as np
import numpy.typing as npt

from ..records import FloatArray
from . import smooth
from .blocks import Blocks
from .pixels import Floats32
from .shape import Shape

Bools = npt.NDArray[np.bool_]
MEMORY = 16
"""Readings that steer the next one."""
SHORTEST = 4
"""Fewest blocks in a row that make a merged stretch; a crossing at a fair angle is shorter."""
HIDDEN = 8
"""Most blocks in a row without edges within one merged stretch."""
NEIGHBOURHOOD = 100
"""Blocks on either side of a merged stretch that its other line may crowd."""


def edges(ink: FloatArray | Floats32, across: FloatArray | Floats32, shape: Shape) -> tuple[FloatArray, FloatArray, Bools, Bools]:
    """Upper and lower edge [px across, n] of the stroke under the path at half the line's height, and which of them are seen.

    ``ink`` [n, k] are cross profiles at offsets ``across`` [k].
    """
    level = 0.5 * shape.height
    n, k = ink.shape
    middle = int(np.argmin(np.abs(across)))
    step = float(across[1] - across[0])
    reach = max(int(round((0.5 * shape.width + 1.5) / step)), 1)
    near = ink[:, middle - reach : middle + reach + 1]
    # Of the dark places near the path the one nearest to it is where the stroke is entered.
    away = np.abs(np.arange(-reach, reach + 1))[None, :] + np.where(near >= level, 0, 10 * reach)
    start = away.argmin(axis=1) + middle - reach
    found = near.max(axis=1) >= level
    columns = np.arange(k)[None, :]
    light = ink < level
    low = np.where(light & (columns <= start[:, None]), columns, -1).max(axis=1)
    high = np.where(light & (columns >= start[:, None]), columns, k).min(axis=1)
    rows = np.arange(n)
    a, b = np.clip(low, 0, k - 2), np.clip(high - 1, 0, k - 2)

    def crossing(cell: npt.NDArray[np.intp]) -> FloatArray:
        first, second = ink[rows, cell].astype(np.float64), ink[rows, cell + 1].astype(np.float64)
        rise = np.where(np.abs(second - first) < 1e-6, 1.0, second - first)
        return across[cell] + step * np.clip((level - first) / rise, 0.0, 1.0)

    return crossing(a), crossing(b), found & (low >= 0), found & (high < k)


def half_width(shape: Shape) -> float:
    """Distance [px] from a line's middle at which its profile falls to one half."""
    d = np.linspace(0.0, shape.half_extent + 2.0, 400)
    return float(np.interp(-0.5, -shape.value(d), d))


def read_merged(
    blocks: Blocks, off: FloatArray, ink: FloatArray | Floats32, across: FloatArray | Floats32, shape: Shape
) -> tuple[Blocks, Bools]:
    """The blocks with readings from the stroke's edges where it is wider than the line, and which blocks these are.

    ``off`` [n] is the distance of the path from a stiff curve along it, so that shift + off runs smoothly along the line.
    """
    top, bottom, above, below = edges(ink, across, shape)
    solid, shown = above & below, above | below
    own = half_width(shape)
    width = bottom - top
    usual = solid & blocks.good & (np.abs(width - 2 * own) < 0.6 * own)
    if usual.sum() < 12:
        return blocks, np.zeros(len(top), bool)
    typical = float(np.median(width[usual]))
    scatter = 1.4826 * float(np.median(np.abs(width[usual] - typical)))
    own = 0.5 * typical
    wide = shown & (width > typical + max(0.14 * typical, 4.0 * scatter, 0.3)) & (width < 4.2 * typical)
    wide = _majority(wide, 5) & shown
    runs = np.flatnonzero(np.diff(np.r_[0, wide.astype(np.int8), 0])).reshape(-1, 2)
    runs = runs[runs[:, 1] - runs[:, 0] >= SHORTEST]
    if len(runs) > 1:
        # A crossing line or a speck may hide the edges for a few blocks.
        apart = np.flatnonzero(runs[1:, 0] - runs[:-1, 1] > HIDDEN)
        runs = np.stack([runs[np.r_[0, apart + 1], 0], runs[np.r_[apart, len(runs) - 1], 1]], axis=1)
    if not len(runs):
        return blocks, np.zeros(len(top), bool)
    wide = np.zeros(len(top), bool)
    for a, b in runs:
        wide[a:b] = True
    # Near a merged stretch the other line crowds this one's flank: readings are refused that its own two edges bear out.
    single = solid & (np.abs(width - typical) < max(0.1 * typical, 3.0 * scatter, 0.25)) & ~wide
    single &= _majority(single, 3) & _grown(wide, NEIGHBOURHOOD)
    value, used = blocks.shift + off, np.zeros(len(top), bool)
    value = np.where(single & ~blocks.good, 0.5 * (top + bottom) + off, value)
    sound = (blocks.good | single) & ~wide
    sides = np.stack([np.where(above, top + own, np.inf), np.where(below, bottom - own, np.inf)]) + off
    bridge = _bridge(value, sound, blocks.sigma)
    settled = np.zeros(len(top), bool)
    for a, b in runs:
        chosen = _follow(value, sound, sides, int(a), int(b), scatter, bridge)
        if chosen is None or (chosen >= 0).mean() < 0.5:
            continue  # nothing tells which edge is whose: the readings stay as they were
        chosen[~np.isfinite(sides[np.maximum(chosen, 0), np.arange(a, b)])] = -1
        settled[a:b] = True
        rows = np.arange(a, b)[chosen >= 0]
        value[rows] = sides[chosen[chosen >= 0], rows]
        used[rows] = True
    if not settled.any():
        return blocks, np.zeros(len(top), bool)
    wide = settled
    value, used = _agreed(value, used, sound, sides, wide, blocks.sigma, max(0.8, 4.0 * scatter))
    sigma = np.where(used | (single & ~blocks.good), max(0.1, 1.2 * scatter), blocks.sigma)
    good = np.where(wide, used, blocks.good | single)
    return replace(blocks, shift=value - off, sigma=sigma, good=good), wide


def _agreed(
    value: FloatArray, used: Bools, sound: Bools, sides: FloatArray, wide: Bools, sigma: FloatArray, gate: float
) -> tuple[FloatArray, Bools]:
    """The sides chosen once more, all along the line: each block takes the side next to one smooth curve through all readings."""
    t = (np.arange(len(value)) + 0.5) / len(value)
    pieces = int(np.clip(len(value) // 40, 4, 24))
    rows = np.arange(len(value))
    for _ in range(3):
        weight = np.where(sound, 1.0 / (sigma**2 + 0.1**2), np.where(used, 1.0 / 0.15**2, 0.0))
        if (weight > 0).sum() < 12:
            break
        curve = smooth.fit(t, np.where(np.isfinite(value), value, 0.0), weight, pieces=pieces, correlation=8.0, floor=0.1)
        miss = np.abs(sides - curve.value(t)[:, 0])
        best = miss.argmin(axis=0)
        fresh = wide & (miss[best, rows] < gate)
        chosen = np.where(fresh, sides[best, rows], value)
        if (fresh == used).all() and (chosen == value).all():
            break
        value, used = chosen, fresh
    return value, used


def merged_blocks(ink: FloatArray | Floats32, across: FloatArray | Floats32, shape: Shape) -> int:
    """The longest run of cross profiles whose stroke is clearly wider than the line."""
    top, bottom, above, below = edges(ink, across, shape)
    wide = (above | below) & (bottom - top > 2.6 * half_width(shape)) & (bottom - top < 8.4 * half_width(shape))
    runs = np.flatnonzero(np.diff(np.r_[0, _majority(wide, 5).astype(np.int8), 0])).reshape(-1, 2)
    return int((runs[:, 1] - runs[:, 0]).max(initial=0))


def _majority(mask: Bools, window: int) -> Bools:
    return np.convolve(np.pad(mask.astype(float), window // 2, mode="edge"), np.ones(window) / window, "valid") > 0.5


def _grown(mask: Bools, by: int) -> Bools:
    return np.convolve(np.pad(mask.astype(float), by), np.ones(2 * by + 1), "valid") > 0.5


def _follow(
    value: FloatArray, sound: Bools, sides: FloatArray, a: int, b: int, scatter: float, bridge: FloatArray
) -> npt.NDArray[np.intp] | None:
    """Which side (0, 1 or -1 for neither) each block of the stretch a..b takes, or None where nothing leads into it."""
    ways = []
    for back in (False, True):
        if back:
            n = len(value)
            way = _one_way(value[::-1], sound[::-1], sides[:, ::-1], n - b, n - a, scatter)
            ways.append(None if way is None else (way[0][::-1], way[1]))
        else:
            ways.append(_one_way(value, sound, sides, a, b, scatter))
    known = [w for w in ways if w is not None]
    if not known:
        return None
    if len(known) == 1:
        return known[0][0]
    forward, backward = known
    if (forward[0] == backward[0]).mean() > 0.8:
        known = [(np.where(forward[0] == backward[0], forward[0], -1), min(forward[1], backward[1]))]
    # A short stretch is bridged well by the line on both sides of it; where lines cross at a small angle, that tells better than the lead.
    known += [(np.where(way >= 0, 1 - way, -1), cost + 0.3) for way, cost in known]
    rows, trust = np.arange(a, b), float(np.clip(40.0 / (b - a), 0.0, 1.0))

    def misfit(way: tuple[npt.NDArray[np.intp], float]) -> float:
        at = (way[0] >= 0) & np.isfinite(sides[:, a:b]).all(axis=0)
        off = np.abs(sides[way[0][at], rows[at]] - bridge[rows[at]]).mean() if at.any() else 3.0
        return way[1] + 2.0 * trust * float(off)

    return min(known, key=misfit)[0]


def _bridge(value: FloatArray, sound: Bools, sigma: FloatArray) -> FloatArray:
    """A smooth curve through the sound readings alone."""
    t = (np.arange(len(value)) + 0.5) / len(value)
    weight = np.where(sound, 1.0 / (sigma**2 + 0.1**2), 0.0)
    curve = smooth.fit(t, np.where(sound, value, 0.0), weight, pieces=int(np.clip(len(value) // 40, 4, 24)), correlation=8.0, floor=0.1)
    return curve.value(t)[:, 0]


def _one_way(
    value: FloatArray, sound: Bools, sides: FloatArray, a: int, b: int, scatter: float
) -> tuple[npt.NDArray[np.intp], float] | None:
    """Sides taken from a to b - 1, and how badly the way joins what lies behind b."""
    before = np.flatnonzero(sound[max(a - 3 * MEMORY, 0) : a]) + max(a - 3 * MEMORY, 0)
    before = before[-MEMORY:]
    if len(before) < 6:
        return None
    at, seen = list(before.astype(float)), list(value[before])
    chosen = np.full(b - a, -1, np.intp)
    for k in range(a, b):
        lead, spread = _led(np.array(at[-MEMORY:]), np.array(seen[-MEMORY:]), float(k))
        miss = np.abs(sides[:, k] - lead)
        best = int(np.argmin(miss))
        if miss[best] < max(0.7, 3.0 * scatter) + 2.0 * spread:
            chosen[k - a] = best
            at.append(float(k))
            seen.append(float(sides[best, k]))
    after = (np.flatnonzero(sound[b : b + 3 * MEMORY]) + b)[:6]
    end = 0.0 if b >= len(value) - 3 else 2.0
    if len(after) >= 3:
        leads = np.array([_led(np.array(at[-MEMORY:]), np.array(seen[-MEMORY:]), float(k))[0] for k in after])
        end = float(np.median(np.abs(value[after] - leads)))
    return chosen, end + 2.0 * float((chosen < 0).mean())


def _led(at: FloatArray, seen: FloatArray, place: float) -> tuple[float, float]:
    """Where the readings lead to at ``place`` (a straight line, late ones counting most), and how unsure that is."""
    u = at - place
    weight = np.exp(u / 10.0)
    total = weight.sum()
    mean_u, mean_y = (weight * u).sum() / total, (weight * seen).sum() / total
    spread_u = (weight * (u - mean_u) ** 2).sum()
    slope = (weight * (u - mean_u) * (seen - mean_y)).sum() / max(spread_u, 1e-9)
    gap = max(-float(u[-1]) - 1.0, 0.0)
    return float(mean_y - slope * mean_u), 0.05 * gap
