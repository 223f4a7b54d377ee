"""Find the long straight lines printed on a sheet: grid, axes, frames, tables; skewed, curled, broken or dashed.

A track of ridges is a printed line when it runs as smoothly as paper lets a ruled line run, and with the rest of the page: its slope
agrees with a smooth field fitted to all tracks (a flat curve leaves that field).
"""

from dataclasses import dataclass

import cv2
import numpy as np
import numpy.typing as npt

from .tracks import Tracks, find_tracks

Bytes = npt.NDArray[np.uint8]
Floats = npt.NDArray[np.float64]
Mask = npt.NDArray[np.bool_]


@dataclass(frozen=True, slots=True, eq=False)
class PrintedLine:
    """One printed line. ``along`` [n] is x for a horizontal line (y for a vertical one), ``across`` [n] its other pixel coordinate.

    ``weight`` is the contrast of the line, 0..1 of full ink; ``width_px`` its full width at half height.
    """

    horizontal: bool
    along: Floats
    across: Floats
    weight: float
    width_px: float
    sigma_px: float

    def points(self) -> Floats:
        """Pixels [n, 2] (x, y) along the line."""
        pair = (self.along, self.across) if self.horizontal else (self.across, self.along)
        return np.stack(pair, axis=1)


def find_lines(ink: Bytes, turned: Bytes, unit: float) -> tuple[list[PrintedLine], list[PrintedLine]]:
    """Horizontal and vertical lines of a page of ink 0..255 and its transpose; ``unit`` is the page's scale (1 for 3 px lines)."""
    return _family(ink, unit, True), _family(turned, unit, False)


@dataclass(slots=True, eq=False)
class Fitted:
    """Tracks with a cubic each (a parabola or straight line for short ones): coefficients [n, 4] in t = 2 x / width - 1, scatter [px]."""

    tracks: Tracks
    coefficients: Floats
    scatter: Floats
    width: int

    def keep(self, which: Mask) -> "Fitted":
        part = Tracks(self.tracks.y[which], self.tracks.response, self.tracks.strip_px)
        return Fitted(part, self.coefficients[which], self.scatter[which], self.width)

    @property
    def seen(self) -> Mask:
        """Strips [n, strips] in which a track has a node."""
        return ~np.isnan(self.tracks.y)

    def span(self) -> tuple[npt.NDArray[np.intp], npt.NDArray[np.intp]]:
        """First and last strip of each track."""
        seen = self.seen
        return np.argmax(seen, axis=1), seen.shape[1] - 1 - np.argmax(seen[:, ::-1], axis=1)

    def slope(self, x: Floats) -> Floats:
        """Slope [px/px] of each track at ``x`` [n, m] or [m]."""
        t = 2 * x / self.width - 1
        c = self.coefficients[:, :, None]
        return (c[:, 1] + t * (2 * c[:, 2] + t * 3 * c[:, 3])) * (2 / self.width)

    def place(self, x: Floats) -> Floats:
        """Each track at ``x`` [n, m] or [m]: its polynomial over its own strips, straight beyond them."""
        first, last = self.span()
        middles = self.tracks.x
        inner = np.clip(x, middles[first][:, None], middles[last][:, None])
        t = 2 * inner / self.width - 1
        c = self.coefficients[:, :, None]
        return c[:, 0] + t * (c[:, 1] + t * (c[:, 2] + t * c[:, 3])) + self.slope(inner) * (x - inner)


def _family(ink: Bytes, unit: float, horizontal: bool) -> list[PrintedLine]:
    """Near-horizontal lines of a page (of its transpose, when ``horizontal`` is False)."""
    height, width = ink.shape
    tracks = find_tracks(ink, unit)
    if not len(tracks.y):
        return []
    fitted = _fitted(tracks, width)
    first, last = fitted.span()
    strips = last - first + 1
    length = strips * tracks.strip_px
    steady = (length >= max(0.10 * width, 4.5 * tracks.strip_px)) & (fitted.seen.sum(axis=1) >= 0.6 * strips)
    fitted = fitted.keep(steady & (fitted.scatter <= 0.6 * max(unit, 0.7)))
    if not len(fitted.scatter):
        return []
    fitted = fitted.keep(_with_field(fitted, height, unit))
    fitted = fitted.keep(~_bends_away(fitted, height, unit))
    return _extended(fitted, height, unit, horizontal)


def _masked_median(values: Floats, mask: Mask) -> Floats:
    """Median of each row's masked values (the upper one of an even number)."""
    ordered = np.sort(np.where(mask, values, np.inf), axis=1)
    return ordered[np.arange(len(values)), np.maximum(mask.sum(axis=1) // 2, 0)]


def _fitted(tracks: Tracks, width: int) -> Fitted:
    """Robust polynomials through all tracks at once, by Tukey weights."""
    seen = ~np.isnan(tracks.y)
    y = np.where(seen, tracks.y, 0.0)
    t = 2 * tracks.x / width - 1
    basis = np.polynomial.polynomial.polyvander(t, 3)
    count = seen.sum(axis=1)
    degree = np.where(count >= 10, 3, np.where(count >= 7, 2, 1))
    unused = np.arange(4) > degree[:, None]
    weight = seen.astype(np.float64)
    coefficients = np.zeros((len(y), 4))
    scale = np.full(len(y), np.inf)
    pairs = (basis[:, :, None] * basis[:, None, :]).reshape(-1, 16)
    fits = np.ones(len(y), bool)
    for _ in range(6):
        lhs = (weight @ pairs).reshape(-1, 4, 4)
        lhs[unused[:, :, None] | unused[:, None, :]] = 0.0
        lhs[np.broadcast_to(np.eye(4, dtype=bool), lhs.shape) & unused[:, :, None]] = 1.0
        right = np.where(unused, 0.0, (weight * y) @ basis)
        # A touch of ridge only keeps a degenerate set of weights solvable.
        lhs += 1e-12 * np.eye(4) * np.maximum(np.trace(lhs, axis1=1, axis2=2), 1e-9)[:, None, None]
        coefficients = np.linalg.solve(lhs, right[:, :, None])[:, :, 0].astype(np.float64)
        miss = np.abs(y - coefficients @ basis.T)
        scale = 1.4826 * _masked_median(miss, seen) + 0.02
        weight = np.where(seen, np.maximum(1 - (miss / (5 * scale[:, None])) ** 2, 0) ** 2, 0.0)
        fits &= (weight > 0).sum(axis=1) > degree + 1
    return Fitted(tracks, coefficients, np.where(fits, scale, np.inf), width)


def _with_field(fitted: Fitted, height: int, unit: float) -> Mask:
    """The tracks whose direction agrees with a smooth field of directions over the page."""
    seen, xs = fitted.seen, fitted.tracks.x
    n = len(seen)
    owner, strip = np.nonzero(seen)
    x, y = xs[strip], fitted.tracks.y[owner, strip]
    slope = fitted.slope(xs)[owner, strip]
    u, v = 2 * x / fitted.width - 1, 2 * y / height - 1
    terms = np.stack([np.ones_like(u), u, v, u * u, u * v, v * v], 1)
    if n < 4:
        terms = terms[:, :1]
    elif n < 8:
        terms = terms[:, :3]
    weight = np.ones(len(x))
    center = np.median(slope)
    weight[np.abs(slope - center) > 0.05] = 0.0
    field = np.full(len(x), center)
    for _ in range(8):
        if (weight > 0).sum() < 3 * terms.shape[1]:
            break
        # A touch of ridge keeps the field flat where only a few lines lie.
        lhs = (terms * weight[:, None]).T @ terms + 1e-3 * len(x) * np.diag([0.0] + [1.0] * (terms.shape[1] - 1))
        field = terms @ np.linalg.solve(lhs, (terms * weight[:, None]).T @ slope)
        miss = np.abs(slope - field)
        scale = max(1.4826 * float(np.median(miss[weight > 0])), 0.0006)
        weight = np.maximum(1 - (miss / (5 * scale)) ** 2, 0) ** 2
    # Nodes are in order of track and strip: the field is summed along each track and compared with where its nodes lie.
    step = np.r_[0.0, np.diff(x) * 0.5 * (field[1:] + field[:-1])]
    starts = np.flatnonzero(np.r_[True, owner[1:] != owner[:-1]])
    step[starts] = 0.0
    drift = np.cumsum(step)
    off = np.full(seen.shape, np.nan)
    off[owner, strip] = y - (drift - drift[starts][owner])
    off -= _masked_median(off, seen)[:, None]
    first, last = fitted.span()
    return 1.4826 * _masked_median(np.abs(off), seen) <= 1.0 * max(unit, 0.7) + 0.0012 * (xs[last] - xs[first])


def _bends_away(fitted: Fitted, height: int, unit: float) -> Mask:
    """Tracks that are the level part of a curve: beyond an end their ink goes on and leaves the straight way faster and faster.

    A parabola is 9/4 times as far off in the third strip as in the second, then 16/9 times; letters behind a line's end stand in one
    strip, or at one height.
    """
    tracks, xs = fitted.tracks, fitted.tracks.x
    guess = np.rint(fitted.place(xs)).astype(np.intp)
    ends = fitted.span()
    reach = max(round(14 * unit), 6)
    out = np.zeros(len(fitted.scatter), bool)
    for k in range(len(out)):
        nodes = np.flatnonzero(fitted.seen[k])
        usual = float(np.median(tracks.response[np.rint(tracks.y[k, nodes]).astype(np.intp), nodes]))
        for end, way in ((int(ends[0][k]), -1), (int(ends[1][k]), 1)):
            off = []
            for column in range(end + 2 * way, end + 5 * way, way):
                if not 0 <= column < len(xs) or not reach <= guess[k, column] < height - reach:
                    break
                window = tracks.response[guess[k, column] - reach : guess[k, column] + reach + 1, column]
                if window.max() < 0.5 * usual:
                    break
                off.append(float(np.argmax(window) - reach))
            for near, far, growth in zip(off[:-1], off[1:], (9 / 4, 16 / 9), strict=False):
                out[k] |= abs(near) > 1.2 * unit and 0.65 * growth < far / near < 1.45 * growth
    return out


def _extended(fitted: Fitted, height: int, unit: float, horizontal: bool) -> list[PrintedLine]:
    """The lines, each carried on beyond its track as far as there is ridge: a curve lying along a line often hides its beginning."""
    tracks = fitted.tracks
    strip, xs, width = tracks.strip_px, tracks.x, fitted.width
    first, last = fitted.span()
    rows = np.rint(np.where(fitted.seen, tracks.y, 0.0)).astype(np.intp)
    columns = np.arange(len(xs))
    strength = _masked_median(tracks.response[rows, columns[None, :]].astype(np.float64), fitted.seen)
    gate = max(1, round(1.5 * unit))
    best = cv2.dilate(tracks.response, np.ones((2 * gate + 1, 1), np.uint8))
    guess = np.rint(fitted.place(xs)).astype(np.intp)
    on_page = (guess >= gate) & (guess < height - gate)
    there = on_page & (best[np.clip(guess, 0, height - 1), columns[None, :]] > 0.35 * strength[:, None])
    out = []
    for k in range(len(strength)):
        low, high = _reach(there[k], on_page[k], int(first[k]), -1), _reach(there[k], on_page[k], int(last[k]), 1)
        # Half a strip beyond the outer strips' middles; the removal step trims to where ink really is.
        start, stop = max(xs[low] - strip / 2, 0), min(xs[high] + strip / 2, width - 1)
        dense = np.r_[np.arange(start, stop - 0.5, max(strip // 4, 1), dtype=float), stop]
        line = fitted.keep(np.arange(len(strength)) == k).place(dense[None, :])[0]
        if line.min() >= 0 and line.max() <= height - 1:
            out.append(PrintedLine(horizontal, dense, line, float(strength[k]), 0.0, float(fitted.scatter[k])))
    return out


def _reach(there: Mask, on_page: Mask, at: int, way: int) -> int:
    """The last strip of a line going ``way`` from strip ``at``: it may miss two strips, not three, and not leave the page."""
    reached, missed = at, 0
    while missed < 3:
        at += way
        if not 0 <= at < len(there) or not on_page[at]:
            break
        if there[at]:
            reached, missed = at, 0
        else:
            missed += 1
    return reached
