"""Numbers and names as findings write them."""

import math
from collections.abc import Sequence

from .. import units
from ..records import Curve

QUANTITY_WORDS = {
    "head": "head",
    "power": "power",
    "efficiency": "efficiency",
    "npshr": "NPSH required",
    "suction_lift": "suction lift",
    "input_power": "input power",
    "overall_efficiency": "overall efficiency",
    "efficiency_contour": "efficiency line",
    "power_contour": "power line",
    "npshr_contour": "NPSH line",
}


def number(x: float, digits: int = 3) -> str:
    """``x`` with ``digits`` significant digits, without exponent or trailing zeros.

    Examples
    --------
    >>> number(1234.5), number(0.012345), number(20.0)
    ('1234', '0.0123', '20')
    """
    if x == 0 or not math.isfinite(x):
        return "0" if x == 0 else str(x)
    places = max(0, digits - 1 - math.floor(math.log10(abs(x))))
    text = f"{x:.{places}f}"
    return text.rstrip("0").rstrip(".") if "." in text else text


def unit_word(unit: str) -> str:
    """A unit as a person writes it."""
    return units.shown(unit)


def flows(lo: float, hi: float) -> str:
    """A stretch of flow: "between 395 and 475 m³/h"."""
    return f"between {number(lo)} and {number(hi)} m³/h"


def printed_mm(x: float) -> str:
    """A diameter as it was typed: whole numbers stay whole."""
    return f"{x:g}" if x != int(x) else f"{int(x)}"


def name_of(curve: Curve) -> str:
    """What a person calls the line: its diameter or printed label, else its id.

    Examples
    --------
    >>> name_of(Curve(id="c1", quantity="head", diameter_mm=320.0)), name_of(Curve(id="c2", quantity="npshr"))
    ('head Ø 320', 'NPSH required (c2)')
    """
    what = QUANTITY_WORDS.get(curve.quantity, curve.quantity)
    if curve.is_contour and curve.level is not None:
        return f"{what} {number(curve.level * 100)} %" if curve.quantity == "efficiency_contour" else f"{what} {number(curve.level)}"
    if curve.diameter_mm is not None:
        return f"{what} Ø {printed_mm(curve.diameter_mm)}"
    if curve.label and curve.label.get("printed"):
        return f"{what} {curve.label['printed']}"
    return f"{what} ({curve.id})"


def sentence(text: str) -> str:
    """First letter large."""
    return text[:1].upper() + text[1:]


def listed(items: Sequence[str], word: str = "and") -> str:
    """ "a, b and c"."""
    items = list(items)
    return items[0] if len(items) == 1 else f"{', '.join(items[:-1])} {word} {items[-1]}"


def panel_of(curves: Sequence[Curve]) -> str | None:
    """The panel all curves share, else None."""
    panels = {c.panel for c in curves}
    return panels.pop() if len(panels) == 1 else None
