"""What the sheet does not say. These are notes and cautions: a gap is no fault of the one who traced."""

from collections.abc import Iterator

from ..records import Finding
from .context import Context
from .words import listed, name_of, panel_of, printed_mm, unit_word

PRACTICE = "common practice, no source"


def missing_quantity(context: Context) -> Iterator[Finding]:
    """complete-missing-quantity: no NPSHr, no power, no efficiency or no head curve."""
    have = {c.quantity for c in context.digitised.curves if c.error is None and len(c.points)}
    have |= {c.quantity.removesuffix("_contour") for c in context.digitised.curves if c.is_contour and c.error is None and len(c.points)}
    if not have:
        return

    def gap(what: str, severity: str, message: str, action: str) -> Finding:
        return Finding(
            rule=f"complete-missing-{what}",
            severity=severity,  # type: ignore[arg-type]
            subject="pump",
            message=f"{message} {action}",
            source=PRACTICE,
            action=action,
        )

    if "head" not in have:
        yield gap("head", "warning", "No head curve is on this sheet.", "Trace head, or add the sheet that has it.")
    if not have & {"power", "input_power"}:
        if "efficiency" in have and "head" in have:
            yield gap(
                "power",
                "note",
                "Power is not on the paper.",
                "It can be computed from head and efficiency, with their doubt added; say so where it is used.",
            )
        else:
            yield gap("power", "note", "Power is not on the paper, nor can it be computed.", "Do not choose a motor from these curves.")
    if not have & {"efficiency", "overall_efficiency"}:
        if "power" in have and "head" in have:
            yield gap(
                "efficiency", "note", "Efficiency is not on the paper.", "It can be computed from head and power, with their doubt added."
            )
        else:
            yield gap("efficiency", "note", "Efficiency is not on the paper.", "Confirm it with the maker before comparing energy.")
    if not have & {"npshr", "suction_lift"}:
        yield gap(
            "npshr",
            "note",
            "NPSH required is not on the paper.",
            "Do not set a suction level from these curves. Confirm with the maker; local codes and a licensed engineer decide.",
        )


def largest_only(context: Context) -> Iterator[Finding]:
    """complete-largest-only: a quantity is printed for one diameter where head is printed for several."""
    diameters = {s.diameter_mm for s in context.of("head") if s.diameter_mm is not None}
    if len(diameters) < 2:
        return
    for quantity in ("efficiency", "power", "npshr"):
        found = [s for s in context.of(quantity) if s.diameter_mm is not None]
        if len(found) != 1 or any(c.quantity == f"{quantity}_contour" for c in context.digitised.curves):
            continue
        c = found[0].curve
        action = "For other diameters it is borrowed, with a wider band."
        what = {"efficiency": "Efficiency", "power": "Power", "npshr": "NPSH required"}[quantity]
        yield Finding(
            rule="complete-largest-only",
            severity="note",
            subject=f"family:{quantity}",
            message=f"{what} is printed for Ø {printed_mm(c.diameter_mm or 0)} alone. {action}",
            measured=1.0,
            limit=float(len(diameters)),
            unit="diameters",
            source=PRACTICE,
            action=action,
            where={"panel": c.panel, "curves": [c.id]},
        )


def letter_without_mm(context: Context) -> Iterator[Finding]:
    """complete-letter-without-mm: lines are told apart by letters, and no diameter is known for them."""
    lettered = [
        c
        for c in context.digitised.curves
        if c.diameter_mm is None and c.label and c.label.get("by") in ("letter", "diameter") and not c.is_contour
    ]
    if not lettered:
        return
    names = listed([c.label["printed"] if c.label and c.label.get("printed") else c.id for c in lettered])
    action = "Ask the maker for the diameters; until then these curves answer under their letter alone."
    yield Finding(
        rule="complete-letter-without-mm",
        severity="note",
        subject="pump",
        message=f"The lines {names} carry a letter and no diameter in mm. They are stored, not compared. {action}",
        measured=float(len(lettered)),
        limit=0.0,
        unit="curves",
        source=PRACTICE,
        action=action,
        where={"panel": panel_of(lettered), "curves": [c.id for c in lettered]},
    )


def applies_unknown(context: Context) -> Iterator[Finding]:
    """complete-applies-unknown: a line is kept although nobody knows for which wheel it holds."""
    for c in context.digitised.curves:
        if c.applies_to != "unknown" or (c.label and c.label.get("by") == "letter"):
            continue
        action = "Look for its label on the paper, or ask the maker."
        yield Finding(
            rule="complete-applies-unknown",
            severity="note",
            subject=f"curve:{c.id}",
            message=f"For which wheel {name_of(c)} holds is not known. {action}",
            source=PRACTICE,
            action=action,
            where={"panel": c.panel, "curves": [c.id]},
        )


def flow_unit_unchecked(context: Context) -> Iterator[Finding]:
    """complete-flow-unit-unchecked: without power and efficiency nothing on the sheet shows a wrong flow unit."""
    usable = {s.curve.quantity for s in context.series}
    if "head" not in usable or {"power", "efficiency"} <= usable:
        return
    typed = sorted({s.curve.printed_x_unit for s in context.of("head")})
    if len(typed) != 1:
        return
    other = "US gal/min" if typed[0] != "gal/min(US)" else "m³/h"
    lacking = "head alone does not show it" if usable == {"head"} else "that would take power and efficiency together"
    action = "Look for the unit on the paper."
    yield Finding(
        rule="complete-flow-unit-unchecked",
        severity="note",
        subject="pump",
        message=f"This sheet cannot tell {unit_word(typed[0])} from {other}: {lacking}. {action}",
        source="affinity: a constant factor on all flows changes no exponent",
        action=action,
        where={"panel": panel_of([s.curve for s in context.of("head")]), "curves": [s.curve.id for s in context.of("head")]},
    )
