"""Quantities over arrays: broadcast, grouped by diameter and speed, each group in one pass."""

import warnings
from typing import Any

import numpy as np

from ..errors import ExtrapolationWarning, LawError, OutsideDomain


def read_arrays(quantity: Any, flow: Any, diameter: Any, speed: Any, outside: str, of: str | None) -> np.ndarray:
    """Values (or uncertainties, with ``of``) of a quantity at arrays of flow, diameter and speed.

    Returns a float64 array of the broadcast shape. NaN flows give NaN with ``outside="nan"`` and an error otherwise.
    """
    flows = np.asarray(flow, dtype=np.float64)
    sizes = [np.asarray(x, dtype=np.float64) for x in (diameter, speed) if x is not None and np.ndim(x) > 0]
    if not sizes:
        d = None if diameter is None else float(diameter)
        n = None if speed is None else float(speed)
        return _group(quantity, flows, d, n, outside, of)
    try:
        parts = np.broadcast_arrays(flows, *(np.nan if x is None else np.asarray(x, dtype=np.float64) for x in (diameter, speed)))
    except ValueError as error:
        raise LawError(f"Flow, diameter and speed have shapes that do not fit together ({error}).") from None
    flows, diameters, speeds = (np.ascontiguousarray(p).reshape(-1) for p in parts)
    if (diameter is not None and not np.isfinite(diameters).all()) or (speed is not None and not np.isfinite(speeds).all()):
        raise LawError("A diameter or speed is not a finite number. Give numbers above 0.")
    pairs = np.stack([diameters, speeds], axis=1)
    unique, which = np.unique(pairs, axis=0, return_inverse=True, equal_nan=True)
    order = np.argsort(which.reshape(-1), kind="stable")
    cuts = np.searchsorted(which.reshape(-1)[order], np.arange(len(unique) + 1))
    out = np.empty(flows.shape)
    for i, (d, n) in enumerate(unique):
        at = order[cuts[i] : cuts[i + 1]]
        out[at] = _group(quantity, flows[at], None if diameter is None else float(d), None if speed is None else float(n), outside, of)
    return out.reshape(parts[0].shape)


def _group(quantity: Any, flows: np.ndarray, diameter: float | None, speed: float | None, outside: str, of: str | None) -> np.ndarray:
    try:
        reading = quantity.plan(diameter, speed)
    except OutsideDomain as error:
        if outside == "nan" and error.code == OutsideDomain.code:
            return np.full(flows.shape, np.nan)
        raise
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
