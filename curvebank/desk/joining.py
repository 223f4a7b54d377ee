"""Two halves of a sheet to one scan file: a lossless PNG that says in itself what it was made of."""

import io
from collections.abc import Callable, Sequence
from dataclasses import dataclass
from pathlib import Path
from typing import Any

from PIL import Image, PngImagePlugin

from .. import sheet
from ..errors import OutputError, SheetError
from ..jsonable import clean
from ..sheet.join import Joined as Picture
from ..sheet.join import join as join_pages
from . import files

Progress = Callable[[float, str], Any]


@dataclass(frozen=True, kw_only=True, slots=True, eq=False)
class Joined:
    """The new scan file, and how its halves were found to fit."""

    png: bytes
    report: dict[str, Any]


def join(
    first_bytes: bytes,
    second_bytes: bytes,
    *,
    ties: Sequence[Any] | None = None,
    first_page: int = 1,
    second_page: int = 1,
    dpi: float = 300,
    first_turn: int = 0,
    second_turn: int = 0,
    progress: Progress | None = None,
) -> Joined:
    """Join two scans of one sheet into one PNG.

    Parameters
    ----------
    ties : sequence of ((x1, y1), (x2, y2)), optional
        Points clicked on both scans [px], two or more; needed where the halves share no print.

    Returns
    -------
    Joined
        ``report`` holds ``first_sha256``, ``second_sha256``, ``swapped``, ``ties``, ``found`` ("ink" or "ties"), ``residual_px``,
        ``overlap_px``, ``size``, ``offset`` (where the half that came first lies in the picture) and ``message``.

    Raises
    ------
    SheetError
        A half cannot be read (``path`` says which), or as `sheet.join.join`.
    """
    tell = progress or (lambda share, text: None)
    tell(0.0, "Reading both halves")
    halves = []
    for name, data, page, turn in (("first", first_bytes, first_page, first_turn), ("second", second_bytes, second_page, second_turn)):
        try:
            halves.append(sheet.load(data, page=page, dpi=dpi, turn=turn))
        except SheetError as e:
            e.path = f"$.{name}"
            raise
    made = join_pages(halves[0], halves[1], ties=ties, progress=lambda share, text: tell(0.05 + 0.85 * share, text))
    tell(0.92, "Writing the new scan")
    height, width = made.pixels.shape[:2]
    report = {
        "join": 1,
        "first_sha256": halves[0].info.sha256,
        "second_sha256": halves[1].info.sha256,
        "swapped": made.swapped,
        "ties": 0 if ties is None else len(ties),
        "found": made.found,
        "residual_px": made.residual_px,
        "overlap_px": list(made.overlap),
        "size": [width, height],
        "offset": list(made.offset),
        "message": words(made),
    }
    base = halves[1] if made.swapped else halves[0]
    png = _png(made, report, ties, base.info.dpi_x, base.info.dpi_y)
    tell(1.0, "Joined")
    return Joined(png=png, report=clean(report))


def _png(made: Picture, report: dict[str, Any], ties: Sequence[Any] | None, dpi_x: float | None, dpi_y: float | None) -> bytes:
    """The picture with its provenance in text chunks; no clock, so the same halves give the same file."""
    told = PngImagePlugin.PngInfo()
    told.add_text("Joined from", f"{report['first_sha256']} {report['second_sha256']}")
    told.add_text("Joined by", f"{made.found}{', the second scan first' if made.swapped else ''}")
    told.add_text("Joined map", " ".join(f"{v:.9g}" for v in made.plane[:2].ravel()))
    if ties is not None and len(ties):
        told.add_text("Joined ties", " ".join(f"{a[0]:g},{a[1]:g}:{b[0]:g},{b[1]:g}" for a, b in ties))
    out = io.BytesIO()
    resolution = {"dpi": (dpi_x, dpi_y)} if dpi_x and dpi_y else {}
    Image.fromarray(made.pixels).save(out, "PNG", pnginfo=told, **resolution)  # type: ignore[arg-type]
    return out.getvalue()


def words(made: Picture) -> str:
    """How the halves fit, in a few sentences."""
    height, width = made.pixels.shape[:2]
    text = f"Joined to {width} x {height} px."
    if made.found == "ink":
        text += f" The halves share {made.overlap[0]} x {made.overlap[1]} px and fit within {made.residual_px or 0.0:.2f} px there."
    elif made.residual_px is None:
        text += " They share no print that could be compared: the two ties alone place them, and nothing checks them. Add a third tie."
    else:
        text += f" They share no print that could be compared: the ties alone place them, within {made.residual_px:.1f} px."
    if made.swapped:
        text += " The second scan lies to the left of or above the first, so it came first: places clicked on it stay as they are."
    if any(made.offset):
        text += f" The first scan begins at ({made.offset[0]}, {made.offset[1]}) in the picture."
    return text


def join_files(
    first: Path, second: Path, out: Path, *, ties: Sequence[Any] | None = None, progress: Progress | None = None
) -> dict[str, Any]:
    """Join two scan files into ``out`` (PNG); gives the report.

    Raises
    ------
    CurvebankError
        As `join`; OutputError where ``out`` is one of the halves, is no PNG, or cannot be written.
    """
    if out.suffix.lower() != ".png":
        raise OutputError(f"{out.name} must end in .png: the joined scan is kept without loss.", code="not-png")
    for half in (first, second):
        if out.exists() and half.exists() and out.samefile(half):
            raise OutputError(f"{out} is one of the halves. Give another name.", code="same-file")
    data = []
    for half in (first, second):
        try:
            data.append(half.read_bytes())
        except OSError as e:
            raise SheetError(f"The scan {half.name} cannot be read: {e.strerror or e}.", code="no-such-file") from None
    made = join(*data, ties=ties, progress=progress)
    files.write_bytes(out, made.png)
    return made.report
