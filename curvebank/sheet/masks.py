"""Masks: areas of a sheet where what is printed is not known (a stamp, handwriting, a hole), painted by hand.

A mask says "not known", never "paper": the ink under it is taken away so that nothing is found there, and ``Prepared.masked`` tells
every reader to give such places no weight.
"""

from collections.abc import Mapping, Sequence
from dataclasses import replace
from typing import Any

import cv2
import numpy as np
import numpy.typing as npt

from ..errors import SheetError
from .prepare import Bytes, Prepared

FRACTION_BITS = 4
"""Sub-pixel bits of drawn coordinates."""
SPILL = 0.05
"""How far a point of a mask may lie off the page, as a share of its longer side: a stroke may run over the paper's edge."""


def mask(prepared: Prepared, masks: Sequence[Any]) -> Prepared:
    """The sheet with masks laid over it; the sheet itself where there are none.

    Parameters
    ----------
    masks : sequence of mapping or objects
        ``{"brush": [[x, y], …], "width_px": w}`` or ``{"outline": [[x, y], …]}`` in sheet pixels.

    Returns
    -------
    Prepared
        ``ink``, ``clean``, ``printed`` and ``colour`` are 0 under the masks and ``masked`` is set there. Memory-mapped images stay
        mapped: only pages that a mask touches are copied.

    Raises
    ------
    SheetError
        Code ``mask``: a point of a mask is off the page; ``path`` names it.
    """
    if not masks:
        return prepared
    height, width = prepared.shape
    hidden = np.zeros((height, width), bool) if prepared.masked is None else np.array(prepared.masked)
    names = ("ink", "clean", "printed", "colour")
    images: dict[str, Any] = {name: _own(getattr(prepared, name)) for name in names if getattr(prepared, name) is not None}
    for i, one in enumerate(masks):
        points, width_px = _read(one, i, height, width)
        box = _box(points, width_px, height, width)
        if box is None:
            continue
        area = _painted(points, width_px, box)
        hidden[box] |= area
        for image in images.values():
            image[box][area] = 0
    for array in (hidden, *images.values()):
        array.setflags(write=False)
    return replace(prepared, masked=hidden, **images)


def mask_extent(prepared: Prepared, one: Any, index: int = 0) -> dict[str, Any]:
    """What a mask covers: ``area_px``, ``box`` (x0, y0, x1, y1) or None where it misses the page. Raises SheetError as `mask`."""
    height, width = prepared.shape
    points, width_px = _read(one, index, height, width)
    box = _box(points, width_px, height, width)
    if box is None:
        return {"area_px": 0, "box": None, "error": None}
    rows, columns = box
    area = int(_painted(points, width_px, box).sum())
    return {"area_px": area, "box": [columns.start, rows.start, columns.stop, rows.stop], "error": None}


def under_mask(prepared: Prepared, points: Any) -> npt.NDArray[np.bool_]:
    """Which of the points [n, 2] px lie under a mask."""
    xy = np.asarray(points, dtype=np.float64).reshape(-1, 2)
    out = np.zeros(len(xy), bool)
    if prepared.masked is None or not len(xy):
        return out
    height, width = prepared.shape
    on_page = (xy >= -0.5).all(axis=1) & (xy[:, 0] < width - 0.5) & (xy[:, 1] < height - 0.5)
    at = np.rint(xy[on_page]).astype(int)
    out[on_page] = prepared.masked[at[:, 1], at[:, 0]]
    return out


def _get(one: Any, name: str) -> Any:
    return one.get(name) if isinstance(one, Mapping) else getattr(one, name, None)


def _read(one: Any, index: int, height: int, width: int) -> tuple[npt.NDArray[np.float64], float | None]:
    """Points and, for a brush, its width; a point far off the page is refused."""
    key = "brush" if _get(one, "brush") is not None else "outline"
    points = np.asarray(_get(one, key), dtype=np.float64).reshape(-1, 2)
    spill = SPILL * max(height, width)
    off = (points < -spill) | (points > np.array([width, height]) - 1 + spill) | ~np.isfinite(points)
    for k in np.flatnonzero(off.any(axis=1)):
        x, y = points[k]
        raise SheetError(
            f"Point {k + 1} of mask {index + 1} ({x:.0f}, {y:.0f}) is off the page of {width} x {height} pixels. "
            "Take the mask away or paint it anew on this page.",
            code="mask",
            path=f"$.sheet.masks[{index}].{key}[{k}]",
        )
    return points, float(_get(one, "width_px")) if key == "brush" else None


def _box(points: npt.NDArray[np.float64], width_px: float | None, height: int, width: int) -> tuple[slice, slice] | None:
    """The part of the page a mask can touch, or None where it misses the page."""
    reach = (width_px or 0.0) / 2 + 2
    x0, y0 = np.maximum(np.floor(points.min(axis=0) - reach), 0).astype(int)
    x1, y1 = np.minimum(np.ceil(points.max(axis=0) + reach) + 1, [width, height]).astype(int)
    return (slice(y0, y1), slice(x0, x1)) if x1 > x0 and y1 > y0 else None


def _painted(points: npt.NDArray[np.float64], width_px: float | None, box: tuple[slice, slice]) -> npt.NDArray[np.bool_]:
    """The mask drawn inside its box."""
    rows, columns = box
    canvas = np.zeros((rows.stop - rows.start, columns.stop - columns.start), np.uint8)
    fixed = np.rint((points - [columns.start, rows.start]) * 2**FRACTION_BITS).astype(np.int32)
    if width_px is None:
        cv2.fillPoly(canvas, [fixed[:, None]], 255, cv2.LINE_8, FRACTION_BITS)
        return canvas > 0
    for x, y in fixed:
        cv2.circle(canvas, (int(x), int(y)), int(round(width_px / 2 * 2**FRACTION_BITS)), 255, -1, cv2.LINE_8, FRACTION_BITS)
    if len(fixed) > 1:
        cv2.polylines(canvas, [fixed[:, None]], False, 255, max(int(round(width_px)), 1), cv2.LINE_8, FRACTION_BITS)
    return canvas > 0


def _own(image: Bytes) -> Bytes:
    """A writable copy; a mapped file is mapped anew copy-on-write, so that untouched parts cost no memory."""
    if isinstance(image, np.memmap) and image.filename is not None and image.base is not None and image.flags.c_contiguous:
        mapped = np.memmap(image.filename, dtype=image.dtype, mode="c", offset=image.offset, shape=image.shape)
        return mapped
    return np.array(image)
