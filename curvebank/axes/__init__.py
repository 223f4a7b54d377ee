"""Marks and printed grid to an invertible map between pixels and values."""

from .calibrate import calibrate
from .panelmap import PanelMap
from .shared import calibrate_all
from .snap import Snap, snap

__all__ = ["PanelMap", "Snap", "calibrate", "calibrate_all", "snap"]
