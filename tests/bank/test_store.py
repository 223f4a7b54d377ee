"""Saving: what a revision holds, what is carried forward, what is refused, and that a save can be repeated safely."""

import sqlite3

import bank_samples as make
import numpy as np
import pytest

from curvebank import digitise, recipe
from curvebank.bank import catalogue, pack, revision_view
from curvebank.bank.reader import Bank
from curvebank.bank.store import Store
from curvebank.bank.verify import verify
from curvebank.errors import BankError, NotFound, OutsideDomain


def ids(bank, number):
    """Curve ids of a revision."""
    return [c["id"] for c in bank.pump(make.KEY, revision=number).curves]


def test_first_save_gives_revision_one_as_a_draft(store):
    """Key from the recipe, number 1, state draft, nothing released."""
    assert make.save(store) == (make.KEY, 1)
    assert store.pump(make.KEY, revision=1).state == "draft"
    with pytest.raises(NotFound, match=r"revision 1 \(draft\)"):
        store.pump(make.KEY)


def test_release_with_the_save_is_one_action(store):
    """save(release=True): saved and released at one moment."""
    make.save(store, release=True)
    pump = store.pump(make.KEY)
    assert (pump.revision, pump.state, pump.released_at) == (1, "released", pump.saved_at)
    kinds = [e["kind"] for e in catalogue.pump_detail(store.bank, make.KEY)["events"]]
    assert kinds == ["saved", "released"]


def test_second_release_supersedes_the_first(store):
    """At most one revision of a pump is released; the span of the old one closes when the new one opens."""
    make.save(store, release=True)
    make.save(store, release=True)
    assert store.pump(make.KEY).revision == 2
    assert store.pump(make.KEY, revision=1).state == "superseded"
    spans = store.connection.execute("SELECT valid_from, valid_to FROM release_span ORDER BY revision_id").fetchall()
    assert spans[0][1] == spans[1][0] and spans[1][1] is None


def test_same_save_key_returns_the_first_answer(store):
    """A retry after a crash saves nothing twice, also when it asks for the release again."""
    first = make.save(store, save_key="once", release=True)
    assert make.save(store, save_key="once", release=True) == first
    assert store.connection.execute("SELECT count(*) FROM revision").fetchone()[0] == 1


def test_save_key_of_something_else_is_refused(store):
    """Another recipe or another pump under a used key is a mistake, not a retry."""
    make.save(store, save_key="once")
    with pytest.raises(BankError, match="revision 1 of LARK-WM-150") as refusal:
        make.save(store, save_key="once", recipe=b'{"recipe": 1, "x-other": 2}')
    assert refusal.value.code == "save-key"
    with pytest.raises(BankError, match="save key"):
        make.save(store, save_key="once", key="OTHER-1")


def test_another_sheet_adds_and_the_first_is_carried_forward(store):
    """A pump has several sheets; saving one replaces only what came from it, to the bit."""
    make.save(store)
    make.save(store, make.digitised([make.curve("N", "npshr", make.NPSHR)], sheet=make.SECOND_SHEET), sheet=make.SECOND_SHEET)
    assert ids(store, 1) == ["H-320", "H-280", "E-320", "P-320", "P-280"]
    assert ids(store, 2) == ["H-320", "H-280", "E-320", "P-320", "P-280", "N"]
    hashes = store.connection.execute("SELECT local_id, sha256 FROM curve ORDER BY revision_id, id").fetchall()
    assert hashes[:5] == hashes[5:10]
    traces = store.connection.execute("SELECT bytes FROM trace JOIN curve ON curve.id = curve_id ORDER BY curve.id").fetchall()
    assert traces[:5] == traces[5:10]


def test_saving_a_sheet_again_replaces_its_own_curves_only(store):
    """The main sheet comes back with one curve; the suction sheet's curve stays."""
    make.save(store)
    make.save(store, make.digitised([make.curve("N", "npshr", make.NPSHR)], sheet=make.SECOND_SHEET), sheet=make.SECOND_SHEET)
    make.save(store, make.digitised([make.curve("H-330", "head", make.HEAD_320, 330.0)]))
    assert ids(store, 3) == ["N", "H-330"]
    assert len(revision_view.detail(store.bank, make.KEY, 3)["sheets"]) == 2


def test_pages_of_one_file_are_sheets_of_their_own(store):
    """A sheet is a file and a page."""
    make.save(store)
    make.save(store, make.digitised([make.curve("N", "npshr", make.NPSHR)], page=2))
    assert ids(store, 2)[-1] == "N" and len(ids(store, 2)) == 6
    assert store.connection.execute("SELECT count(*) FROM sheet").fetchone()[0] == 1


def test_two_sheets_may_use_the_same_curve_id(store):
    """The newcomer gets a number; saving it again gives it the same one."""
    make.save(store)
    again = make.digitised([make.curve("H-320", "head", make.HEAD_320, 320.0)], sheet=make.SECOND_SHEET)
    make.save(store, again, sheet=make.SECOND_SHEET)
    assert ids(store, 2)[-1] == "H-320 (2)"
    make.save(store, again, sheet=make.SECOND_SHEET)
    assert ids(store, 3) == ids(store, 2)


def test_findings_follow_their_sheet(store):
    """Those of another sheet are carried, those of this one replaced."""
    make.save(store, make.digitised(findings=[make.finding("fit-miss")]))
    second = make.digitised(
        [make.curve("N", "npshr", make.NPSHR)], sheet=make.SECOND_SHEET, findings=[make.finding("trace-gap", subject="curve:N")]
    )
    make.save(store, second, sheet=make.SECOND_SHEET)
    assert [f["rule"] for f in store.pump(make.KEY, revision=2).findings] == ["fit-miss", "trace-gap"]
    make.save(store, make.digitised())
    assert [f["rule"] for f in store.pump(make.KEY, revision=3).findings] == ["trace-gap"]


def test_failed_curves_are_named_not_stored(store):
    """They stand in the revision and in the saved event with code and message."""
    make.save(store)
    assert "H-300" not in ids(store, 1)
    detail = revision_view.detail(store.bank, make.KEY, 1)
    error = {"code": "off-ink", "message": "Click 2 is off the ink."}
    assert detail["failed"] == [
        {"id": "H-300", "quantity": "head", "error": error, "sheet_sha256": detail["sheets"][0]["sha256"], "page": 1}
    ]
    assert detail["events"][0]["more"]["failed"][0]["id"] == "H-300"


def test_head_per_stage_comes_as_total_head_and_is_stored_once(store):
    """A three-stage pump whose sheet shows head per stage, digitised and saved: 3 x 20 m at no flow, not 9 x."""
    text = recipe.to_bytes(
        {
            "recipe": 1,
            "pump": {"maker": "Lark", "model": "WM 3", "key": make.KEY, "stages": 3, "speed_rpm": 1450.0},
            "curves": [
                {
                    "id": "H",
                    "quantity": "head",
                    "kind": "table",
                    "head_is": "per stage",
                    "diameter_mm": 320.0,
                    "x_unit": "m3/h",
                    "y_unit": "m",
                    "rows": [[q, 20.0 - 0.0006 * q * q] for q in range(0, 101, 10)],
                }
            ],
        }
    )
    made = digitise.run(text, None, {})
    make.save(store, made, sheet=None, recipe=text, release=True)
    pump = store.pump(make.KEY)
    assert (pump.stages, pump.head(0.0, 320.0)) == (3, pytest.approx(60.0, rel=1e-6))
    assert pump.head(100.0, 320.0) == pytest.approx(42.0, rel=1e-6)
    assert revision_view.detail(store.bank, make.KEY, 1)["curves"][0]["head_is"] == "per stage"


def test_traces_keep_at_most_200_points_with_both_ends(store):
    """Float32, first and last point exact to float32."""
    make.save(store, make.digitised([make.curve("H", "head", make.HEAD_320, 320.0, n=5000)]))
    n, raw = store.connection.execute("SELECT n, bytes FROM trace").fetchone()
    table = np.frombuffer(raw, "<f4").reshape(6, n)
    assert n == 200
    np.testing.assert_allclose(table[3, [0, -1]], [0.0, 100.0])
    np.testing.assert_allclose(table[4], np.float32(50 - 0.05 * table[3].astype(float) - 0.0015 * table[3].astype(float) ** 2), rtol=1e-5)


def test_body_reads_back_what_was_saved(store):
    """Everything of a curve, a panel and a finding, through the packed bytes."""
    made = make.digitised(findings=[make.finding()])
    make.save(store, made)
    raw = store.connection.execute("SELECT bytes FROM blob WHERE kind = 'body'").fetchone()[0]
    body = pack.unpack(raw)
    first, source = body["curves"][0], made.curves[0]
    np.testing.assert_array_equal(first["fit"]["scaled"], source.fit.scaled)
    np.testing.assert_array_equal(first["fit"]["covariance"], source.fit.covariance)
    assert (first["spread"], first["trace"]["confidence"], first["trace"]["traced"]) == (source.spread, 0.97, 400)
    np.testing.assert_array_equal(body["panels"][0]["map_pixels"], made.panels[0].map_pixels)
    assert body["findings"][0]["key"] == made.findings[0].key
    assert (body["maker"], body["who"], body["made_by"]["numpy"]) == ("Lark & Söhne", "R. Holt", "2.0")


def test_sheets_and_recipes_are_kept_once_per_content(store):
    """Three saves of the same recipe and sheet: one blob each."""
    for _ in range(3):
        make.save(store)
    kinds = dict(store.connection.execute("SELECT kind, count(*) FROM blob GROUP BY kind"))
    assert kinds["sheet"] == 1 and kinds["recipe"] == 1 and kinds["body"] == 3


def test_typed_tables_need_no_sheet(store):
    """A recipe of tables alone."""
    table = make.renamed(make.curve("T", "head", make.HEAD_320, 320.0), trace=None, kind="table", panel=None)
    made = make.renamed(make.digitised([table], sheet=None), panels=())
    make.save(store, made, sheet=None, release=True)
    assert store.pump(make.KEY).head(50.0, 320.0) == pytest.approx(43.75)


def test_settings_in_force_are_copied_into_the_revision(store):
    """What a number means does not change when a setting does."""
    store.set_settings({"machine.catalogue.head_pct": 3.0}, who="R. Holt")
    make.save(store, release=True)
    before = store.pump(make.KEY).head.uncertainty(50.0, 320.0, of="machine")
    store.set_settings({"machine.catalogue.head_pct": 30.0}, who="R. Holt")
    assert store.settings()["machine.catalogue.head_pct"] == 30.0
    assert store.pump(make.KEY).head.uncertainty(50.0, 320.0, of="machine") == before
    make.save(store, release=True)
    assert store.pump(make.KEY).head.uncertainty(50.0, 320.0, of="machine") > before


def test_a_later_sheet_may_correct_stages_and_speed(store):
    """They belong to the revision, the first ones stay readable."""
    make.save(store)
    make.save(store, make.digitised(stages=2, speed_rpm=2900.0))
    assert [store.pump(make.KEY, revision=n).stages for n in (1, 2)] == [1, 2]
    assert [store.pump(make.KEY, revision=n).rated_rpm for n in (1, 2)] == [1450.0, 2900.0]


def test_several_pumps_on_one_sheet(store):
    """The same scan, two keys; one maker."""
    make.save(store)
    make.save(store, make.digitised(key="LARK-WM-200", model="WM 200"))
    assert [p.key for p in store.pumps()] == [make.KEY, "LARK-WM-200"]
    assert store.connection.execute("SELECT count(*) FROM maker").fetchone()[0] == 1


@pytest.mark.parametrize(
    ("change", "code"),
    [
        ({"who": " "}, "who-why"),
        ({"why": ""}, "who-why"),
        ({"save_key": ""}, None),
        ({"key": "lark wm"}, "bad-key"),
        ({"sheet": b"another scan"}, "sheet"),
        ({"sheet": None}, "sheet"),
    ],
)
def test_saves_that_are_refused(store, change, code):
    """Nothing is written."""
    if code is None:
        with pytest.raises(BankError, match="save key"):
            store.save(make.digitised(), make.RECIPE, make.SHEET, who="a", why="b", save_key="")
    else:
        with pytest.raises(BankError) as refusal:
            make.save(store, **change)
        assert refusal.value.code == code
    assert store.connection.execute("SELECT (SELECT count(*) FROM pump) + (SELECT count(*) FROM blob)").fetchone()[0] == 0


def test_failed_digitisation_is_not_saved(store):
    """A result whose whole recipe failed."""
    broken = make.renamed(make.digitised(), pump=None, error={"code": "recipe", "message": "no", "path": "$"})
    with pytest.raises(BankError) as refusal:
        make.save(store, broken)
    assert refusal.value.code == "not-digitised"


def test_infinite_uncertainty_is_refused_whole(store):
    """One number that is not finite: no part of the revision is kept."""
    bad = make.curve("H", "head", make.HEAD_320, 320.0)
    bad = make.renamed(bad, fit=make.renamed(bad.fit, sigma=float("inf")))
    with pytest.raises(BankError) as refusal:
        make.save(store, make.digitised([bad]))
    assert refusal.value.code == "not-finite"
    assert store.connection.execute("SELECT count(*) FROM revision").fetchone()[0] == 0
    assert make.save(store) == (make.KEY, 1)


def test_events_follow_the_states(store):
    """draft, submitted, released, withdrawn; comments and waivers change nothing."""
    make.save(store, make.digitised(findings=[make.finding(severity="error")]))
    waived = make.finding().key
    store.event(make.KEY, 1, "commented", who="A. Reed", why="The scan is faint at the right edge.")
    store.event(make.KEY, 1, "submitted", who="R. Holt", why="ready")
    store.event(make.KEY, 1, "waived", who="A. Reed", why="read by eye, agrees", finding=waived)
    store.event(make.KEY, 1, "released", who="A. Reed", why="checked")
    pump = store.pump(make.KEY)
    assert pump.state == "released" and pump.waivers[0]["finding"] == waived and pump.waivers[0]["who"] == "A. Reed"
    store.event(make.KEY, 1, "withdrawn", who="A. Reed", why="wrong pump")
    with pytest.raises(NotFound, match="withdrawn"):
        store.pump(make.KEY)


@pytest.mark.parametrize(
    ("steps", "refused"), [([], "superseded"), (["released"], "released"), (["released"], "submitted"), (["withdrawn"], "released")]
)
def test_events_that_do_not_fit_the_state_are_refused(store, steps, refused):
    """The message names the state."""
    make.save(store)
    for kind in steps:
        store.event(make.KEY, 1, kind, who="A. Reed", why="step")
    with pytest.raises(BankError) as refusal:
        store.event(make.KEY, 1, refused, who="A. Reed", why="again")
    assert refusal.value.code in ("state", "kind")


def test_superseded_revision_is_not_released_again(store):
    """A revision is released once; its curves may be saved again."""
    make.save(store, release=True)
    make.save(store, release=True)
    with pytest.raises(BankError, match="new revision"):
        store.event(make.KEY, 1, "released", who="A. Reed", why="back")


def test_events_on_what_is_not_there(store):
    """Pump, revision and finding are named."""
    make.save(store)
    with pytest.raises(NotFound, match="no pump NOBODY"):
        store.event("NOBODY", 1, "released", who="a", why="b")
    with pytest.raises(NotFound, match="no revision 7"):
        store.event(make.KEY, 7, "released", who="a", why="b")
    with pytest.raises(NotFound, match="no findings"):
        store.event(make.KEY, 1, "waived", who="a", why="b", finding="0" * 16)


def test_time_never_runs_backwards(store, monkeypatch):
    """at = the later of the clock and the last event."""
    from curvebank.bank import chain

    monkeypatch.setattr(chain, "utc_now", lambda: "2030-01-01T00:00:00.000Z")
    make.save(store)
    monkeypatch.setattr(chain, "utc_now", lambda: "2020-01-01T00:00:00.000Z")
    make.save(store)
    assert store.pump(make.KEY, revision=2).saved_at == "2030-01-01T00:00:00.000Z"


def test_writer_holds_its_pragmas(store):
    """WAL, synchronous FULL (2), foreign keys, recursive triggers, 30 s of patience."""
    read = {
        name: store.connection.execute(f"PRAGMA {name}").fetchone()[0]
        for name in ("journal_mode", "synchronous", "foreign_keys", "recursive_triggers")
    }
    assert read == {"journal_mode": "wal", "synchronous": 2, "foreign_keys": 1, "recursive_triggers": 1}
    assert store.connection.execute("PRAGMA busy_timeout").fetchone()[0] == 30000


def test_create_refuses_a_file_that_exists(store, path):
    """`create` is for new banks alone."""
    with pytest.raises(BankError) as refusal:
        Store.create(path)
    assert refusal.value.code == "exists"


def test_open_again_adds_to_the_same_bank(store, path):
    """Identity and content stay."""
    make.save(store)
    uuid = store.bank.uuid
    store.close()
    with Store.open(path) as again:
        assert again.bank.uuid == uuid
        assert make.save(again) == (make.KEY, 2)
    assert verify(path).ok


def test_old_pump_objects_keep_their_revision(store, path):
    """A pump read before a release goes on answering from its own revision."""
    make.save(store, release=True)
    with Bank(path) as bank:
        old = bank.pump(make.KEY)
        make.save(store, make.digitised([make.curve("H-320", "head", (60.0, -0.05, -0.0015), 320.0)]), release=True)
        assert old.head(0.0, 320.0) == 50.0 and bank.pump(make.KEY).head(0.0, 320.0) == 60.0


def test_reading_a_curve_that_failed_says_what_there_is(store):
    """No power line: computed from head and efficiency; no NPSHr: an error in words."""
    make.save(store, release=True)
    with pytest.raises(OutsideDomain, match="no NPSH required line"):
        store.pump(make.KEY).npshr(50.0, 320.0)


def test_statements_outside_a_transaction_are_not_needed(store):
    """After a save no transaction is left open."""
    make.save(store)
    assert not store.connection.in_transaction
    with pytest.raises(sqlite3.OperationalError):
        store.connection.execute("COMMIT")
