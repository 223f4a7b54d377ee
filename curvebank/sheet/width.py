"""Typical width of the curves drawn on a sheet: the scale of every search window."""

import cv2
import numpy as np
import numpy.typing as npt

Bytes = npt.NDArray[np.uint8]
Floats = npt.NDArray[np.float64]
Mask = npt.NDArray[np.bool_]

INKED = (96, 45)
"""Ink from which a pixel counts as drawn: the second where the first leaves too little."""
EDGE_PX = 0.45
"""Blur of print and scanner: strokes read this much wider than they are where they are cut at half their ink."""
UNKNOWN = 3.0
"""Width [px] taken where there are no lines."""
COARSE_FROM = 4.5
"""Lines at least this wide [px] are measured on the page at half size, where noise has averaged out."""
COMPACT = 0.2
"""Ink over the square of its extent: letters and blots have more, strokes less."""
TILE_PX, TILES = 512, 8
"""Side and number of the pieces of a large page that are looked at."""
BINS = np.exp(np.linspace(np.log(0.7), np.log(40.0), 58))


def line_width(ink: Bytes) -> float:
    """Width [px] that most length of drawn curves has, on ink 0..255; specks, letters and blots do not count.

    Curves lean and printed lines do not, so leaning strokes are asked first.
    """
    half = np.asarray(cv2.resize(ink, None, fx=0.5, fy=0.5, interpolation=cv2.INTER_AREA), dtype=np.uint8)
    for level in INKED:
        (coarse, coarse_leans), (fine, fine_leans) = _strokes(half, level), _strokes(ink, level)
        for wide, narrow in ((coarse[coarse_leans], fine[fine_leans]), (coarse, fine)):
            found = _commonest(wide)
            if found is not None and 2 * found >= COARSE_FROM:
                found = 2 * found
            else:
                found = _commonest(narrow)
            if found is not None:
                # In steps of a tenth: the windows of two scans of one drawing are the same.
                return round(float(np.clip(found - EDGE_PX, 0.8, 20.0)), 1)
    return UNKNOWN


def _tiles(ink: Bytes) -> list[Bytes]:
    """Pieces spread over the page, of those that have some ink and are not mostly ink."""
    height, width = ink.shape
    if height * width <= TILES * TILE_PX**2:
        return [ink]
    rows, columns = max(height // TILE_PX, 1), max(width // TILE_PX, 1)
    share = np.asarray(cv2.resize(ink, (columns, rows), interpolation=cv2.INTER_AREA), dtype=np.float64) / 255
    fair = np.flatnonzero((share.ravel() > 0.004) & (share.ravel() < 0.4))
    if not len(fair):
        fair = np.arange(rows * columns)
    picked = fair[np.unique(np.linspace(0, len(fair) - 1, TILES).astype(int))]
    high, wide = height // rows, width // columns
    corners = [(k // columns * high, k % columns * wide) for k in picked]
    return [ink[y : y + TILE_PX, x : x + TILE_PX] for y, x in corners]


def _strokes(ink: Bytes, level: int) -> tuple[Floats, Mask]:
    """Width across the stroke [px] at the pixels of long thin pieces of ink, and which of them lean."""
    widths, leans = [], []
    for part in _tiles(ink):
        drawn = (part > level).view(np.uint8)
        drawn = _long(np.asarray(cv2.morphologyEx(drawn, cv2.MORPH_CLOSE, np.ones((3, 3), np.uint8)), dtype=np.uint8))
        across = _runs(drawn)
        down = np.ascontiguousarray(_runs(np.ascontiguousarray(drawn.T)).T)
        place = np.flatnonzero(drawn)
        h, v = across.reshape(-1)[place].astype(np.float64), down.reshape(-1)[place].astype(np.float64)
        leaning = np.zeros_like(drawn)
        leaning.reshape(-1)[place] = np.maximum(h, v) < 12 * np.minimum(h, v)
        # Without the lines that run with the page, pieces of them and their crossings fall apart.
        leans.append(_long(leaning).reshape(-1)[place] > 0)
        # A stroke of width w at an angle a has runs w / sin a across and w / cos a down.
        widths.append(h * v / np.hypot(h, v))
    return np.concatenate(widths), np.concatenate(leans)


def _long(drawn: Bytes) -> Bytes:
    """The pieces (0 or 1) that are long and thin."""
    _, label, stats, _ = cv2.connectedComponentsWithStats(drawn, connectivity=8, ltype=cv2.CV_32S)
    extent = np.hypot(stats[:, cv2.CC_STAT_WIDTH], stats[:, cv2.CC_STAT_HEIGHT])
    stroke = (extent >= 14) & (stats[:, cv2.CC_STAT_AREA] <= COMPACT * extent**2)
    stroke[0] = False
    return np.asarray(stroke.view(np.uint8)[label])


def _commonest(width: Floats) -> float | None:
    """The commonest width by length; None where there is too little to go by."""
    counts = np.histogram(width, BINS, weights=1.0 / np.maximum(width, 0.5))[0]
    if counts.sum() < 150:
        return None
    smooth = np.convolve(counts, [0.1, 0.2, 0.4, 0.2, 0.1], "same")
    top = int(smooth.argmax())
    near = width[(width > BINS[max(top - 2, 0)]) & (width < BINS[min(top + 3, len(BINS) - 1)])]
    return float(len(near) / (1.0 / near).sum())


def _runs(drawn: Bytes) -> npt.NDArray[np.uint16]:
    """Length of the run along its row that each drawn pixel belongs to."""
    height, width = drawn.shape
    padded = np.zeros((height, width + 1), np.int8)
    padded[:, :width] = drawn
    edges = np.flatnonzero(np.diff(padded.reshape(-1), prepend=0))
    lengths = edges[1::2] - edges[::2]
    out = np.zeros((height, width), np.uint16)
    out[drawn.view(bool)] = np.repeat(np.minimum(lengths, 60000), lengths)
    return out
