"""The command line as a user drives it: files in, files and words out, exit codes."""

import csv
import json
import re
import subprocess
import sys
import time
import urllib.request
from pathlib import Path

import chart
import pytest
from click.testing import CliRunner

import curvebank
from curvebank.cli import main

ROOT = Path(curvebank.__file__).resolve().parent.parent


@pytest.fixture(scope="module")
def folder(tmp_path_factory, chart_png):
    """Recipes beside their scan: one good, one broken JSON, one whose scan is missing; the good one stored in a bank."""
    d = tmp_path_factory.mktemp("sheets")
    (d / "chart.png").write_bytes(chart_png)
    (d / "good.recipe.json").write_text(json.dumps(chart.document()))
    (d / "broken.recipe.json").write_text('{"recipe": 1,')
    lost = chart.document()
    lost["sheet"]["file"] = "gone.png"
    (d / "lost.recipe.json").write_text(json.dumps(lost))
    return d


@pytest.fixture(scope="module")
def stored(folder):
    """The bank after ``digitise --save --release``, and what the command printed."""
    bank = folder / "bank.db"
    done = run("digitise", folder / "good.recipe.json", "--out", folder / "out", "--bank", bank, "--save", *WHO, "--release")
    assert done.exit_code == 0, done.output
    return bank, done.output


WHO = ("--who", "R. Hale", "--why", "first reading of the paper")


def run(*arguments):
    return CliRunner().invoke(main, [str(a) for a in arguments])


def test_every_command_has_help():
    assert {"demo", "serve", "digitise", "check", "show", "export", "verify"} <= set(main.commands)
    for name, command in main.commands.items():
        assert command.help and len(command.help) > 20, name
        assert run(name, "--help").exit_code == 0


def test_readme_names_every_command():
    text = (ROOT / "README.md").read_text()
    assert [name for name in main.commands if f"curvebank {name}" not in text] == []


def test_digitise_writes_every_result_and_exits_1_if_one_failed(folder):
    out = folder / "mixed"
    done = run("digitise", folder / "broken.recipe.json", folder / "lost.recipe.json", folder / "good.recipe.json", "--out", out)
    assert done.exit_code == 1
    results = {p.name: json.loads(p.read_text()) for p in out.glob("*.result.json")}
    assert set(results) == {"broken.result.json", "lost.result.json", "good.result.json"}
    assert results["broken.result.json"]["error"]["code"] == "recipe-json"
    assert results["lost.result.json"]["error"]["path"] == "$.sheet.file" and "gone.png" in done.output
    assert [c["id"] for c in results["lost.result.json"]["curves"]] == list(chart.LINES)
    assert results["good.result.json"]["error"] is None
    assert not list(out.glob("*.part"))


def test_a_recipe_that_is_not_there_still_writes_a_result(folder, tmp_path):
    done = run("digitise", folder / "nowhere.recipe.json", "--out", tmp_path, "--json")
    assert done.exit_code == 1
    assert json.loads(done.output)[0]["error"]["code"] == "no-such-file"
    assert (tmp_path / "nowhere.result.json").exists()


@pytest.mark.parametrize(
    "arguments", [("digitise",), ("digitise", "x"), ("digitise", "x", "--out", ".", "--save"), ("show", "--revision", "0")]
)
def test_wrong_use_exits_2(arguments):
    assert run(*arguments).exit_code == 2


def test_the_scan_may_be_a_link(folder, tmp_path):
    (tmp_path / "chart.png").symlink_to(folder / "chart.png")
    (tmp_path / "a.recipe.json").write_text(json.dumps(chart.document() | {"curves": chart.document()["curves"][:1]}))
    assert run("digitise", tmp_path / "a.recipe.json", "--out", tmp_path).exit_code == 0


def test_saved_number_is_the_printed_one(stored):
    """From paper to script: the value read from the bank against the drawn curve."""
    bank, said = stored
    assert "FENWRIGHT-DP-80 revision 1, released" in said
    with curvebank.open(bank) as reader:
        pump = reader.pump("FENWRIGHT-DP-80")
        assert pump.head(flow_m3h=100.0, diameter_mm=320) == pytest.approx(float(chart.head_m(100, 320)), abs=0.03)
        between = pump.head(flow_m3h=100.0, diameter_mm=305)
        assert between == pytest.approx(float(chart.head_m(100, 305)), abs=0.1)


def test_saving_the_same_again_stores_once(stored, folder):
    bank, _ = stored
    again = run("digitise", folder / "good.recipe.json", "--out", folder / "out", "--bank", bank, "--save", *WHO, "--release")
    assert again.exit_code == 0 and "revision 1" in again.output
    other = run("digitise", folder / "good.recipe.json", "--out", folder / "out", "--bank", bank, "--save", "--who", "B", "--why", "second")
    assert "revision 2, draft" in other.output


def test_show_lists_shows_and_reads(stored):
    bank, _ = stored
    assert "FENWRIGHT-DP-80" in run("show", "--bank", bank).output
    one = run("show", "FENWRIGHT-DP-80", "--bank", bank).output
    assert "H-320" in one and "Confirm with the maker" in one
    values = json.loads(run("show", "FENWRIGHT-DP-80", "--bank", bank, "--flow", 100, "--diameter", 320, "--json").output)["values"]
    assert values["head"]["value"] == pytest.approx(38.0, abs=0.03)
    assert values["head"]["u_machine"] > values["head"]["u_print"] > 0
    far = run("show", "FENWRIGHT-DP-80", "--bank", bank, "--flow", 900, "--diameter", 320).output
    assert re.search(r"head .*\?", far) and "17" in far


def test_export_csv_can_be_evaluated(stored, tmp_path):
    """The fits table alone gives the curve: Horner over t = (flow - mid) / half."""
    bank, _ = stored
    assert run("export", "FENWRIGHT-DP-80", "--bank", bank, "--format", "csv", "--out", tmp_path).exit_code == 0
    rows = list(csv.DictReader((tmp_path / "FENWRIGHT-DP-80-fits.csv").read_text().splitlines()))
    row = next(r for r in rows if r["curve"] == "H-320")
    t = (100 - float(row["q_mid_m3h"])) / float(row["q_half_m3h"])
    value = 0.0
    for k in reversed(range(int(row["order"]) + 1)):
        value = value * t + float(row[f"scaled_{k}"])
    assert value == pytest.approx(38.0, abs=0.03)
    points = list(csv.DictReader((tmp_path / "FENWRIGHT-DP-80-points.csv").read_text().splitlines()))
    assert len(points) > 300 and {"m", "1"} == {p["unit"] for p in points}


def test_export_json_is_the_revision(stored):
    bank, _ = stored
    doc = json.loads(run("export", "FENWRIGHT-DP-80", "--bank", bank).output)
    assert doc["number"] == 1 and {c["id"] for c in doc["curves"]} == set(chart.LINES) and doc["cautions"]


def test_check_of_recipe_result_and_key_agree(stored, folder):
    bank, _ = stored
    rules = [
        [f["rule"] for f in json.loads(run("check", subject, "--bank", bank, "--json").output)]
        for subject in (folder / "good.recipe.json", folder / "out" / "good.result.json", "FENWRIGHT-DP-80")
    ]
    assert rules[0] == rules[1] and sorted(rules[0]) == sorted(rules[2])
    bad = run("check", folder / "broken.recipe.json")
    assert bad.exit_code == 1 and "line 1" in bad.output


def test_verify_says_whole_and_finds_an_edit(stored, tmp_path):
    import shutil
    import sqlite3

    bank, _ = stored
    assert run("verify", "--bank", bank).exit_code == 0
    copy = tmp_path / "copy.db"
    with sqlite3.connect(bank) as source, sqlite3.connect(copy) as target:
        source.backup(target)
    source.close()
    with sqlite3.connect(copy) as db:
        for (name,) in db.execute("SELECT name FROM sqlite_master WHERE type = 'trigger' AND tbl_name = 'curve'").fetchall():
            db.execute(f'DROP TRIGGER "{name}"')
        db.execute("UPDATE curve SET c0 = c0 * 1.000001 WHERE local_id = 'H-320'")
    db.close()
    target.close()
    done = run("verify", "--bank", copy)
    assert done.exit_code == 1 and "not whole" in done.output
    shutil.rmtree(tmp_path)


@pytest.mark.parametrize("command", [("show",), ("show", "A"), ("export", "A"), ("verify",)])
def test_a_bank_that_is_none(command, tmp_path):
    text = tmp_path / "text.db"
    text.write_text("this is not a bank, only text that is long enough to have a header" * 20)
    for path, word in ((text, "bank"), (tmp_path / "missing.db", "not there")):
        done = run(*command, "--bank", path)
        assert done.exit_code == 1 and word in done.output, done.output
        assert done.exception is None or isinstance(done.exception, SystemExit)


def test_demo_refuses_an_existing_file(stored):
    bank, _ = stored
    before = bank.read_bytes()
    done = run("demo", "--bank", bank, "--no-serve", "--samples", ROOT / "samples")
    assert done.exit_code == 1 and "exists" in done.output
    assert bank.read_bytes() == before


def test_demo_builds_a_bank_of_its_samples(folder, tmp_path):
    """On a folder of three recipes, two of them bad: the good one is released, the others are said; the last line is the bank's path."""
    bank = tmp_path / "new" / "demo.db"
    done = subprocess.run(
        [sys.executable, "-m", "curvebank.cli", "demo", "--no-serve", "--samples", str(folder), "--bank", str(bank)],
        capture_output=True,
        text=True,
        timeout=300,
    )
    assert done.returncode == 0, done.stderr
    assert done.stdout.strip().splitlines()[-1] == str(bank)
    assert "gone.png" in done.stdout and "released" in done.stdout
    with curvebank.open(bank) as reader:
        assert [p.key for p in reader.pumps()] == ["FENWRIGHT-DP-80"]


def test_serve_prints_its_address_and_answers(tmp_path):
    bank = tmp_path / "new.db"
    process = subprocess.Popen(
        [sys.executable, "-m", "curvebank.cli", "serve", "--bank", str(bank), "--port", "0", "--no-browser"],
        stdout=subprocess.PIPE,
        text=True,
    )
    try:
        address = process.stdout.readline().strip()
        assert re.fullmatch(r"http://127\.0\.0\.1:\d+/", address)
        end = time.monotonic() + 30
        while True:
            try:
                with urllib.request.urlopen(address + "healthz", timeout=5) as answer:
                    assert answer.status == 200
                break
            except OSError:
                assert time.monotonic() < end
                time.sleep(0.1)
        assert bank.exists()
    finally:
        process.terminate()
        process.wait(20)
        process.stdout.close()
