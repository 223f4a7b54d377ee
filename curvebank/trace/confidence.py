"""From evidence to the chance that a trace follows the wanted line throughout: a logistic model with no weight below zero.

Refit with ``python tests/bench/flags.py --fit`` (with ``--sheets`` and ``--drawn`` as the pool) and copy what it prints; the checking
half of the pool shows what the new weights are worth.
"""

import numpy as np

from ..records import FloatArray
from .evidence import NAMES

BIAS = -4.553
WEIGHTS = {
    "unsupported": 0.462,
    "longest_gap": 0.373,
    "bare": 1.266,
    "click_off": 0.705,
    "misfit": 0.554,
    "jump": 0.593,
    "straight_on": 1.192,
    "both_on": 1.353,
    "goes_on": 4.846,
    "merged": 3.868,
    "cost": 2.93,
    "scatter": 0.724,
    "two_clicks": 0.29,
    "colour_step": 1.366,
    "shared": 4.359,
}
"""Log-odds of failure for each step of a number (`evidence.Evidence.vector`)."""
FLAG_BELOW = 0.8
"""A trace whose confidence is lower than this is flagged."""


def doubts(vector: FloatArray) -> FloatArray:
    """What each number adds to the log-odds of failure, in the order of ``NAMES``."""
    return vector * np.array([WEIGHTS[name] for name in NAMES])


def chance(vector: FloatArray) -> float:
    """Chance that the trace is right."""
    return float(1.0 / (1.0 + np.exp(np.clip(BIAS + doubts(vector).sum(), -30.0, 30.0))))
