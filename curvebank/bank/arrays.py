"""Quantities over arrays: broadcast, grouped by diameter and speed, each group in one pass."""

import warnings
from typing import Any

import numpy as np

from ..errors import ExtrapolationWarning, LawError, NumberError, OutsideDomain
from ..laws import family
from .quantity import no_number, number

MANY_SPEEDS = 16
"""From so many distinct speeds on, the speed laws are applied to the array instead of making a reading for each."""


def read_arrays(quantity: Any, flow: Any, diameter: Any, speed: Any, outside: str, of: str | None) -> Any:
    """Values (or uncertainties, with ``of``) of a quantity at arrays of flow, diameter and speed.

    Returns a float64 array of the broadcast shape, or a float where no input is an array (a Decimal or a float32 is a plain number too).
    NaN flows give NaN with ``outside="nan"`` and an error otherwise; what holds no numbers is a `NumberError`.
    """
    out = _read(quantity, flow, diameter, speed, outside, of)
    return out if out.ndim or any(isinstance(x, np.ndarray) for x in (flow, diameter, speed)) else float(out)


def _read(quantity: Any, flow: Any, diameter: Any, speed: Any, outside: str, of: str | None) -> np.ndarray:
    flows = _numbers(flow, "flow_m3h")
    many = [x for x in (diameter, speed) if x is not None and np.ndim(x) > 0]
    if not many:
        d = None if diameter is None else number(diameter, "diameter_mm")
        n = None if speed is None else number(speed, "speed_rpm")
        return _group(quantity, flows, d, n, outside, of)
    diameters, of_diameter = _levels(diameter, "diameter", "mm", "diameter_mm")
    speeds, of_speed = _levels(speed, "speed", "1/min", "speed_rpm")
    try:
        flows, of_diameter, of_speed = np.broadcast_arrays(flows, of_diameter, of_speed)
    except ValueError as error:
        raise LawError(f"Flow, diameter and speed have shapes that do not fit together ({error}).") from None
    by_law = of is None and speed is not None and len(speeds) > MANY_SPEEDS
    code = of_diameter.reshape(-1) if by_law else of_diameter.reshape(-1) * len(speeds) + of_speed.reshape(-1)
    order = np.argsort(code, kind="stable")
    starts = np.flatnonzero(np.diff(code[order], prepend=-1))
    flat, out = np.ascontiguousarray(flows).reshape(-1), np.empty(flows.size)
    for start, stop in zip(starts, [*starts[1:], code.size], strict=True):
        at = order[start:stop]
        d, n = diameters[of_diameter.reshape(-1)[at[0]]], speeds[of_speed.reshape(-1)[at[0]]]
        if by_law:
            out[at] = _over_speeds(quantity, flat[at], d, speeds[of_speed.reshape(-1)[at]], outside)
        else:
            out[at] = _group(quantity, flat[at], None if diameter is None else float(d), None if speed is None else float(n), outside, of)
    return out.reshape(flows.shape)


def _numbers(values: Any, name: str) -> np.ndarray:
    """A float64 array of numbers of any type. Text is not read as numbers, and truth values are not 0 and 1."""
    try:
        a = np.asarray(values)
    except ValueError as error:
        raise LawError(f"{name} is not an even table of numbers ({error}).") from None
    if a.dtype.kind in "fiu":
        return a.astype(np.float64, copy=False)
    if a.dtype.kind == "O":
        return np.array([number(v, name) for v in a.flat], dtype=np.float64).reshape(a.shape)
    raise NumberError(no_number(values, name))


def _levels(values: Any, what: str, unit: str, name: str) -> tuple[np.ndarray, np.ndarray]:
    """Distinct values and, in the shape of the input, which of them each one is."""
    if values is None:
        return np.array([np.nan]), np.zeros((), dtype=np.intp)
    a = _numbers(values, name)
    if not np.isfinite(a).all() or (a <= 0).any():
        raise LawError(f"A {what} in the array is not a number above 0 {unit}.")
    distinct, which = np.unique(a, return_inverse=True)
    return distinct, which.reshape(a.shape)


def _over_speeds(quantity: Any, flows: np.ndarray, diameter: float, speeds: np.ndarray, outside: str) -> np.ndarray:
    """Many speeds at one diameter: one reading per printed speed, carried by the speed laws over the whole array."""
    d = None if np.isnan(diameter) else float(diameter)
    able = np.array(family.able_speeds(quantity.lines, d))
    if able.size == 0 or not quantity.carries_speed:
        return np.array([quantity(float(q), d, float(n), outside=outside) for q, n in zip(flows, speeds, strict=True)])
    distance = np.abs(np.log(speeds[:, None] / able[None, ::-1]))  # the faster of two equally near, as for plain numbers
    nearest = able[::-1][np.argmin(distance, axis=1)]
    out = np.empty(flows.shape)
    for printed in np.unique(nearest):
        at = np.flatnonzero(nearest == printed)
        ratio = speeds[at] / printed
        power = np.where(ratio >= 1, *(family.speed_exponent(quantity.quantity, r) for r in (1.0, 0.5)))
        try:
            out[at] = _group(quantity, flows[at] / ratio, d, float(printed), outside, None) * ratio**power
        except OutsideDomain:
            for i in at:  # the sentence is about the flow and the speed that were asked
                quantity(float(flows[i]), d, float(speeds[i]), outside=outside)
            raise
    return out


def _group(quantity: Any, flows: np.ndarray, diameter: float | None, speed: float | None, outside: str, of: str | None) -> np.ndarray:
    try:
        reading = quantity.plan(diameter, speed)
    except OutsideDomain as error:
        if outside == "nan" and error.code == OutsideDomain.code:
            return np.full(flows.shape, np.nan)
        raise
    if of is None and isinstance(reading, family.Plan):
        quick = reading.values(flows, guarded=True)
        if quick is not None:
            return quick
    inside = reading.holds(flows)
    if inside.all():
        return _inside(quantity, reading, flows, of)
    if outside == "error":
        bad = flows[~inside]
        count = f" ({bad.size} of {flows.size} flows are outside)" if flows.size > 1 else ""
        raise OutsideDomain(quantity.outside_text(reading, float(bad.flat[0])) + count)
    out = np.full(flows.shape, np.nan)
    out[inside] = _inside(quantity, reading, flows[inside], of)
    if outside == "extrapolate":
        beyond = ~inside & ~np.isnan(flows)
        if beyond.any():
            warnings.warn(
                f"{int(beyond.sum())} of {flows.size} flows are outside what was traced, {reading.lo:.4g} to {reading.hi:.4g} m³/h. "
                "Their values are the end's tangent, with a wider band.",
                ExtrapolationWarning,
                stacklevel=5,
            )
        flat = out.reshape(-1)
        for i in np.flatnonzero(beyond.reshape(-1)):
            flat[i] = quantity._scalar(reading, float(flows.reshape(-1)[i]), outside, of, quiet=True)
        out = flat.reshape(flows.shape)
    return out


def _inside(quantity: Any, reading: Any, flows: np.ndarray, of: str | None) -> np.ndarray:
    if of is None:
        return reading.values(flows)
    u = np.broadcast_to(np.asarray(reading.uncertainty(flows), dtype=np.float64), flows.shape)
    if of == "print":
        return np.array(u)
    return quantity._machine(reading, flows, reading.values(flows), u)
