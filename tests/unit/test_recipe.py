"""The recipe: defaults, strict JSON, and faults named by JSON path (document format of the project, DEVELOPERS.md)."""

import copy
import json

import pytest

from curvebank import recipe
from curvebank.errors import RecipeError


def document():
    return {
        "recipe": 1,
        "sheet": {"file": "fen-07.png"},
        "pump": {"maker": "Fenwright", "model": "DP 80", "speed_rpm": 1450},
        "panels": [
            {
                "id": "main",
                "axes": {
                    "flow": {
                        "quantity": "flow",
                        "unit": "m3/h",
                        "marks": [{"at": [100, 900], "value": 0}, {"at": [900, 900], "value": 200}],
                    },
                    "head": {"quantity": "head", "unit": "m", "marks": [{"at": [100, 900], "value": 0}, {"at": [100, 100], "value": 50}]},
                },
            }
        ],
        "curves": [
            {
                "id": "H-320",
                "panel": "main",
                "x": "flow",
                "y": "head",
                "quantity": "head",
                "diameter_mm": 320,
                "clicks": [[110, 200], [800, 500]],
            }
        ],
    }


def test_defaults_are_the_documented_ones():
    r = recipe.parse(document())
    c = r.curves[0]
    assert (r.pump.catalogue_key, r.pump.stages, r.pump.density_kgm3) == ("FENWRIGHT-DP-80", 1, 998.2)
    assert (r.sheet.page, r.sheet.dpi, r.sheet.turn) == (1, 300, 0)
    assert (c.kind, c.ends, c.basis, c.head_is, c.factor, c.belongs_to, c.fit.order) == (
        "line",
        "ink",
        "catalogue",
        "total",
        1,
        "this",
        "auto",
    )
    assert r.panels[0].grid == "auto" and r.panels[0].axes["flow"].scale == "linear"


@pytest.mark.parametrize(
    ("label", "belongs_to"), [(None, "all"), ({"by": "letter", "printed": "B"}, "unknown"), ({"by": "speed", "printed": "1450"}, "all")]
)
def test_a_line_without_diameter_is_read_for_all_and_a_letter_for_none(label, belongs_to):
    doc = document()
    doc["curves"][0] |= {"diameter_mm": None} | ({"label": label} if label else {})
    assert recipe.parse(doc).curves[0].belongs_to == belongs_to


def put(doc, path, value):
    *way, last = path
    for step in way:
        doc = doc[step]
    if value is ...:
        del doc[last]
    else:
        doc[last] = value


@pytest.mark.parametrize(
    ("path", "value", "json_path", "words"),
    [
        (["curves", 0, "diametr_mm"], 3, "$.curves[0].diametr_mm", "diameter_mm"),
        (["panels", 0, "axes", "flow", "unit"], "gpm", "$.panels[0].axes.flow.unit", "gal/min(US)"),
        (["panels", 0, "axes", "head", "unit"], "bar", "$.panels[0].axes.head.density_kgm3", "density"),
        (["panels", 0, "axes", "head"], ..., "$.panels[0].axes", "value axis"),
        (["curves", 0, "y"], "eta", "$.curves[0].y", "flow, head"),
        (["curves", 0, "y"], "flow", "$.curves[0].y", "not flow"),
        (["curves", 0, "panel"], "p9", "$.curves[0].panel", "main"),
        (["curves", 0, "clicks", 1], [3], "$.curves[0].clicks[1][1]", "missing"),
        (["curves", 0, "fit"], {"order": 9}, "$.curves[0].fit.order", "9"),
        (["curves", 0, "quantity"], "efficiency_contour", "$.curves[0].value", "value"),
        (["curves", 0, "speed_rpm"], "1450", "$.curves[0].speed_rpm", "not a number"),
        (["sheet", "turn"], 45, "$.sheet.turn", "90"),
        (["sheet", "file"], "../up.png", "$.sheet.file", "bare name"),
        (["sheet", "sha256"], "abc", "$.sheet.sha256", "64"),
        (["sheet"], ..., "$.sheet", "missing"),
        (["pump", "stages"], 0, "$.pump.stages", "at least 1"),
        (["pump", "key"], "lower-case", "$.pump.key", "capital"),
        (["pump", "maker"], ..., "$.pump.maker", "missing"),
        (["recipe"], 2, "$.recipe", "version"),
        (["sheet", "masks"], [{"brush": [], "width_px": 4}], "$.sheet.masks[0].brush", "at least 1 belongs here"),
        (["sheet", "masks"], [{"brush": [[1, 2]]}], "$.sheet.masks[0]", "width_px"),
        (["sheet", "masks"], [{"outline": [[1, 2], [3, 4]]}], "$.sheet.masks[0].outline", "at least 3 belong here"),
        (["sheet", "masks"], [{"outline": [[1, 2], [3, 4], [5, 6]], "width_px": 4}], "$.sheet.masks[0]", "an outline has none"),
        (["sheet", "masks"], [{}], "$.sheet.masks[0]", "either a brush"),
        (["sheet", "masks"], [{"brush": [[1, 2]], "width_px": 0}], "$.sheet.masks[0].width_px", "at least 1"),
        (["curves", 0, "locked"], [[5, 6]], "$.curves[0].locked[0]", "not an object"),
        (["curves", 0, "locked"], [{"pixels": [[1, 2]]}], "$.curves[0].locked[0].pixels", "at least 2"),
        (["curves", 0, "guides"], [[5]], "$.curves[0].guides[0][1]", "missing"),
    ],
)
def test_each_fault_names_its_place(path, value, json_path, words):
    doc = document()
    put(doc, path, value)
    with pytest.raises(RecipeError) as caught:
        recipe.parse(json.dumps(doc))
    assert caught.value.path == json_path
    assert words in caught.value.message


def test_guides_locked_stretches_and_masks_are_kept():
    doc = document()
    doc["curves"][0] |= {"guides": [[5, 6]], "locked": [{"pixels": [[1, 2], [3, 4]], "sigma_px": 0.03}, {"pixels": [[7, 8], [9, 9]]}]}
    doc["curves"][1 if len(doc["curves"]) > 1 else 0].setdefault("locked", [])
    doc["sheet"]["masks"] = [{"brush": [[10, 20]], "width_px": 40}, {"outline": [[1, 2], [3, 4], [5, 6]]}]
    got = recipe.parse(doc)
    assert got.curves[0].guides == ((5, 6),) and got.curves[0].locked[0].sigma_px == 0.03 and got.curves[0].locked[1].sigma_px is None
    assert got.sheet.masks[0].width_px == 40 and got.sheet.masks[1].brush is None


def test_every_fault_is_listed():
    doc = document()
    put(doc, ["sheet", "turn"], 45)
    put(doc, ["curves", 0, "nonsense"], 1)
    with pytest.raises(RecipeError) as caught:
        recipe.parse(doc)
    assert {e["path"] for e in caught.value.details["errors"]} == {"$.sheet.turn", "$.curves[0].nonsense"}


def test_two_curves_of_one_name_are_refused():
    doc = document()
    doc["curves"].append(copy.deepcopy(doc["curves"][0]))
    with pytest.raises(RecipeError, match="Two curves"):
        recipe.parse(doc)


def test_own_keys_begin_with_x():
    doc = document()
    doc["x-note"] = {"any": "thing"}
    doc["curves"][0]["x-colour"] = "blue"
    assert recipe.parse(doc).curves[0].id == "H-320"


@pytest.mark.parametrize(
    ("text", "words"),
    [
        ('{"recipe": 1,', "line 1"),
        ("[1]", "object"),
        ('{"recipe": NaN}', "finite"),
        ('{"recipe": 1, "recipe": 1}', "twice"),
        (b"\xff\xfe\x00", "UTF-8"),
        ("[" * 200000, "nested"),
        ("", "line 1"),
    ],
)
def test_what_is_not_json_is_said(text, words):
    with pytest.raises(RecipeError, match=words):
        recipe.parse(text)


def test_a_table_needs_no_sheet_but_its_units():
    table = {"id": "T", "quantity": "head", "kind": "table", "rows": [[0, 40], [50, 35]], "x_unit": "l/s", "y_unit": "ft"}
    doc = {"recipe": 1, "pump": {"maker": "F", "model": "1"}, "curves": [table]}
    assert recipe.parse(doc).sheet is None
    del table["y_unit"]
    with pytest.raises(RecipeError) as caught:
        recipe.parse(doc)
    assert caught.value.path == "$.curves[0].y_unit"


def test_identity_is_over_the_given_bytes():
    """SHA-256 of the bytes; FIPS 180-4's empty-string value as the outside check."""
    assert recipe.sha256(b"") == "e3b0c44298fc1c149afbf4c8996fb92427ae41e4649b934ca495991b7852b855"
    assert recipe.sha256('{"a": 1}') != recipe.sha256('{"a":1}')
