"""The recipe document: read, validated, hashed."""

from .model import AxisModel, CurveModel, LockedModel, MaskModel, PanelModel, PumpModel, Recipe, SheetModel, slug
from .parse import load_json, parse, sha256, to_bytes, validate_part

__all__ = [
    "AxisModel",
    "CurveModel",
    "LockedModel",
    "MaskModel",
    "PanelModel",
    "PumpModel",
    "Recipe",
    "SheetModel",
    "load_json",
    "parse",
    "sha256",
    "slug",
    "to_bytes",
    "validate_part",
]
