"""A way along the ink from click to click where a band along a spline through the clicks cannot hold the line: U shapes, S shapes.

The page round the clicks is reduced until its lines are a pixel or two wide; the crests of its ink become spots a few pixels apart.
A step from spot to spot costs its length, more over paper; two steps in a row cost the square of the turn between them, so the way has
a memory of its direction and goes straight over crossings and gaps. The cheapest way is Dijkstra's over the graph of steps.
"""

from dataclasses import dataclass

import cv2
import numpy as np
import numpy.typing as npt
from scipy.sparse import csr_matrix
from scipy.sparse.csgraph import dijkstra
from scipy.spatial import cKDTree

from ..records import FloatArray

SHORT, ACROSS, LONG = 9.0, 15.0, 30.0
"""Longest step [reduced px] along ink, over a crossing and over a gap."""
SPACING = 3
"""Side of the cells [reduced px] that hold one spot each."""
SHARPEST = np.radians(38.0)
BEND = 300.0
"""Cost of turning: BEND turn^2 / step [reduced px]."""
INK_COST, PAPER_COST = 0.15, 1.15
MOST_SPOTS = 9000


@dataclass(frozen=True, slots=True, eq=False)
class Spots:
    """Crest points [n, 2] of the reduced page (px of it), their unit directions [n, 2] and how sure these are, 0..1."""

    xy: FloatArray
    along: FloatArray
    sure: FloatArray
    like: npt.NDArray[np.float32]


def find_way(
    clean: npt.NDArray[np.uint8], clicks: FloatArray, grain: float, cap: float, spread: float, closed: bool = False, *, again: bool = False
) -> FloatArray | None:
    """A polyline [m, 2] px along the ink through the clicks in their order, or None.

    ``grain`` is the factor the page is reduced by, ``cap`` the ink that counts as full, ``spread`` [px] how far a click may be off;
    ``again`` says that this is the second, coarser try.
    """
    height, width = clean.shape
    span = np.ptp(clicks, axis=0)
    margin = 1.2 * float(span.max()) + 40 * grain
    x0, y0 = np.maximum(np.floor(clicks.min(axis=0) - margin), 0).astype(int)
    x1, y1 = np.minimum(np.ceil(clicks.max(axis=0) + margin), (width - 1, height - 1)).astype(int)
    part = clean[y0:y1, x0:x1]
    if min(part.shape) < 8 * grain:
        return None
    size = (max(int(round(part.shape[1] / grain)), 8), max(int(round(part.shape[0] / grain)), 8))
    scale = np.array([size[0] / part.shape[1], size[1] / part.shape[0]])
    spots = _spots(np.asarray(cv2.resize(part, size, interpolation=cv2.INTER_AREA), dtype=np.uint8), cap)
    if len(spots.xy) > MOST_SPOTS and not again:
        # Speckle: averaged further, noise fades and lines stay.
        return find_way(clean, clicks, 1.7 * grain, 0.7 * cap, spread, closed, again=True)
    if not 2 <= len(spots.xy) <= MOST_SPOTS:
        return None
    local = (clicks - (x0, y0) + 0.5) * scale - 0.5
    way = _through(spots, local, spread / grain, closed)
    return None if way is None else (way + 0.5) / scale - 0.5 + (x0, y0)


def _spots(reduced: npt.NDArray[np.uint8], cap: float) -> Spots:
    """Local crests: where the ink's second derivative across its own direction is strongest."""
    ink = cv2.GaussianBlur(reduced.astype(np.float32) / 255, (0, 0), 1.1)
    xx, yy, xy = (cv2.Sobel(ink, cv2.CV_32F, *order, ksize=3, scale=s) for order, s in (((2, 0), 0.25), ((0, 2), 0.25), ((1, 1), 0.25)))
    middle, half = 0.5 * (xx + yy), np.hypot(0.5 * (xx - yy), xy)
    crest = np.maximum(half - middle, 0)
    other = -middle - half
    like = np.clip(crest / np.float32(0.28 * cap / 0.45), 0, 1)
    turn = 0.5 * np.arctan2(2 * xy, xx - yy)
    # The eigenvector of the most negative curvature points across the line.
    nx, ny = -np.sin(turn), np.cos(turn)
    gy, gx = np.gradient(ink)
    reach = -(gx * nx + gy * ny) / np.minimum(middle - half, -1e-6)
    found = (like > 0.3) & (np.abs(reach) < 0.8)
    rows, columns = np.nonzero(found)
    if not len(rows):
        return Spots(np.zeros((0, 2)), np.zeros((0, 2)), np.zeros(0), like)
    cell = (rows // SPACING) * (reduced.shape[1] // SPACING + 1) + columns // SPACING
    order = np.lexsort((-crest[rows, columns], cell))
    first = order[np.r_[True, np.diff(cell[order]) > 0]]
    rows, columns = rows[first], columns[first]
    step, px, py = reach[rows, columns], nx[rows, columns], ny[rows, columns]
    at = np.stack([columns + step * px, rows + step * py], axis=1).astype(np.float64)
    sure = np.clip(1.5 - 2.5 * np.maximum(other[rows, columns], 0) / np.maximum(crest[rows, columns], 1e-6), 0, 1)
    return Spots(at, np.stack([py, -px], axis=1).astype(np.float64), sure.astype(np.float64), like)


def _steps(spots: Spots) -> tuple[npt.NDArray[np.intp], npt.NDArray[np.intp], FloatArray, FloatArray]:
    """Directed steps: from, to, unit direction [n, 2] and cost without turns; each is followed by its reverse half way on."""
    tree = cKDTree(spots.xy)
    pairs = tree.query_pairs(LONG, output_type="ndarray")
    a, b = pairs[:, 0], pairs[:, 1]
    d = spots.xy[b] - spots.xy[a]
    length = np.hypot(*d.T)
    d = d / np.maximum(length, 1e-9)[:, None]
    off_a, off_b = (np.abs(d[:, 0] * spots.along[k, 1] - d[:, 1] * spots.along[k, 0]) for k in (a, b))
    lean = np.maximum(off_a * spots.sure[a], off_b * spots.sure[b])
    keep = (length >= 2.0) & (lean < np.where(length <= SHORT, 0.5, 0.2))
    a, b, d, length, lean = a[keep], b[keep], d[keep], length[keep], lean[keep]
    share = (np.arange(7) + 0.5) / 7
    x = spots.xy[a, :1] + (spots.xy[b, :1] - spots.xy[a, :1]) * share
    y = spots.xy[a, 1:] + (spots.xy[b, 1:] - spots.xy[a, 1:]) * share
    h, w = spots.like.shape
    inked = spots.like[np.clip(np.rint(y), 0, h - 1).astype(int), np.clip(np.rint(x), 0, w - 1).astype(int)].mean(axis=1)
    inked = np.minimum(inked / 0.75, 1.0)
    # Along ink there are short steps; longer ones lead over crossings, the longest over gaps only.
    keep = np.where(length <= SHORT, (inked > 0.45) | (lean < 0.35), (length <= ACROSS) | (inked < 0.6))
    a, b, d, length, inked, lean = a[keep], b[keep], d[keep], length[keep], inked[keep], lean[keep]
    cost = length * (PAPER_COST - (PAPER_COST - INK_COST) * inked) + 3.0 * lean**2
    return np.r_[a, b], np.r_[b, a], np.vstack([d, -d]), np.r_[cost, cost]


def _graph(spots: Spots) -> tuple[csr_matrix, npt.NDArray[np.intp], npt.NDArray[np.intp], FloatArray] | None:
    """Steps as nodes, joints as edges (cost: the turn and the step that follows)."""
    start, end, way, cost = _steps(spots)
    if not len(start):
        return None
    length = np.hypot(*(spots.xy[end] - spots.xy[start]).T)
    order = np.argsort(start, kind="stable")
    start, end, way, cost, length = start[order], end[order], way[order], cost[order], length[order]
    begin = np.searchsorted(start, np.arange(len(spots.xy) + 1))
    count = (begin[1:] - begin[:-1])[end]
    first = np.repeat(np.arange(len(start)), count)
    second = np.arange(count.sum()) - np.repeat(np.cumsum(count) - count, count) + np.repeat(begin[end], count)
    cos = (way[first] * way[second]).sum(axis=1)
    keep = cos > np.cos(SHARPEST)
    first, second, cos = first[keep], second[keep], cos[keep]
    joint = BEND * 2 * (1 - cos) / (0.5 * (length[first] + length[second])) + cost[second]
    return csr_matrix((joint, (first, second)), shape=(len(start), len(start))), start, end, cost


def _through(spots: Spots, clicks: FloatArray, spread: float, closed: bool) -> FloatArray | None:
    graph = _graph(spots)
    if graph is None:
        return None
    joints, start, end, cost = graph
    steps = len(start)
    stops = np.vstack([clicks, clicks[:1]]) if closed else clicks
    so_far = cost + _pull(spots.xy[end], stops[0], spread)
    legs: list[npt.NDArray[np.intp]] = []
    for stop in stops[1:]:
        open_ = np.flatnonzero(np.isfinite(so_far))
        if not len(open_):
            return None
        base = float(so_far[open_].min())
        # A virtual start that leads to every step a leg may begin with, at what it has cost so far.
        entry = so_far[open_] - base + 1e-6
        whole = csr_matrix(
            (np.r_[joints.data, entry], np.r_[joints.indices, open_], np.r_[joints.indptr, joints.indptr[-1] + len(open_)]),
            shape=(steps + 1, steps + 1),
        )
        distance, before = dijkstra(whole, indices=steps, return_predecessors=True)
        legs.append(before)
        so_far = distance[:steps] + base + _pull(spots.xy[end], stop, spread)
    at = int(np.argmin(so_far))
    if not np.isfinite(so_far[at]):
        return None
    path = [at]
    for before in reversed(legs):
        while before[at] != steps:
            at = int(before[at])
            path.append(at)
    path.reverse()
    points = np.vstack([spots.xy[start[path[0]]], spots.xy[end[path]]])
    return points[np.r_[True, np.hypot(*np.diff(points, axis=0).T) > 0]]


def _pull(points: FloatArray, click: FloatArray, spread: float) -> FloatArray:
    """What a leg costs more for ending away from its click; endless beyond a few spreads."""
    gap = np.hypot(*(points - click).T)
    return np.where(gap < 3.0 * spread + 2.0, 2.0 * (gap / spread) ** 2, np.inf)
