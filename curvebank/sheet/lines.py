"""Find the long straight lines printed on a sheet: grid, axes, frames, tables; skewed, curled, broken or dashed.

The page is cut into strips along the line direction. In each strip the mean of the negative second derivative across gives
ridges at several slopes; ridges are linked from strip to strip, and tracks that do not run with the rest of the page (a flat
curve) are dropped because their slope differs from a smooth field fitted to all tracks.
"""

from dataclasses import dataclass

import cv2
import numpy as np
import numpy.typing as npt

Bytes = npt.NDArray[np.uint8]
Floats = npt.NDArray[np.float64]

CELLS = 8
"""Cells a strip; slopes are searched by shifting cells against each other."""
SLOPES = np.arange(-0.075, 0.0751, 0.015)
"""Slopes tried [px/px]: about +-4.3 degrees, fine enough to smear a strip by less than half a pixel."""


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


def find_lines(ink: Bytes, unit: float) -> tuple[list[PrintedLine], list[PrintedLine]]:
    """Horizontal and vertical lines of a page of ink 0..255; ``unit`` is the page's scale (1 for 3 px lines)."""
    across = _family(ink, unit)
    down = _family(np.ascontiguousarray(ink.T), unit)
    return ([_line(t, True) for t in across], [_line(t, False) for t in down])


def _line(track: tuple[Floats, Floats, float, float], horizontal: bool) -> PrintedLine:
    x, y, weight, sigma = track
    return PrintedLine(horizontal, x, y, weight, 0.0, sigma)


def _family(ink: Bytes, unit: float) -> list[tuple[Floats, Floats, float, float]]:
    """Tracks (x, y, contrast, scatter) of near-horizontal lines."""
    cell = max(4, round(8 * unit))
    response, slope, floor = _ridges(ink, cell, 1.2 * max(unit, 0.7))
    strip = cell * CELLS
    tracks = _link(response, slope, floor, strip, unit)
    width = ink.shape[1]
    kept = []
    for x, y, r in tracks:
        span = x[-1] - x[0] + strip
        if span < max(0.10 * width, 4.5 * strip) or len(x) < 0.6 * span / strip:
            continue
        fit = _robust_poly(x, y, width)
        if fit is None or fit[1] > 0.6 * max(unit, 0.7):
            continue
        kept.append((x, y, r, fit[0], fit[1]))
    return _with_field(kept, response, ink.shape, strip, unit)


def _ridges(ink: Bytes, cell: int, sigma: float) -> tuple[npt.NDArray[np.float32], npt.NDArray[np.float32], float]:
    """Best ridge response [H, strips] over slopes, that slope, and the level below which it is noise."""
    height, width = ink.shape
    strips = max(width // (cell * CELLS), 1)
    used = strips * cell * CELLS
    if used > width:
        used, cell = width, max(width // CELLS, 1)
    cells = cv2.resize(ink[:, :used], (strips * CELLS, height), interpolation=cv2.INTER_AREA).astype(np.float32) / 255.0
    smooth = cv2.GaussianBlur(cells, (1, 0 or int(6 * sigma) | 1), 1e-6, sigmaY=sigma)
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


def _link(
    response: npt.NDArray[np.float32], slope: npt.NDArray[np.float32], floor: float, strip: int, unit: float
) -> list[tuple[Floats, Floats, Floats]]:
    height, strips = response.shape
    reach = max(1, round(3 * unit))
    peak = (response >= cv2.dilate(response, np.ones((2 * reach + 1, 1), np.uint8))) & (response > floor)
    peak[:2] = peak[-2:] = False
    open_tracks: list[list[tuple[int, float, float]]] = []
    done: list[list[tuple[int, float, float]]] = []
    last: list[int] = []
    for k in range(strips):
        rows = np.flatnonzero(peak[:, k])
        a, b, c = response[rows - 1, k], response[rows, k], response[rows + 1, k]
        y = rows + np.clip(0.5 * (a - c) / np.minimum(a - 2 * b + c, -1e-9), -0.5, 0.5)
        tilt = slope[rows, k]
        taken = np.zeros(len(rows), bool)
        order = np.argsort([-len(t) for t in open_tracks], kind="stable")
        for t in order:
            track = open_tracks[t]
            gap = k - last[t]
            if len(track) >= 3:
                back = track[max(-len(track), -6)]
                rate = (track[-1][1] - back[1]) / (track[-1][0] - back[0])
            else:
                rate = track[-1][2]
            guess = track[-1][1] + rate * gap
            gate = (1.6 if len(track) >= 3 else 2.2) * max(unit, 0.8)
            i = int(np.searchsorted(y, guess))
            near = [j for j in (i - 1, i) if 0 <= j < len(y) and not taken[j] and abs(y[j] - guess) < gate]
            if near:
                j = min(near, key=lambda j: abs(y[j] - guess))
                taken[j] = True
                track.append((k, float(y[j]), float(tilt[j]) * strip))
                last[t] = k
        keep = [t for t in range(len(open_tracks)) if k - last[t] <= 3]
        done += [open_tracks[t] for t in range(len(open_tracks)) if k - last[t] > 3 and len(open_tracks[t]) >= 4]
        open_tracks, last = [open_tracks[t] for t in keep], [last[t] for t in keep]
        for fresh in np.flatnonzero(~taken):
            open_tracks.append([(k, float(y[fresh]), float(tilt[fresh]) * strip)])
            last.append(k)
    done += [t for t in open_tracks if len(t) >= 4]
    out = []
    for track in done:
        nodes = np.array(track)
        x = nodes[:, 0] * strip + (strip - 1) / 2
        out.append((x, nodes[:, 1], response[np.rint(nodes[:, 1]).astype(int), nodes[:, 0].astype(int)].astype(float)))
    return out


def _robust_poly(x: Floats, y: Floats, width: int) -> tuple[Floats, float] | None:
    """A cubic (a parabola or straight line for short tracks) by Tukey weights: coefficients in t = 2 x / width - 1, scatter."""
    t = 2 * x / width - 1
    degree = 3 if len(x) >= 10 else 2 if len(x) >= 7 else 1
    basis = np.polynomial.polynomial.polyvander(t, degree)
    weight = np.ones(len(x))
    coefficients: Floats = np.zeros(degree + 1)
    scale = np.inf
    for _ in range(6):
        coefficients = np.linalg.lstsq(basis * weight[:, None], y * weight, rcond=None)[0].astype(np.float64)
        miss = y - basis @ coefficients
        scale = 1.4826 * float(np.median(np.abs(miss))) + 0.02
        weight = np.sqrt(np.maximum(1 - (miss / (5 * scale)) ** 2, 0) ** 2)
        if (weight > 0).sum() <= degree + 1:
            return None
    return coefficients, scale


def _with_field(
    tracks: list[tuple[Floats, Floats, Floats, Floats, float]],
    response: npt.NDArray[np.float32],
    shape: tuple[int, ...],
    strip: int,
    unit: float,
) -> list[tuple[Floats, Floats, float, float]]:
    """Keep the tracks whose direction agrees with a smooth field of directions over the page."""
    height, width = shape[:2]
    if not tracks:
        return []
    x = np.concatenate([t[0] for t in tracks])
    y = np.concatenate([t[1] for t in tracks])
    owner = np.repeat(np.arange(len(tracks)), [len(t[0]) for t in tracks])
    slope = np.concatenate(
        [np.polynomial.polynomial.polyval(2 * t[0] / width - 1, np.polynomial.polynomial.polyder(t[3])) * 2 / width for t in tracks]
    )
    u, v = 2 * x / width - 1, 2 * y / height - 1
    terms = np.stack([np.ones_like(u), u, v, u * u, u * v, v * v], 1)
    if len(tracks) < 4:
        terms = terms[:, :1]
    elif len(tracks) < 8:
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
    out = []
    for k, (tx, ty, strength, coefficients, scatter) in enumerate(tracks):
        mine = field[owner == k]
        drift = np.r_[0.0, np.cumsum(np.diff(tx) * 0.5 * (mine[1:] + mine[:-1]))]
        off = ty - drift
        off = off - np.median(off)
        if 1.4826 * np.median(np.abs(off)) > 1.0 * max(unit, 0.7) + 0.0012 * (tx[-1] - tx[0]):
            continue
        low, high = (_reach(response, tx, coefficients, float(np.median(strength)), strip, width, unit, way) for way in (-1, 1))
        # Half a strip beyond the outer strips' middles; the removal step trims to where ink really is.
        first, last = max(low - strip / 2, 0), min(high + strip / 2, width - 1)
        dense = np.unique(np.r_[np.arange(first, last + 1, max(strip // 4, 1), dtype=float), last])
        line = _continued(dense, tx, coefficients, width)
        if line.min() < 0 or line.max() > height - 1:
            continue
        out.append((dense, line, float(np.median(strength)), scatter))
    return out


def _continued(x: Floats, track_x: Floats, coefficients: Floats, width: int) -> Floats:
    """The track's polynomial over its own strips, straight beyond them."""
    poly = np.polynomial.polynomial
    inner = np.clip(x, track_x[0], track_x[-1])
    slope = poly.polyval(2 * inner / width - 1, poly.polyder(coefficients)) * 2 / width
    return poly.polyval(2 * inner / width - 1, coefficients) + slope * (x - inner)


def _reach(
    response: npt.NDArray[np.float32], track_x: Floats, coefficients: Floats, strength: float, strip: int, width: int, unit: float, way: int
) -> float:
    """How far the line goes on beyond its track, strip by strip: a curve lying along a line often hides its beginning."""
    at = float(track_x[0] if way < 0 else track_x[-1])
    reached, missed = at, 0
    gate = max(1, round(1.5 * unit))
    while missed < 3:
        at += way * strip
        column = int(at // strip)
        if not 0 <= column < response.shape[1] or at < 0:
            break
        y = int(round(float(_continued(np.array([at]), track_x, coefficients, width)[0])))
        if not gate <= y < response.shape[0] - gate:
            break
        if response[y - gate : y + gate + 1, column].max() > 0.35 * strength:
            reached, missed = at, 0
        else:
            missed += 1
    return reached
