"""Mutated recipes: whatever the document says, a run answers with a sound result and never with an exception of its own."""

import copy
import json

import chart
import contract_check
import pytest
from hypothesis import HealthCheck, given, settings
from hypothesis import strategies as st

from curvebank import digitise, sheet
from curvebank.errors import Cancelled, RecipeError
from curvebank.recipe import parse

BOUNDED = settings(derandomize=True, deadline=None, database=None, suppress_health_check=list(HealthCheck))
ODD = st.one_of(
    st.sampled_from([None, True, False, 0, -1, 1, 2, 7.5, 1e-300, 1e-12, 1e12, 1e13, -1e12, "", " ", "x", "head", "flow", "%", "1/min"]),
    st.sampled_from([[], {}, [[]], [1, 2], [[1, 2], [3, 4]], [0, 0], {"x-a": 1}, "\x00", "\ud800", "log10", "table", "points", "hand"]),
    st.floats(allow_nan=True, allow_infinity=True),
    st.integers(-(10**40), 10**40),
    st.text(max_size=8),
)
NEAR = st.one_of(st.floats(-50, 950), st.integers(-50, 950), st.sampled_from([0.5, 0.999, 1.001, 2.0, -1.0]))


class Ready:
    """A prepared sheet and its page; named in one word where a failing example is printed."""

    def __init__(self, prepared, page):
        self.prepared, self.page = prepared, page

    def __repr__(self):
        return "chart"


@pytest.fixture(scope="module")
def prepared(chart_png):
    """The drawn chart, decoded and prepared once."""
    loaded = sheet.load(chart_png)
    return Ready(sheet.prepare(loaded), loaded.info)


def places(value, at=()):
    """Every place of a document, as the keys that lead there."""
    items = value.items() if isinstance(value, dict) else enumerate(value) if isinstance(value, list) else ()
    for k, v in items:
        yield (*at, k)
        yield from places(v, (*at, k))


def numbers_of(value):
    """The places that hold a number a person clicked or typed."""

    def get(at):
        found = value
        for k in at:
            found = found[k]
        return found

    return [at for at in places(value) if type(get(at)) in (int, float) and at[0] != "recipe"]


def put(doc, at, value, how="set"):
    """Change one place; a place that an earlier change removed is left alone."""
    try:
        for k in at[:-1]:
            doc = doc[k]
        if how == "delete":
            del doc[at[-1]]
        elif how == "twice" and isinstance(doc, list):
            doc.insert(at[-1], copy.deepcopy(doc[at[-1]]))
        else:
            doc[at[-1]] = value
    except (KeyError, IndexError, TypeError):
        pass


def run(doc, prepared):
    """The result, held against the contract; the recipe's own curves where it can be read."""
    made = digitise.run(doc, None, prepared=prepared.prepared, page=prepared.page)
    result = json.loads(digitise.dumps(made))
    try:
        parse(doc if isinstance(doc, bytes) else json.dumps(doc).encode())
        known = doc if isinstance(doc, dict) else None
    except RecipeError:
        known = None
        assert result["error"] is not None and result["error"]["path"].startswith("$")
    assert contract_check.faults(result, known) == []
    return result


def test_the_untouched_recipe_has_no_fault(prepared):
    result = run(chart.document(), prepared)
    assert result["error"] is None and all(c["error"] is None and c["fit"] for c in result["curves"])


@pytest.mark.parametrize(
    ("at", "value"),
    [
        (("curves", 0, "sigma"), [1.0]),
        (("curves", 0, "points", 3, 1), float("nan")),
        (("curves", 0, "fit", "scaled", 0), 1e6),
        (("curves", 0, "id"), "other"),
        (("curves", 0, "error"), {"code": "x", "message": "long enough to be read", "path": "$"}),
        (("panels", 0, "map", "values", "head"), [0.0] * 80),
        (("findings", 0, "rule"), "odd-rule"),
    ],
)
def test_the_check_sees_a_broken_promise(prepared, at, value):
    result = run(chart.document(), prepared)
    put(result, at, value)
    assert contract_check.faults(result, chart.document())


@settings(BOUNDED, max_examples=60)
@given(st.data())
def test_any_value_anywhere(prepared, data):
    """One to three places of the document changed to anything: mostly refused with a path, otherwise a sound result."""
    doc = chart.document() | {"curves": chart.document()["curves"][:1]}
    for _ in range(data.draw(st.integers(1, 3))):
        at = data.draw(st.sampled_from(list(places(doc))))
        put(doc, at, copy.deepcopy(data.draw(ODD)), data.draw(st.sampled_from(["set", "set", "delete", "twice"])))
    run(doc, prepared)


@settings(BOUNDED, max_examples=20)
@given(st.data())
def test_marks_clicks_and_numbers_moved(prepared, data):
    """Valid documents with wrong numbers: the faults that only calibration, tracing, fit and checks can see."""
    doc = chart.document()
    doc["curves"] = [data.draw(st.sampled_from(doc["curves"]))]
    doc["curves"][0] |= data.draw(
        st.fixed_dictionaries(
            {},
            optional={
                "kind": st.sampled_from(["hand", "points"]),
                "closed": st.just(True),
                "ends": st.just("click"),
                "factor": st.sampled_from([1e-12, 0.5, 1e12]),
                "head_is": st.just("per stage"),
                "fit": st.fixed_dictionaries({"order": st.sampled_from([1, 8]), "through_zero": st.booleans()}),
                "clicks": st.lists(st.tuples(NEAR, NEAR).map(list), max_size=9),
            },
        )
    )
    for at in data.draw(st.lists(st.sampled_from(numbers_of(doc)), max_size=3)):
        put(doc, at, data.draw(NEAR))
    doc["panels"][0]["axes"]["head"]["scale"] = data.draw(st.sampled_from(["linear", "linear", "log10"]))
    run(doc, prepared)


@settings(BOUNDED, max_examples=60)
@given(st.lists(st.tuples(NEAR | st.floats(-1e12, 1e12), NEAR | st.floats(-1e12, 1e12)), max_size=8), st.sampled_from(["m", "ft"]))
def test_typed_tables(prepared, rows, unit):
    curve = {"id": "t", "quantity": "head", "kind": "table", "rows": [list(r) for r in rows], "x_unit": "l/s", "y_unit": unit}
    run({"recipe": 1, "pump": {"maker": "Fenwright", "model": "T"}, "curves": [curve]}, Ready(None, None))


@settings(BOUNDED, max_examples=60)
@given(st.integers(0, 4000), st.binary(max_size=4), st.booleans())
def test_bytes_cut_and_changed(prepared, at, junk, cut):
    data = json.dumps(chart.document() | {"curves": []}).encode()
    at = min(at, len(data))
    run(data[:at] + junk + (b"" if cut else data[at + len(junk) :]), prepared)


def test_cancelling_passes_through(prepared):
    def stop(share, text):
        raise Cancelled("stopped by the test")

    with pytest.raises(Cancelled):
        digitise.run(chart.document(), None, prepared=prepared.prepared, page=prepared.page, progress=stop)
