"""Readings along a curve: in each block of a few pixels of its length base, height and shift of the line's profile, all blocks at once.

Gauss-Newton with robust weights (Tukey) on matrices with a column for each block, so that every sum is a sum of rows.
"""

from dataclasses import dataclass

import numpy as np
import numpy.typing as npt

from ..records import FloatArray
from .pixels import Floats32, Pixels
from .shape import Shape
from .smooth import middle

PER_PX = 128
BACKGROUND_PX = 2.5
"""How far beside the line its background is read."""
Bools = npt.NDArray[np.bool_]


@dataclass(frozen=True, slots=True, eq=False)
class Blocks:
    """Readings along the curve: arc length, shift and its sigma [px], height, and whether each one is believed."""

    s: FloatArray
    shift: FloatArray
    sigma: FloatArray
    height: FloatArray
    good: Bools
    masked: Bools


def read_blocks(pixels: Pixels, d: FloatArray | Floats32, shape: Shape, length: float, block_px: float, rounds: int = 4) -> Blocks:
    """Readings from pixels; ``d`` are their distances from the current middle."""
    count = max(int(round(length / block_px)), 4)
    block = np.clip((pixels.s * (count / length)).astype(np.int64), 0, count - 1)
    sides = []
    for sign in (-1, 1):
        flank = (sign * d > shape.half_extent + 0.5) & (sign * d < shape.half_extent + 6.0)
        sides.append(np.bincount(block[flank], pixels.ink[flank], count) / np.maximum(np.bincount(block[flank], minlength=count), 1))
    near = np.flatnonzero(np.abs(d) <= shape.half_extent + BACKGROUND_PX)
    near = near[np.argsort(block[near].astype(np.int32), kind="stable")]
    block = block[near]
    seen = np.bincount(block, minlength=count)
    column = np.arange(len(block)) - (np.cumsum(seen) - seen)[block]
    place = column * count + block

    def table(values: FloatArray | Floats32, fill: float) -> Floats32:
        out = np.full(count * max(int(seen.max(initial=1)), 1), fill, np.float32)
        out[place] = values[near]
        return out.reshape(-1, count)

    beside = np.minimum(*sides)
    return read_table(table(d, 99.0), table(pixels.ink, 0.0), table(pixels.weight, 0.0), seen, beside, shape, length, rounds)


def read_table(
    d: Floats32,
    ink: Floats32,
    given: Floats32,
    seen: npt.NDArray[np.intp],
    beside: FloatArray,
    shape: Shape,
    length: float,
    rounds: int = 4,
    slack: float = 0.02,
) -> Blocks:
    """Readings from matrices [n, blocks] of distances across, ink and weights.

    ``seen`` counts the readings of each block, ``beside`` is the ink on the lighter of its flanks. A block is believed while its misfit
    is not above the usual one by much: more than 2.5 times and ``slack``.
    """
    count = d.shape[1]
    base, height, shift = np.zeros(count), np.full(count, shape.height), np.zeros(count)
    noise = max(shape.noise, 0.01)
    prior = 1.0 / np.array([0.15, 0.6 * shape.height, 1.5]) ** 2
    clear = given > 0.3
    # The profile is even and its slope odd: both are looked up from a fine table.
    table = (np.arange(int((shape.half_extent + 8.0) * PER_PX)) + 0.5) / PER_PX
    level, tilt = shape.value(table).astype(np.float32), (-shape.slope(table)).astype(np.float32)
    last = np.float32(len(level) - 1)
    root = np.sqrt(given)
    miss = ink
    variance = np.ones(count)
    for turn in range(rounds):
        local = d - shift.astype(np.float32)
        far = np.abs(local)
        core = clear & (far < shape.half_extent)
        far *= np.float32(PER_PX)
        cell = np.minimum(far, last, out=far).astype(np.int32)
        g, dg = level[cell], tilt[cell]
        np.copysign(dg, local, out=dg)
        miss = ink - height.astype(np.float32) * g
        miss -= base.astype(np.float32)
        weight = given
        if turn:
            off = miss * root
            off *= np.float32(1 / (5.0 * noise))
            off *= off
            weight = given * np.maximum(1 - off, 0) ** 2
        wg, wd, wm = weight * g, weight * dg, weight * miss
        scale = 1.0 / noise**2
        total, one_g, one_d, one_m = (w.sum(axis=0) * scale for w in (weight, wg, wd, wm))
        gg, g_d, dd, gm, dm = ((a * b).sum(axis=0) * scale for a, b in ((wg, g), (wg, dg), (wd, dg), (wm, g), (wm, dg)))
        step, variance = _step(
            (total + prior[0], one_g, one_d * height, gg + prior[1], g_d * height, dd * height**2 + prior[2]),
            (one_m - base * prior[0], gm - (height - shape.height) * prior[1], dm * height - shift * prior[2]),
        )
        base = base + step[0]
        height = np.clip(height + step[1], 0.02, 2.0)
        shift = np.clip(shift + np.clip(step[2], -1.0, 1.0), -4.0, 4.0)
        off = np.abs(miss[core])
        noise = min(max(1.4826 * middle(off), 0.01), 0.3) if len(off) else noise
    total = given.sum(axis=0, dtype=np.float64)
    chi = np.sqrt((given * np.minimum(miss**2, np.float32(0.25))).sum(axis=0) / np.maximum(total, 1e-9))
    told = total > 0  # not wholly under a mask
    strong = told & (height > 0.3 * shape.height)
    usual = middle(height[strong]) if strong.any() else shape.height
    strong = told & (height > 0.4 * usual)
    usual_chi = middle(chi[strong]) if strong.any() else 0.1
    sigma = np.sqrt(variance)
    masked = total < 0.35 * np.maximum(seen, 1)
    good = (
        (height > 0.45 * usual)
        & (height < 1.7 * usual)
        & (np.abs(shift) < 3.0)
        & (chi < 2.5 * usual_chi + slack)
        & (sigma < 0.8)
        & (seen > 3)
    )
    good &= ~_text_zones(good | masked, beside > 0.12 * shape.height)
    return Blocks((np.arange(count) + 0.5) * length / count, shift, sigma, height, good, masked)


def _step(lhs: tuple[FloatArray, ...], right: tuple[FloatArray, ...]) -> tuple[tuple[FloatArray, ...], FloatArray]:
    """Solutions of symmetric 3 x 3 systems (upper triangles, by rows), and the last element of each inverse."""
    a, b, c, e, f, g = (np.asarray(v, dtype=np.float64) for v in lhs)
    aa, bb, cc = e * g - f * f, c * f - b * g, b * f - c * e
    ee, ff, gg = a * g - c * c, b * c - a * f, a * e - b * b
    det = 1.0 / (a * aa + b * bb + c * cc)
    x, y, z = right
    return ((aa * x + bb * y + cc * z) * det, (bb * x + ee * y + ff * z) * det, (cc * x + ff * y + gg * z) * det), gg * det


def _text_zones(fair: Bools, cluttered: Bools, window: int = 15) -> Bools:
    """Stretches where readings mostly fail amid clutter: a label stands in the line, and what happens to fit are strokes of letters.

    Clutter is ink on both flanks: letters, or a line that crosses.
    """
    if len(fair) < window:
        return np.zeros(len(fair), bool)
    box = np.ones(window) / window
    failing = np.convolve(~fair, box, "same")
    crowded = np.convolve(cluttered, box, "same")
    return (failing > 0.45) & (crowded > 0.15)
