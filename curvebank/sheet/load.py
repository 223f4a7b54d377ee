"""Scan files to arrays: one door for images (Pillow) and PDF pages (pypdfium2), with limits and clear errors.

Pixels are those of the decoded page after EXIF turn and the recipe's own ``turn``; nothing else moves them. The identity of a
sheet is the SHA-256 of its file and a page number.
"""

import hashlib
import io
import warnings
from dataclasses import dataclass
from typing import Any

import numpy as np
import numpy.typing as npt
from PIL import Image, ImageOps, UnidentifiedImageError

from ..errors import SheetError
from ..records import PageInfo

TURNS = (0, 90, 180, 270)
MAGIC = (b"\x89PNG", b"\xff\xd8\xff", b"II*\x00", b"MM\x00*", b"BM", b"GIF8", b"RIFF", b"II+\x00", b"MM\x00+", b"\x00\x00\x00\x0cjP")
"""First bytes of the image formats people scan to: tells a damaged scan from a file that never was one."""


@dataclass(frozen=True, kw_only=True, slots=True)
class Limits:
    """What is still read: bytes of the file, pixels of the decoded page, its longest side [px] and the resolution asked of a PDF."""

    file_bytes: int = 500_000_000
    pixels: int = 160_000_000
    side_px: int = 32_000
    min_side_px: int = 16
    dpi: tuple[float, float] = (36.0, 1200.0)


LIMITS = Limits()


@dataclass(frozen=True, kw_only=True, slots=True, eq=False)
class Sheet:
    """One decoded page: ``pixels`` uint8, height x width (grey) or height x width x 3 (RGB), read-only, and what is known of it."""

    pixels: npt.NDArray[np.uint8]
    info: PageInfo


def load(data: bytes, *, page: int = 1, dpi: float = 300, turn: int = 0, limits: Limits = LIMITS) -> Sheet:
    """Decode one page of a scan.

    Parameters
    ----------
    data : the whole file.
    page : 1-based page of a multi-page TIFF or PDF.
    dpi : resolution [1/inch] at which a PDF page is drawn; images ignore it.
    turn : 0, 90, 180 or 270 degrees clockwise, after the turn that the file itself asks for.

    Raises SheetError with code ``not-an-image``, ``truncated``, ``too-large``, ``encrypted``, ``no-such-page`` or ``turn``.
    """
    if turn not in TURNS:
        raise SheetError(f"Turn is {turn}. It must be 0, 90, 180 or 270 degrees clockwise.", code="turn")
    if not data:
        raise SheetError("The file is empty. Add the scan again.", code="not-an-image")
    if len(data) > limits.file_bytes:
        raise SheetError(
            f"The file has {len(data) / 1e6:.0f} MB, the limit is {limits.file_bytes / 1e6:.0f} MB. Save a single page of it.",
            code="too-large",
        )
    resolution: tuple[float | None, float | None]
    if b"%PDF-" in data[:1024]:
        from .pdf import render_page

        pixels, pages = render_page(data, page, dpi, limits)
        media, resolution = "application/pdf", (float(dpi), float(dpi))
    else:
        pixels, pages, media, resolution = _image(data, page, limits)
    if turn:
        pixels = np.rot90(pixels, -(turn // 90))
        resolution = resolution if turn == 180 else resolution[::-1]
    pixels = np.ascontiguousarray(pixels)
    pixels.setflags(write=False)
    height, width = pixels.shape[:2]
    info = PageInfo(
        sha256=hashlib.sha256(data).hexdigest(), page=page, width=width, height=height,
        dpi_x=resolution[0], dpi_y=resolution[1], media=media, turn=turn, pages=pages,
    )  # fmt: skip
    return Sheet(pixels=pixels, info=info)


def check_size(width: float, height: float, limits: Limits) -> None:
    """Refuse a page before it is decoded."""
    if width * height > limits.pixels or max(width, height) > limits.side_px:
        raise SheetError(
            f"The page is {width:.0f} x {height:.0f} pixels; "
            f"at most {limits.pixels / 1e6:.0f} million pixels and {limits.side_px} a side are read. "
            "Scan at 300 dpi, or crop to the chart.",
            code="too-large",
        )
    if min(width, height) < limits.min_side_px:
        raise SheetError(f"The page is only {width:.0f} x {height:.0f} pixels. Scan the chart at 150 dpi or more.", code="not-an-image")


def check_page(page: int, pages: int) -> None:
    """Refuse a page number that the file does not have."""
    if not 1 <= page <= pages:
        has = "one page" if pages == 1 else f"{pages} pages"
        raise SheetError(f"There is no page {page}: the file has {has}.", code="no-such-page")


def _image(data: bytes, page: int, limits: Limits) -> tuple[Any, int, str, tuple[float | None, float | None]]:
    with warnings.catch_warnings():
        # Pillow warns about large pages and odd metadata; the limits below decide instead.
        warnings.simplefilter("ignore")
        try:
            picture = Image.open(io.BytesIO(data))
            check_size(*picture.size, limits)
            pages = int(getattr(picture, "n_frames", 1))
            check_page(page, pages)
            if page > 1:
                picture.seek(page - 1)
                check_size(*picture.size, limits)
            media = Image.MIME.get(picture.format or "", "image/unknown")
            resolution = _resolution(picture)
            white_is_zero = picture.format == "TIFF" and picture.tag_v2.get(262) == 0  # type: ignore[attr-defined]
            picture.load()
            before = picture.getexif().get(0x0112, 1)
            turned = ImageOps.exif_transpose(picture)
            if before in (5, 6, 7, 8):
                resolution = resolution[::-1]
            pixels = to_uint8(turned, white_is_zero)
        except SheetError:
            raise
        except Image.DecompressionBombError:
            raise SheetError(
                f"The page has more pixels than can be read (limit {limits.pixels / 1e6:.0f} million). "
                "Scan at 300 dpi, or crop to the chart.",
                code="too-large",
            ) from None
        except UnidentifiedImageError:
            if data.startswith(MAGIC):
                raise SheetError("The file breaks off in its first part. Copy or scan it again.", code="truncated") from None
            raise SheetError("This is not an image or a PDF. Save the scan as PNG, TIFF, JPEG or PDF.", code="not-an-image") from None
        except MemoryError:
            raise SheetError("The page does not fit into memory. Scan at 300 dpi, or crop to the chart.", code="too-large") from None
        except Exception as fault:  # decoders raise OSError, EOFError, SyntaxError, struct.error, zlib.error, ValueError
            raise SheetError(f"The file is damaged or breaks off ({fault}). Copy or scan it again.", code="truncated") from None
    return pixels, pages, media, resolution


def _resolution(picture: Image.Image) -> tuple[float | None, float | None]:
    try:
        x, y = (float(v) for v in picture.info["dpi"])
    except (KeyError, TypeError, ValueError, ZeroDivisionError):
        return None, None
    return (x, y) if 10 <= x <= 10_000 and 10 <= y <= 10_000 else (None, None)


def to_uint8(picture: Image.Image, white_is_zero: bool = False) -> npt.NDArray[np.uint8]:
    """Any Pillow mode as uint8 grey or RGB; transparency lies on white paper; deep greys are scaled, never cut off."""
    mode = picture.mode
    if mode.startswith("I") or mode == "F":
        return _deep_grey(np.asarray(picture), white_is_zero)
    if mode in ("1", "L"):
        return np.array(picture.convert("L"))
    if mode in ("LA", "La", "PA", "RGBA", "RGBa") or "transparency" in picture.info:
        rgba = picture.convert("RGBA")
        paper = Image.new("RGBA", rgba.size, "white")
        picture = Image.alpha_composite(paper, rgba)
    rgb = np.array(picture.convert("RGB"))
    if np.array_equal(rgb[..., 0], rgb[..., 1]) and np.array_equal(rgb[..., 0], rgb[..., 2]):
        return np.ascontiguousarray(rgb[..., 0])
    return rgb


def _deep_grey(values: npt.NDArray[Any], white_is_zero: bool) -> npt.NDArray[np.uint8]:
    grey = values.astype(np.float32)
    top = float(grey.max(initial=0.0))
    if values.dtype.kind == "f":
        low = min(float(grey.min(initial=0.0)), 0.0)
        grey, white = grey - low, max(top - low, 1e-9)
    else:
        # A 16-bit file often holds 10, 12 or 14 bits: white is the full scale of the bits in use.
        white = float(next((2**bits - 1 for bits in (8, 10, 12, 14, 16) if top < 2**bits), max(top, 1.0)))
    scaled = np.clip(np.rint(grey * (255.0 / white)), 0, 255).astype(np.uint8)
    return 255 - scaled if white_is_zero else scaled
