"""Single-curve, reading, completeness and provenance rules, each with a case that speaks and one that is silent; and the door itself."""

import doctest
import math
from dataclasses import replace

import numpy as np
import pytest
from closed_form import curve, family, notice, panel, sheet, whole

from curvebank import checks
from curvebank.checks import settings, words
from curvebank.errors import CurvebankError
from curvebank.records import Digitised, Trace, frozen

GROUPS = ("calibration-", "trace-", "fit-", "family-", "energy-", "plausible-", "complete-", "catalogue-", "provenance-")


def run(curves, overrides=None, **how):
    return checks.run(sheet(curves, **how), overrides or {})


def said(rule, curves, **how):
    return [f for f in run(curves, **how) if f.rule == rule]


def shaped(c, f):
    """The curve with its values passed through f(flow, value)."""
    p = c.points
    return replace(c, points=frozen(np.c_[p[:, 0], f(p[:, 0], p[:, 1])]))


# ------------------------------------------------------------------------------------------------- plausibility


def test_drooping_head_is_a_note_then_a_warning():
    assert said("plausible-rising-head", [curve()]) == []
    (slight,) = said("plausible-rising-head", [shaped(curve(), lambda q, v: v - 2.5 * np.exp(-q / 25))])
    assert slight.severity == "note" and "one head may have two flows" in slight.message
    (strong,) = said("plausible-rising-head", [shaped(curve(), lambda q, v: v - 8 * np.exp(-q / 25))])
    assert strong.severity == "warning" and "between 8 and" in strong.message


def test_drooping_wheels_of_one_family_are_said_in_one_breath():
    (f,) = said("plausible-rising-head", [shaped(c, lambda q, v: v - 2.5 * np.exp(-q / 25)) for c in family()])
    assert "So do 3 other wheels." in f.message and len(f.where["curves"]) == 4


def test_head_that_rises_after_a_fall():
    (f,) = said("plausible-head-saddle", [shaped(curve(), lambda q, v: v + 4 * np.exp(-(((q - 150) / 15) ** 2)))])
    assert f.severity == "warning" and "falls and then rises again" in f.message
    assert said("plausible-head-saddle", [curve()]) == []


@pytest.mark.parametrize(("scale", "severity"), [(1.0, None), (1.17, None), (1.24, "error"), (1.5, "error"), (0.01, "warning")])
def test_efficiency_limits(scale, severity):
    found = said("plausible-efficiency", [curve("efficiency", scale=scale)])
    assert [f.severity for f in found] == ([severity] if severity else [])


def test_efficiency_over_one_says_no_pump_can():
    (f,) = said("plausible-efficiency", [curve("efficiency", scale=1.5)])
    assert "reaches 120 %" in f.message and "no pump can" in f.message and "149 m³/h" in f.message


def test_values_below_zero():
    (f,) = said("plausible-negative", [shaped(curve("power"), lambda q, v: v - 12)])
    assert f.severity == "error" and f.measured < 0
    assert said("plausible-negative", [shaped(curve("npshr"), lambda q, v: v - v.min() - 0.003)]) == []


def test_npshr_that_falls():
    assert said("plausible-npshr", [curve("npshr")]) == []
    (f,) = said("plausible-npshr", [shaped(curve("npshr"), lambda q, v: 9 - v)])
    assert f.severity == "warning" and "rises with flow" in f.message
    u_shape = shaped(curve("npshr"), lambda q, v: v + 1.5 * np.exp(-q / 20))
    assert said("plausible-npshr", [u_shape]) == []


def test_power_that_still_rises_is_cautioned_once_for_the_largest_wheel():
    rising = [shaped(c, lambda q, v: 5 + 0.05 * q) for c in family("power")]
    (f,) = said("plausible-power-still-rising", rising)
    assert (f.severity, f.subject) == ("note", "curve:P-340")
    assert "Do not choose the motor from this curve without a stated run-out flow." in f.message
    assert said("plausible-power-still-rising", [shaped(curve("power"), lambda q, v: 20 - ((q - 150) / 40) ** 2)]) == []


# ------------------------------------------------------------------------------------------------- reading


def test_a_failed_curve_is_an_error_with_its_own_words():
    bad = curve(
        points=frozen([], (0, 2)), sigma=frozen([]), trace=None, fit=None, error={"code": "trace", "message": "No ink here.", "path": None}
    )
    (f,) = said("trace-failed", [bad])
    assert f.severity == "error" and f.message == "Head Ø 340 was not read. No ink here."


def test_a_flagged_trace_names_stretch_and_reason():
    c = curve()
    t = Trace(
        pixels=c.trace.pixels,
        sigma_px=c.trace.sigma_px,
        flagged=True,
        confidence=0.4,
        stretches=((100, 150, "it meets the efficiency line"),),
    )
    (f,) = said("trace-flagged", [replace(c, trace=t)])
    lo, hi = c.points[100, 0], c.points[150, 0]
    assert f"between {words.number(lo)} and {words.number(hi)} m³/h: it meets the efficiency line." in f.message
    assert f.where["box"][0] == pytest.approx(lo) and f.severity == "warning"
    (f,) = said("trace-flagged", [replace(c, trace=replace(t, stretches=()))])
    assert "chance 40 %" in f.message
    assert said("trace-flagged", [c]) == []


def test_a_fit_that_leaves_its_trace():
    c = curve()
    off = replace(c.fit, max_miss=1.2, max_miss_pct=3.0, scaled=frozen(c.fit.scaled + np.eye(7)[0]))
    (f,) = said("fit-miss", [replace(c, fit=off)])
    assert "misses its trace by 3 %" in f.message and f.limit == settings.DEFAULTS["fit_miss_pct"]
    assert said("fit-miss", [c]) == []


def test_a_line_without_fit_and_a_contour_that_needs_none():
    assert said("fit-missing", [curve(fit=None)])
    contour = curve(fit=None, quantity="efficiency", id="e75")
    assert said("fit-missing", [replace(contour, quantity="efficiency_contour", level=0.75)]) == []


def test_a_mistyped_mark_is_an_error_and_silences_the_residual():
    p = panel(worst_px=40.0, residual_px=20.0, warnings=(notice("mistyped-mark", "The power mark typed 25 sits where 20.0 kW belongs."),))
    found = [f for f in run([curve()], panels=[p]) if f.rule.startswith("calibration-")]
    assert [(f.rule, f.severity) for f in found] == [("calibration-mistyped-mark", "error")]
    assert found[0].message.startswith("The power mark typed 25")


@pytest.mark.parametrize(
    ("code", "severity"),
    [
        ("calibration-mistyped", "error"),
        ("calibration-swapped", "error"),
        ("calibration-scatter", "warning"),
        ("calibration-direction", "note"),
    ],
)
def test_notices_of_the_axes_become_findings_under_their_own_name(code, severity):
    found = [f for f in run([curve()], panels=[panel(warnings=(notice(code),))]) if f.rule.startswith("calibration-")]
    assert [(f.rule, f.severity) for f in found] == [(code, severity)]


def test_residuals_of_marks_are_judged_by_panel_size():
    assert [f.rule for f in run([curve()], panels=[panel(worst_px=9.0)]) if f.severity == "warning"] == ["calibration-residual"]
    large = panel(worst_px=9.0, outline=frozen([[0, 0], [4800, 0], [4800, 3600], [0, 3600]]))
    assert not said("calibration-residual", [curve()], panels=[large])


def test_notices_of_one_code_keep_their_own_keys():
    p = panel(warnings=(notice("grid-off", "One."), notice("grid-off", "Two.")))
    found = said("calibration-grid-off", [curve()], panels=[p])
    assert [f.message for f in found] == ["One.", "Two."] and len({f.key for f in found}) == 2


def test_a_panel_that_could_not_be_placed():
    p = panel(error={"code": "calibration", "message": "Both marks say 40.", "path": None})
    (f,) = said("calibration-failed", [], panels=[p])
    assert f.severity == "error" and "Both marks say 40." in f.message


# ------------------------------------------------------------------------------------------------- completeness, provenance


def test_what_is_missing_is_said_and_what_is_there_is_not():
    assert not [f for f in run(whole()) if f.rule.startswith("complete-missing")]
    rules = {f.rule: f for f in run(family())}
    assert {"complete-missing-power", "complete-missing-efficiency", "complete-missing-npshr"} <= set(rules)
    assert "licensed engineer" in rules["complete-missing-npshr"].message
    assert all(f.severity == "note" for f in rules.values() if f.rule.startswith("complete-"))
    assert said("complete-missing-head", [curve("power")])[0].severity == "warning"


def test_contours_count_as_present():
    contour = replace(curve("efficiency"), quantity="efficiency_contour", level=0.75, fit=None)
    assert not said("complete-missing-efficiency", [curve(), contour])


def test_head_alone_cannot_tell_the_flow_unit():
    (f,) = said("complete-flow-unit-unchecked", family())
    assert f.severity == "note" and "cannot tell m³/h from US gal/min: head alone does not show it" in f.message
    assert not said("complete-flow-unit-unchecked", whole())


def test_a_quantity_of_the_largest_wheel_only():
    (f,) = said("complete-largest-only", [*family(), curve("npshr")])
    assert f.message.startswith("NPSH required is printed for Ø 340 alone.") and f.severity == "note"


def test_letters_without_millimetres():
    lines = [curve(id=x, diameter_mm=None, label={"by": "letter", "printed": x}, applies_to="unknown") for x in "ABC"]
    (f,) = said("complete-letter-without-mm", lines)
    assert "The lines A, B and C carry a letter" in f.message
    assert not said("complete-applies-unknown", lines)


def test_a_line_for_an_unknown_wheel():
    (f,) = said("complete-applies-unknown", [curve("npshr", applies_to="unknown", diameter_mm=None)])
    assert "For which wheel NPSH required (N-340) holds is not known." in f.message


def test_speed_missing_and_speed_that_differs():
    assert said("provenance-speed-missing", [curve(rpm=None)], speed_rpm=None)[0].message.startswith("No speed is stated for any curve.")
    assert not said("provenance-speed-missing", [curve(rpm=None)])
    (f,) = said("provenance-speed-differs", [curve(rpm=1480.0)])
    assert f.severity == "note" and "rated at 1450 1/min and its curves are for 1480 1/min" in f.message
    assert not said("provenance-speed-differs", [curve(), curve(rpm=1480.0, id="x")])


def test_a_line_on_another_quantitys_axis_is_not_judged_by_its_numbers():
    mixed = shaped(
        curve("efficiency", warnings=(notice("mixed-axis", "This efficiency line is read on the head axis."),)), lambda q, v: v * 50
    )
    found = run([curve(), curve("power"), mixed])
    assert [f.severity for f in found if f.rule == "provenance-mixed-axis"] == ["warning"]
    assert not [f for f in found if f.rule in ("plausible-efficiency", "energy-balance")]


# ------------------------------------------------------------------------------------------------- the door


def everything():
    """One of nearly each finding."""
    bad = curve(
        id="bad",
        points=frozen([], (0, 2)),
        sigma=frozen([]),
        trace=None,
        fit=None,
        error={"code": "trace", "message": "No ink.", "path": None},
    )
    return sheet(
        [
            bad,
            *family("head", (340, 325, 295, 280)),
            curve("head", 300.0, true=309.0),
            curve("power", scale=1.4),
            curve("efficiency", scale=1.3),
            shaped(curve("npshr"), lambda q, v: 9 - v),
        ],
        panels=[panel(worst_px=30.0, warnings=(notice("grid-off"),))],
        speed_rpm=990.0,
    )


def test_every_finding_is_whole():
    found = checks.run(everything(), {})
    assert len(found) > 8
    order = [("error", "warning", "note").index(f.severity) for f in found]
    assert order == sorted(order)
    for f in found:
        assert f.rule.startswith(GROUPS) and f.source and f.action and f.message
        assert f.message.endswith(".") and "  " not in f.message and "None" not in f.message and "nan" not in f.message
        assert f.subject == "pump" or f.subject.split(":")[0] in ("curve", "axis", "panel", "family")
        for x in (f.measured, f.limit):
            assert x is None or math.isfinite(x)
    assert len({f.key for f in found}) == len(found)


def test_the_same_records_give_the_same_findings():
    assert checks.run(everything(), {}) == checks.run(everything(), {})


def test_rules_can_be_chosen():
    from curvebank.checks import energy

    assert {f.rule for f in checks.run(everything(), {}, rules=[energy.balance])} == {"energy-balance"}


def test_every_rule_states_its_names():
    for rule in checks.ALL:
        assert (rule.__doc__ or "").startswith(GROUPS), rule


def test_an_empty_and_a_failed_sheet_have_nothing_to_judge():
    assert checks.run(Digitised(recipe_sha256="", page=None, pump=None), {}) == []
    failed = replace(everything(), error={"code": "sheet", "message": "Not an image.", "path": None})
    assert checks.run(failed) == []


def test_a_sheet_without_pump_or_labels_is_judged_for_what_it_has():
    found = checks.run(Digitised(recipe_sha256="", page=None, pump=None, curves=(curve(rpm=None, diameter_mm=None),)), None)
    assert {f.rule for f in found if f.severity != "note"} == {"provenance-speed-missing"}


def test_tables_of_few_rows_are_judged_too():
    def rows(d):
        c = curve("head", d)
        k = np.linspace(0, 299, 6).astype(int)
        return replace(c, kind="table", trace=None, fit=None, panel=None, points=frozen(c.points[k]), sigma=frozen(c.sigma[k]))

    found = checks.run(sheet([rows(340.0), rows(325.0), rows(310.0), rows(295.0)]), {})
    assert not [f for f in found if f.rule.startswith("family-")]


def test_settings_override_by_name_and_refuse_nonsense():
    assert not [
        f for f in run([curve("efficiency", scale=1.24)], {"efficiency_high": 0.999, "theme": "dark"}) if f.rule == "plausible-efficiency"
    ]
    for bad in ("high", True, float("nan"), float("inf"), None):
        with pytest.raises(CurvebankError, match="must be a number"):
            settings.resolve({"psi_high": bad})


def test_every_limit_has_unit_source_and_meaning():
    for name, limit in settings.LIMITS.items():
        assert limit.unit and limit.source and limit.meaning, name
        assert settings.DEFAULTS[name] == limit.value


@pytest.mark.parametrize("module", [settings, words])
def test_examples_in_docstrings(module):
    failed, ran = doctest.testmod(module)
    assert ran > 0 and failed == 0
