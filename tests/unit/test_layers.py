"""The architecture holds: imports, module sizes, public names, the cold path of units and errors."""

import ast
import subprocess
import sys
from pathlib import Path

import curvebank

ROOT = Path(curvebank.__file__).resolve().parent.parent
PYTHON = [p for folder in ("curvebank", "web", "tests", "samples") for p in (ROOT / folder).rglob("*.py")]
BROWSER = [p for suffix in ("*.js", "*.css") for p in (ROOT / "web").rglob(suffix)]


def test_imports_go_one_way():
    """import-linter's contracts of pyproject.toml are kept, indirect imports counted."""
    done = subprocess.run(
        [sys.executable, "-c", "import sys; from importlinter.cli import lint_imports_command as c; sys.argv=['lint-imports']; c()"],
        cwd=ROOT,
        capture_output=True,
        text=True,
    )
    assert done.returncode == 0, done.stdout + done.stderr


def test_no_module_is_over_500_lines():
    """One idea a module: 500 lines at most, in every language."""
    assert PYTHON and BROWSER
    long = {str(p.relative_to(ROOT)): n for p in PYTHON + BROWSER if (n := len(p.read_text().splitlines())) > 500}
    assert long == {}


def test_public_names_are_few_and_known():
    """Adding a public name is a decision: at most 12, listed here."""
    assert curvebank.__all__ == ["CurvebankError", "ExtrapolationWarning", "__version__", "digitise_recipe", "open"]
    assert all(hasattr(curvebank, name) for name in curvebank.__all__)


def test_top_level_is_exactly_the_agreed_one():
    """Seven entries beside dot-files, as far as git knows them (built files are ignored)."""
    done = subprocess.run(["git", "ls-files"], cwd=ROOT, capture_output=True, text=True)
    if done.returncode == 0:
        top = {line.split("/")[0] for line in done.stdout.splitlines()}
        wanted = {"pyproject.toml", "README.md", "DEVELOPERS.md", "curvebank", "web", "tests", "samples"}
        assert {t for t in top if not t.startswith(".")} == wanted


def test_library_prints_nothing():
    """Only the command line prints."""
    for path in (ROOT / "curvebank").rglob("*.py"):
        if "cli" in path.parts:
            continue
        calls = [
            n.lineno for n in ast.walk(ast.parse(path.read_text())) if isinstance(n, ast.Call) and getattr(n.func, "id", "") == "print"
        ]
        assert not calls, f"{path.relative_to(ROOT)} prints at {calls}"


def test_plain_import_is_cold():
    """``import curvebank`` loads no numpy, dataclasses or other heavy module."""
    code = "import sys, curvebank; print(sorted({'numpy','dataclasses','scipy','pandas','sqlite_utils','flask','cv2'} & set(sys.modules)))"
    done = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, cwd=ROOT, check=True)
    assert done.stdout.strip() == "[]"
