"""Measure the cross profile and the strength of printed lines, and paint them: what a page would look like with these lines alone.

All lines of one direction are handled together in a few array passes; millimetre paper has hundreds of them.
"""

from collections.abc import Iterator
from dataclasses import dataclass, replace

import cv2
import numpy as np
import numpy.typing as npt

from .lines import PrintedLine

Bytes = npt.NDArray[np.uint8]
Floats32 = npt.NDArray[np.float32]
Indices = npt.NDArray[np.intp]

BLOCK_PX = 64
"""Length over which a line's strength is taken as one."""
PER_BLOCK = 16
"""Places sampled in a block."""
PROFILE_PLACES = 400
"""Places along a line that its cross profile is taken from."""
PER_PX = 16
"""Steps a pixel of the profile that is painted."""
GROUP_BLOCKS = 6000
"""Blocks handled at a time: bounds the memory."""
STRONGER = 1.25
"""A block may be this much stronger than the line is around it; more is another line lying on it."""


@dataclass(slots=True, eq=False)
class _Blocks:
    """Blocks of all lines of a group: the line each belongs to, first and last block of that line, middle [px] along it."""

    owner: Indices
    first: Indices
    last: Indices
    middle: npt.NDArray[np.float64]


def paint(page: Bytes, into: Bytes, lines: list[PrintedLine], unit: float) -> list[PrintedLine]:
    """Write near-horizontal lines' modelled ink (0..255) into ``into``; the lines that can be seen, contrast and width filled in."""
    out: list[PrintedLine] = []
    for group in _groups(lines):
        out += _paint_group(page, into, group, unit)
    return out


def _groups(lines: list[PrintedLine]) -> Iterator[list[PrintedLine]]:
    group: list[PrintedLine] = []
    blocks = 0
    for line in lines:
        count = int(line.along[-1] - line.along[0]) // BLOCK_PX + 1
        if group and blocks + count > GROUP_BLOCKS:
            yield group
            group, blocks = [], 0
        group.append(line)
        blocks += count
    if group:
        yield group


def _paint_group(page: Bytes, into: Bytes, lines: list[PrintedLine], unit: float) -> list[PrintedLine]:
    half = max(4, round(5 * unit))
    offsets = np.arange(-half, half + 0.01, 0.5)
    blocks, band = _sampled(page, lines, offsets)
    profile, base = _profiles(band, blocks, len(lines), offsets)
    middle = np.abs(offsets) <= 2.0 * max(unit, 0.7)
    peak = profile[:, middle].max(axis=1)
    centre = np.argmax(np.where(middle, profile, -1.0), axis=1)
    index = np.arange(len(offsets))
    low = profile <= 0.5 * peak[:, None]
    left = np.where(low & (index < centre[:, None]), index, -1).max(axis=1) + 1
    right = np.where(low & (index > centre[:, None]), index, len(offsets)).min(axis=1) - 1
    full = 0.5 * (right - left + 1)
    reach = full / 2 + 2.0 * max(unit, 0.6)
    profile = profile * np.clip(reach[:, None] + 0.5 - np.abs(offsets - offsets[centre][:, None]), 0, 1)
    seen = peak >= 0.03
    strength = _strengths(band, base, profile, peak, blocks)
    _write(into, lines, seen, offsets, profile, strength, blocks)
    return [
        replace(line, weight=float(peak[k]), width_px=float(full[k])) for k, line in enumerate(lines) if seen[k]
    ]  # fmt: skip


def _sampled(page: Bytes, lines: list[PrintedLine], offsets: npt.NDArray[np.float64]) -> tuple[_Blocks, Floats32]:
    """The blocks of all lines and the page [blocks, offsets, places] at ``offsets`` across them, 0..1."""
    counts, xs, ys, middles = [], [], [], []
    for line in lines:
        start, stop = int(line.along[0]), int(line.along[-1]) + 1
        count = -(-(stop - start) // BLOCK_PX)
        x = start + (np.arange(count * PER_BLOCK) + 0.5) * ((stop - start) / (count * PER_BLOCK)) - 0.5
        counts.append(count)
        xs.append(x)
        ys.append(np.interp(x, line.along, line.across))
        middles.append(start + (np.arange(count) + 0.5) * ((stop - start) / count) - 0.5)
    stops = np.cumsum(counts)
    owner = np.repeat(np.arange(len(lines)), counts)
    x = np.concatenate(xs).reshape(-1, 1, PER_BLOCK).astype(np.float32)
    y = np.concatenate(ys).reshape(-1, 1, PER_BLOCK).astype(np.float32) + offsets[:, None].astype(np.float32)
    shape = (len(owner), len(offsets) * PER_BLOCK)
    mx = np.broadcast_to(x, y.shape).reshape(shape)
    band = cv2.remap(page, mx, y.reshape(shape), cv2.INTER_LINEAR, borderMode=cv2.BORDER_REPLICATE)
    seen = band.reshape(y.shape).astype(np.float32)
    seen *= np.float32(1 / 255)
    return _Blocks(owner, (stops - np.array(counts))[owner], (stops - 1)[owner], np.concatenate(middles)), seen


def _profiles(
    band: Floats32, blocks: _Blocks, count: int, offsets: npt.NDArray[np.float64]
) -> tuple[npt.NDArray[np.float64], npt.NDArray[np.float64]]:
    """Cross profile [lines, offsets] of each line above the ink beside it, and that ink [lines]."""
    first = np.searchsorted(blocks.owner, np.arange(count))
    size = np.searchsorted(blocks.owner, np.arange(count), side="right") - first
    spread = (np.arange(PROFILE_PLACES) + 0.5) / PROFILE_PLACES
    place = np.floor(spread * (size * PER_BLOCK)[:, None]).astype(np.intp)
    pick = band[first[:, None] + place // PER_BLOCK, :, place % PER_BLOCK]
    # The 60th percentile sees a dashed line with half its length inked; curves that cross are rare along one line.
    rank = int(0.6 * PROFILE_PLACES)
    profile = np.partition(pick, rank, axis=1)[:, rank].astype(np.float64)
    fifth = len(offsets) // 5
    base = np.median(np.concatenate([profile[:, :fifth], profile[:, -fifth:]], axis=1), axis=1)
    return np.maximum(profile - base[:, None], 0.0), base


def _strengths(
    band: Floats32, base: npt.NDArray[np.float64], profile: npt.NDArray[np.float64], peak: npt.NDArray[np.float64], blocks: _Blocks
) -> npt.NDArray[np.float64]:
    """Strength of each block relative to its line's profile, filtered so that a curve lying on the line does not count."""
    core = profile > 0.6 * peak[:, None]
    share = (core / np.maximum((profile * core).sum(axis=1), 1e-6)[:, None]).astype(np.float32)
    lift = base * core.sum(axis=1) / np.maximum((profile * core).sum(axis=1), 1e-6)
    level = np.einsum("bop,bo->bp", band, share[blocks.owner]) - lift[blocks.owner, None]
    local = np.partition(level, PER_BLOCK // 2, axis=1)[:, PER_BLOCK // 2].astype(np.float64)
    here = np.arange(len(local))

    def median(reach: int) -> npt.NDArray[np.float64]:
        near = np.clip(here[:, None] + np.arange(-reach, reach + 1), blocks.first[:, None], blocks.last[:, None])
        return np.asarray(np.partition(local[near], reach, axis=1)[:, reach])

    return np.clip(np.minimum(median(1), STRONGER * median(6)), 0.0, 1.6)


def _write(
    into: Bytes,
    lines: list[PrintedLine],
    seen: npt.NDArray[np.bool_],
    offsets: npt.NDArray[np.float64],
    profile: npt.NDArray[np.float64],
    strength: npt.NDArray[np.float64],
    blocks: _Blocks,
) -> None:
    height, width = into.shape
    half = float(offsets[-1])
    fine = np.arange(-half - 1, half + 1 + 0.5 / PER_PX, 1 / PER_PX)
    table = np.stack([np.interp(fine, offsets, row, left=0.0, right=0.0) for row in 255 * profile]).astype(np.float32)
    used = np.flatnonzero((profile[seen] > 0.004).any(axis=0)) if seen.any() else np.zeros(0, np.intp)
    if not len(used):
        return
    xs, ys, factors, rows = [], [], [], []
    for k in np.flatnonzero(seen):
        x = np.arange(int(lines[k].along[0]), int(lines[k].along[-1]) + 1)
        own = slice(*np.searchsorted(blocks.owner, [k, k + 1]))
        xs.append(x)
        ys.append(np.interp(x, lines[k].along, lines[k].across))
        factors.append(np.interp(x, blocks.middle[own], strength[own]).astype(np.float32))
        rows.append(np.full(len(x), k * table.shape[1], np.int32))
    x, factor = np.concatenate(xs), np.concatenate(factors)
    exact = np.concatenate(ys)
    row = np.rint(exact).astype(np.int32)
    # Index into the painted profile of the pixel nearest the line; a row further down is PER_PX further on.
    start = np.concatenate(rows) + np.rint((row - exact + half + 1) * PER_PX).astype(np.int32)
    flat = row.astype(np.int64) * width + x
    levels, pixels = table.ravel(), into.reshape(-1)
    for step in range(int(np.floor(offsets[used[0]])), int(np.ceil(offsets[used[-1]])) + 1):
        inside = (row + step >= 0) & (row + step < height)
        at = flat[inside] + step * width
        value = np.minimum(np.rint(levels[start[inside] + step * PER_PX] * factor[inside]), 255).astype(np.uint8)
        pixels[at] = np.maximum(pixels[at], value)
