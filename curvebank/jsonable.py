"""Records as strict JSON: numpy to plain Python, numbers rounded to what they are worth, nothing that is not finite."""

import math
from typing import Any

import numpy as np


def places(values: Any, n: int = 4) -> Any:
    """Rounded to ``n`` decimals, as lists."""
    return np.round(np.asarray(values, dtype=float), n).tolist()


def digits(values: Any, n: int = 9) -> Any:
    """Rounded to ``n`` significant digits, as lists."""
    a = np.asarray(values, dtype=float)
    if not a.size:
        return a.tolist() if a.ndim == 1 else []
    # The power of ten is held where a float can carry it: a subnormal number is its own best rounding.
    power = np.clip(n - 1 - np.floor(np.log10(np.where(a == 0, 1.0, np.abs(a)))), -300, 300)
    scale = 10.0**power
    return (np.round(a * scale) / scale).tolist()


def clean(value: Any) -> Any:
    """Numpy scalars to Python, tuples to lists; a number that is not finite becomes null (strict JSON)."""
    if isinstance(value, dict):
        return {str(k): clean(v) for k, v in value.items()}
    if isinstance(value, (list, tuple)):
        return [clean(v) for v in value]
    if isinstance(value, np.ndarray):
        return clean(value.tolist())
    if isinstance(value, (np.bool_, bool)):
        return bool(value)
    if isinstance(value, (np.integer, int)):
        return int(value)
    if isinstance(value, (np.floating, float)):
        return float(value) if math.isfinite(value) else None
    return value
