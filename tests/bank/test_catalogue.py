"""The lists and details that screens and commands show: plain, complete, ready for JSON."""

import json

import bank_samples as make
import pytest

from curvebank.bank import catalogue, revision_view
from curvebank.errors import BankError, NotFound, OutsideDomain


@pytest.fixture
def shelf(store):
    """Twelve pumps of two makers in several states."""
    for i in range(12):
        maker = "Lark & Söhne" if i % 2 else "Plover Works"
        make.save(store, make.digitised(key=f"P-{i:02d}", model=f"WM {100 + i}%", maker=maker), release=i % 3 == 0)
    return store.bank


def test_list_has_one_item_a_pump(shelf):
    """Everything that a line of the catalogue shows."""
    item = catalogue.list_pumps(shelf)["items"][0]
    assert item["key"] == "P-00" and item["state"] == "released" and item["revision"] == 1
    assert item["diameters_mm"] == [280.0, 320.0] and item["quantities"] == ["head", "efficiency", "power"]
    assert item["bep"]["flow_m3h"] == pytest.approx(67.142857) and item["findings"] == {"error": 0, "warning": 0, "note": 0}
    json.dumps(item, allow_nan=False)


def test_pages_cover_all_once(shelf):
    """By cursor, in the order of the key."""
    seen, cursor = [], None
    while True:
        page = catalogue.list_pumps(shelf, cursor=cursor, limit=5)
        seen += [item["key"] for item in page["items"]]
        cursor = page["next"]
        if cursor is None:
            break
    assert seen == [f"P-{i:02d}" for i in range(12)]


@pytest.mark.parametrize(
    ("how", "count"),
    [
        ({"q": "plover"}, 6),
        ({"q": "LARK wm"}, 6),
        ({"q": "p-0"}, 10),
        ({"q": "100%"}, 1),
        ({"q": "_"}, 0),
        ({"state": "released"}, 4),
        ({"state": "draft", "q": "lark"}, 4),
    ],
)
def test_filters(shelf, how, count):
    """Words in key, maker or model; wildcards of SQL mean themselves."""
    assert len(catalogue.list_pumps(shelf, **how)["items"]) == count


def test_unknown_state_is_named(shelf):
    """Not an empty list."""
    with pytest.raises(BankError, match="withdrawn"):
        catalogue.list_pumps(shelf, state="lost")


def test_pump_detail_tells_the_history(store):
    """Revisions with their states, events with their chain."""
    make.save(store, release=True)
    make.save(store, release=True, why="better scan")
    store.event(make.KEY, 2, "commented", who="A. Reed", why="Edge is faint.")
    detail = catalogue.pump_detail(store.bank, make.KEY)
    assert [(r["number"], r["state"], r["parent"]) for r in detail["revisions"]] == [(1, "superseded", None), (2, "released", 1)]
    assert detail["released"] == 2 and detail["maker"] == "Lark & Söhne"
    assert [e["kind"] for e in detail["events"]] == ["saved", "released", "saved", "superseded", "released", "commented"]
    assert detail["events"][3]["more"] == {"by": 2} and detail["events"][4]["more"] == {"supersedes": 1}
    json.dumps(detail, allow_nan=False)
    with pytest.raises(NotFound):
        catalogue.pump_detail(store.bank, "NOBODY")


def test_revision_detail_is_complete(store):
    """Curves with fit, trace pixels and points; panels; failed curves; findings; cautions; sheets."""
    make.save(store, make.digitised([*make.main_curves(), make.contour()], findings=[make.finding()]), release=True)
    detail = revision_view.detail(store.bank, make.KEY, 1)
    json.dumps(detail, allow_nan=False)
    curve = detail["curves"][0]
    assert len(curve["points"]) == len(curve["trace_pixels"]) == len(curve["sigma_px"]) == len(curve["sigma"]) == 200
    x, y = curve["trace_pixels"][-1]
    q, h = curve["points"][-1]
    assert (x, y) == pytest.approx((100 + 10 * q, 900 - 10 * h), rel=1e-5)
    assert curve["fit"]["coefficients"] == pytest.approx(make.HEAD_320) and curve["fit"]["domain"] == [0.0, 100.0]
    assert detail["curves"][-1]["fit"] is None and detail["curves"][-1]["level"] == 0.75
    assert detail["panels"][0]["map"]["values"]["flow"][0] == 0.0 and detail["panels"][0]["grid"]["lines"] == 42
    assert detail["sheets"][0]["page"] == 1 and detail["sheets"][0]["width"] == 1200 and len(detail["sheets"][0]["sha256"]) == 64
    assert detail["findings"][0]["where"] == {"panel": "main", "curves": ["H-320"]}
    assert detail["findings"][0]["sheet_sha256"] == detail["curves"][0]["sheet_sha256"] == detail["sheets"][0]["sha256"]
    assert detail["state"] == "released" and detail["made_by"]["curvebank"] == "0.1.0" and detail["cautions"]
    with pytest.raises(NotFound, match="It has 1"):
        revision_view.detail(store.bank, make.KEY, 9)


def test_withdrawn_revision_is_shown_without_a_script_s_warning(store):
    """Screens say it in their own way; warnings are errors in this suite."""
    make.save(store, release=True)
    store.event(make.KEY, 1, "withdrawn", who="A. Reed", why="wrong")
    assert revision_view.detail(store.bank, make.KEY, 1)["state"] == "withdrawn"


def test_values_at_a_list_of_flows(store):
    """None where nothing was traced."""
    make.save(store)
    got = revision_view.values(store.bank, make.KEY, 1, "head", [50.0, 500.0], diameter_mm=320.0)
    assert got["value"] == [pytest.approx(43.75), None] and got["inside"] == [True, False]
    assert got["u_machine"][0] > got["u_print"][0] > 0 and got["u_print"][1] is None and got["domain"] == [0.0, 100.0]
    with pytest.raises(OutsideDomain):
        revision_view.values(store.bank, make.KEY, 1, "head", [50.0], diameter_mm=500.0)


def test_duties_as_dicts(store):
    """For the page's form."""
    make.save(store)
    got = revision_view.duty(store.bank, make.KEY, 1, static_head_m=20, friction_m_per_m3h2=2e-3, diameter_mm=320)
    assert got["duties"][0]["stable"] and json.dumps(got)


def test_sheets_and_recipes_come_back_as_they_were(store):
    """Byte for byte, by hash."""
    make.save(store)
    sheet = revision_view.detail(store.bank, make.KEY, 1)["sheets"][0]
    assert catalogue.sheet_bytes(store.bank, sheet["sha256"]) == make.SHEET
    facts = {"sha256": sheet["sha256"], "file_name": "lark-main.png", "media": "image/png", "pages": 3}
    assert catalogue.sheet_facts(store.bank, sheet["sha256"]) == facts
    assert catalogue.blob(store.bank, sheet["recipe_sha256"]) == ("recipe", make.RECIPE)
    (entry,) = revision_view.recipes(store.bank, make.KEY, 1)
    assert entry["recipe"] == make.RECIPE and entry["sheet_sha256"] == sheet["sha256"]
    for wrong in ("00" * 32, "not hex"):
        with pytest.raises(NotFound):
            catalogue.sheet_bytes(store.bank, wrong)
    with pytest.raises(NotFound):
        catalogue.sheet_bytes(store.bank, sheet["recipe_sha256"])
