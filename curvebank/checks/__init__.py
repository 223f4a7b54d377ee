"""Rules that judge records, fresh or stored; each rule is a small function of a `Context` that yields findings.

``run`` is the door. ``ALL`` lists the rules in the order in which findings are read; ``family_picture`` gives the drawing of
affinity ghosts.
"""

from collections.abc import Callable, Iterable, Mapping, Sequence
from typing import Any

from ..records import Digitised, Finding
from . import coefficient, complete, energy, family, plausible, provenance, reading
from .context import Context
from .picture import family_picture
from .settings import DEFAULTS, LIMITS, resolve

Rule = Callable[[Context], Iterable[Finding]]

ALL: tuple[Rule, ...] = (
    reading.calibration_failed,
    reading.calibration_notices,
    reading.calibration_residual,
    reading.trace_failed,
    reading.trace_flagged,
    reading.fit_miss,
    reading.fit_missing,
    family.diameter_label,
    family.displaced,
    family.unexplained,
    family.order_of_diameters,
    family.exponents,
    energy.balance,
    coefficient.head_coefficient_at_shut_off,
    plausible.efficiency,
    plausible.negative,
    plausible.rising_head,
    plausible.head_saddle,
    plausible.npshr,
    plausible.power_still_rising,
    complete.missing_quantity,
    complete.largest_only,
    complete.letter_without_mm,
    complete.applies_unknown,
    complete.flow_unit_unchecked,
    provenance.speed_missing,
    provenance.speed_differs,
    provenance.mixed_axis,
)
_RANK = {"error": 0, "warning": 1, "note": 2}


def run(digitised: Digitised, settings: Mapping[str, Any] | None = None, *, rules: Sequence[Rule] = ALL) -> list[Finding]:
    """Hold one digitised sheet, or a stored pump, against the rules.

    Parameters
    ----------
    digitised : Digitised
        Panels, curves and pump; findings it may already carry are not looked at.
    settings : mapping, optional
        Overrides of ``DEFAULTS`` by name; other names are left alone.
    rules : sequence of callable
        Rules to run, ``ALL`` unless said.

    Returns
    -------
    list of Finding
        Errors first, then warnings, then notes; within one severity in the order of the rules; one finding for each rule and
        subject. The same input gives the same list.

    Raises
    ------
    CurvebankError
        A setting that is not a number.
    """
    if digitised.error is not None:
        return []
    context = Context(digitised, resolve(settings))
    found = sorted((f for rule in rules for f in rule(context)), key=lambda f: _RANK[f.severity])
    # a waiver binds to the key, so one rule speaks once of one subject: its gravest finding
    return list({f.key: f for f in reversed(found)}.values())[::-1]


__all__ = ["ALL", "DEFAULTS", "LIMITS", "Context", "Rule", "family_picture", "resolve", "run"]
