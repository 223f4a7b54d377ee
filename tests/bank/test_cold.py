"""The cold path: a script that reads one number loads nothing heavy and starts fast."""

import ast
import subprocess
import sys
from pathlib import Path

import bank_samples as make
import pytest

import curvebank

HEAVY = (
    "numpy",
    "dataclasses",
    "scipy",
    "pandas",
    "sqlite_utils",
    "flask",
    "cv2",
    "pint",
    "pydantic",
    "json",
    "inspect",
    "typing",
    "hashlib",
)
PACKAGE = Path(curvebank.__file__).parent
COLD = ["errors.py", "bank/connect.py", "bank/reader.py", "bank/pump.py", "bank/quantity.py", "laws/family.py"]


def run(code):
    """A fresh interpreter without site packages beyond the ones needed to find curvebank."""
    done = subprocess.run(
        [sys.executable, "-S", "-c", f"import sys; sys.path[:0] = [{str(PACKAGE.parent)!r}]\n{code}"], capture_output=True, text=True
    )
    assert done.returncode == 0, done.stderr
    return done.stdout.split()


@pytest.mark.parametrize("diameter", [320.0, 305.0])
def test_open_and_one_head_load_nothing_heavy(released, path, diameter):
    """open(), pump(), head(<float>) and a domain error: none of the heavy modules is imported."""
    code = f"""
import curvebank
with curvebank.open({str(path)!r}) as bank:
    pump = bank.pump({make.KEY!r})
    pump.head(flow_m3h=50.0, diameter_mm={diameter}, speed_rpm=1480.0)
    pump.efficiency(50.0, {diameter}); pump.head.domain({diameter}); pump.head.uncertainty(50.0, {diameter}, of="print")
    try:
        pump.head(500.0, {diameter})
    except curvebank.CurvebankError:
        pass
print(*[name for name in {HEAVY!r} if name in sys.modules], "end")
"""
    assert run(code) == ["end"]


def test_an_array_may_load_numpy(released, path):
    """Only then."""
    code = f"""
import curvebank
pump = curvebank.open({str(path)!r}).pump({make.KEY!r})
assert "numpy" not in sys.modules
sys.path[:] = {sys.path!r}
import array
print(pump.head(array.array("d", [50.0]), 320.0)[0], "numpy" in sys.modules)
"""
    assert run(code) == ["43.75", "True"]


@pytest.mark.parametrize("module", COLD)
def test_cold_modules_import_only_what_they_may(module):
    """At top: sqlite3, math, struct, collections, and each other."""
    allowed = {"sqlite3", "math", "struct", "collections"}
    own = {"errors", "connect", "pump", "quantity", "laws", "laws.family"}
    for node in ast.parse((PACKAGE / module).read_text()).body:
        if isinstance(node, ast.Import):
            assert {alias.name for alias in node.names} <= allowed
        elif isinstance(node, ast.ImportFrom):
            assert (node.level and (node.module in own)) or node.module in allowed, ast.unparse(node)


def test_packages_on_the_way_are_empty():
    """`curvebank.bank` and `curvebank.laws` load nothing by themselves."""
    for name in ("bank", "laws"):
        assert all(isinstance(node, ast.Expr) for node in ast.parse((PACKAGE / name / "__init__.py").read_text()).body)
