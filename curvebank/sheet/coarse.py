"""A first idea of how two scans of one paper lie on each other: features that look alike (D. Lowe, 2004), and a plane through them.

Printed grids repeat themselves, so no idea is believed by itself: `votes` asks whether the page moved by a pitch would do as well.
"""

from dataclasses import dataclass

import cv2
import numpy as np
import numpy.typing as npt

from .blocks import DARK, INKED
from .paperwarp import projected

Bytes = npt.NDArray[np.uint8]
Floats = npt.NDArray[np.float64]
Image = npt.NDArray[np.float32]

FEATURES = 5000
RATIO = 0.86
"""A match must be this much nearer than the second best: crossings of a grid never are."""
NEAR_PX = 4.0
"""How far a matching feature may lie from the plane [px of the reduced page]: paper bends."""
LEAST = 8
"""Matches below which there is no idea."""
BLOCK = 40
CLEARLY = 0.08
"""Difference of likeness by which a block prefers one position to another."""
TELLING = 0.4
"""A block that is like the other page in neither position has no vote."""


@dataclass(frozen=True, slots=True, eq=False)
class Idea:
    """A plane [3, 3] from the first reduced page to the second, and the matches [n, 2] each that agree with it."""

    plane: Floats
    here: Floats
    there: Floats


def ideas(first: Bytes, second: Bytes, count: int = 3) -> list[Idea]:
    """Up to ``count`` planes, each from matches that those before it do not explain; pages are ink 0..255."""
    here, words = _features(first)
    there, others = _features(second)
    if min(len(here), len(there)) < LEAST:
        return []
    pairs = _matches(words, others)
    here, there = here[pairs[:, 0]], there[pairs[:, 1]]
    out: list[Idea] = []
    for _ in range(count):
        if len(here) < LEAST:
            break
        cv2.setRNGSeed(7)
        found, _mask = cv2.findHomography(here, there, cv2.USAC_MAGSAC, ransacReprojThreshold=NEAR_PX / 2, maxIters=8000, confidence=0.9999)
        if found is None:
            break
        plane = np.asarray(found, dtype=np.float64)
        if not sensible(plane, first.shape):
            break
        agree = np.hypot(*(projected(plane, here) - there).T) < NEAR_PX
        if agree.sum() < LEAST:
            break
        out.append(Idea(plane, here[agree], there[agree]))
        here, there = here[~agree], there[~agree]
    return out


def _features(page: Bytes) -> tuple[Floats, Image]:
    finder = cv2.SIFT_create(  # type: ignore[attr-defined]
        nfeatures=FEATURES, contrastThreshold=0.02, edgeThreshold=12
    )
    points, words = finder.detectAndCompute(255 - page, None)
    if words is None:
        return np.zeros((0, 2)), np.zeros((0, 128), np.float32)
    # The square root of a normed histogram: the plain distance then compares as Hellinger's does.
    words = np.sqrt(words / np.maximum(words.sum(axis=1, keepdims=True), 1e-9)).astype(np.float32)
    return np.array([p.pt for p in points], dtype=np.float64), words


def _matches(words: Image, others: Image) -> npt.NDArray[np.intp]:
    """Pairs (index, index) of features that are each other's nearest, clearly nearer than the second nearest."""
    best, gap = [], []
    back = np.full(len(others), -1, np.int64)
    back_likeness = np.full(len(others), -1.0, np.float32)
    for start in range(0, len(words), 1000):
        like = words[start : start + 1000] @ others.T
        two = np.argpartition(-like, 1, axis=1)[:, :2]
        value = np.take_along_axis(like, two, axis=1)
        order = np.argsort(-value, axis=1)
        two, value = np.take_along_axis(two, order, axis=1), np.take_along_axis(value, order, axis=1)
        best.append(two[:, 0])
        gap.append(np.sqrt(np.maximum(2 - 2 * value[:, 0], 1e-6)) / np.sqrt(np.maximum(2 - 2 * value[:, 1], 1e-6)))
        top = like.argmax(axis=0)
        better = like[top, np.arange(len(others))] > back_likeness
        back[better] = top[better] + start
        back_likeness[better] = like[top[better], np.flatnonzero(better)]
    nearest, ratio = np.concatenate(best), np.concatenate(gap)
    mine = np.arange(len(words))
    keep = (ratio < RATIO) & (back[nearest] == mine)
    return np.stack([mine[keep], nearest[keep]], axis=1)


def sensible(plane: Floats, shape: tuple[int, ...]) -> bool:
    """A page seen by a scanner or a phone: not mirrored, not folded over itself, no side shrunk to less than a third of another."""
    height, width = shape[:2]
    corners = np.array([[0, 0], [width, 0], [width, height], [0, height]], dtype=np.float64)
    depth = corners @ plane[2, :2] + plane[2, 2]
    if (depth * depth[0] <= 0).any():
        return False
    q = projected(plane, corners)
    sides = np.roll(q, -1, axis=0) - q
    turns = sides[:, 0] * np.roll(sides, -1, axis=0)[:, 1] - sides[:, 1] * np.roll(sides, -1, axis=0)[:, 0]
    scale = np.hypot(*sides.T) / np.hypot(*(np.roll(corners, -1, axis=0) - corners).T)
    return bool((turns > 0).all() and scale.max() < 3 * scale.min() and 0.02 < scale.min() and scale.max() < 50)


@dataclass(frozen=True, slots=True)
class Vote:
    """Blocks that clearly prefer where the pages lie to ``shift`` px further on, and blocks that prefer the shift."""

    shift: tuple[int, int]
    stay: int
    go: int


def votes(fixed: Bytes, moved: Bytes, valid: npt.NDArray[np.bool_], reach_px: int) -> list[Vote]:
    """The strongest rivals of lying exactly here: shifts of the whole page at which it looks most like itself, put to a vote of blocks."""
    a, b = (_soft(p) * valid for p in (fixed, moved))
    surface = _correlation(a, b)
    height, width = surface.shape
    middle = (height // 2, width // 2)
    reach = [min(reach_px, n // 2 - 1) for n in (height, width)]
    part = surface[middle[0] - reach[0] : middle[0] + reach[0] + 1, middle[1] - reach[1] : middle[1] + reach[1] + 1].copy()
    guard = 5
    part[reach[0] - guard : reach[0] + guard + 1, reach[1] - guard : reach[1] + guard + 1] = -np.inf
    here = _likeness(a, b)
    out = []
    for _ in range(8):
        dy, dx = (int(v) for v in np.unravel_index(int(part.argmax()), part.shape))
        shift = (dx - reach[1], dy - reach[0])
        by = np.array([[1.0, 0, -shift[0]], [0, 1.0, -shift[1]]])
        moved_on = np.asarray(cv2.warpAffine(b, by, (a.shape[1], a.shape[0])), dtype=np.float32)
        known = np.asarray(cv2.warpAffine(valid.astype(np.uint8), by, (a.shape[1], a.shape[0])))
        there = _likeness(a, moved_on)
        both = _whole(valid) & _whole(known > 0) & ~np.isnan(here) & ~np.isnan(there)
        gain = np.where(both & (np.maximum(here, there) > TELLING), here - there, 0.0)
        out.append(Vote(shift, int((gain > CLEARLY).sum()), int((gain < -CLEARLY).sum())))
        part[max(dy - guard, 0) : dy + guard + 1, max(dx - guard, 0) : dx + guard + 1] = -np.inf
    return out


def _soft(page: Bytes) -> Image:
    return np.asarray(cv2.GaussianBlur(page, (0, 0), 1.2), dtype=np.float32) / np.float32(255)


def _correlation(a: Image, b: Image) -> Image:
    """Cross-correlation of two pages, zero shift in the middle; large values at shifts by which ``b`` must be read further on."""
    height, width = cv2.getOptimalDFTSize(2 * a.shape[0]), cv2.getOptimalDFTSize(2 * a.shape[1])
    fa, fb = (np.fft.rfft2(p - p.mean(), (height, width)) for p in (a, b))
    return np.asarray(np.fft.fftshift(np.fft.irfft2(np.conj(fa) * fb, (height, width))), dtype=np.float32)


def _blocks(page: Image) -> Image:
    height, width = (n // BLOCK * BLOCK for n in page.shape)
    return page[:height, :width].reshape(height // BLOCK, BLOCK, width // BLOCK, BLOCK).swapaxes(1, 2).reshape(-1, BLOCK * BLOCK)


def _likeness(a: Image, b: Image) -> Floats:
    """Normalised correlation of each block; NaN where the first page shows nothing."""
    x, y = _blocks(a), _blocks(b)
    inked = (x > DARK).mean(axis=1) > INKED
    x, y = x - x.mean(axis=1, keepdims=True), y - y.mean(axis=1, keepdims=True)
    power = np.sqrt((x * x).sum(axis=1) * np.maximum((y * y).sum(axis=1), 1e-3))
    return np.where(inked, (x * y).sum(axis=1) / np.maximum(power, 1e-6), np.nan)


def _whole(mask: npt.NDArray[np.bool_]) -> npt.NDArray[np.bool_]:
    return np.asarray(_blocks(mask.astype(np.float32)).min(axis=1) > 0)
