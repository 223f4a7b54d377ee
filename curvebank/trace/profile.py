"""The sub-pixel step: where across the path the ink's middle lies, block by block along it.

First on a band resampled along the path, to bring it near; then on the page's own pixels, without resampling. One line width and one
blur hold for the whole curve; in each block of a few pixels of length base, height and shift are fitted. The shifts are then smoothed
along the curve by a penalised spline that bridges gaps.
"""

from dataclasses import dataclass, replace

import numpy as np

from ..records import FloatArray
from ..sheet import Prepared, under_mask
from ..sheet.prepare import unit_of
from . import smooth
from .axis import Axis, from_polyline
from .band import sample
from .blocks import Blocks, read_blocks, read_table
from .merged import merged_blocks, read_merged
from .pixels import Floats32, believed, pixels_near, trust
from .shape import Shape, shape_of

__all__ = ["Blocks", "Refined", "Shape", "align", "pixels_near", "read_blocks", "refine", "runs_merged"]
BILINEAR = 1 / 6
"""Variance [px^2] that linear interpolation adds to a blur, the mean over all places between pixels."""
Held = tuple[FloatArray | None, FloatArray | None]
AGAIN_PX = 0.7
"""A curve further than this (times the unit) from where its ink was read about is read once more."""
FEW = (1, 2, 3, 5, 8, 12)
"""Pieces of a reference, fewest first."""
REACH_PX = 6.0
"""How far (times the unit) the line may lie from its reference."""
STIFF_SHARE, SUPPLE = 4, 3
"""A stiff curve has one piece for so many of a supple one; fewer where the path had to be moved far, as on sharp bends."""
STIFF = 4.0
"""Readings that count as one for a first, stiff curve through them: other strokes come in runs."""
WANDER_PX = 0.15
"""Scatter of a path about its line (times the unit) that is taken for granted."""
ASTRAY_PX = 6.0
"""A stiff curve through what shows may leave the path by this much where nothing shows."""
ROWS = 3
"""Rows of the band that are averaged to one reading."""


@dataclass(frozen=True, slots=True, eq=False)
class Refined:
    """A sub-pixel curve: its axis, sigma [px] at each axis sample, the readings behind it and the line's shape."""

    axis: Axis
    sigma: FloatArray
    blocks: Blocks
    shape: Shape
    scatter: float


def align(prepared: Prepared, axis: Axis, clicks: FloatArray) -> tuple[Axis, Shape, float]:
    """Bring an axis that is a pixel or two off near the middle of its ink: the axis, the line's shape and how far [px] it moved."""
    unit = max(prepared.unit, 0.6)
    half, step = max(0.9 * prepared.width_px, 3.0) + 6.0 * unit, 0.5 * max(unit, 0.8)
    count = max(int(round(axis.length / (3.0 * unit))), 4)
    ink, weight, across = _band(prepared, axis, count, half, step)
    keep = believed(weight)
    d = np.broadcast_to(across[:, None], ink.shape)
    rough = shape_of(d[keep], ink[keep], prepared.width_px)
    unit = max(unit_of(rough.width), 0.6)
    flanks = [(sign * across > rough.half_extent + 0.5) & (sign * across < rough.half_extent + 6.0) for sign in (-1, 1)]
    sides = [ink[f].mean(axis=0) if f.any() else np.zeros(count) for f in flanks]
    near = np.abs(across) <= rough.half_extent + 2.5
    seen = np.full(count, int(near.sum()))
    rows = (d[near], ink[near], weight[near])
    # Averaged rows have little noise: what a neighbouring line adds to the misfit must not be held against it.
    blocks = read_table(*rows, seen, np.minimum(*sides), rough, axis.length, rounds=3, slack=0.1)
    blocks = _with_clicks(blocks, axis, clicks, unit)
    # A path may wander a pixel or two to either side: that is followed here, and only what lies further off is some other stroke.
    stiff = _stiff(blocks, axis, _weights(blocks), _pieces(axis, unit) // STIFF_SHARE, STIFF, WANDER_PX * unit)
    fitted = _stiff(blocks, axis, _gated(blocks, stiff, axis, 5 * WANDER_PX * unit), _pieces(axis, unit) // 2, 2.0, WANDER_PX * unit)
    shift = fitted.value(axis.s / axis.length)
    moved = axis.points + axis.normals * shift
    d = (across[:, None] - fitted.value((np.arange(count) + 0.5) / count)[:, 0]).astype(np.float32)
    shape = shape_of(d[keep], ink[keep], rough.width, BILINEAR)
    return from_polyline(moved, axis.closed), shape, float(np.abs(shift).max())


def _band(prepared: Prepared, axis: Axis, count: int, half: float, step: float) -> tuple[Floats32, Floats32, Floats32]:
    """Ink and weight [n, count] of blocks along the axis, and the offsets [n] px across, from a band of a few rows a block."""
    rows = (np.arange(count * ROWS, dtype=np.float64) + 0.5) * (axis.length / (count * ROWS))
    across = np.arange(-half, half + 0.5 * step, step, dtype=np.float64)
    ink = sample(prepared.clean, axis, rows, across, 1.0).reshape(count, ROWS, -1)
    weight = trust(sample(prepared.printed, axis, rows, across, 1.0)).reshape(count, ROWS, -1)
    if prepared.masked is not None:
        points, normals = axis.at(rows)
        hidden = under_mask(prepared, (points[:, None] + normals[:, None] * across[:, None]).reshape(-1, 2))
        weight = np.where(hidden.reshape(weight.shape), np.float32(0), weight)
    total = weight.sum(axis=1)
    mean = (ink * weight).sum(axis=1) / np.maximum(total, np.float32(1e-9))
    return np.ascontiguousarray(mean.T), np.ascontiguousarray(total.T) * np.float32(1 / ROWS), across.astype(np.float32)


def refine(prepared: Prepared, axis: Axis, shape: Shape, clicks: FloatArray, held: Held = (None, None)) -> Refined:
    """Move an aligned axis onto the middle of its ink, with uncertainties; ``held`` are pixels [n, 2] of the known line at its ends."""
    fine, sharper, moved = _read(prepared, axis, shape, clicks, held)
    # A shape measured about a wiggling axis is too broad, and ink far from the axis is read poorly: read again about the curve itself.
    if abs(np.log(sharper.width / shape.width)) >= 0.2 or moved > AGAIN_PX * max(unit_of(shape.width), 0.6):
        fine, _, _ = _read(prepared, fine.axis, sharper, clicks, held, SUPPLE)
    return fine


def _read(
    prepared: Prepared, axis: Axis, shape: Shape, clicks: FloatArray, held: Held, share: int = STIFF_SHARE
) -> tuple[Refined, Shape, float]:
    """One reading about an axis: the curve, the line's shape as seen about the curve, and how far [px] the curve lies from the axis.

    ``share``: the stiff reference has one piece for so many of the curve's own.
    """
    unit = max(unit_of(shape.width), 0.6)
    pixels = pixels_near(prepared, axis, shape.half_extent + 6.0)
    blocks = read_blocks(pixels, pixels.d, shape, axis.length, 3.0 * unit)
    for end, known in enumerate(held):
        if known is not None:
            blocks = _with_known(blocks, axis, known, 3.0 * unit, end)
    # The axis may wiggle, so what is smoothed is not the shift from it but the whole distance from a stiff reference.
    blocks = _unmerged(prepared, axis, blocks, shape, unit, share)
    reference, foot, off = _reference(axis, _pieces(axis, unit) // share, _shown(blocks, axis), REACH_PX * unit)
    start, way = (0.0, axis.length) if axis.closed else (foot[0], foot[-1] - foot[0])
    whole = _with_clicks(blocks, axis, clicks, unit)
    place = (np.interp(whole.s, axis.s, foot) - start) * (axis.length / way)
    whole = replace(whole, s=place, shift=whole.shift + np.interp(whole.s, axis.s, off))
    fitted = _along(whole, axis, unit, share)
    t = axis.s / axis.length
    moved = fitted.value((foot - start) / way)[:, 0] - off
    keep = pixels.believed()
    about = pixels.d - np.interp(pixels.s, axis.s, moved).astype(np.float32)
    seen = shape_of(about[keep], pixels.ink[keep], shape.width)
    base, normal = reference.at(start + t * way)
    final = from_polyline(base + normal * fitted.value(t), axis.closed)
    sigma = np.interp(np.linspace(0, 1, len(final.s)), np.linspace(0, 1, len(t)), fitted.sigma(t))
    return Refined(final, sigma, blocks, shape, fitted.scale), seen, float(np.abs(moved).max())


def runs_merged(prepared: Prepared, axis: Axis, shape: Shape) -> bool:
    """Whether the path lies in a stroke wider than its line for longer than a crossing takes."""
    unit = max(unit_of(shape.width), 0.6)
    count = max(int(axis.length / (6.0 * unit)), 4)
    half = 3.5 * shape.width + 4.0 * unit
    across = np.arange(-half, half, 0.5 * max(unit, 0.8))
    return merged_blocks(sample(prepared.clean, axis, (np.arange(count) + 0.5) * axis.length / count, across, 1.0), across, shape) > 6


def _unmerged(prepared: Prepared, axis: Axis, blocks: Blocks, shape: Shape, unit: float, share: int) -> Blocks:
    """The blocks read from the edges of the stroke where lines run into one, told apart by their smoothness about a stiff curve."""
    off = _off_stiff(axis, _pieces(axis, unit) // share, _shown(blocks, axis))
    half, step = 3.5 * shape.width + 4.0 * unit, 0.5 * max(unit, 0.8)
    ink, _, across = _band(prepared, axis, len(blocks.s), half, step)
    read, wide = read_merged(blocks, np.interp(blocks.s, axis.s, off), ink.T, across, shape)
    return read if wide.any() else blocks


def _off_stiff(axis: Axis, pieces: int, shown: FloatArray) -> FloatArray:
    """The axis's distance from a stiff curve along it where the line shows."""
    t = axis.s / axis.length
    points, tangents = _stiff_curve(axis, max(pieces, 6 if axis.closed else 3), shown)
    if np.hypot(*(points - axis.points).T).max() > ASTRAY_PX:
        # A long gap where the line bends much: the path found there is poor, but a bridge that leaves it by so much is worse.
        points, tangents = _stiff_curve(axis, 2 * max(pieces, 6 if axis.closed else 3), np.maximum(shown, 0.02))
    return ((axis.points - points) * Axis(points, t, tangents, axis.closed).normals).sum(axis=1)


def _stiff_curve(axis: Axis, pieces: int, shown: FloatArray) -> tuple[FloatArray, FloatArray]:
    """Points and unit tangents, at each sample's share of the length, of a curve of so many pieces."""
    t = axis.s / axis.length
    thin = slice(None, -1 if axis.closed else None, max(len(t) // 400, 1))
    curve = smooth.fit(t[thin], axis.points[thin], shown[thin], pieces=pieces, periodic=axis.closed, cut=0)
    tangents = curve.slope(t)
    tangents /= np.maximum(np.hypot(*tangents.T), 1e-12)[:, None]
    return curve.value(t), tangents


def _with_clicks(blocks: Blocks, axis: Axis, clicks: FloatArray, unit: float) -> Blocks:
    """The readings and the clicks as poor readings: they count only where the ink says nothing (merged lines, long gaps)."""
    s = axis.arc_of(clicks)
    base, normal = axis.at(s)
    gap = clicks - base
    across = (gap * normal).sum(axis=1)
    keep = np.hypot(*gap.T) < np.abs(across) + 3.0
    count = int(keep.sum())
    none = np.zeros(count, bool)
    return Blocks(
        np.r_[blocks.s, s[keep]], np.r_[blocks.shift, across[keep]], np.r_[blocks.sigma, np.full(count, 2.0 * max(unit, 0.75))],
        np.r_[blocks.height, np.ones(count)], np.r_[blocks.good, ~none], np.r_[blocks.masked, none],
    )  # fmt: skip


def _with_known(blocks: Blocks, axis: Axis, known: FloatArray, block_px: float, end: int) -> Blocks:
    """The readings with those along known pixels (near the first end of the axis, or the last) replaced by the pixels themselves."""
    known = known[:: max(int(round(block_px)), 1)] if len(known) > 2 * block_px else known
    rows = slice(len(axis.s) // 2, None) if end else slice(0, len(axis.s) // 2 + 1)
    s = axis.s[rows][((known[:, None] - axis.points[None, rows]) ** 2).sum(axis=2).argmin(axis=1)]
    base, normal = axis.at(s)
    across = ((known - base) * normal).sum(axis=1)
    out = (blocks.s < s.min() - 0.5 * block_px) | (blocks.s > s.max() + 0.5 * block_px)
    usual = float(np.median(blocks.sigma[blocks.good])) if blocks.good.any() else 0.05
    same = np.ones(len(s))
    new = (s, across, 0.5 * usual * same, float(np.median(blocks.height)) * same, same > 0, same < 0)
    old = (blocks.s, blocks.shift, blocks.sigma, blocks.height, blocks.good, blocks.masked)
    order = np.argsort(np.r_[blocks.s[out], s], kind="stable")
    return Blocks(*(np.concatenate([a[out], b])[order] for a, b in zip(old, new, strict=True)))


def _good_near(good: FloatArray, width: int) -> FloatArray:
    """Good readings within an odd window round each one; as many values as readings, also where the window is the longer."""
    return np.convolve(np.pad(good, width // 2), np.ones(width), "valid")


def _shown(blocks: Blocks, axis: Axis) -> FloatArray:
    """Weight of each axis sample: 1 where the line is shown by a run of good readings, 0 in a label gap."""
    good = blocks.good.astype(float)
    solid = _good_near(good, 5) >= 3
    if (solid & blocks.good).mean() < 0.3:
        solid = blocks.good | (_good_near(good, 9) >= 2)
    if solid.mean() < 0.3:
        return np.ones(len(axis.s))
    return (np.interp(axis.s, blocks.s, solid.astype(float)) > 0.5).astype(float)


def _reference(axis: Axis, pieces: int, shown: FloatArray, reach: float) -> tuple[Axis, FloatArray, FloatArray]:
    """A curve of few pieces along the axis, bridging gaps by its curvature; for each sample of the axis its foot on it and its distance.

    It rests on the axis, not on readings of the page, so it has no more freedom than it needs to stay within ``reach`` px of the axis:
    what lies between the two is read and smoothed, what the reference itself follows is not.
    """
    most = max(pieces, 6 if axis.closed else 3)
    for count in (most,) if axis.closed else [n for n in FEW if n < most] + [most]:
        points, tangents = _stiff_curve(axis, count, shown)
        if float(np.hypot(*(axis.points - points).T).max()) < reach:
            break
    else:
        points, tangents = _stiff_curve(axis, 2 * most, np.maximum(shown, 0.02))
    reference = Axis(points, axis.s, tangents, axis.closed)
    # A sample of the axis is not opposite the reference's sample of the same share of the length: its foot lies a little beside it.
    if not axis.closed:
        reference, before = _longer(reference, 3.0 * reach)
    else:
        before = 0.0
    foot = axis.s + before
    for _ in range(3):
        base, normal = reference.at(foot)
        gap = axis.points - base
        foot = foot + gap[:, 0] * normal[:, 1] - gap[:, 1] * normal[:, 0]
    base, normal = reference.at(foot)
    return reference, np.maximum.accumulate(foot), ((axis.points - base) * normal).sum(axis=1)


def _longer(axis: Axis, by: float) -> tuple[Axis, float]:
    """An open axis carried on straight at both ends, and how far [px] its old start lies from its new one."""
    step = axis.length / (len(axis.s) - 1)
    count = int(np.ceil(by / step))
    far = step * np.arange(1, count + 1)[:, None]
    first, last = axis.tangents[0], axis.tangents[-1]
    points = np.vstack([axis.points[0] - far[::-1] * first, axis.points, axis.points[-1] + far * last])
    tangents = np.vstack([np.tile(first, (count, 1)), axis.tangents, np.tile(last, (count, 1))])
    s = np.arange(len(points), dtype=np.float64) * step
    return Axis(points, s, tangents, False), count * step


def _pieces(axis: Axis, unit: float) -> int:
    return int(np.clip(axis.length / (18 * unit), 6 if axis.closed else 4, 80))


def _weights(blocks: Blocks) -> FloatArray:
    if blocks.good.sum() < 4:
        return np.ones(len(blocks.s))
    return np.where(blocks.good, 1.0 / (blocks.sigma**2 + 0.01**2), 0.0)


def _stiff(blocks: Blocks, axis: Axis, weight: FloatArray, pieces: int, correlation: float, floor: float = 0.0) -> smooth.Smooth:
    pieces = max(pieces, 6 if axis.closed else 3)
    t = blocks.s / axis.length
    return smooth.fit(t, blocks.shift, weight, pieces=pieces, periodic=axis.closed, correlation=correlation, floor=floor)


def _gated(blocks: Blocks, stiff: smooth.Smooth, axis: Axis, least: float = 0.35) -> FloatArray:
    """Weights without readings far off a stiff curve (strokes of letters, other lines): a supple curve must not see them."""
    weight = _weights(blocks)
    if blocks.good.sum() < 8:
        return weight
    miss = np.abs(blocks.shift - stiff.value(blocks.s / axis.length)[:, 0])
    return np.where(miss < max(5.0 * 1.4826 * float(np.median(miss[blocks.good])), least), weight, 0.0)


def _along(blocks: Blocks, axis: Axis, unit: float, share: int) -> smooth.Smooth:
    """The shifts smoothed along the curve."""
    t = blocks.s / axis.length
    pieces = _pieces(axis, unit)
    stiff = _stiff(blocks, axis, _weights(blocks), pieces // share, STIFF)
    weight = _gated(blocks, stiff, axis)
    curve = smooth.fit(t, blocks.shift, weight, pieces=pieces, periodic=axis.closed, correlation=2.0, rounds=3)
    count = _correlation(blocks, curve, t)
    # Where the line bends faster than the stiff curve can, its readings were left out: those that the supple one passes come back.
    weight = _gated(blocks, curve, axis)
    return smooth.fit(t, blocks.shift, weight, pieces=pieces, periodic=axis.closed, correlation=count, rounds=3, start=curve)


def _correlation(blocks: Blocks, curve: smooth.Smooth, t: FloatArray) -> float:
    """How many neighbouring readings count as one: 1 + 2 sum of the autocorrelation of the residuals, up to its first drop below 0.05.

    At least two: the likelihood alone spends twice the freedom on a line that the line has.
    """
    use = curve.weights > 0.05
    if use.sum() < 20:
        return 2.0
    miss = np.where(use, blocks.shift - curve.value(t)[:, 0], 0.0)
    power = float((miss**2).sum()) / use.sum()
    total = 1.0
    for lag in range(1, 12):
        pairs = use[lag:] & use[:-lag]
        if pairs.sum() < 10:
            break
        rho = float((miss[lag:] * miss[:-lag])[pairs].mean()) / max(power, 1e-12)
        if rho < 0.05:
            break
        total += 2 * rho
    return float(np.clip(total, 2.0, 8.0))
