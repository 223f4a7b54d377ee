"""What the masks of an unfinished draft cover."""

import chart

from curvebank import sheet
from curvebank.desk import masked


def test_marks_clicks_areas_and_faults_are_told():
    prepared = sheet.prepare(sheet.load(chart.png()))
    doc = chart.document()
    (x, y), (u, v) = doc["panels"][0]["axes"]["eta"]["marks"][2]["at"], doc["curves"][1]["clicks"][0]
    doc["sheet"]["masks"] = [{"brush": [[x, y], [u, v]], "width_px": 10}, {"outline": [[1, 2]]}, {"brush": [[99999, 1]], "width_px": 4}]
    doc["curves"].append({"id": "draft", "clicks": [["?", None], [1]]})
    told = masked.look(doc, prepared)
    assert told["marks"] == [{"panel": "main", "axis": "eta", "mark": 2, "message": told["marks"][0]["message"]}]
    assert [(c["curve"], c["click"]) for c in told["clicks"]] == [("H-290", 0)]
    first, second, third = told["masks"]
    assert first["error"] is None and first["area_px"] > 1000 and first["box"][0] < min(x, u)
    assert second["error"]["path"] == "$.sheet.masks[1].outline" and third["error"]["path"] == "$.sheet.masks[2].brush[0]"
    assert 0 < told["share"] < 0.05


def test_no_masks_hide_nothing():
    prepared = sheet.prepare(sheet.load(chart.png()))
    assert masked.look({"recipe": 1}, prepared) == {"masks": [], "marks": [], "clicks": [], "share": 0.0}
