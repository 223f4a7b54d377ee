"""The documents say what is: examples run, commands and dependencies are named."""

import re
import sqlite3
import tomllib
from pathlib import Path

import chart
import pytest

import curvebank
from curvebank import digitise, recipe
from curvebank.bank.store import Store

ROOT = Path(curvebank.__file__).resolve().parent.parent
README = (ROOT / "README.md").read_text()


@pytest.fixture(scope="module")
def bank(tmp_path_factory, chart_png):
    """The drawn chart, released as LARK-WM-150 so that the README's examples find their pump."""
    path = tmp_path_factory.mktemp("docs") / "bank.db"
    doc = chart.document()
    doc["pump"]["key"] = "LARK-WM-150"
    for c in doc["curves"]:
        if c["diameter_mm"] == 320:
            c["diameter_mm"] = 330.0
    data = recipe.to_bytes(doc)
    with Store.open(path) as store:
        store.save(digitise.run(data, chart_png), data, chart_png, who="A", why="test", save_key="docs", release=True)
    return path


def test_readme_opens_with_the_job():
    first = README.split("\n\n")[1]
    assert first.startswith("Plants run") and "\n#" not in first


def test_readme_holds_the_two_commands():
    assert "python3 -m venv .venv && .venv/bin/pip install . && .venv/bin/curvebank demo" in README
    assert "python3 tests/run.py" in README
    assert "tests/run.py" in (ROOT / ".ci" / "run").read_text()


def test_sql_example_gives_what_the_reader_gives(bank):
    """The worked Horner over scaled coefficients, run by sqlite3 alone, against the Python reader."""
    sql = re.search(r"```sql\n(.*?)```", README, re.S)[1]
    db = sqlite3.connect(f"file:{bank}?mode=ro", uri=True)
    rows = db.execute(sql).fetchall()
    db.close()
    with curvebank.open(bank) as reader:
        wanted = reader.pump("LARK-WM-150").head(flow_m3h=150.0, diameter_mm=330)
    assert len(rows) == 1 and rows[0][0] == pytest.approx(wanted, rel=1e-12)


def test_calls_of_the_script_walk_through_exist(bank):
    """Every ``pump.`` and ``bank.`` name of the README's Python blocks is there."""
    blocks = "\n".join(re.findall(r"```python\n(.*?)```", README, re.S))
    names = set(re.findall(r"\bpump\.([a-z_]+)", blocks))
    assert {"head", "duty", "trim_for", "findings", "waivers", "cautions"} <= names
    with curvebank.open(bank) as reader:
        pump = reader.pump("LARK-WM-150")
        assert [n for n in names if not hasattr(pump, n)] == []
        assert [n for n in re.findall(r"\bpump\.head\.([a-z_]+)", blocks) if not hasattr(pump.head, n)] == []
        assert [n for n in re.findall(r"\bbank\.([a-z_]+)\(", blocks) if not hasattr(reader, n)] == []


def test_cautions_are_in_the_readme():
    for word in ("shut-off", "motor overload", "cavitation", "trim", "maker", "licensed engineer"):
        assert word in README, word


def test_every_dependency_is_justified():
    project = tomllib.loads((ROOT / "pyproject.toml").read_text())["project"]
    wanted = list(project["dependencies"]) + [d for extra in project["optional-dependencies"].values() for d in extra]
    table = (ROOT / "DEVELOPERS.md").read_text().split("## Dependencies")[1]
    assert [d for d in wanted if re.split(r"[><=~]", d)[0] not in table] == []


def test_pictures_of_the_readme_are_there():
    for name in re.findall(r"\]\(([^)]+\.png)\)", README):
        assert (ROOT / name).is_file(), name
