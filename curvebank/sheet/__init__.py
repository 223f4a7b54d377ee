"""Scan files to arrays: decoding, ink levelling, printed lines, identity. Knows nothing of axes or curves."""

from .lines import PrintedLine
from .load import LIMITS, Limits, Sheet, load
from .masks import mask, mask_extent, under_mask
from .prepare import ALGORITHM, Prepared, prepare

__all__ = ["ALGORITHM", "LIMITS", "Limits", "PrintedLine", "Prepared", "Sheet", "load", "mask", "mask_extent", "prepare", "under_mask"]
