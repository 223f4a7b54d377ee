"""verify: a sound bank passes, re-derivation compares by the uncertainty, progress may cancel."""

import sqlite3

import bank_samples as make
import numpy as np
import pytest

from curvebank.bank.verify import verify
from curvebank.errors import Cancelled, RecipeError


@pytest.fixture
def filled(store, path):
    """Two sheets, a contour, a superseded and a draft revision, events and settings."""
    store.set_settings({"a": [1, 2]}, who="R. Holt")
    make.save(store, make.digitised([*make.main_curves(), make.contour()], findings=[make.finding()]), release=True)
    make.save(store, make.digitised([make.curve("N", "npshr", make.NPSHR)], sheet=make.SECOND_SHEET), sheet=make.SECOND_SHEET, release=True)
    store.event(make.KEY, 1, "commented", who="A. Reed", why="a word")
    make.save(store)
    store.close()
    return path


def test_a_sound_bank_passes(filled):
    """Counts and the head of the chain are told."""
    report = verify(filled)
    assert report.ok and report.faults == [] and report.notes == []
    assert report.counts["revision"] == 3 and report.counts["pump"] == 1 and report.counts["event"] == 7
    with sqlite3.connect(filled) as raw:
        assert raw.execute("SELECT hex(sha256) FROM event ORDER BY seq DESC LIMIT 1").fetchone()[0].lower() == report.head_sha256
    raw.close()


def test_an_empty_bank_passes(store, path):
    """Nothing to say about nothing."""
    store.close()
    assert verify(path).ok and verify(path).head_sha256 == ""


def test_verify_does_not_write(filled):
    """The file keeps its bytes."""
    before = filled.read_bytes()
    verify(filled)
    assert filled.read_bytes() == before


def test_faults_name_the_place(filled):
    """Pump, revision, curve and column."""
    raw = sqlite3.connect(filled, isolation_level=None)
    trigger = raw.execute("SELECT sql FROM sqlite_master WHERE name = 'guard_curve_update'").fetchone()[0]
    raw.execute("DROP TRIGGER guard_curve_update")
    raw.execute("UPDATE curve SET q_hi = q_hi - 1 WHERE local_id = 'E-320' AND revision_id = 1")
    raw.execute(trigger)
    raw.close()
    (fault,) = verify(filled).faults
    assert (fault.code, fault.subject, fault.message) == ("columns", "LARK-WM-150 revision 1, E-320", "q_hi differ from what was saved.")


def test_progress_is_told_and_may_cancel(filled):
    """Shares rise from 0 to 1."""
    told = []
    verify(filled, progress=lambda share, text: told.append((share, text)))
    assert [s for s, _ in told] == sorted(s for s, _ in told) and told[0][0] == 0 and told[-1] == (1.0, "Done")

    def cancel(share, text):
        raise Cancelled("stopped")

    with pytest.raises(Cancelled):
        verify(filled, progress=cancel)


def again(shift=0.0, drop=None):
    """A digitiser that gives the same sheets again, with the heads moved by ``shift`` metres."""

    def rederive(recipe, sheet, settings):
        assert settings == {"a": [1, 2]} and recipe == make.RECIPE
        if sheet == make.SECOND_SHEET:
            return make.digitised([make.curve("N", "npshr", make.NPSHR)], sheet=sheet)
        curves = []
        for item in make.main_curves():
            if item.id == drop:
                continue
            if item.quantity == "head" and item.fit is not None:
                fit = make.renamed(item.fit, scaled=make.frozen(item.fit.scaled + np.array([shift, 0, 0])))
                item = make.renamed(item, fit=fit)
            curves.append(item)
        return make.digitised([*curves, make.contour()], sheet=sheet)

    return rederive


@pytest.mark.parametrize(("shift", "faults", "notes"), [(0.0, 0, 0), (0.001, 0, 0), (0.01, 0, 2), (0.1, 2, 0)])
def test_rederivation_is_judged_by_the_uncertainty(filled, shift, faults, notes):
    """u is 0.02 m at the middle: 0.1 u and less is the same, up to 1 u a drift, more a fault."""
    report = verify(filled, rederive=again(shift))
    assert (len(report.faults), len(report.notes)) == (faults, notes)
    assert all("again" in item.message for item in [*report.faults, *report.notes])


def test_rederivation_that_loses_a_curve_or_fails(filled):
    """Both are faults, named."""
    (fault,) = verify(filled, rederive=again(drop="P-280")).faults
    assert "P-280" in fault.subject and "not there" in fault.message

    def broken(recipe, sheet, settings):
        raise RecipeError("Unknown unit.", path="$.panels[0]")

    assert {f.code for f in verify(filled, rederive=broken).faults} == {"rederive"}
