#!/usr/bin/env python3
"""Run every check of the project from a bare clone: ``python3 tests/run.py``.

Needs only Python 3.11 or newer. Makes its own environment (.venv-test), installs the project with its test extra, finds a browser or
installs one by the platform's means, then runs style, types, layers, the Python tests, the browser-side module tests (where node is) and
the browser tests. What could not be run is listed at the end with the reason.

  python3 tests/run.py             everything
  python3 tests/run.py unit bank   only these folders of tests/ (no style, types or layers)
  python3 tests/run.py --no-browser
"""

import argparse
import hashlib
import os
import shutil
import subprocess
import sys
import time
from pathlib import Path

ROOT = Path(__file__).resolve().parent.parent
VENV = ROOT / ".venv-test"
FOLDERS = ("unit", "external", "bank", "web", "cli", "fuzz")
BROWSERS = ("chromium", "chromium-browser", "google-chrome", "google-chrome-stable", "microsoft-edge", "msedge")


def say(text: str) -> None:
    print(f"== {text}", flush=True)


def python() -> Path:
    return VENV / ("Scripts/python.exe" if os.name == "nt" else "bin/python")


def make_environment() -> None:
    """A virtual environment with the project (editable) and its test extra; reused while pyproject.toml and Python stay the same."""
    stamp = hashlib.sha256((ROOT / "pyproject.toml").read_bytes() + sys.version.encode()).hexdigest()
    note = VENV / "made-from"
    if note.exists() and note.read_text() == stamp:
        return
    say(f"making {VENV.name} and installing the project with its test extra")
    shutil.rmtree(VENV, ignore_errors=True)
    subprocess.run([sys.executable, "-m", "venv", str(VENV)], check=True)
    subprocess.run([str(python()), "-m", "pip", "install", "-q", "--disable-pip-version-check", "-e", ".[test]"], cwd=ROOT, check=True)
    note.write_text(stamp)


def find_browser() -> tuple[str | None, str]:
    """(path, how it was found) or (None, why there is none)."""
    named = os.environ.get("CURVEBANK_BROWSER")
    if named:
        return (named, "CURVEBANK_BROWSER") if Path(named).exists() else (None, f"CURVEBANK_BROWSER names {named}, which is not there")
    for name in BROWSERS:
        if found := shutil.which(name):
            return found, "on the path"
    for folder in ("PROGRAMFILES", "PROGRAMFILES(X86)", "LOCALAPPDATA"):
        for tail in ("Google/Chrome/Application/chrome.exe", "Microsoft/Edge/Application/msedge.exe"):
            candidate = Path(os.environ.get(folder, "/nowhere")) / tail
            if candidate.exists():
                return str(candidate), "an installed browser"
    mac = Path("/Applications/Google Chrome.app/Contents/MacOS/Google Chrome")
    if mac.exists():
        return str(mac), "an installed browser"
    if shutil.which("apt-get") and hasattr(os, "geteuid") and os.geteuid() == 0:
        say("installing Chromium with apt-get")
        env = {**os.environ, "DEBIAN_FRONTEND": "noninteractive"}
        for command in (["apt-get", "update", "-qq"], ["apt-get", "install", "-y", "-qq", "chromium"]):
            done = subprocess.run(command, env=env, stdout=subprocess.DEVNULL, stderr=subprocess.PIPE, text=True)
            if done.returncode:
                return None, f"{' '.join(command)} failed: {done.stderr.strip()[-200:]}"
        if found := shutil.which("chromium"):
            return found, "installed with apt-get"
    return None, "no Chromium, Chrome or Edge found; install one or set CURVEBANK_BROWSER to its path"


def main() -> int:
    parser = argparse.ArgumentParser(description=__doc__, formatter_class=argparse.RawDescriptionHelpFormatter)
    parser.add_argument("folders", nargs="*", metavar="FOLDER", help="folders of tests/ to run (default: all)")
    parser.add_argument("--no-browser", action="store_true", help="leave the browser tests out")
    asked = parser.parse_args()
    everything = not asked.folders
    began = time.monotonic()
    make_environment()

    env = {**os.environ, "PYTHONDONTWRITEBYTECODE": "1", "OMP_NUM_THREADS": "1", "OPENBLAS_NUM_THREADS": "1"}
    steps: list[tuple[str, list[str]]] = []
    skipped: list[str] = []

    def step(name: str, *command: str) -> None:
        steps.append((name, [str(python()), "-m", *command]))

    if everything:
        step("style", "ruff", "check", ".")
        step("format", "ruff", "format", "--check", ".")
        step("types", "mypy")
        steps.append(("layers", [str(python().with_name("lint-imports" + (".exe" if os.name == "nt" else "")))]))
    folders = [f"tests/{f}" for f in FOLDERS if (everything or f in asked.folders) and any((ROOT / "tests" / f).rglob("test_*.py"))]
    if folders:
        step("python tests", "pytest", "-n", "2", "-m", "not browser", "-p", "no:cacheprovider", *folders)
    if everything or "js" in asked.folders:
        scripts = [str(p) for p in sorted((ROOT / "tests/js").rglob("*.test.js"))]
        if node := shutil.which("node"):
            steps.append(("browser-side modules", [node, "--test", *scripts]))
        else:
            skipped.append("browser-side module tests: node is not installed")
    if (everything or "browser" in asked.folders) and not asked.no_browser:
        path, how = find_browser()
        if path:
            say(f"browser: {path} ({how})")
            env["CURVEBANK_BROWSER"] = path
            step("browser tests", "pytest", "-m", "browser", "-p", "no:cacheprovider", "tests/browser")
        else:
            skipped.append(f"browser tests: {how}")
    elif everything:
        skipped.append("browser tests: --no-browser was given")

    failed = []
    for name, command in steps:
        say(name)
        start = time.monotonic()
        code = subprocess.run(command, cwd=ROOT, env=env).returncode
        say(f"{name}: {'ok' if code == 0 else f'FAILED ({code})'} in {time.monotonic() - start:.0f} s")
        if code:
            failed.append(name)
    say(f"{len(steps) - len(failed)} of {len(steps)} steps passed in {time.monotonic() - began:.0f} s")
    for reason in skipped:
        say(f"skipped {reason}")
    for name in failed:
        say(f"FAILED {name}")
    return 1 if failed else 0


if __name__ == "__main__":
    sys.exit(main())
