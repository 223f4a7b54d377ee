"""Records made by hand for the bank's tests: known polynomials of an invented pump, no engine needed."""

import dataclasses
import hashlib

import numpy as np

from curvebank.records import Curve, Digitised, Finding, Fit, GridReport, Notice, PageInfo, PanelResult, PumpInfo, Trace, frozen

KEY = "LARK-WM-150"
SHEET = b"a scan of the main sheet"
SECOND_SHEET = b"a scan of the suction sheet"
RECIPE = b'{"recipe": 1}'
HEAD_320 = (50.0, -0.05, -0.0015)
HEAD_280 = (38.0, -0.04, -0.0015)
EFFICIENCY = (0.0, 0.0235, -0.000175)  # peak 0.788928571 at 67.142857 m3/h
POWER_320 = (6.0, 0.075, -0.0001)
POWER_280 = (4.0, 0.055, -0.0001)
NPSHR = (2.0, 0.0, 0.0003)


def fit(plain, lo=0.0, hi=100.0, u=0.02):
    """A fit with these plain powers, exact; its covariance gives a standard uncertainty of ``u`` at the middle and more at the ends."""
    mid, half = (lo + hi) / 2, (hi - lo) / 2
    scaled = np.polynomial.Polynomial(plain)(np.polynomial.Polynomial([mid, half])).coef
    scaled = np.pad(scaled, (0, len(plain) - len(scaled)))
    n = len(plain)
    return Fit(
        order=n - 1,
        lo=lo,
        hi=hi,
        mid=mid,
        half=half,
        scaled=frozen(scaled),
        covariance=frozen(np.eye(n) * u**2),
        plain=frozen(plain),
        sigma=u * 1.2,
        max_miss=u,
        max_miss_pct=0.1,
    )


def curve(name, quantity, plain, diameter=None, *, lo=0.0, hi=100.0, speed=1450.0, n=400, u=0.02, **more):
    """A traced and fitted curve; pixels lie 10 px per unit."""
    f = fit(plain, lo, hi, u)
    q = np.linspace(lo, hi, n)
    v = f.value(q)
    trace = Trace(
        pixels=frozen(np.c_[100 + 10 * q, 900 - 10 * v]),
        sigma_px=frozen(np.full(n, 0.05)),
        confidence=0.97,
        stretches=((3, 9, "dashes"),),
        warnings=(Notice(code="dashed", message="The line is dashed.", stretch=(3, 9)),),
        line_width_px=2.4,
    )
    made = dict(
        id=name,
        quantity=quantity,
        panel="main",
        x_axis="flow",
        y_axis=quantity,
        diameter_mm=diameter,
        speed_rpm=speed,
        trace=trace,
        points=frozen(np.c_[q, v]),
        sigma=frozen(np.full(n, u)),
        spread={"calibration": u / 2, "reading": u / 3},
        fit=f,
    )
    return Curve(**(made | more))


def failed(name):
    """A curve that could not be traced."""
    return Curve(
        id=name, quantity="head", diameter_mm=300.0, error={"code": "off-ink", "message": "Click 2 is off the ink.", "path": "$.curves[2]"}
    )


def contour(name="C-75", level=0.75):
    """A closed contour of efficiency on the head-flow plane."""
    angle = np.linspace(0, 2 * np.pi, 120)
    points = np.c_[60 + 20 * np.cos(angle), 35 + 5 * np.sin(angle)]
    trace = Trace(pixels=frozen(points * 10), sigma_px=frozen(np.full(120, 0.1)), closed=True)
    return Curve(
        id=name,
        quantity="efficiency_contour",
        panel="main",
        level=level,
        speed_rpm=1450.0,
        trace=trace,
        points=frozen(points),
        sigma=frozen(np.full(120, 0.05)),
    )


def panel(name="main"):
    """A calibrated panel with its 9 x 9 map."""
    x, y = np.meshgrid(np.linspace(100, 1100, 9), np.linspace(900, 300, 9))
    return PanelResult(
        id=name,
        outline=frozen([(100, 900), (1100, 900), (1100, 300), (100, 300)]),
        map_pixels=frozen(np.c_[x.ravel(), y.ravel()]),
        map_values={"flow": frozen((x.ravel() - 100) / 10), "head": frozen((900 - y.ravel()) / 10)},
        covariance=frozen(np.eye(4) * 0.01),
        residual_px=0.2,
        worst_px=0.5,
        grid=GridReport(used=True, lines=42, residual_px=0.03, why="42 printed lines agree with the marks."),
    )


def finding(rule="fit-miss", severity="note", subject="curve:H-320"):
    """A finding with every field filled."""
    return Finding(
        rule=rule,
        severity=severity,
        subject=subject,
        message="The fit misses the trace by 0.3 m at 12 m³/h.",
        measured=0.3,
        limit=0.2,
        unit="m",
        source="common practice, no source",
        action="Raise the order.",
        where={"panel": "main", "curves": ["H-320"]},
    )


def main_curves():
    """Head at two diameters, efficiency for the largest alone, power at two, and a failed curve."""
    return (
        curve("H-320", "head", HEAD_320, 320.0),
        curve("H-280", "head", HEAD_280, 280.0, hi=90.0),
        curve("E-320", "efficiency", EFFICIENCY, 320.0, u=0.004),
        curve("P-320", "power", POWER_320, 320.0),
        curve("P-280", "power", POWER_280, 280.0, hi=90.0),
        failed("H-300"),
    )


def digitised(curves=None, *, sheet=SHEET, page=1, findings=(), pump=None, **pump_more):
    """A digitisation of the invented pump from one sheet."""
    info = dict(maker="Lark & Söhne", model="WM 150", key=KEY, stages=1, speed_rpm=1450.0)
    info.update(pump_more)
    found = None
    if sheet is not None:
        sha = hashlib.sha256(sheet).hexdigest()
        found = PageInfo(sha256=sha, page=page, width=1200, height=1000, dpi_x=150.0, dpi_y=150.0, media="image/png", pages=3)
    return Digitised(
        recipe_sha256=hashlib.sha256(RECIPE).hexdigest(),
        page=found,
        pump=pump or PumpInfo(**info),
        panels=(panel(),),
        curves=main_curves() if curves is None else tuple(curves),
        findings=tuple(findings),
        made_by={"curvebank": "0.1.0", "numpy": "2.0"},
        sheet_file="lark-main.png",
    )


def save(store, made=None, *, sheet=SHEET, recipe=RECIPE, save_key=None, **more):
    """Save with a person, a reason and a fresh save key."""
    made = digitised() if made is None else made
    save.count += 1
    key = save_key or f"save-{save.count}"
    return store.save(made, recipe, sheet, **({"who": "R. Holt", "why": "first trace", "save_key": key} | more))


save.count = 0


def renamed(item, **changes):
    """A copy of a frozen record with other fields."""
    return dataclasses.replace(item, **changes)
