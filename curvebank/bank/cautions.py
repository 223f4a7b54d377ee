"""Cautions: what can hurt someone or a machine, once, in plain words, beginning with the number's limit.

They defer to the maker, local codes and a licensed engineer; nothing here replaces either.
"""

import json
from typing import Any

from ..errors import CurvebankError
from .closure import computed_power
from .duty import known
from .quantity import NAMES

DEFER = (
    "These numbers were read from a printed chart of a type of pump. Confirm with the maker; local codes and a licensed engineer decide."
)
NO_NPSH = "NPSH required is not on the paper. Do not set a suction level from these curves."
PREFERRED = (0.7, 1.2)
"""Preferred region as shares of best-efficiency flow (ANSI/HI 9.6.3, from memory; 70-120 % seen in public text)."""
CLOSURE_LIMIT = 0.05
"""Closure error [-] from which motor sizing on the higher power is said aloud (common practice, no source)."""
TRIM_FLOOR = 0.75
"""Smallest diameter as a share of the largest (US DOE Pumping Systems Tip Sheet #7, 2006: "limited to about 75%")."""
SAMPLES = 100


def _try(call: Any, *args: Any) -> Any:
    try:
        return call(*args)
    except CurvebankError:
        return None


def largest(pump: Any) -> float | None:
    """The largest traced diameter [mm], or None."""
    return pump.diameters_mm[-1] if pump.diameters_mm else None


def standing(pump: Any) -> list[str]:
    """Cautions that belong to a revision as a whole."""
    out = [*_suction(pump), *_motor(pump), *_droop(pump), *_letters(pump), *_corrections(pump), *_open_errors(pump)]
    return [*out, DEFER]


def _suction(pump: Any) -> list[str]:
    return [] if pump.npshr else [NO_NPSH]


def _motor(pump: Any) -> list[str]:
    if not pump.power:
        return ["Power is not on the paper. Do not choose a motor from these curves."]
    reading = _try(pump.power.plan, largest(pump), None)
    if reading is None:
        return []
    computed = [] if "power" in pump.quantities else [reading.notes[0]]
    return [*computed, *_rising_power(reading)]


def _rising_power(reading: Any) -> list[str]:
    if reading.slope(reading.hi) * (reading.hi - reading.lo) <= 0.01 * abs(reading.value(reading.hi)):
        return []
    at = f"{reading.value(reading.hi):.3g} kW"
    return [f"Power still rises where the line ends, at {at}. Do not choose the motor from this curve without a stated run-out flow."]


def _droop(pump: Any) -> list[str]:
    reading = _try(pump.head.plan, largest(pump), None)
    if reading is None:
        return []
    flows = [reading.lo + (reading.hi - reading.lo) * i / SAMPLES for i in range(SAMPLES + 1)]
    top = max(flows, key=reading.value)
    rise = reading.value(top) - reading.value(reading.lo)
    if top == reading.lo or rise <= 2 * reading.uncertainty(top):
        return []
    return [f"Head rises by {rise:.2g} m from {reading.lo:.4g} to {top:.4g} m³/h: there one head has two flows, and the pump may hunt."]


def _letters(pump: Any) -> list[str]:
    lost: dict[str, list[str]] = {}
    for c in pump.curves:
        if c["applies_to"] == "unknown":
            lost.setdefault(NAMES.get(c["quantity"], c["quantity"]), []).append(c["label"] or c["id"])
    listed = "; ".join(f"{name} {', '.join(letters)}" for name, letters in lost.items())
    return [f"Lines without a known diameter are stored but not read: {listed}."] if lost else []


def _corrections(pump: Any) -> list[str]:
    sql = "SELECT bytes FROM revision_recipe JOIN blob ON blob.sha256 = recipe_sha256 WHERE revision_id = ? ORDER BY id"
    out = []
    for (raw,) in pump._bank.query(sql, (pump.revision_id,)):
        try:
            listed = json.loads(raw).get("corrections") or []
        except (ValueError, AttributeError):
            continue
        out += [
            f"The sheet prints a correction that is not applied here: {c['quantity']} {c['amount']:+g}, {c['condition']}." for c in listed
        ]
    return out


def _open_errors(pump: Any) -> list[str]:
    waived = {w["finding"] for w in pump.waivers}
    stand = [f for f in pump.findings if f["severity"] == "error" and f["key"] not in waived]
    if not stand:
        return []
    more = f" and {len(stand) - 1} more" if len(stand) > 1 else ""
    return [f"The checks found an error that nobody has cured or waived: {stand[0]['message']}{more}"]


def at_duty(
    pump: Any,
    flow: float,
    diameter_mm: float | None,
    speed_rpm: float | None,
    *,
    stable: bool | None = True,
    crossings: int = 1,
    density_kgm3: float | None = None,
) -> tuple[str, ...]:
    """Cautions of one duty point."""
    out: list[str] = []
    if stable is False:
        out.append(f"At {flow:.4g} m³/h the duty is not stable: the head curve rises as fast as the system or faster. Do not run there.")
    if crossings > 1:
        out.append(f"The system meets the pump at {crossings} flows. Which one it runs at depends on how it was started.")
    out += _overpressure(pump, diameter_mm, speed_rpm)
    out += _overload(pump, flow, diameter_mm, speed_rpm, density_kgm3)
    out += _cavitation(pump, flow, diameter_mm, speed_rpm)
    out += _region(pump, flow, diameter_mm, speed_rpm)
    for quantity in (pump.head, pump.efficiency, pump.power, pump.npshr):
        reading = _try(quantity.plan, diameter_mm, speed_rpm) if quantity else None
        out += reading.notes if reading is not None else ()
    return tuple(dict.fromkeys([*out, DEFER]))


def _overpressure(pump: Any, diameter_mm: float | None, speed_rpm: float | None) -> list[str]:
    if speed_rpm is None or not pump.speeds_rpm or speed_rpm <= max(pump.speeds_rpm):
        return []
    reading = _try(pump.head.plan, diameter_mm, speed_rpm)
    if reading is None:
        return []
    flows = [reading.lo + (reading.hi - reading.lo) * i / SAMPLES for i in range(SAMPLES + 1)]
    top = max(reading.value(q) for q in flows)
    return [
        f"Against a closed valve the head reaches at least {top:.3g} m at {speed_rpm:g} 1/min, above the printed speed. "
        "Check the pressure rating of casing, flanges and pipes, and the speed limit of the rotor."
    ]


def _overload(pump: Any, flow: float, diameter_mm: float | None, speed_rpm: float | None, density_kgm3: float | None) -> list[str]:
    reading = _try(pump.power.plan, diameter_mm, speed_rpm) if pump.power else None
    if reading is None:
        return ["Power is not known here. Do not choose a motor from this duty."]
    out = _rising_power(reading)
    ratio = 1.0 if density_kgm3 is None else density_kgm3 / pump.density_kgm3
    if ratio > 1.0:
        out.append(f"The liquid is {100 * (ratio - 1):.2g} % denser than the sheet's: power and motor load rise with it.")
    traced = known(pump.power, flow, diameter_mm, speed_rpm)
    computed = computed_power(pump, flow, diameter_mm, speed_rpm) if "power" in pump.quantities else None
    if traced and computed and abs(traced / computed - 1) > CLOSURE_LIMIT:
        out.append(
            f"Traced power and the power from head and efficiency differ by {100 * (traced / computed - 1):+.2g} %. "
            f"For a motor take the higher, {max(traced, computed) * ratio:.3g} kW here."
        )
    return out


def _cavitation(pump: Any, flow: float, diameter_mm: float | None, speed_rpm: float | None) -> list[str]:
    if not pump.npshr:
        return [NO_NPSH]
    value = known(pump.npshr, flow, diameter_mm, speed_rpm)
    if value is None:
        return [f"NPSH required is not traced at {flow:.4g} m³/h. Do not set a suction level from these curves."]
    return [f"NPSH required is {value:.2g} m, where head is commonly already down by 3 %. Keep a margin above it against cavitation."]


def _region(pump: Any, flow: float, diameter_mm: float | None, speed_rpm: float | None) -> list[str]:
    from .choice import best_efficiency

    best = _try(best_efficiency, pump, diameter_mm, speed_rpm)
    if best is None or not best.flow_m3h > 0:
        return []
    share = flow / best.flow_m3h
    low, high = PREFERRED
    if low <= share <= high:
        return []
    return [
        f"The duty is at {100 * share:.0f} % of best-efficiency flow; 70 to 120 % is preferred. Expect more vibration, wear and lost power."
    ]
