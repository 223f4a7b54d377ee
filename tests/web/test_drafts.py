"""Drafts: a tree of steps with a head; nothing acknowledged is lost, nothing is overwritten."""

import sqlite3
import threading
import uuid

import pytest

from curvebank_web import desk_drafts, desk_file


def test_a_new_draft_names_its_sheet_and_shows_its_page(draft, sheet):
    assert draft["step"] == 1 and draft["undo"] is None and draft["redo"] is None
    assert draft["doc"]["sheet"] == {"file": "chart.png", "page": 1, "dpi": 300, "turn": 0, "sha256": sheet["sha256"]}
    assert draft["page"] == sheet["page"]
    assert [s["step"] for s in draft["steps"]] == [1]


def test_steps_stack_up_and_the_head_follows(client, draft, put):
    doc = draft["doc"] | {"x-note": "first"}
    assert put(draft["id"], doc, 1, "First").json == {"step": 2}
    now = client.get(f"/api/drafts/{draft['id']}").json
    assert now["step"] == 2 and now["doc"] == doc
    assert now["undo"] == {"step": 1, "label": "First"} and now["redo"] is None


def test_the_document_comes_back_in_its_own_order(client, draft, put):
    doc = {"z": 1, "a": {"y": 1.5, "b": [1, 2.25, "\U0001f4a7"]}, "m": None}
    put(draft["id"], doc, 1)
    raw = client.get(f"/api/drafts/{draft['id']}").json["doc"]
    assert list(raw) == ["z", "a", "m"] and list(raw["a"]) == ["y", "b"] and raw == doc


def test_a_write_on_an_old_step_is_a_conflict_that_shows_the_newer(client, draft, put, is_problem):
    put(draft["id"], {"x-by": "mine"}, 1)
    problem = is_problem(put(draft["id"], {"x-by": "yours"}, 1), 409, "conflict")
    assert problem["step"] == 2 and problem["doc"] == {"x-by": "mine"}
    assert client.get(f"/api/drafts/{draft['id']}").json["doc"] == {"x-by": "mine"}


def test_the_same_action_again_gets_its_first_answer(client, draft, put):
    first = put(draft["id"], {"x-n": 1}, 1, action_id="action-1")
    put(draft["id"], {"x-n": 2}, 2)
    again = put(draft["id"], {"x-n": 1}, 1, action_id="action-1")
    assert first.json == again.json == {"step": 2}
    assert client.get(f"/api/drafts/{draft['id']}").json["step"] == 3


def test_undo_and_redo_go_back_the_way_they_came(client, draft, put):
    url = f"/api/drafts/{draft['id']}"
    for n in (2, 3, 4):
        put(draft["id"], {"x-n": n}, n - 1, f"Step {n}")
    here = client.get(url).json
    for n in (3, 2, 1):
        here = client.post(f"{url}/head", json={"step": here["undo"]["step"]}).json
        assert here["step"] == n and here["redo"] == {"step": n + 1, "label": f"Step {n + 1}"}
    assert here["undo"] is None and here["doc"] == draft["doc"]
    for n in (2, 3, 4):
        here = client.post(f"{url}/head", json={"step": here["redo"]["step"]}).json
        assert here["step"] == n and here["doc"] == {"x-n": n}
    assert here["redo"] is None


def test_a_step_after_undo_makes_a_branch_and_keeps_the_old_one(client, draft, put):
    url = f"/api/drafts/{draft['id']}"
    put(draft["id"], {"x-n": "a"}, 1, "A")
    put(draft["id"], {"x-n": "b"}, 2, "B")
    client.post(f"{url}/head", json={"step": 1})
    assert put(draft["id"], {"x-n": "c"}, 1, "C").json == {"step": 4}
    now = client.get(url).json
    assert [(s["step"], s["parent"]) for s in now["steps"]] == [(1, None), (2, 1), (3, 2), (4, 1)]
    back = client.post(f"{url}/head", json={"step": 1}).json
    assert back["redo"] == {"step": 4, "label": "C"}
    jumped = client.post(f"{url}/head", json={"step": 3}).json
    assert jumped["doc"] == {"x-n": "b"} and jumped["undo"] == {"step": 2, "label": "B"}
    assert client.post(f"{url}/head", json={"step": 1}).json["redo"] == {"step": 2, "label": "A"}


def test_a_jump_to_a_step_that_is_not_there_changes_nothing(client, draft, is_problem):
    is_problem(client.post(f"/api/drafts/{draft['id']}/head", json={"step": 7}), 404, "no-such-step")
    assert client.get(f"/api/drafts/{draft['id']}").json["step"] == 1


def test_a_write_after_undo_elsewhere_is_a_conflict(client, draft, put, is_problem):
    put(draft["id"], {"x-n": 2}, 1)
    client.post(f"/api/drafts/{draft['id']}/head", json={"step": 1})
    is_problem(put(draft["id"], {"x-n": 3}, 2), 409, "conflict")


def test_the_list_names_drafts_by_their_pump_and_puts_the_last_touched_first(client, draft, put):
    other = client.post("/api/drafts", json={"doc": {"sheet": {"file": "other.png"}}}).json
    put(draft["id"], draft["doc"] | {"pump": {"maker": "Lark", "model": "WM 150"}}, 1)
    items = client.get("/api/drafts").json["items"]
    assert [(i["id"], i["title"], i["step"]) for i in items] == [(draft["id"], "Lark WM 150", 2), (other["id"], "other.png", 1)]
    assert items[0]["sheet_sha256"] == draft["doc"]["sheet"]["sha256"]


def test_a_draft_opened_from_a_recipe_gets_the_sheet_it_is_laid_on(client, sheet):
    doc = {"recipe": 1, "sheet": {"file": "old-name.png", "page": 1}, "pump": {"maker": "Lark", "model": "WM"}}
    made = client.post("/api/drafts", json={"doc": doc, "sheet_sha256": sheet["sha256"]}).json
    assert made["doc"]["sheet"] == {"file": "old-name.png", "page": 1, "sha256": sheet["sha256"]}
    assert made["page"]["sha256"] == sheet["sha256"]


def test_the_same_creation_again_gives_the_same_draft(client):
    first = client.post("/api/drafts", json={"doc": {}, "action_id": "c-1"}).json
    again = client.post("/api/drafts", json={"doc": {}, "action_id": "c-1"}).json
    assert first["id"] == again["id"] and len(client.get("/api/drafts").json["items"]) == 1


@pytest.mark.parametrize(
    "doc",
    [
        {},
        {"sheet": None, "pump": 5},
        {"sheet": {"sha256": "x", "page": "one"}},
        {"sheet": {"sha256": "0" * 64, "page": 10**40, "dpi": "300", "turn": 45}},
        {"sheet": {"sha256": "0" * 64}},
        {"sheet": {"file": "\ud800"}, "pump": {"maker": ["a"], "model": "\udfff"}},
    ],
)
def test_an_unfinished_or_wrong_document_is_kept_all_the_same(client, doc):
    made = client.post("/api/drafts", json={"doc": doc})
    assert made.status_code == 201
    assert made.json["doc"] == doc and made.json["page"] is None


def test_a_page_that_is_not_in_the_file_does_not_lock_the_draft(client, draft, put):
    doc = draft["doc"] | {"sheet": draft["doc"]["sheet"] | {"page": 9}}
    put(draft["id"], doc, 1)
    now = client.get(f"/api/drafts/{draft['id']}").json
    assert now["page"] is None and now["doc"] == doc


def test_throwing_away_removes_the_draft_and_its_sheet_but_no_other_draft(client, draft, sheet, put, is_problem):
    second = client.post("/api/drafts", json={"sheet": {"sha256": sheet["sha256"]}}).json
    put(second["id"], {"x-sheet": "forgotten at the head"}, 1)
    assert client.delete(f"/api/drafts/{draft['id']}").status_code == 204
    is_problem(client.get(f"/api/drafts/{draft['id']}"), 404, "no-such-draft")
    back = client.post(f"/api/drafts/{second['id']}/head", json={"step": 1}).json
    assert back["page"]["sha256"] == sheet["sha256"]
    client.delete(f"/api/drafts/{second['id']}")
    is_problem(client.post("/api/drafts", json={"sheet": {"sha256": sheet["sha256"]}}), 404, "no-such-sheet")


def test_steps_cannot_be_changed_in_the_file(app, draft):
    db = desk_file.connect(app.extensions["curvebank"].desk)
    with pytest.raises(sqlite3.IntegrityError, match="never changed"):
        db.execute("UPDATE step SET doc = '{}'")
    db.close()


def test_eight_threads_on_one_draft_lose_nothing(app, draft):
    desk = app.extensions["curvebank"].desk
    kept, clashes = [], []

    def work(name):
        db = desk_file.connect(desk)
        for n in range(12):
            action = f"{name}-{n}"
            while True:
                head = desk_drafts.row_of(db, draft["id"])["head"]
                try:
                    step = desk_drafts.put(db, draft["id"], doc={"x-by": action}, base_step=head, action_id=action, label=action)
                    kept.append((step, action))
                    break
                except desk_drafts.Conflict:
                    clashes.append(action)
        db.close()

    threads = [threading.Thread(target=work, args=(f"t{n}",)) for n in range(8)]
    for t in threads:
        t.start()
    for t in threads:
        t.join()
    db = desk_file.connect(desk)
    stored = {(r["step"], r["action_id"]) for r in db.execute("SELECT step, action_id FROM step WHERE step > 1")}
    parents = dict(db.execute("SELECT step, parent FROM step WHERE step > 1").fetchall())
    db.close()
    assert stored == set(kept) and len(kept) == 96
    assert parents == {n: n - 1 for n in range(2, 98)}


def test_two_desks_beside_two_banks_do_not_mix(tmp_path):
    from curvebank_web import create_app

    ids = []
    for name in ("a.db", "b.db"):
        app = create_app({"BANK": str(tmp_path / name), "CACHE": str(tmp_path / "cache"), "PREPARE_AHEAD": False})
        client = app.test_client()
        assert client.get("/api/drafts").json == {"items": []}
        ids.append(client.post("/api/drafts", json={"doc": {}}).json["id"])
        app.extensions["curvebank"].close()
    assert (tmp_path / "a.db.desk").exists() and (tmp_path / "b.db.desk").exists() and ids[0] != ids[1]


class TestDeskFile:
    """What is refused as a desk."""

    def test_another_programs_file(self, tmp_path):
        path = tmp_path / "other.desk"
        db = sqlite3.connect(path)
        db.execute("CREATE TABLE t (a)")
        db.commit()
        db.close()
        with pytest.raises(desk_file.DeskError, match="not a desk"):
            desk_file.prepare(path)

    def test_no_database_at_all(self, tmp_path):
        path = tmp_path / "text.desk"
        path.write_text("hello " * 1000)
        with pytest.raises(desk_file.DeskError, match="not a desk"):
            desk_file.prepare(path)

    def test_a_newer_desk(self, tmp_path):
        path = tmp_path / "new.desk"
        desk_file.prepare(path)
        db = sqlite3.connect(path)
        db.execute("PRAGMA user_version = 99")
        db.close()
        with pytest.raises(desk_file.DeskError, match="newer"):
            desk_file.prepare(path)

    def test_preparing_twice_changes_nothing(self, tmp_path):
        path = tmp_path / "x.desk"
        desk_file.prepare(path)
        db = desk_file.connect(path)
        draft_id = desk_drafts.create(db, {}, label="", sheet_sha256=None, create_id=uuid.uuid4().hex)
        db.close()
        desk_file.prepare(path)
        db = desk_file.connect(path)
        assert desk_drafts.row_of(db, draft_id)["head"] == 1
        assert db.execute("PRAGMA synchronous").fetchone()[0] == 2
        assert db.execute("PRAGMA journal_mode").fetchone()[0] == "wal"
        db.close()
