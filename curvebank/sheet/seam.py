"""Where one scan ends and the next begins: along the path of least ink through what both show, both at one level of paper."""

from typing import Any

import cv2
import numpy as np
import numpy.typing as npt

Pixels = npt.NDArray[np.uint8]
Mask = npt.NDArray[np.bool_]

STEP = 2
"""The seam may shift by so many px from row to row."""
GAIN = (0.5, 2.0)
"""Contrast of one scan against the other that is believed."""


def compose(first: Pixels, laid: Pixels, valid: Mask, at: tuple[int, int]) -> tuple[Pixels, tuple[int, int]]:
    """The joined picture and the overlap (width, height) px.

    ``laid`` [H, W(, 3)] is the second scan on the picture's pixels, ``valid`` [H, W] where it shows paper, ``at`` (x, y) the first
    scan's place.
    Left of (or above) the seam the first scan stands unchanged.
    """
    height, width = first.shape[:2]
    spot = (slice(at[1], at[1] + height), slice(at[0], at[0] + width))
    mine = np.zeros(valid.shape, bool)
    mine[spot] = True
    both = mine & valid
    out = np.empty_like(laid)
    out[...] = paper_of(first)
    theirs = levelled(laid, first, laid[spot], both[spot])
    out[valid] = theirs[valid]
    keep = mine & ~valid
    if both.any():
        keep |= mine & _first_side(first, theirs, both, mine, valid, spot)
    else:
        keep |= mine
    inside = keep[spot]
    out[spot][inside] = first[inside]
    rows, columns = np.flatnonzero(both.any(axis=1)), np.flatnonzero(both.any(axis=0))
    overlap = (int(columns[-1] - columns[0] + 1), int(rows[-1] - rows[0] + 1)) if len(rows) else (0, 0)
    return out, overlap


def paper_of(page: Pixels) -> Any:
    """The commonest bright level of a page, a channel at a time."""
    thin = page[::4, ::4].reshape(-1, 1 if page.ndim == 2 else 3)
    level = np.median(thin, axis=0)
    return np.rint(level).astype(np.uint8) if page.ndim == 3 else np.uint8(round(float(level[0])))


def levelled(laid: Pixels, first: Pixels, second: Pixels, both: Mask) -> Pixels:
    """The second scan with paper and ink at the first's levels, as the overlap shows them; of the whole pages where there is none."""
    if both.sum() > 2000:
        one, two = first[both], second[both]
    else:
        one, two = first[::4, ::4].reshape(-1, *first.shape[2:]), laid[::4, ::4].reshape(-1, *laid.shape[2:])
    one, two = one.reshape(len(one), -1).astype(np.float64), two.reshape(len(two), -1).astype(np.float64)
    table = []
    for c in range(one.shape[1]):
        paper = [float(np.median(v[:, c])) for v in (one, two)]
        ink = [float(np.percentile(v[:, c], 0.5)) for v in (one, two)]
        gain = (paper[0] - ink[0]) / (paper[1] - ink[1]) if abs(paper[1] - ink[1]) > 30 else 1.0
        gain = float(np.clip(gain, *GAIN))
        table.append(np.clip(np.rint(paper[0] + gain * (np.arange(256) - paper[1])), 0, 255).astype(np.uint8))
    if laid.ndim == 2:
        return np.asarray(table[0][laid])
    return np.stack([table[c][laid[..., c]] for c in range(3)], axis=2)


def _first_side(first: Pixels, theirs: Pixels, both: Mask, mine: Mask, valid: Mask, spot: tuple[slice, slice]) -> Mask:
    """Pixels on the first scan's side of the seam, over the whole picture."""
    whole = np.full(both.shape, 255, np.uint8)
    whole[spot] = first if first.ndim == 2 else first.min(axis=2)
    other = theirs if theirs.ndim == 2 else theirs.min(axis=2)
    paper = float(np.median(whole[both]))
    dark = np.maximum(paper - np.minimum(whole, other).astype(np.float32), 0.0) + np.abs(whole.astype(np.float32) - other)
    cost = np.asarray(cv2.boxFilter(dark, -1, (5, 5)), dtype=np.float32)
    only = valid & ~mine
    if not only.any():
        return mine
    # The side on which the second scan goes on: that of the larger part which it alone shows.
    y, x = np.nonzero(only[::8, ::8])
    my, mx = np.nonzero(mine[::8, ::8])
    away = 8 * np.array([x.mean() - mx.mean(), y.mean() - my.mean()]) if len(x) else np.array([1.0, 0.0])
    size = np.array([spot[1].stop - spot[1].start, spot[0].stop - spot[0].start])
    down = abs(away[1]) / size[1] > abs(away[0]) / size[0]
    turned = (lambda a: a.T) if down else (lambda a: a)
    flip = away[1 if down else 0] < 0
    facing = (lambda a: turned(a)[:, ::-1]) if flip else turned
    side = _left_of_seam(np.ascontiguousarray(facing(cost)), np.ascontiguousarray(facing(both)))
    side = side[:, ::-1] if flip else side
    return np.asarray(side.T if down else side)


def _left_of_seam(cost: Any, both: Mask) -> Mask:
    """True left of the cheapest path from top to bottom that stays where both scans show paper, as far as it can."""
    height, width = cost.shape
    columns = np.flatnonzero(both.any(axis=0))
    low, high = int(columns[0]), int(columns[-1]) + 1
    price = np.where(both[:, low:high], cost[:, low:high] + 0.5, np.float32(1e4))
    # Away from the edges of both scans, where lids and folds throw shadows.
    across = np.linspace(-1, 1, high - low, dtype=np.float32)
    price = price + 3.0 * across**4
    total = np.empty_like(price)
    total[0] = price[0]
    back = np.zeros(price.shape, np.int8)
    for y in range(1, height):
        best, move = total[y - 1].copy(), np.zeros(high - low, np.int8)
        for k in range(-STEP, STEP + 1):
            if k == 0:
                continue
            moved = np.full(high - low, np.inf, np.float32)
            if k > 0:
                moved[k:] = total[y - 1, :-k]
            else:
                moved[:k] = total[y - 1, -k:]
            moved += 0.3 * abs(k)
            better = moved < best
            best, move = np.where(better, moved, best), np.where(better, np.int8(-k), move)
        total[y] = price[y] + best
        back[y] = move
    at = np.empty(height, np.int64)
    at[-1] = int(total[-1].argmin())
    for y in range(height - 1, 0, -1):
        at[y - 1] = np.clip(at[y] + back[y, at[y]], 0, high - low - 1)
    return np.arange(width)[None, :] <= (at + low)[:, None]
