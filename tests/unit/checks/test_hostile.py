"""Records no chart would give, and charts drawn by a careless hand: the rules must answer, never fall over."""

from dataclasses import replace

import numpy as np
import pytest
from closed_form import curve, panel, sheet

from curvebank import checks
from curvebank.records import Trace, frozen

QUANTITIES = ("head", "power", "efficiency", "npshr", "suction_lift", "input_power", "overall_efficiency", "efficiency_contour")


def wild(rng, i):
    """One curve of arbitrary shape, size and labels."""
    n = int(rng.choice([0, 1, 2, 3, 7, 40, 300]))
    kind = rng.integers(6)
    q = np.sort(rng.uniform(0, 10.0 ** rng.integers(-1, 5), n))
    v = 10.0 ** rng.integers(-3, 4) * rng.normal(size=n)
    if kind == 0:
        q = np.full(n, 5.0)
    elif kind == 1:
        v = np.zeros(n)
    elif kind == 2:
        v = np.full(n, 3.0)
    elif kind == 3:
        q = q[::-1]
    elif kind == 4:
        q, v = rng.permutation(q), np.abs(v)
    quantity = str(rng.choice(QUANTITIES))
    return replace(
        curve(id=f"c{i}"),
        quantity=quantity,
        level=0.7 if quantity.endswith("_contour") else None,
        points=frozen(np.c_[q, v], (n, 2)),
        sigma=frozen(np.abs(rng.normal(size=n)) * rng.choice([0, 1e-9, 1.0]), (n,)),
        spread={} if rng.uniform() < 0.5 else {"drawing": float(rng.choice([0.0, 0.1]))},
        trace=Trace(
            pixels=frozen(np.c_[q, v], (n, 2)),
            sigma_px=frozen(np.ones(n), (n,)),
            flagged=bool(rng.uniform() < 0.3),
            stretches=((0, max(0, n - 1), "doubt"),) if rng.uniform() < 0.3 else (),
        ),
        fit=None if rng.uniform() < 0.5 else curve().fit,
        diameter_mm=rng.choice([None, 1e-3, 200.0, 300.0, 300.5, 340.0, 1e6]),
        speed_rpm=rng.choice([None, 1.0, 1450.0, 2900.0]),
        applies_to=str(rng.choice(["this", "all", "unknown"])),
        printed_x_unit=str(rng.choice(["m3/h", "l/s", "gal/min(US)"])),
        printed_y_unit=str(rng.choice(["m", "kW", "%", "bar", "hp", "1"])),
    )


@pytest.mark.parametrize("seed", range(40))
def test_nothing_makes_a_rule_fall_over(seed):
    import json

    rng = np.random.default_rng(seed)
    curves = [wild(rng, i) for i in range(int(rng.integers(1, 9)))]
    d = sheet(curves, panels=[panel(outline=frozen([], (0, 2)))], speed_rpm=rng.choice([None, 1450.0]), stages=int(rng.integers(1, 5)))
    for f in checks.run(d, {}):
        assert f.message and "nan" not in f.message.lower().split() and "inf" not in f.message.split()
        json.dumps([f.measured, f.limit, f.where], allow_nan=False)
    json.dumps(checks.family_picture(curves, {}, pump=d.pump), allow_nan=False)


def test_a_line_that_turns_back_in_flow_is_judged_by_its_mean():
    c = curve()
    p = c.points.copy()
    p[::2, 0] += 3.0
    assert not [f for f in checks.run(sheet([replace(c, points=frozen(p))]), {}) if f.severity == "error"]


def test_the_same_wheel_drawn_twice_with_different_heads_is_a_contradiction():
    twice = [curve(), curve("head", 340.0, id="again", scale=0.9), curve("head", 310.0), curve("head", 295.0)]
    found = [f for f in checks.run(sheet(twice), {}) if f.rule.startswith("family-") and f.severity != "note"]
    assert found
