"""Recipe and sheet bytes to curves, fits and findings."""

from .live import Before
from .preview import preview
from .result import curve_json, dumps, finding_json, panel_json, result_json
from .run import ALGORITHM, made_by, run

__all__ = ["ALGORITHM", "Before", "curve_json", "dumps", "finding_json", "made_by", "panel_json", "preview", "result_json", "run"]
