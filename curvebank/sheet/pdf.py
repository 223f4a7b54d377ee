"""One page of a PDF, drawn to pixels by pypdfium2."""

import threading
from typing import Any

import numpy as np
import numpy.typing as npt
import pypdfium2

from ..errors import SheetError
from .load import Limits, check_page, check_size

ONE_AT_A_TIME = threading.Lock()
"""PDFium is not safe to call from two threads at once."""


def render_page(data: bytes, page: int, dpi: float, limits: Limits) -> tuple[npt.NDArray[np.uint8], int]:
    """The page as uint8 grey or RGB on white paper, and the number of pages. ``dpi`` [1/inch]."""
    low, high = limits.dpi
    if not low <= dpi <= high:
        raise SheetError(f"{dpi:g} dpi is outside {low:g} to {high:g}. 300 is usual.", code="too-large")
    with ONE_AT_A_TIME:
        document: Any = None
        try:
            document = pypdfium2.PdfDocument(data)
            pages = len(document)
            check_page(page, pages)
            sheet = document[page - 1]
            width, height = sheet.get_size()
            check_size(width * dpi / 72, height * dpi / 72, limits)
            drawn = sheet.render(scale=dpi / 72, rev_byteorder=True, fill_color=(255, 255, 255, 255)).to_numpy()
            rgb = np.array(drawn[..., :3] if drawn.ndim == 3 and drawn.shape[2] >= 3 else drawn.reshape(drawn.shape[:2]))
        except pypdfium2.PdfiumError as fault:
            if "password" in str(fault).lower() or b"/Encrypt" in data:
                raise SheetError("The PDF is encrypted. Save a copy without a password and add that.", code="encrypted") from None
            raise SheetError(
                f"The PDF is damaged ({fault}). Print it to a new PDF, or save the page as an image.", code="truncated"
            ) from None
        finally:
            if document is not None:
                document.close()
    if rgb.ndim == 3 and np.array_equal(rgb[..., 0], rgb[..., 1]) and np.array_equal(rgb[..., 0], rgb[..., 2]):
        rgb = np.ascontiguousarray(rgb[..., 0])
    return rgb, pages
