"""A pump in closed form, as the records that a digitised sheet would give. Not a test."""

import numpy as np

from curvebank import units
from curvebank.records import Curve, Digitised, Fit, GridReport, Notice, PanelResult, PumpInfo, Trace, frozen

FULL_MM, RATED_RPM = 340.0, 1450.0
DENSITY = 998.2


def head(q):
    """psi at shut-off is 9.80665 x 40 / (pi 0.34 1450 / 60)^2 = 0.589."""
    return 40 - 0.01 * q - 0.0004 * q**2


def efficiency(q):
    """Best efficiency 0.80 at 150 m3/h."""
    return 0.80 * (1 - ((q - 150) / 150) ** 2)


def power(q):
    """rho g Q H / eta; the limit at zero flow is finite."""
    with np.errstate(invalid="ignore", divide="ignore"):
        return DENSITY * 9.80665 * q * head(q) / efficiency(q) / 3.6e6


EXPONENT = {"head": 2.1, "power": 3.2, "efficiency": 0.1, "npshr": 0.0}
SHAPE = {"head": head, "power": power, "efficiency": efficiency, "npshr": lambda q: 2 + 1.2e-4 * q**2}
UNIT = {"head": "m", "power": "kW", "efficiency": "%", "npshr": "m"}


def curve(quantity="head", mm=FULL_MM, *, true=None, read_as=None, flow_as=None, scale=1.0, lo=8.0, hi=230.0, rpm=RATED_RPM, **fields):
    """One curve of diameter ``true`` printed as ``mm``; ``read_as`` is the wrong unit its axis is typed in, ``flow_as`` likewise."""
    r = (true or mm) / FULL_MM
    q = np.linspace(lo, hi, 300)
    v = SHAPE[quantity](q) * r ** EXPONENT[quantity] * scale
    q = q * r**1.1
    top = float(np.abs(v).max())
    if read_as:
        k = units.factor(quantity, read_as) / units.factor(quantity, UNIT[quantity])
        v, top = v * k, top * k
    if flow_as:
        q = q * units.factor("flow", flow_as)
    fields.setdefault("id", f"{quantity[0].upper()}-{mm:g}")
    n = len(q)
    trace = Trace(pixels=frozen(np.c_[q, v]), sigma_px=frozen(np.full(n, 0.05)))
    t = (q - q.mean()) / (np.ptp(q) / 2)
    c = np.polynomial.polynomial.polyfit(t, v, 6)
    fit = Fit(
        order=6,
        lo=float(q[0]),
        hi=float(q[-1]),
        mid=float(q.mean()),
        half=float(np.ptp(q) / 2),
        scaled=frozen(c),
        covariance=frozen(np.eye(7) * 1e-8),
        plain=frozen(c),
        sigma=0.002 * top,
        max_miss=0.0005 * top,
        max_miss_pct=0.05,
    )
    base = {
        "quantity": quantity,
        "panel": "main",
        "diameter_mm": mm,
        "speed_rpm": rpm,
        "points": frozen(np.c_[q, v]),
        "sigma": frozen(np.full(n, 0.002 * top)),
        "spread": {"calibration": 0.001 * top, "reading": 0.0002 * top, "drawing": 0.0015 * top, "fit": 0.0003 * top},
        "trace": trace,
        "fit": fit,
        "printed_x_unit": flow_as or "m3/h",
        "printed_y_unit": read_as or UNIT[quantity],
    }
    return Curve(**{**base, **fields})


def family(quantity="head", diameters=(340, 325, 310, 295), **fields):
    """Curves of several diameters, right in every way."""
    return [curve(quantity, float(d), **fields) for d in diameters]


def whole():
    """A complete sheet: head and power of four diameters, efficiency of two, NPSHr of one."""
    return [*family("head"), *family("power"), *family("efficiency", (340, 310)), curve("npshr")]


def panel(**fields):
    """A calibrated panel without fault."""
    base = {
        "id": "main",
        "outline": frozen([[0, 0], [1200, 0], [1200, 900], [0, 900]]),
        "map_pixels": frozen(np.zeros((81, 2))),
        "map_values": {},
        "covariance": frozen(np.zeros((1, 1))),
        "residual_px": 0.6,
        "worst_px": 1.2,
        "grid": GridReport(used=True, lines=20, residual_px=0.05, why="matched"),
    }
    return PanelResult(**{**base, **fields})


def notice(code, message="Something is off."):
    return Notice(code=code, message=message)


def sheet(curves, *, panels=None, **pump):
    base = {"maker": "Brook", "model": "T 65", "key": "BROOK-T-65", "stages": 1, "speed_rpm": RATED_RPM}
    return Digitised(
        recipe_sha256="0" * 64,
        page=None,
        pump=PumpInfo(**{**base, **pump}),
        panels=tuple(panels if panels is not None else [panel()]),
        curves=tuple(curves),
    )
