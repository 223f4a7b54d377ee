"""Ridges that go on from strip to strip of a page: the raw material of printed lines.

The page is cut into strips along the line direction. In each strip the mean of the negative second derivative across gives ridges at
several slopes; ridges are linked from strip to strip into tracks.
"""

from dataclasses import dataclass

import cv2
import numpy as np
import numpy.typing as npt

Bytes = npt.NDArray[np.uint8]
Floats = npt.NDArray[np.float64]
Floats32 = npt.NDArray[np.float32]

CELLS = 8
"""Cells a strip; slopes are searched by shifting cells against each other."""
SLOPES = np.arange(-0.075, 0.0751, 0.015)
"""Slopes tried [px/px]: about +-4.3 degrees, fine enough to smear a strip by less than half a pixel."""
MEMORY = 6
"""Nodes that a track's direction is taken from."""
SKIP = 3
"""Strips a track may miss."""
LEAST = 4
"""Nodes a track must have."""


@dataclass(slots=True, eq=False)
class Tracks:
    """Linked ridges: ``y`` [tracks, strips] across the page, nan where a strip has none; ``response`` [h, strips] they were found in.

    Strip k is centred at k * strip_px + (strip_px - 1) / 2.
    """

    y: Floats
    response: Floats32
    strip_px: int

    @property
    def x(self) -> Floats:
        """Middles of the strips [px]."""
        return np.asarray(np.arange(self.y.shape[1]) * self.strip_px + (self.strip_px - 1) / 2, dtype=np.float64)


def find_tracks(ink: Bytes, unit: float) -> Tracks:
    """Tracks of near-horizontal ridges of a page of ink 0..255."""
    cell = max(4, round(8 * unit))
    response, slope, floor = _ridges(ink, cell, 1.2 * max(unit, 0.7))
    strip = cell * CELLS
    return Tracks(_link(response, slope, floor, strip, unit), response, strip)


def _ridges(ink: Bytes, cell: int, sigma: float) -> tuple[Floats32, Floats32, float]:
    """Best ridge response [h, strips] over slopes, that slope, and the level below which it is noise."""
    height, width = ink.shape
    strips = max(width // (cell * CELLS), 1)
    used = strips * cell * CELLS
    if used > width:
        used, cell = width, max(width // CELLS, 1)
    cells = cv2.resize(ink[:, :used], (strips * CELLS, height), interpolation=cv2.INTER_AREA).astype(np.float32) / 255.0
    smooth = cv2.GaussianBlur(cells, (1, int(6 * sigma) | 1), 1e-6, sigmaY=sigma)
    bend = np.zeros_like(smooth)
    bend[1:-1] = 2 * smooth[1:-1] - smooth[2:] - smooth[:-2]
    # The square root favours a line present in every cell over a blob in one of them.
    bend = np.sqrt(np.maximum(bend * sigma**2, 0.0)).reshape(height, strips, CELLS)
    layers = [np.ascontiguousarray(bend[:, :, c]) for c in range(CELLS)]
    best = np.full((height, strips), -1.0, np.float32)
    slope = np.zeros((height, strips), np.float32)
    for s in SLOPES:
        total = np.zeros((height, strips), np.float32)
        for c, layer in enumerate(layers):
            d = int(round(s * cell * (c - (CELLS - 1) / 2)))
            if d >= 0:
                total[: height - d] += layer[d:]
            else:
                total[-d:] += layer[:d]
        better = total > best
        best[better] = total[better]
        slope[better] = s
    best = np.square(best / np.float32(CELLS))
    return best.astype(np.float32), slope.astype(np.float32), float(max(0.012, 3.0 * np.median(best)))


@dataclass(slots=True, eq=False)
class _Open:
    """Tracks that may still grow: names, counts of nodes, the last nodes' strips ``k`` and places ``at`` [n, MEMORY] (newest last), and
    the slope [px a strip] of the newest."""

    name: npt.NDArray[np.intp]
    count: npt.NDArray[np.intp]
    k: Floats
    at: Floats
    tilt: Floats

    def keep(self, which: npt.NDArray[np.bool_]) -> "_Open":
        return _Open(self.name[which], self.count[which], self.k[which], self.at[which], self.tilt[which])

    def guess(self, k: int) -> Floats:
        """Where each track would be in strip ``k``."""
        back = np.maximum(MEMORY - self.count, 0)
        rows = np.arange(len(back))
        run = self.k[:, -1] - self.k[rows, back]
        rate = np.where(self.count >= 3, (self.at[:, -1] - self.at[rows, back]) / np.maximum(run, 1), self.tilt)
        return self.at[:, -1] + rate * (k - self.k[:, -1])

    def add(self, rows: npt.NDArray[np.intp], k: int, y: Floats, tilt: Floats) -> None:
        self.count[rows] += 1
        for table, value in ((self.k, k), (self.at, y)):
            table[rows, :-1] = table[rows, 1:]
            table[rows, -1] = value
        self.tilt[rows] = tilt

    def born(self, names: npt.NDArray[np.intp], k: int, y: Floats, tilt: Floats) -> "_Open":
        """With new tracks of one node each."""
        at = np.zeros((len(y), MEMORY))
        at[:, -1] = y
        return _Open(
            np.r_[self.name, names], np.r_[self.count, np.ones(len(y), np.intp)],
            np.concatenate([self.k, np.full((len(y), MEMORY), float(k))]), np.concatenate([self.at, at]), np.r_[self.tilt, tilt],
        )  # fmt: skip


def _link(response: Floats32, slope: Floats32, floor: float, strip: int, unit: float) -> Floats:
    """Nodes [tracks, strips] of the tracks."""
    strips = response.shape[1]
    reach = max(1, round(3 * unit))
    peak = (response >= cv2.dilate(response, np.ones((2 * reach + 1, 1), np.uint8))) & (response > floor)
    peak[:2] = peak[-2:] = False
    live = _Open(np.zeros(0, np.intp), np.zeros(0, np.intp), np.zeros((0, MEMORY)), np.zeros((0, MEMORY)), np.zeros(0))
    names, places, total = [], [], 0
    for k in range(strips):
        rows = np.flatnonzero(peak[:, k])
        a, b, c = response[rows - 1, k], response[rows, k], response[rows + 1, k]
        y = rows + np.clip(0.5 * (a - c) / np.minimum(a - 2 * b + c, -1e-9), -0.5, 0.5)
        tilt = slope[rows, k] * float(strip)
        name = np.full(len(rows), -1, np.intp)
        if len(rows) and len(live.count):
            tracks, nodes = _matched(live, k, y, unit)
            name[nodes] = live.name[tracks]
            live.add(tracks, k, y[nodes], tilt[nodes])
        live = live.keep(k - live.k[:, -1] <= SKIP)
        fresh = np.flatnonzero(name < 0)
        name[fresh] = total + np.arange(len(fresh))
        total += len(fresh)
        live = live.born(name[fresh], k, y[fresh], tilt[fresh])
        names.append(name)
        places.append(y)
    count = np.bincount(np.concatenate(names), minlength=total)
    row = np.cumsum(count >= LEAST) - 1
    out = np.full((int((count >= LEAST).sum()), strips), np.nan)
    for k, (name, y) in enumerate(zip(names, places, strict=True)):
        long = count[name] >= LEAST
        out[row[name[long]], k] = y[long]
    return out


def _matched(live: _Open, k: int, y: Floats, unit: float) -> tuple[npt.NDArray[np.intp], npt.NDArray[np.intp]]:
    """Tracks and the ridges of strip ``k`` that carry them on; the longer track has the first choice."""
    guess = live.guess(k)
    gate = np.where(live.count >= 3, 1.6, 2.2) * max(unit, 0.8)
    right = np.searchsorted(y, guess)
    pair = np.clip(np.stack([right - 1, right]), 0, len(y) - 1)
    miss = np.abs(y[pair] - guess)
    swap = miss[1] < miss[0]
    first, second = np.where(swap, pair[1], pair[0]), np.where(swap, pair[0], pair[1])
    owner = np.full(len(y), -1, np.intp)
    order = np.argsort(live.count, kind="stable")
    for choice in (first, second):
        free = np.ones(len(guess), bool)
        free[owner[owner >= 0]] = False
        asks = free & (np.abs(y[choice] - guess) < gate) & (owner[choice] < 0)
        turn = order[asks[order]]
        owner[choice[turn]] = turn
    nodes = np.flatnonzero(owner >= 0)
    return owner[nodes], nodes
