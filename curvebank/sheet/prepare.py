"""Prepare a sheet once: ink 0..1 levelled, printed lines found and taken out, the scale of the drawing. Pure, and cacheable as arrays."""

from collections.abc import Callable
from dataclasses import dataclass
from typing import Any

import cv2
import numpy as np
import numpy.typing as npt

from . import ink as levels
from .lines import PrintedLine, find_lines
from .load import Sheet
from .removal import remove_lines
from .width import line_width

ALGORITHM = "ribbon-4"
"""Name of the preparation; changes when its output would, so that cached arrays are never mixed."""

DENSE = 0.6
"""Share of the ink in printed lines from which the width of curves is measured once more without them."""
Progress = Callable[[float, str], Any]
Bytes = npt.NDArray[np.uint8]

cv2.setNumThreads(1)  # one environment must repeat itself to the bit
cv2.ocl.setUseOpenCL(False)


@dataclass(frozen=True, kw_only=True, slots=True, eq=False)
class Prepared:
    """A sheet ready for axes and traces; all images are 0 (paper) to 255 (full ink), read-only.

    ``ink`` [h, w]; ``clean`` is ink without printed lines; ``printed`` the modelled ink of those lines; ``colour`` [h, w, 3] the ink
    of each channel (red, green, blue) or None for a grey sheet. ``width_px`` is the typical width of a line on the sheet.
    ``masked`` [h, w] is True where a mask hides what is printed (not known, not paper), or None where nothing is masked.
    """

    ink: Bytes
    clean: Bytes
    printed: Bytes
    colour: Bytes | None
    lines: tuple[PrintedLine, ...]
    width_px: float
    light_on_dark: bool
    masked: npt.NDArray[np.bool_] | None = None

    @property
    def shape(self) -> tuple[int, int]:
        """Height and width [px]."""
        return self.ink.shape[0], self.ink.shape[1]

    @property
    def unit(self) -> float:
        """Scale of the drawing: 1 where lines are 3 px wide."""
        return unit_of(self.width_px)

    def arrays(self) -> dict[str, npt.NDArray[Any]]:
        """Everything as plain arrays, to be kept as one ``.npy`` file each."""
        table = [(ln.horizontal, len(ln.along), ln.weight, ln.width_px, ln.sigma_px) for ln in self.lines]
        out: dict[str, npt.NDArray[Any]] = {
            "ink": self.ink, "clean": self.clean, "printed": self.printed,
            "line_table": np.array(table, dtype=np.float64).reshape(-1, 5),
            "line_points": np.concatenate([np.stack([ln.along, ln.across], 1) for ln in self.lines]) if self.lines else np.zeros((0, 2)),
            "scalars": np.array([self.width_px, float(self.light_on_dark)]),
        }  # fmt: skip
        if self.colour is not None:
            out["colour"] = self.colour
        if self.masked is not None:
            out["masked"] = self.masked
        return out

    @classmethod
    def from_arrays(cls, arrays: dict[str, npt.NDArray[Any]]) -> "Prepared":
        """The inverse of ``arrays``; memory-mapped images stay mapped."""
        table, points = arrays["line_table"], arrays["line_points"]
        stops = np.cumsum(table[:, 1]).astype(int)
        lines = []
        for row, stop in zip(table, stops, strict=True):
            part = points[stop - int(row[1]) : stop]
            lines.append(PrintedLine(bool(row[0]), np.array(part[:, 0]), np.array(part[:, 1]), float(row[2]), float(row[3]), float(row[4])))
        return cls(
            ink=arrays["ink"], clean=arrays["clean"], printed=arrays["printed"], colour=arrays.get("colour"), lines=tuple(lines),
            width_px=float(arrays["scalars"][0]), light_on_dark=bool(arrays["scalars"][1]),
            masked=arrays.get("masked"),
        )  # fmt: skip


def unit_of(width_px: float) -> float:
    """Scale of search windows from a line width."""
    return float(np.clip(width_px / 3.0, 0.5, 3.0))


def prepare(sheet: Sheet, *, progress: Progress | None = None) -> Prepared:
    """Level the ink of a sheet, find its printed lines and take them out. ``progress(share, text)`` may raise Cancelled."""
    tell = progress or (lambda share, text: None)
    tell(0.0, "Levelling the paper")
    pixels = sheet.pixels
    grey = pixels if pixels.ndim == 2 else np.asarray(cv2.cvtColor(pixels, cv2.COLOR_RGB2GRAY), dtype=np.uint8)
    light = levels.is_light_on_dark(grey)
    if light:
        pixels, grey = 255 - pixels, 255 - grey
    colour: Bytes | None = None
    if pixels.ndim == 2:
        dark = levels.darkness(grey)
        ink = levels.to_bytes(dark, levels.ink_scale(dark))
    else:
        channels = [levels.darkness(np.ascontiguousarray(pixels[..., c])) for c in range(3)]
        scale = max(levels.ink_scale(c) for c in channels)
        colour = np.stack([levels.to_bytes(c, scale) for c in channels], axis=2)
        # The darkest channel shows a curve of any one colour; each trace later weighs the channels for its own ink.
        ink = colour.max(axis=2)
        if not _is_coloured(colour):
            colour = None
    turned = np.asarray(cv2.transpose(ink), dtype=np.uint8)
    width = line_width(ink)
    unit = unit_of(width)
    tell(0.35, "Finding printed lines")
    lines = find_lines(ink, turned, unit)
    tell(0.75, "Taking printed lines out")
    clean, printed, measured = remove_lines(ink, turned, lines, unit)
    if np.count_nonzero(printed[::4, ::4] > 26) > DENSE * np.count_nonzero(ink[::4, ::4] > 26):
        width = line_width(clean)
    tell(1.0, "Prepared")
    for a in (ink, clean, printed, colour):
        if a is not None:
            a.setflags(write=False)
    return Prepared(ink=ink, clean=clean, printed=printed, colour=colour, lines=tuple(measured), width_px=width, light_on_dark=light)


def _is_coloured(colour: Bytes) -> bool:
    """False where the three channels tell the same (a grey page saved as colour, up to compression noise)."""
    thin = colour[::4, ::4].astype(np.int16)
    spread = thin.max(axis=2) - thin.min(axis=2)
    inked = thin.max(axis=2) > 80
    return bool(inked.sum() > 50 and np.percentile(spread[inked], 95) > 40)
