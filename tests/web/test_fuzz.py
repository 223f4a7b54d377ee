"""Documents that are wrong anywhere: kept as they are, answered with a problem, never with a fault of the program."""

import copy
import json
import random

import pytest
from hypothesis import HealthCheck, given, settings
from hypothesis import strategies as st

ODD = (None, True, 0, -1, 1e300, 1e-320, 10**25, "", "x", "\x00", "Ø", [], {}, [[]], [1, 2], {"a": 1}, 0.5, "flow", "ft", "log10", "off")
JSON = st.recursive(
    st.none() | st.booleans() | st.integers(-(10**30), 10**30) | st.floats(allow_nan=False, allow_infinity=False) | st.text(max_size=8),
    lambda inner: (
        st.lists(inner, max_size=3)
        | st.dictionaries(st.sampled_from(["sheet", "pump", "page", "sha256", "file", "x-a"]), inner, max_size=3)
    ),
    max_leaves=12,
)


@settings(max_examples=30, deadline=None, derandomize=True, suppress_health_check=[HealthCheck.function_scoped_fixture])
@given(doc=st.dictionaries(st.sampled_from(["recipe", "sheet", "pump", "panels", "curves", "x-a"]), JSON, max_size=4))
def test_any_json_object_can_be_a_draft_and_comes_back_unchanged(client, doc):
    made = client.post("/api/drafts", json={"doc": doc})
    assert made.status_code == 201 and json.dumps(made.json["doc"]) == json.dumps(doc)
    assert client.put(f"/api/drafts/{made.json['id']}", json={"doc": doc, "base_step": 1, "action_id": "a", "label": ""}).json == {
        "step": 2
    }
    client.delete(f"/api/drafts/{made.json['id']}")


def places(node, path=()):
    """Every path inside a document."""
    yield path
    items = node.items() if isinstance(node, dict) else enumerate(node) if isinstance(node, list) else ()
    for key, value in items:
        yield from places(value, (*path, key))


def spoil(node, rng):
    """A copy with one or two places removed, scaled or replaced by something odd."""
    node = copy.deepcopy(node)
    for _ in range(rng.randint(1, 2)):
        path = rng.choice([p for p in places(node) if p])
        inner = node
        for key in path[:-1]:
            inner = inner[key]
        value, how = inner[path[-1]], rng.random()
        if how < 0.15:
            del inner[path[-1]]
        elif how < 0.35 and isinstance(value, int | float) and not isinstance(value, bool):
            inner[path[-1]] = value * rng.choice([-1, 0, 1.5, 1e3, 1e-9])
        else:
            inner[path[-1]] = rng.choice(ODD)
    return node


@pytest.mark.parametrize("seed", range(6))
def test_a_spoilt_panel_or_curve_is_a_problem_not_a_fault(client, ran, seed):
    rng = random.Random(seed)
    url = f"/api/drafts/{ran['id']}/preview"
    codes = set()
    for _ in range(12):
        panel = spoil(ran["doc"]["panels"][0], rng)
        curve = rng.choice([None, None, spoil(ran["doc"]["curves"][0], rng)])
        answer = client.post(url, json={"panel": panel, "curve": curve, "seq": 1})
        assert answer.status_code in (200, 422), (answer.get_data(as_text=True), panel, curve)
        if answer.status_code == 422:
            assert answer.mimetype == "application/problem+json" and answer.json["detail"]
            codes.add(answer.json["code"])
    assert codes
