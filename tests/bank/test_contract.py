"""The SQL read contract, from plain sqlite3 and from the sqlite3 shell: nothing of curvebank is needed to read a bank."""

import json
import shutil
import sqlite3
import subprocess

import bank_samples as make
import numpy as np
import pytest

HORNER = """
WITH RECURSIVE line AS (
  SELECT key, curve, q_lo, q_hi, orders, (:flow - q_mid) / q_half AS t FROM released_curve
  WHERE key = :key AND quantity = :quantity AND diameter_mm = :diameter),
step (k, v) AS (
  SELECT orders, (SELECT scaled FROM released_coefficient AS c WHERE c.key = line.key AND c.curve = line.curve AND k = orders) FROM line
  UNION ALL
  SELECT k - 1, v * (SELECT t FROM line) + (SELECT scaled FROM released_coefficient AS c, line
    WHERE c.key = line.key AND c.curve = line.curve AND c.k = step.k - 1) FROM step WHERE step.k > 0)
SELECT v FROM step WHERE k = 0 AND :flow BETWEEN (SELECT q_lo FROM line) AND (SELECT q_hi FROM line)
"""


@pytest.fixture
def raw(released, path):
    """A plain connection, default settings."""
    connection = sqlite3.connect(path)
    yield connection
    connection.close()


COLUMNS = {
    "released_pump": "key maker model stages rated_rpm revision released_at",
    "released_curve": "key revision curve quantity diameter_mm speed_rpm level q_lo q_hi q_mid q_half orders sigma",
    "released_coefficient": "key curve k scaled plain",
    "released_point": "key curve i flow_m3h value sigma",
}


@pytest.mark.parametrize("view", COLUMNS)
def test_views_have_the_agreed_columns(raw, view):
    """Contract 1, in this order."""
    cursor = raw.execute(f"SELECT * FROM {view}")
    assert [d[0] for d in cursor.description] == COLUMNS[view].split() and cursor.fetchone() is not None


def test_the_file_states_its_contract(raw, released):
    """In plain SQL and through the reader."""
    assert raw.execute("SELECT value FROM meta WHERE name = 'contract'").fetchone() == ("1",) and released.contract == 1


def test_horner_in_sql_equals_the_reader(raw, pump):
    """Scaled coefficients, q_mid and q_half; the domain guard gives no row outside."""
    for quantity, diameter in (("head", 320.0), ("head", 280.0), ("efficiency", 320.0), ("power", 280.0)):
        for q in (0.0, 33.3, 85.0):
            got = raw.execute(HORNER, {"key": make.KEY, "quantity": quantity, "diameter": diameter, "flow": q}).fetchall()
            assert got[0][0] == pytest.approx(pump.quantity(quantity)(q, diameter), rel=1e-14, abs=1e-14)
    assert raw.execute(HORNER, {"key": make.KEY, "quantity": "head", "diameter": 320.0, "flow": 120.0}).fetchall() == []


def test_plain_coefficients_are_the_same_curve(raw):
    """Powers of flow, lowest first."""
    rows = raw.execute("SELECT k, plain FROM released_coefficient WHERE curve = 'H-320' ORDER BY k").fetchall()
    assert [k for k, _ in rows] == [0, 1, 2] and [p for _, p in rows] == pytest.approx(make.HEAD_320)


def test_points_are_decoded_exactly_from_float32(raw, path):
    """Every bit of flow, value and sigma, against numpy."""
    for curve_id, name, n, blob in raw.execute(
        "SELECT curve.id, local_id, n, bytes FROM trace JOIN curve ON curve.id = curve_id"
    ).fetchall():
        got = raw.execute("SELECT flow_m3h, value, sigma FROM released_point WHERE curve = ? ORDER BY i", (name,)).fetchall()
        want = np.frombuffer(blob, "<f4").reshape(6, n)[3:].T.astype(float)
        np.testing.assert_array_equal(np.array(got), want)
        assert curve_id > 0


def test_point_view_decodes_any_normal_float32(store, path):
    """Large, small and negative numbers, from 1e-37 to 1e37."""
    values = np.array([0.0, 1e-37, 3e-20, 1.5, -2.25, 123456.7, 8.5e12, -3e25, 9e37, 1e-5, 255.0, 2.0**-63, 2.0**63])
    line = make.curve("X", "head", (1.0,), 320.0, n=len(values))
    line = make.renamed(line, points=make.frozen(np.c_[np.arange(len(values)), values]))
    make.save(store, make.digitised([line]), release=True)
    with sqlite3.connect(path) as raw:
        got = [v for (v,) in raw.execute("SELECT value FROM released_point ORDER BY i")]
    raw.close()
    np.testing.assert_array_equal(got, values.astype(np.float32).astype(float))


def test_contours_have_points_and_a_level_but_no_coefficients(store, path):
    """Their fit is null."""
    make.save(store, make.digitised([*make.main_curves(), make.contour()]), release=True)
    with sqlite3.connect(path) as raw:
        row = raw.execute("SELECT level, orders FROM released_curve WHERE curve = 'C-75'").fetchone()
        coefficients = raw.execute("SELECT count(*) FROM released_coefficient WHERE curve = 'C-75'").fetchone()
        points = raw.execute("SELECT count(*) FROM released_point WHERE curve = 'C-75'").fetchone()
    raw.close()
    assert row == (0.75, None) and coefficients == (0,) and points == (120,)


def test_views_show_released_revisions_alone(store, path):
    """Drafts, superseded and withdrawn revisions are not there."""
    make.save(store)
    with sqlite3.connect(path) as raw:
        assert raw.execute("SELECT * FROM released_curve").fetchall() == []
        make.save(store, release=True)
        make.save(store, release=True)
        make.save(store)
        assert raw.execute("SELECT revision FROM released_pump").fetchall() == [(3,)]
        assert raw.execute("SELECT DISTINCT revision FROM released_curve").fetchall() == [(3,)]
        store.event(make.KEY, 3, "withdrawn", who="A. Reed", why="wrong")
        assert all(raw.execute(f"SELECT count(*) FROM {view}").fetchone() == (0,) for view in COLUMNS)
    raw.close()


def test_per_stage_pump_states_its_stages(store, path):
    """Of the released revision."""
    make.save(store, make.digitised(stages=3), release=True)
    with sqlite3.connect(path) as raw:
        assert raw.execute("SELECT stages, rated_rpm, maker FROM released_pump").fetchone() == (3, 1450.0, "Lark & Söhne")
    raw.close()


def test_the_sqlite3_shell_reads_it(released, path):
    """The same worked Horner in the shell, where one is installed; the library's own SQLite otherwise answers for it."""
    sql = HORNER.replace(":key", f"'{make.KEY}'").replace(":quantity", "'head'").replace(":diameter", "320").replace(":flow", "50.0")
    shell = shutil.which("sqlite3")
    if shell:
        done = subprocess.run([shell, "-readonly", "-json", str(path), sql], capture_output=True, text=True, check=True)
        value = json.loads(done.stdout)[0]["v"]
    else:
        connection = sqlite3.connect(path)
        value = connection.execute(sql).fetchone()[0]
        connection.close()
    assert value == pytest.approx(43.75, rel=1e-12)
