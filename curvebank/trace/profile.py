"""The sub-pixel step: where across the path the ink's middle lies, block by block along it.

Every pixel near the path is given its arc length and its distance across the path; no resampling. One line width and one blur hold for
the whole curve; in each block of a few pixels of length base, height and shift are fitted by Gauss-Newton with robust weights, all
blocks at once. The shifts are then smoothed along the curve by a penalised spline that bridges gaps.
"""

from dataclasses import dataclass, replace

import numpy as np
import numpy.typing as npt
from scipy.special import ndtr

from ..records import FloatArray
from ..sheet import Prepared
from ..sheet.prepare import unit_of
from . import smooth
from .axis import Axis, from_polyline

WIDTHS = np.array([0.4, 0.55, 0.7, 0.85, 1.0, 1.15, 1.3, 1.5, 1.8])
BLURS = (0.45, 0.65, 0.85, 1.1, 1.4, 1.8, 2.4)
"""Widths (in parts of a first guess) and blurs [px] tried for a line's cross profile."""
PER_PX = 128


@dataclass(frozen=True, slots=True, eq=False)
class Shape:
    """Cross profile of a drawn line: a box of ``width`` px blurred by a Gaussian of ``blur`` px, ``height`` in ink.

    ``noise`` is the scatter of single pixels about it.
    """

    width: float
    blur: float
    noise: float
    height: float

    def value(self, d: FloatArray) -> FloatArray:
        """Profile at distance ``d`` [px] from the middle, 1 at the middle."""
        return (ndtr((d + self.width / 2) / self.blur) - ndtr((d - self.width / 2) / self.blur)) / self._peak

    def slope(self, d: FloatArray) -> FloatArray:
        """Derivative of the profile [1/px]."""
        a, b = (d + self.width / 2) / self.blur, (d - self.width / 2) / self.blur
        return (np.exp(-0.5 * a * a) - np.exp(-0.5 * b * b)) / (np.sqrt(2 * np.pi) * self.blur * self._peak)

    @property
    def _peak(self) -> float:
        return max(float(2 * ndtr(self.width / 2 / self.blur) - 1), 1e-6)

    @property
    def half_extent(self) -> float:
        """Distance [px] from the middle beyond which there is practically no ink."""
        return self.width / 2 + 2.2 * self.blur


@dataclass(frozen=True, slots=True, eq=False)
class Blocks:
    """Readings along the curve: arc length, shift and its sigma [px], height, and whether each one is believed."""

    s: FloatArray
    shift: FloatArray
    sigma: FloatArray
    height: FloatArray
    good: npt.NDArray[np.bool_]
    masked: npt.NDArray[np.bool_]


@dataclass(frozen=True, slots=True, eq=False)
class Refined:
    """A sub-pixel curve: its axis, sigma [px] at each axis sample, the readings behind it and the line's shape."""

    axis: Axis
    sigma: FloatArray
    blocks: Blocks
    shape: Shape
    scatter: float


@dataclass(slots=True, eq=False)
class Pixels:
    """Pixels near an axis: arc length, distance across, ink 0..1, weight 0..1 (low under printed lines)."""

    s: FloatArray
    d: FloatArray
    ink: FloatArray
    weight: FloatArray
    printed: FloatArray


def pixels_near(prepared: Prepared, axis: Axis, half: float) -> Pixels:
    """All pixels within ``half`` px of the axis, each once."""
    height, width = prepared.shape
    s = np.arange(0.0, axis.length + 0.4, 0.8)
    if axis.closed:
        s = s[s < axis.length]
    d = np.arange(-half, half + 0.4, 0.8)
    points, normals = axis.at(s)
    x = np.rint(points[:, :1] + normals[:, :1] * d).astype(np.int64)
    y = np.rint(points[:, 1:] + normals[:, 1:] * d).astype(np.int64)
    ok = ((x >= 0) & (x < width) & (y >= 0) & (y < height)).ravel()
    flat = (y * width + x).ravel()[ok]
    # Each pixel once: the last place written to it is the one that keeps it. Only touched cells of the page are ever read.
    order = np.arange(len(flat), dtype=np.int32)
    low = int(flat.min(initial=0))
    owner = np.empty(int(flat.max(initial=0)) - low + 1, np.int32)
    owner[flat - low] = order
    first = np.flatnonzero(owner[flat - low] == order)
    place = np.flatnonzero(ok)[first]
    px = np.stack([x.ravel()[place], y.ravel()[place]], axis=1).astype(np.float64)
    row = place // len(d)
    normal = normals[row]
    gap = px - points[row]
    at = s[row] + gap[:, 0] * normal[:, 1] - gap[:, 1] * normal[:, 0]
    base, normal = axis.at(at)
    across = ((px - base) * normal).sum(axis=1)
    if axis.closed:
        at = np.mod(at, axis.length)
    else:
        keep = (at >= -1.0) & (at <= axis.length + 1.0)
        at, across, first = at[keep], across[keep], first[keep]
    pick = flat[first]
    ink = prepared.clean.ravel()[pick] / 255.0
    printed = prepared.printed.ravel()[pick] / 255.0
    # A light line divides out well, a dark one hides what lies below: trust falls with its strength.
    weight = 1.0 / (1.0 + (printed / 0.10) ** 2)
    if prepared.masked is not None:
        weight = np.where(prepared.masked.ravel()[pick], 0.0, weight)
    return Pixels(at, across, ink, weight, printed)


def first_shape(pixels: Pixels, width_px: float) -> Shape:
    """Line width and blur from the median profile of all pixels."""
    bins = np.rint(pixels.d * 3).astype(np.int64)
    low = int(bins.min())
    known = pixels.weight > 0  # not under a mask
    keep = pixels.weight > 0.4
    if keep.sum() < 0.3 * known.sum() or not keep.any():
        keep = known if known.any() else np.ones(len(keep), bool)
    bins, ink = bins[keep] - low, pixels.ink[keep]
    # Medians of all bins at once: counted by bin and ink step, the middle of each bin's count.
    count = int(bins.max()) + 1
    table = np.bincount(bins * 256 + np.rint(255.0 * ink).astype(np.int64), minlength=256 * count).reshape(count, 256)
    sizes = table.sum(axis=1)
    held = np.flatnonzero(sizes)
    at = (held + low) / 3.0
    profile = np.argmax(np.cumsum(table[held], axis=1) > (sizes[held] // 2)[:, None], axis=1) / 255.0
    width = np.repeat(np.clip(width_px * WIDTHS, 0.6, 30), len(BLURS))[:, None]
    blur = np.tile(BLURS, len(WIDTHS))[:, None]
    edge = 0.5 * width / blur
    u = at / blur
    g = (ndtr(u + edge) - ndtr(u - edge)) / np.maximum(2 * ndtr(edge) - 1, 1e-6)
    g -= g.mean(axis=1, keepdims=True)
    heights = (g @ profile) / np.maximum((g * g).sum(axis=1), 1e-12)
    miss = np.where(heights > 0.02, np.abs(profile - profile.mean() - heights[:, None] * g).sum(axis=1), np.inf)
    k = int(np.argmin(miss))
    if not np.isfinite(miss[k]):
        return Shape(max(width_px, 1.0), 0.9, 0.05, 1.0)
    return Shape(float(width[k, 0]), float(blur[k, 0]), 0.05, float(heights[k]))


def read_blocks(pixels: Pixels, d: FloatArray, shape: Shape, length: float, block_px: float, rounds: int = 4) -> Blocks:
    """Base, height and shift of each block by robust Gauss-Newton on all blocks at once; ``d`` are distances from the current middle."""
    count = max(int(round(length / block_px)), 4)
    block = np.clip((pixels.s * (count / length)).astype(int), 0, count - 1)
    cluttered = _clutter(block, d, pixels.ink, shape, count)
    near = np.abs(d) <= shape.half_extent + 2.5
    block, d, ink, given = block[near], d[near], pixels.ink[near], pixels.weight[near]
    base, height, shift = np.zeros(count), np.full(count, shape.height), np.zeros(count)
    robust = np.ones(len(d))
    noise = max(shape.noise, 0.01)
    eye = np.eye(3)
    prior = np.array([0.15, 0.6 * shape.height, 1.5])
    weight = given
    clear = given > 0.3
    # The profile is even and its slope odd: both are looked up from a fine table.
    table = (np.arange(int((shape.half_extent + 8.0) * PER_PX)) + 0.5) / PER_PX
    level, tilt = shape.value(table), -shape.slope(table)
    miss = ink
    inverse = np.repeat(eye[None], count, axis=0)
    for turn in range(rounds):
        local = d - shift[block]
        cell = np.minimum(np.abs(local) * PER_PX, len(level) - 1).astype(np.int64)
        g, dg = level[cell], -height[block] * np.copysign(tilt[cell], -local)
        miss = ink - base[block] - height[block] * g
        if turn:
            robust = np.maximum(1 - (miss * np.sqrt(given) / (5.0 * noise)) ** 2, 0.0) ** 2
        weight = given * robust / noise**2
        terms = (np.ones_like(g), g, dg)
        lhs = np.empty((count, 3, 3))
        right = np.empty((count, 3))
        for i in range(3):
            wi = weight * terms[i] if i else weight
            right[:, i] = np.bincount(block, wi * miss, count)
            for j in range(i, 3):
                lhs[:, i, j] = lhs[:, j, i] = np.bincount(block, wi * terms[j] if j else wi, count)
        now = np.stack([base, height - shape.height, shift], axis=1)
        inverse = np.linalg.inv(lhs + np.diag(1 / prior**2)).astype(np.float64)
        change = np.einsum("nij,nj->ni", inverse, right - now / prior**2)
        base = base + change[:, 0]
        height = np.clip(height + change[:, 1], 0.02, 2.0)
        shift = np.clip(shift + np.clip(change[:, 2], -1.0, 1.0), -4.0, 4.0)
        core = (np.abs(local) < shape.half_extent) & clear
        spread = 1.4826 * float(np.median(np.abs(miss[core]))) if core.any() else noise
        noise = float(np.clip(spread, 0.01, 0.3))
    total = np.bincount(block, given, count)
    chi = np.sqrt(np.bincount(block, given * np.minimum(miss**2, 0.25), count) / np.maximum(total, 1e-9))
    seen = np.bincount(block, minlength=count)
    told = total > 0  # not wholly under a mask
    strong = told & (height > 0.3 * shape.height)
    usual = float(np.median(height[strong])) if strong.any() else shape.height
    strong = told & (height > 0.4 * usual)
    usual_chi = float(np.median(chi[strong])) if strong.any() else 0.1
    sigma = np.sqrt(inverse[:, 2, 2])
    masked = total < 0.35 * np.maximum(seen, 1)
    good = (
        (height > 0.45 * usual)
        & (height < 1.7 * usual)
        & (np.abs(shift) < 3.0)
        & (chi < 2.5 * usual_chi + 0.02)
        & (sigma < 0.8)
        & (seen > 3)
    )
    good &= ~_text_zones(good | masked, cluttered)
    return Blocks((np.arange(count) + 0.5) * length / count, shift, sigma, height, good, masked)


def _clutter(block: npt.NDArray[np.intp], d: FloatArray, ink: FloatArray, shape: Shape, count: int) -> npt.NDArray[np.bool_]:
    """Blocks with ink on both flanks: letters, or a line that crosses."""
    sides = []
    for sign in (-1, 1):
        flank = (sign * d > shape.half_extent + 0.5) & (sign * d < shape.half_extent + 6.0)
        sides.append(np.bincount(block[flank], ink[flank], count) / np.maximum(np.bincount(block[flank], minlength=count), 1))
    return np.minimum(*sides) > 0.12 * shape.height


def _text_zones(fair: npt.NDArray[np.bool_], cluttered: npt.NDArray[np.bool_], window: int = 15) -> npt.NDArray[np.bool_]:
    """Stretches where readings mostly fail amid clutter: a label stands in the line, and what happens to fit are strokes of letters."""
    if len(fair) < window:
        return np.zeros(len(fair), bool)
    box = np.ones(window) / window
    failing = np.convolve(~fair, box, "same")
    crowded = np.convolve(cluttered, box, "same")
    return (failing > 0.45) & (crowded > 0.15)


def align(prepared: Prepared, axis: Axis, clicks: FloatArray) -> tuple[Axis, Shape, float]:
    """Bring an axis that is a pixel or two off near the middle of its ink: the axis, the line's shape and how far [px] it moved."""
    unit = max(prepared.unit, 0.6)
    pixels = pixels_near(prepared, axis, max(0.9 * prepared.width_px, 3.0) + 6.0 * unit)
    rough = first_shape(pixels, prepared.width_px)
    unit = max(unit_of(rough.width), 0.6)
    blocks = read_blocks(pixels, pixels.d, rough, axis.length, 3.0 * unit, rounds=3)
    blocks = _with_clicks(blocks, axis, clicks, unit)
    stiff = _stiff(blocks, axis, _weights(blocks), _pieces(axis, unit) // 4, 8.0)
    fitted = _stiff(blocks, axis, _gated(blocks, stiff, axis), _pieces(axis, unit) // 2, 4.0)
    pixels.d = pixels.d - fitted.value(pixels.s / axis.length)[:, 0]
    shift = fitted.value(axis.s / axis.length)
    moved = axis.points + axis.normals * shift
    return from_polyline(moved, axis.closed), first_shape(pixels, rough.width), float(np.abs(shift).max())


def refine(prepared: Prepared, axis: Axis, shape: Shape, clicks: FloatArray) -> Refined:
    """Move an aligned axis onto the middle of its ink, with uncertainties."""
    unit = max(unit_of(shape.width), 0.6)
    pixels = pixels_near(prepared, axis, shape.half_extent + 6.0)
    # The aligned axis may wiggle, so what is smoothed is not the shift from it but the whole distance from a stiff reference.
    for turn in (0, 1):
        blocks = read_blocks(pixels, pixels.d, shape, axis.length, 3.0 * unit)
        reference, off = _reference(axis, _pieces(axis, unit) // 4, _shown(blocks, axis))
        whole = _with_clicks(blocks, axis, clicks, unit)
        whole = replace(whole, shift=whole.shift + np.interp(whole.s, axis.s, off))
        fitted = _along(whole, axis, unit)
        if turn:
            break
        # A shape measured about a wiggling axis is too broad: measured again about the curve itself, it may ask for another reading.
        t_pixels = pixels.s / axis.length
        moved = pixels.d - fitted.value(t_pixels)[:, 0] + np.interp(pixels.s, axis.s, off)
        sharper = first_shape(replace(pixels, d=moved), shape.width)
        if abs(np.log(sharper.width / shape.width)) < 0.2:
            break
        shape = sharper
    t = axis.s / axis.length
    final = from_polyline(reference.points + reference.normals * fitted.value(t), axis.closed)
    sigma = np.interp(np.linspace(0, 1, len(final.s)), np.linspace(0, 1, len(t)), fitted.sigma(t))
    return Refined(final, sigma, blocks, shape, fitted.scale)


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


def _reference(axis: Axis, pieces: int, shown: FloatArray) -> tuple[Axis, FloatArray]:
    """A curve of few pieces along the axis where the line shows, bridging gaps by its curvature, and the axis's distance from it."""
    t = axis.s / axis.length
    thin = slice(None, -1 if axis.closed else None, max(len(t) // 400, 1))
    curve = smooth.fit(t[thin], axis.points[thin], shown[thin], pieces=max(pieces, 6 if axis.closed else 3), periodic=axis.closed, cut=0)
    points = curve.value(t)
    tangents = curve.slope(t)
    tangents = tangents / np.maximum(np.hypot(*tangents.T), 1e-12)[:, None]
    reference = Axis(points, axis.s, tangents, axis.closed)
    return reference, ((axis.points - points) * reference.normals).sum(axis=1)


def _pieces(axis: Axis, unit: float) -> int:
    return int(np.clip(axis.length / (18 * unit), 6 if axis.closed else 4, 80))


def _weights(blocks: Blocks) -> FloatArray:
    if blocks.good.sum() < 4:
        return np.ones(len(blocks.s))
    return np.where(blocks.good, 1.0 / (blocks.sigma**2 + 0.01**2), 0.0)


def _stiff(blocks: Blocks, axis: Axis, weight: FloatArray, pieces: int, correlation: float) -> smooth.Smooth:
    pieces = max(pieces, 6 if axis.closed else 3)
    t = blocks.s / axis.length
    return smooth.fit(t, blocks.shift, weight, pieces=pieces, periodic=axis.closed, correlation=correlation)


def _gated(blocks: Blocks, stiff: smooth.Smooth, axis: Axis) -> FloatArray:
    """Weights without readings far off a stiff curve (strokes of letters, other lines): a supple curve must not see them."""
    weight = _weights(blocks)
    if blocks.good.sum() < 8:
        return weight
    miss = np.abs(blocks.shift - stiff.value(blocks.s / axis.length)[:, 0])
    return np.where(miss < max(5.0 * 1.4826 * float(np.median(miss[blocks.good])), 0.35), weight, 0.0)


def _along(blocks: Blocks, axis: Axis, unit: float) -> smooth.Smooth:
    """The shifts smoothed along the curve."""
    t = blocks.s / axis.length
    pieces = _pieces(axis, unit)
    stiff = _stiff(blocks, axis, _weights(blocks), pieces // 4, 8.0)
    weight = _gated(blocks, stiff, axis)
    curve = smooth.fit(t, blocks.shift, weight, pieces=pieces, periodic=axis.closed, correlation=2.0, rounds=3)
    count = _correlation(blocks, curve, t)
    return smooth.fit(t, blocks.shift, weight, pieces=pieces, periodic=axis.closed, correlation=count, rounds=3, start=curve.robust)


def _correlation(blocks: Blocks, curve: smooth.Smooth, t: FloatArray) -> float:
    """How many neighbouring readings count as one: 1 + 2 sum of the autocorrelation of the residuals, up to its first drop below 0.05."""
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
    return float(np.clip(total, 1.0, 8.0))
