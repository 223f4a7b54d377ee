"""Many small patches of two pages that nearly coincide: how far each is shifted, by least squares (B. Lucas and T. Kanade, 1981)."""

from dataclasses import dataclass
from typing import Any

import cv2
import numpy as np
import numpy.typing as npt

Floats = npt.NDArray[np.float64]
Image = npt.NDArray[np.float32]

PRIOR_PX = 1.5
"""A shift that the ink does not tell (along a single line) is known no better than this."""
CORRELATED = 4.0
"""Neighbouring pixels of a scan are not independent: their count is divided by this (blur of about a pixel both ways)."""
DARK, INKED = 0.25, 0.008
"""Ink from which a pixel is no noise of the paper, and the share of such pixels below which a patch says nothing."""


@dataclass(frozen=True, slots=True, eq=False)
class Blocks:
    """Patches: ``centre`` [n, 2] px, ``shift`` [n, 2] px by which the second page must be read further on, ``covariance`` [n, 2, 2],
    ``likeness`` [n] 0..1 after the shift."""

    centre: Floats
    shift: Floats
    covariance: Floats
    likeness: Floats

    def __len__(self) -> int:
        return len(self.centre)

    def where(self, keep: npt.NDArray[np.bool_]) -> "Blocks":
        """Some of the patches."""
        return Blocks(self.centre[keep], self.shift[keep], self.covariance[keep], self.likeness[keep])


def compare(fixed: Image, moved: Image, valid: npt.NDArray[np.bool_], size: int) -> Blocks:
    """Shift of each inked patch of ``size`` px between two pages of ink 0..1 of one shape; ``valid`` is where both are known.

    In each patch  moved + g . d = a fixed + b  is solved for the shift d, contrast a and offset b, all patches at once.
    """
    height, width = (n // size * size for n in fixed.shape)
    mean = 0.5 * (fixed + moved)
    kernel = np.array([[-0.5, 0.0, 0.5]], np.float32)
    gx, gy = cv2.filter2D(mean, -1, kernel), cv2.filter2D(mean, -1, np.ascontiguousarray(kernel.T))
    columns = (np.arange(width // size) + 0.5) * size - 0.5
    found: list[tuple[Any, ...]] = []
    for top in range(0, height, size):
        rows = slice(top, top + size)
        tiles = [_tiles(a[rows, :width], size) for a in (gx, gy, fixed, moved)]
        whole = _tiles(valid[rows, :width], size).all(axis=1)
        shares = [(t > DARK).mean(axis=1) for t in tiles[2:]]
        keep = whole & (shares[0] > INKED) & (shares[1] > 0.2 * shares[0])
        if not keep.any():
            continue
        dx, dy, one, other = (t[keep].astype(np.float64) for t in tiles)
        shift, covariance, likeness = _solve(dx, dy, one, other)
        centre = np.stack([columns[keep], np.full(int(keep.sum()), top + (size - 1) / 2)], axis=1)
        found.append((centre, shift, covariance, likeness))
    if not found:
        return Blocks(np.zeros((0, 2)), np.zeros((0, 2)), np.zeros((0, 2, 2)), np.zeros(0))
    return Blocks(*(np.concatenate(part) for part in zip(*found, strict=True)))


def inked(page: Image, size: int, valid: npt.NDArray[np.bool_] | None = None) -> int:
    """How many patches of a page hold ink; with ``valid`` only those that lie wholly in it."""
    height, width = (n // size * size for n in page.shape)
    counted = 0
    for top in range(0, height, size):
        rows = slice(top, top + size)
        told = (_tiles(page[rows, :width], size) > DARK).mean(axis=1) > INKED
        if valid is not None:
            told &= _tiles(valid[rows, :width], size).all(axis=1)
        counted += int(told.sum())
    return counted


def _tiles(strip: Any, size: int) -> Any:
    """A strip [size, k size] as patches [k, size * size]."""
    return strip.reshape(size, -1, size).swapaxes(0, 1).reshape(-1, size * size)


def _solve(dx: Floats, dy: Floats, one: Floats, other: Floats) -> tuple[Floats, Floats, Floats]:
    terms = np.stack([-dx, -dy, one, np.ones_like(one)], axis=2)
    normal = np.einsum("npi,npj->nij", terms, terms)
    right = np.einsum("npi,np->ni", terms, other)
    spread = other.var(axis=1)
    floor = np.maximum(spread, 1e-6)
    lift = np.zeros((4, 4))
    lift[0, 0] = lift[1, 1] = 1.0
    normal = normal + lift * (0.02 * floor / PRIOR_PX**2)[:, None, None] + np.eye(4) * 1e-9
    solved = np.linalg.solve(normal, right[..., None])[..., 0]
    miss = other - np.einsum("npi,ni->np", terms, solved)
    noise = np.maximum((miss**2).mean(axis=1), 1e-6)
    inverse = np.linalg.inv(normal / (noise * CORRELATED)[:, None, None] + lift / PRIOR_PX**2)
    likeness = np.sqrt(np.clip(1.0 - noise / floor, 0.0, 1.0)) * (solved[:, 2] > 0.05)
    return solved[:, :2], inverse[:, :2, :2], likeness
