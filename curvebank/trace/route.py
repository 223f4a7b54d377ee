"""Second-order dynamic programming through a band: the path remembers its direction, so it goes straight over crossings.

A path is a chain of straight segments, each over the same number of rows. State: offset at the segment's end and the
columns it moved in the segment (its slope). Cost of a segment: how little of it is line-like, saturating so that a dashed line
counts as a full one; cost of a joint: the square of the change in slope.
"""

import numpy as np
import numpy.typing as npt

from ..records import FloatArray

Floats32 = npt.NDArray[np.float32]
FULL = 0.55
"""Share of line-like rows from which a segment counts as fully inked."""
FORBIDDEN = np.float32(1e6)


def segment_costs(likeness: Floats32, segments: int, reach: int) -> Floats32:
    """Cost [2 reach + 1, segments, offsets] of each straight segment from every offset, for every move -reach..reach."""
    rows, width = likeness.shape
    per = rows // segments
    blocks = likeness[: per * segments].reshape(segments, per, width)
    padded = np.pad(blocks, ((0, 0), (0, 0), (reach, reach)))
    rows_first = np.ascontiguousarray(padded.transpose(1, 0, 2))
    out = np.empty((2 * reach + 1, segments, width), np.float32)
    middle = (np.arange(per) + 0.5) / per
    for move in range(-reach, reach + 1):
        shifts = np.rint(move * middle).astype(int) + reach
        total = np.zeros((segments, width), np.float32)
        for j, shift in enumerate(shifts):
            total += rows_first[j, :, shift : shift + width]
        out[move + reach] = total
    out *= np.float32(1 / per)
    full = np.minimum(out * np.float32(1 / FULL), np.float32(1))
    out *= np.float32(-0.08)
    out -= full
    out += np.float32(1)
    return out


def best_path(
    costs: Floats32, bend: float, turn: int, pulls: dict[int, Floats32], slope_pull: float = 0.0
) -> tuple[npt.NDArray[np.intp], npt.NDArray[np.intp], float]:
    """Cheapest path: offsets index at each of segments + 1 nodes, moves of each segment, total cost.

    ``bend`` weighs (change of move)^2, at most ``turn`` columns a joint; ``pulls`` are costs [offsets] at given nodes.
    """
    moves, segments, width = costs.shape
    reach = moves // 2
    penalties = (bend * np.arange(-turn, turn + 1) ** 2).astype(np.float32)
    # Row m of the state moves m - reach columns: gather index that carries a start offset to its end offset.
    starts = np.arange(width)[None, :] - (np.arange(moves)[:, None] - reach)
    valid = (starts >= 0) & (starts < width)
    flat = np.where(valid, starts, 0) + np.arange(moves)[:, None] * width
    blocked = np.where(valid, np.float32(0), FORBIDDEN)
    first = pulls.get(0, np.zeros(width, np.float32))
    entry = np.broadcast_to(first, (moves, width)).astype(np.float32)
    if slope_pull:
        entry = entry + np.float32(slope_pull) * ((np.arange(moves) - reach)[:, None] ** 2).astype(np.float32)
    history = np.empty((segments, moves, width), np.float32)
    padded = np.full((moves + 2 * turn, width), FORBIDDEN, np.float32)
    trial = np.empty((moves, width), np.float32)
    for k in range(segments):
        arrive = (entry + costs[:, k, :]).ravel()[flat] + blocked
        if k + 1 in pulls:
            arrive = arrive + pulls[k + 1]
        history[k] = arrive
        padded[turn : turn + moves] = arrive
        entry = padded[turn : turn + moves].copy()
        for d in range(2 * turn + 1):
            if d != turn:
                np.add(padded[d : d + moves], penalties[d], out=trial)
                np.minimum(entry, trial, out=entry)
    end = int(np.argmin(history[-1]))
    move, offset = divmod(end, width)
    total = float(history[-1][move, offset])
    nodes = np.empty(segments + 1, np.intp)
    path_moves = np.empty(segments, np.intp)
    nodes[segments] = offset
    for k in range(segments - 1, -1, -1):
        path_moves[k] = move - reach
        offset = int(np.clip(offset - (move - reach), 0, width - 1))
        nodes[k] = offset
        if k:
            low, high = max(move - turn, 0), min(move + turn + 1, moves)
            options = history[k - 1][low:high, offset] + penalties[low - move + turn : high - move + turn]
            move = low + int(np.argmin(options))
    return nodes, path_moves, total


def click_pull(offsets: FloatArray, at: float, spread: float, weight: float = 0.25) -> Floats32:
    """Soft pull towards a click at offset ``at`` [px]: weight (d / spread)^2, forbidden beyond three spreads."""
    d = (offsets - at) / spread
    return np.where(np.abs(d) <= 3.0, weight * d**2, FORBIDDEN).astype(np.float32)
