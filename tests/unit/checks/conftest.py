"""The closed-form sheet, importable by the tests of the checks."""

import sys
from pathlib import Path

sys.path.insert(0, str(Path(__file__).resolve().parent))
