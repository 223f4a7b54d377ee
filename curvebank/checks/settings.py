"""Every limit of every check in one place, with its unit and where it comes from.

``DEFAULTS`` is what a bank starts with; a bank's own settings override single names. "Common practice, no source" says so.
"""

from collections.abc import Mapping
from typing import Any, NamedTuple

from ..errors import CurvebankError


class Limit(NamedTuple):
    """Default value, unit, source and meaning of one setting."""

    value: float
    unit: str
    source: str
    meaning: str


PRACTICE = "common practice, no source"
DRAWING = "0.35 mm pen on a 180 mm axis is 0.2 %; three printed curves read at 0.3 to 0.5 % of axis each"
SIMULATED = "set on simulated families with published exponents, tests/bench/family.py"

LIMITS: dict[str, Limit] = {
    "family_threshold": Limit(5.5, "ln likelihood", SIMULATED, "gain an explanation needs before a label is doubted"),
    "family_margin": Limit(2.0, "ln likelihood", SIMULATED, "explanations this close to the best are named with it"),
    "family_reading_pct": Limit(0.3, "%", DRAWING, "least standard uncertainty of a drawn curve, in % of the family's largest value"),
    "family_order_pct": Limit(1.0, "%", DRAWING, "a smaller wheel's head may exceed a larger one's by this and its uncertainty"),
    "energy_warning_pct": Limit(4.0, "%", DRAWING, "least disagreement of P, Q, H and efficiency that is reported"),
    "energy_error_pct": Limit(8.0, "%", DRAWING, "least disagreement that is an error"),
    "energy_low_share": Limit(0.4, "of best flow", PRACTICE, "lowest flow used for the power balance"),
    "energy_high_share": Limit(1.2, "of best flow", PRACTICE, "highest flow used for the power balance"),
    "energy_agree_pct": Limit(5.0, "%", PRACTICE, "a unit is named when it brings the balance within this"),
    "psi_low": Limit(0.40, "-", PRACTICE, "lowest usual head coefficient at shut-off"),
    "psi_high": Limit(0.80, "-", PRACTICE, "highest usual head coefficient at shut-off"),
    "psi_error_low": Limit(0.27, "-", PRACTICE, "head coefficient no centrifugal wheel shows: below"),
    "psi_error_high": Limit(1.05, "-", PRACTICE, "head coefficient no centrifugal wheel shows: above"),
    "psi_core_low": Limit(0.45, "-", PRACTICE, "a unit, speed or stage count is named when it brings the coefficient above this"),
    "psi_core_high": Limit(0.72, "-", PRACTICE, "and below this"),
    "shut_off_reach": Limit(
        0.35, "of largest flow", PRACTICE, "head is carried back to zero flow from at most this share of the flow range"
    ),
    "efficiency_high": Limit(0.95, "-", PRACTICE, "no pump of ordinary size is better"),
    "rising_note_pct": Limit(0.5, "%", DRAWING, "head rising from its left end by more than this is noted"),
    "rising_warning_pct": Limit(3.0, "%", PRACTICE, "and is a warning above this"),
    "npshr_fall_pct": Limit(5.0, "%", PRACTICE, "NPSHr may fall with flow by this share of its largest value"),
    "power_rise_pct": Limit(0.5, "%", DRAWING, "power rising by more than this over the last tenth of the curve still rises"),
    "calibration_rms_px": Limit(2.0, "px", "marks clicked by hand stray by about 1 px", "largest root mean square residual of marks"),
    "calibration_worst_px": Limit(5.0, "px", "marks clicked by hand stray by about 1 px", "largest residual of one mark"),
    "fit_miss_pct": Limit(1.0, "%", DRAWING, "largest distance of the fit from the trace, in % of the largest value"),
    "fit_miss_sigmas": Limit(4.0, "standard uncertainties", "four of a normal distribution", "and in standard uncertainties of the trace"),
    "speed_match_pct": Limit(1.0, "%", PRACTICE, "a curve's speed may differ from the pump's by this"),
}
DEFAULTS: dict[str, float] = {name: limit.value for name, limit in LIMITS.items()}


def resolve(settings: Mapping[str, Any] | None) -> dict[str, float]:
    """Defaults with a bank's own values laid over; names that are not limits of checks are left to others.

    Raises
    ------
    CurvebankError
        A limit that is not a finite number.

    Examples
    --------
    >>> resolve({"psi_high": 0.9, "units": "US"})["psi_high"]
    0.9
    """
    out = dict(DEFAULTS)
    for name, value in (settings or {}).items():
        if name not in DEFAULTS:
            continue
        if isinstance(value, bool) or not isinstance(value, int | float) or not abs(value) < 1e300:
            raise CurvebankError(f"The setting {name} must be a number, not {value!r}.", code="settings")
        out[name] = float(value)
    return out
