"""Marks and printed grid to an invertible map between pixels and values."""

from .calibrate import calibrate
from .panelmap import PanelMap

__all__ = ["PanelMap", "calibrate"]
