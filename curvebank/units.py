"""Units at the edges, canonical units inside: one place for every conversion factor.

Canonical units are m3/h, m, kW, efficiency as a fraction, mm, 1/min and kg/m3. ``to_canonical`` is the only door
from a printed unit, ``from_canonical`` the way back. Factors are exact from their definitions (NIST SP 811,
appendix B; international yard and pound of 1959; the US gallon is 231 in3, the imperial gallon 4.54609 l).
There is no bare ``gal`` and no guess: an unknown unit is a ``UnitError`` that lists the known ones.
"""

import re

from .errors import UnitError

GRAVITY_MS2 = 9.80665
"""Standard gravity [m/s2], exact (3rd CGPM 1901)."""

WATER_DENSITY_KGM3 = 998.2
"""Clean cold water at 20 C [kg/m3] (IAPWS-95 gives 998.207 at 101325 Pa)."""

LB_KG = 0.45359237
FOOT_M = 0.3048
INCH_MM = 25.4
GALLON_US_M3 = 3.785411784e-3  # 231 in3, exact
GALLON_IMP_M3 = 4.54609e-3
POUND_FORCE_N = LB_KG * GRAVITY_MS2
PSI_PA = POUND_FORCE_N / (INCH_MM / 1000) ** 2
HORSEPOWER_W = 550 * FOOT_M * POUND_FORCE_N
"""Mechanical horsepower, 550 ft lbf/s [W]."""
HORSEPOWER_METRIC_W = 75 * GRAVITY_MS2
"""Metric horsepower, 75 kgf m/s [W]."""

FLOW = {
    "m3/h": 1.0,
    "m3/s": 3600.0,
    "m3/min": 60.0,
    "m3/d": 1 / 24,
    "l/s": 3.6,
    "l/min": 0.06,
    "Ml/d": 1000 / 24,
    "gal/min(US)": 0.22712470704,  # 60 x 3.785411784e-3, written out because the product is one ulp off
    "gal/min(imp)": GALLON_IMP_M3 * 60,
    "Mgal/d(US)": GALLON_US_M3 * 1e6 / 24,
    "Mgal/d(imp)": GALLON_IMP_M3 * 1e6 / 24,
    "ft3/s": FOOT_M**3 * 3600,
    "ft3/min": FOOT_M**3 * 60,
}
HEAD = {"m": 1.0, "ft": FOOT_M}
PRESSURE_PA = {"bar": 1e5, "kPa": 1e3, "psi": PSI_PA, "kgf/cm2": 98066.5}
POWER = {"kW": 1.0, "W": 1e-3, "hp": HORSEPOWER_W / 1e3, "hp(metric)": HORSEPOWER_METRIC_W / 1e3}
EFFICIENCY = {"%": 0.01, "1": 1.0}
LENGTH_MM = {"mm": 1.0, "in": INCH_MM}
SPEED = {"1/min": 1.0}

QUANTITIES = {
    "flow": FLOW,
    "head": HEAD,
    "npshr": HEAD,
    "suction_lift": HEAD,
    "power": POWER,
    "input_power": POWER,
    "efficiency": EFFICIENCY,
    "overall_efficiency": EFFICIENCY,
    "diameter": LENGTH_MM,
    "speed": SPEED,
}
CANONICAL = {
    "flow": "m3/h",
    "head": "m",
    "npshr": "m",
    "suction_lift": "m",
    "power": "kW",
    "input_power": "kW",
    "efficiency": "1",
    "overall_efficiency": "1",
    "diameter": "mm",
    "speed": "1/min",
}
SHOWN = {
    "m3/h": "m³/h", "m3/s": "m³/s", "m3/min": "m³/min", "m3/d": "m³/d", "ft3/s": "ft³/s", "ft3/min": "ft³/min",
    "gal/min(US)": "US gal/min", "gal/min(imp)": "imperial gal/min", "Mgal/d(US)": "US Mgal/d", "Mgal/d(imp)": "imperial Mgal/d",
    "hp(metric)": "metric hp", "kgf/cm2": "kgf/cm²", "1": "a fraction",
}  # fmt: skip
"""How a unit is written in a text, where that is not its code."""
_PRESSURE_AS_HEAD = ("head", "npshr", "suction_lift")


def known_units(quantity):
    """Units accepted for a quantity, canonical first; pressure units count as head."""
    if quantity not in QUANTITIES:
        raise UnitError(f"{quantity!r} is not a quantity. Known: {', '.join(QUANTITIES)}.")
    units = list(QUANTITIES[quantity])
    return units + list(PRESSURE_PA) if quantity in _PRESSURE_AS_HEAD else units


def factor(quantity, unit, *, density_kgm3=None):
    """Canonical units per printed unit, so that ``canonical = printed * factor``.

    Parameters
    ----------
    quantity : str
        One of ``QUANTITIES``.
    unit : str
        A unit of that quantity. Pressure as head needs ``density_kgm3``: h = p / (rho g).
    density_kgm3 : float, optional
        Density that the printed pressure scale was drawn for [kg/m3].

    Raises
    ------
    UnitError
        Unknown quantity or unit, or a pressure scale without its density.

    Examples
    --------
    >>> factor("flow", "gal/min(US)")
    0.22712470704
    >>> round(factor("head", "bar", density_kgm3=1000.0), 6)
    10.197162
    """
    if quantity not in QUANTITIES:
        raise UnitError(f"{quantity!r} is not a quantity. Known: {', '.join(QUANTITIES)}.")
    table = QUANTITIES[quantity]
    if unit in table:
        return table[unit]
    if quantity in _PRESSURE_AS_HEAD and unit in PRESSURE_PA:
        if density_kgm3 is None:
            raise UnitError(f"A {quantity} axis in {unit} needs the density it was drawn for: give density_kgm3.")
        return PRESSURE_PA[unit] / (density_kgm3 * GRAVITY_MS2)
    hint = ""
    if unit in ("gal/min", "gpm", "usgpm", "igpm"):
        hint = " A gallon has two meanings: write gal/min(US) or gal/min(imp)."
    elif unit in ("ps", "PS", "cv", "CV"):
        hint = " Metric horsepower is written hp(metric)."
    raise UnitError(f"{unit!r} is not a unit of {quantity}.{hint} Known: {', '.join(known_units(quantity))}.")


def to_canonical(value, quantity, unit, *, density_kgm3=None):
    """Convert a number or array from a printed unit to the canonical one."""
    return value * factor(quantity, unit, density_kgm3=density_kgm3)


def from_canonical(value, quantity, unit, *, density_kgm3=None):
    """Convert a number or array from the canonical unit to a printed one."""
    return value / factor(quantity, unit, density_kgm3=density_kgm3)


def shown(unit):
    """A unit as texts write it: m³/h for the code m3/h."""
    return SHOWN.get(unit, unit)


_FRACTION = re.compile(r"(?:(?P<whole>\d+)[ -]+)?(?P<top>\d+)/(?P<bottom>\d+)")
_SPACES = r"[ \u00a0\u2009\u202f]"  # plain, no-break, thin and narrow no-break: all are typed or pasted
_THOUSANDS = re.compile(rf"\d{{1,3}}(?:{_SPACES}\d{{3}})+(?:[.,]\d+)?")


def parse_number(text):
    """Read a number as people type it: ``12.5``, ``12,5``, ``12 1/2``, ``1 450``.

    A comma is a decimal comma. ``1,450`` could mean two things and is refused with both readings named.

    Raises
    ------
    UnitError
        The text is no number; the message repeats it and, where one letter was meant as a digit, asks.

    Examples
    --------
    >>> parse_number("12 1/2"), parse_number("12,5"), parse_number("1 450")
    (12.5, 12.5, 1450.0)
    """
    raw = str(text).strip()
    s = raw.replace("−", "-").replace("″", "").replace('"', "").strip()
    sign = -1.0 if s.startswith("-") else 1.0
    body = s[1:].strip() if s[:1] in ("+", "-") else s
    m = _FRACTION.fullmatch(body)
    if m and int(m["bottom"]) > 0:
        return sign * (int(m["whole"] or 0) + int(m["top"]) / int(m["bottom"]))
    if _THOUSANDS.fullmatch(body):
        body = re.sub(_SPACES, "", body)
    if re.fullmatch(r"[1-9]\d{0,2},\d{3}", body):
        whole, rest = body.split(",")
        raise UnitError(f"“{raw}” can mean {whole}.{rest} or {whole}{rest}. Type it without the comma.")
    body = body.replace(",", ".", 1) if body.count(",") == 1 and "." not in body else body
    try:
        if not re.fullmatch(r"(\d+\.?\d*|\.\d+)([eE][+-]?\d+)?", body):
            raise ValueError
        return sign * float(body)
    except ValueError:
        repaired = body.translate(str.maketrans("oOlIS", "00115"))
        hint = f" Did you mean {repaired}?" if re.fullmatch(r"\d+\.?\d*", repaired) else " Type digits, like 120 or 12.5."
        raise UnitError(f"“{raw}” is not a number.{hint}") from None
