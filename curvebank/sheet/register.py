"""Two scans of the same paper: where each pixel of the old one lies on the new one, whatever the resolution, turn, angle and bend.

First ideas come from features; each is followed from coarse to fine by matching many small blocks, with a plane and then a smooth warp
through them; then the page is asked whether another position would do as well. What cannot be told is refused, never guessed.
"""

from collections.abc import Callable
from dataclasses import dataclass
from typing import Any

import cv2
import numpy as np
import numpy.typing as npt

from ..errors import SheetError
from . import blocks, coarse, paperwarp
from . import ink as levels
from .coarse import Floats
from .load import Sheet
from .paperwarp import PaperWarp
from .prepare import Prepared

Bytes = npt.NDArray[np.uint8]
Progress = Callable[[float, str], Any]

BLOCK_PX, BLOCK_PART_PX = (48, 64), (24, 32)
"""Sides of the blocks on the reduced and on the full pages; smaller where only a strip of the paper is on both scans."""
SMALL_PX, FINE_PX = 1500, 3600
"""Longest side of the pages on which features are sought, and of those on which blocks are matched."""
NEARLY = 0.75
"""Reduction not worth its own resampling error."""
FLOOR_PX = 0.03
"""Scatter of a block's shift that its own pixels do not tell [px]."""
LIKE = 0.5
"""Likeness from which a block is taken for the same print."""
LEAST_BLOCKS = 12
LEAST_VOTES = 10
LEAST_COVERAGE = 0.3
"""Share of the inked blocks of the old scan that must be found again."""


@dataclass(frozen=True, slots=True, eq=False)
class Registration:
    """How an old scan lies on a new one; both in px of their full pages.

    ``residual_px`` is the rms of what single blocks still miss by [px of the new scan], ``sigma_px`` one standard uncertainty of the map
    itself, typical over the page. ``coverage`` is the share of the old scan's inked blocks found on the new one, ``blocks`` their
    number. ``scale`` is new px an old px, ``turn_deg`` the turn (clockwise on the screen). ``here`` and ``there`` [n, 2]
    are the places that were matched, ``white`` [n, 2, 2] whitens a miss of theirs [px of the new scan].
    """

    warp: PaperWarp
    old_to_small: tuple[float, float]
    new_to_small: tuple[float, float]
    residual_px: float
    sigma_px: float
    coverage: float
    blocks: int
    scale: float
    turn_deg: float
    here: Floats
    there: Floats
    white: Floats

    def __call__(self, points: Any) -> Floats:
        """Points [n, 2] of the old scan on the new one."""
        xy = np.asarray(points, dtype=np.float64).reshape(-1, 2)
        return _grown(self.warp(_shrunk(xy, self.old_to_small)), self.new_to_small)

    def local_scale(self, points: Any) -> Floats:
        """New px an old px [n] at points of the old scan."""
        xy = np.asarray(points, dtype=np.float64).reshape(-1, 2)
        j = self.warp.jacobian(_shrunk(xy, self.old_to_small))
        return np.asarray(np.sqrt(np.abs(np.linalg.det(j))) * self.old_to_small[0] / self.new_to_small[0])


def match(
    old: Sheet | Prepared,
    new: Sheet | Prepared,
    *,
    progress: Progress | None = None,
    bend: bool = True,
    part: bool = False,
    start: Floats | None = None,
) -> Registration:
    """Register two scans of one paper.

    Parameters
    ----------
    old, new : Sheet or Prepared
        Decoded pages; a prepared sheet saves levelling it again.
    bend : bool
        Allow for paper that lay differently; without it the map is a plane.
    part : bool
        The scans overlap only in part: what is found again is counted where both show the paper.
    start : array [3, 3], optional
        A plane known beforehand to a few pixels (from points clicked on both), in place of a search.

    Raises
    ------
    SheetError
        ``not-the-same-paper`` where too little of the old scan is found on the new one; ``ambiguous-paper`` where the page moved by a
        pitch of its grid would do as well.
    """
    tell = progress or (lambda share, text: None)
    tell(0.0, "Levelling both scans")
    pages = [_ink(p) for p in (old, new)]
    small = [_reduced(p, SMALL_PX / max(p.shape)) for p in pages]
    tell(0.2, "Finding what looks alike")
    if start is None:
        found = coarse.ideas(small[0][0], small[1][0])
    else:
        found = [_given(start, small)]
    doubtful = False
    for i, idea in enumerate(found):
        tell(0.3 + 0.1 * i, "Laying one scan on the other")
        warp = _settled(idea, small[0][0], small[1][0], part)
        verdict = _verdict(warp, small[0][0], small[1][0], part)
        if verdict.share < LEAST_COVERAGE:
            continue
        if not verdict.rival:
            tell(0.6, "Measuring")
            return _fine(warp, pages, [s[1] for s in small], bend, part, lambda share: tell(0.6 + 0.4 * share, "Measuring"))
        doubtful = True
    raise _refused(doubtful)


@dataclass(frozen=True, slots=True)
class _Verdict:
    """Share of the old page's inked blocks found again, and whether another position does about as well."""

    share: float
    rival: bool


def _refused(doubtful: bool) -> SheetError:
    if doubtful:
        return SheetError(
            "These scans fit on each other in more than one way: moved by a pitch of the grid they look the same. "
            "Scan the whole page, with its labels and curves, or set the marks and clicks on the new scan by hand.",
            code="ambiguous-paper",
        )
    return SheetError(
        "These are not two scans of the same paper, or too little of one is found on the other. "
        "Give another scan, or set the marks and clicks on the new scan by hand.",
        code="not-the-same-paper",
    )


def _ink(page: Sheet | Prepared) -> Bytes:
    """Ink 0..255 of a page, dark or light print alike."""
    if isinstance(page, Prepared):
        return page.ink
    grey = page.pixels if page.pixels.ndim == 2 else np.asarray(cv2.cvtColor(page.pixels, cv2.COLOR_RGB2GRAY), dtype=np.uint8)
    if levels.is_light_on_dark(grey):
        grey = 255 - grey
    dark = levels.darkness(np.ascontiguousarray(grey))
    return levels.to_bytes(dark, levels.ink_scale(dark))


def _reduced(page: Bytes, wanted: float) -> tuple[Bytes, tuple[float, float]]:
    """A page made smaller by area means, and its true scale across and down; never enlarged, and left alone where little would change."""
    if wanted > NEARLY:
        return page, (1.0, 1.0)
    height, width = page.shape
    size = (max(round(width * wanted), 1), max(round(height * wanted), 1))
    return np.asarray(cv2.resize(page, size, interpolation=cv2.INTER_AREA), dtype=np.uint8), (size[0] / width, size[1] / height)


def _shrunk(points: Floats, scale: tuple[float, float]) -> Floats:
    return (points + 0.5) * np.asarray(scale) - 0.5


def _grown(points: Floats, scale: tuple[float, float]) -> Floats:
    return (points + 0.5) / np.asarray(scale) - 0.5


def _read_as(warp: PaperWarp, there: Bytes, shape: tuple[int, int], blur: float) -> tuple[blocks.Image, npt.NDArray[np.bool_]]:
    """The second page as the first sees it, ink 0..1, and where it is known."""
    x, y = warp.grid(shape[1], shape[0])
    height, width = there.shape
    valid = (x >= 0) & (y >= 0) & (x <= width - 1) & (y <= height - 1)
    seen = cv2.remap(there, x, y, cv2.INTER_CUBIC, borderMode=cv2.BORDER_CONSTANT, borderValue=0)
    return _soft(np.asarray(seen, dtype=np.uint8), blur), valid


def _soft(page: Bytes, blur: float) -> blocks.Image:
    return np.asarray(cv2.GaussianBlur(page.astype(np.float32) / np.float32(255), (0, 0), blur), dtype=np.float32)


def _sizes(part: bool) -> tuple[int, int]:
    return BLOCK_PART_PX if part else BLOCK_PX


def _given(start: Floats, small: list[tuple[Bytes, tuple[float, float]]]) -> coarse.Idea:
    """A plane between the full pages as an idea between the reduced ones, with a grid of places for features."""
    plane = _between((1.0, 1.0), small[1][1]) @ start @ _between(small[0][1], (1.0, 1.0))
    height, width = small[0][0].shape
    here = np.stack(np.meshgrid(np.linspace(0, width, 5), np.linspace(0, height, 5)), axis=-1).reshape(-1, 2)
    return coarse.Idea(plane, here, paperwarp.projected(plane, here))


def _settled(idea: coarse.Idea, here: Bytes, there: Bytes, part: bool) -> PaperWarp:
    """An idea pulled tight: a stiff warp through its features, then blocks."""
    low, high = np.zeros(2), np.array([here.shape[1], here.shape[0]], dtype=np.float64)
    white = np.broadcast_to(np.eye(2), (len(idea.here), 2, 2))
    freedom = 1 if len(idea.here) > 150 else 0
    warp, _ = paperwarp.fit(idea.plane, low, high, idea.here, idea.there, white, pieces=freedom)
    for blur in (2.0, 1.5):
        warp = _tightened(warp, here, there, _sizes(part)[0], blur, 1 if blur > 1.8 else 3)
    return warp


def _tightened(
    warp: PaperWarp, here: Bytes, there: Bytes, size: int, blur: float, pieces: int | None, fixed: blocks.Image | None = None
) -> PaperWarp:
    """One round: blocks compared under the present map, and the map fitted anew."""
    seen, valid = _read_as(warp, there, here.shape[:2], blur)
    found = blocks.compare(_soft(here, blur) if fixed is None else fixed, seen, valid, size)
    found = found.where((found.likeness > LIKE) & (np.hypot(*found.shift.T) < 4.0))
    if len(found) < LEAST_BLOCKS:
        return warp
    targets = warp(found.centre + found.shift)
    low, high = np.zeros(2), np.array([here.shape[1], here.shape[0]], dtype=np.float64)
    return paperwarp.fit(warp.plane, low, high, found.centre, targets, _whitening(found, warp), pieces=pieces)[0]


def _whitening(found: blocks.Blocks, warp: PaperWarp) -> Floats:
    """[n, 2, 2]: a miss on the second page in units of its standard uncertainty."""
    root = np.linalg.cholesky(np.linalg.inv(found.covariance + FLOOR_PX**2 * np.eye(2)))
    return np.asarray(np.swapaxes(root, 1, 2) @ np.linalg.inv(warp.jacobian(found.centre)))


def _verdict(warp: PaperWarp, here: Bytes, there: Bytes, part: bool) -> _Verdict:
    """How much of the first page is found again, and whether another position would do as well."""
    seen, valid = _read_as(warp, there, here.shape[:2], 1.2)
    size = _sizes(part)[0]
    found = blocks.compare(_soft(here, 1.2), seen, valid, size)
    good = (found.likeness > LIKE) & (np.hypot(*found.shift.T) < 1.5)
    total = max(blocks.inked(_soft(here, 1.2), size, valid if part else None), 1)
    moved = np.clip(np.rint(seen * 255), 0, 255).astype(np.uint8)
    ballots = coarse.votes(here, moved, valid, max(here.shape) // 4)
    rival = any(v.stay < max(3 * v.go, LEAST_VOTES) for v in ballots)
    return _Verdict(float(good.sum()) / total, rival)


def _scale(warp: PaperWarp, shape: tuple[int, ...]) -> float:
    middle = np.array([[shape[1] / 2, shape[0] / 2]])
    return float(np.sqrt(abs(np.linalg.det(warp.jacobian(middle)[0]))))


def _fine(
    rough: PaperWarp, pages: list[Bytes], scales: list[tuple[float, float]], bend: bool, part: bool, tell: Callable[[float], Any]
) -> Registration:
    """From the reduced pages to full measure: both at the coarser one's resolution, as no scan tells more than it shows."""
    ratio = _scale(rough, (round(pages[0].shape[0] * scales[0][1]), round(pages[0].shape[1] * scales[0][0]))) * scales[0][0] / scales[1][0]
    wanted = min(1.0, FINE_PX / max(pages[0].shape), max(ratio, 1e-3))
    here, old_scale = _reduced(pages[0], wanted)
    there, new_scale = _reduced(pages[1], min(1.0, wanted / ratio))
    warp = _rescaled(rough, scales[0], old_scale, scales[1], new_scale, here.shape)
    size = _sizes(part)[1]
    warp = _tightened(warp, here, there, size, 2.0, 3 if bend else 0)
    tell(0.3)
    fixed = _soft(here, 1.0)
    for i in range(3):
        warp = _tightened(warp, here, there, size, 1.0, None if bend else 0, fixed)
        tell(0.4 + 0.2 * i)
    seen, valid = _read_as(warp, there, here.shape[:2], 1.0)
    left = blocks.compare(fixed, seen, valid, size)
    good = (left.likeness > LIKE) & (np.hypot(*left.shift.T) < 1.0)
    total = max(blocks.inked(fixed, size, valid if part else None), 1)
    if good.sum() < LEAST_BLOCKS or good.sum() / total < LEAST_COVERAGE:
        raise _refused(False)
    left = left.where(good)
    told = np.sqrt(np.maximum(left.covariance[:, [0, 1], [0, 1]], 1e-8)) < 0.25
    to_new = _scale(warp, here.shape) / new_scale[0]
    residual = float(np.sqrt(np.mean(left.shift[told] ** 2))) if told.any() else float("nan")
    freedom = 8 + 2 * len(warp.coefficients)
    sigma = residual * float(np.sqrt(freedom / max(2 * int(told.any(axis=1).sum()), freedom)))
    middle = np.array([[here.shape[1] / 2, here.shape[0] / 2]])
    j = warp.jacobian(middle)[0]
    turn = float(np.degrees(np.arctan2(j[1, 0] - j[0, 1], j[0, 0] + j[1, 1])))
    return Registration(
        warp=warp,
        old_to_small=old_scale,
        new_to_small=new_scale,
        residual_px=residual * to_new,
        sigma_px=sigma * to_new,
        coverage=float(good.sum() / total),
        blocks=int(good.sum()),
        scale=to_new * old_scale[0],
        turn_deg=turn,
        here=_grown(left.centre, old_scale),
        there=_grown(warp(left.centre + left.shift), new_scale),
        white=_whitening(left, warp) * np.asarray(new_scale),
    )


def _rescaled(
    warp: PaperWarp,
    old_from: tuple[float, float],
    old_to: tuple[float, float],
    new_from: tuple[float, float],
    new_to: tuple[float, float],
    shape: tuple[int, ...],
) -> PaperWarp:
    """The same map between pages of other sizes (pixel centres keep their half)."""
    a = _between(old_to, old_from)
    b = _between(new_from, new_to)
    high = np.array([shape[1], shape[0]], dtype=np.float64)
    grow = np.array([b[0, 0], b[1, 1]])
    return PaperWarp(b @ warp.plane @ a, np.zeros(2), high, warp.pieces, warp.coefficients * grow)


def _between(start: tuple[float, float], end: tuple[float, float]) -> Floats:
    """Affine map [3, 3] of pixels from one reduction of a page to another."""
    fx, fy = end[0] / start[0], end[1] / start[1]
    return np.array([[fx, 0, 0.5 * fx - 0.5], [0, fy, 0.5 * fy - 0.5], [0, 0, 1.0]])
