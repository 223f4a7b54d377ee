"""From evidence to the chance that a trace follows the wanted line throughout: a logistic model with no weight below zero.

Refit with ``python tests/bench/flags.py --fit`` (with ``--sheets`` and ``--drawn`` as the pool) and copy what it prints; the checking
half of the pool shows what the new weights are worth.
"""

import numpy as np

from ..records import FloatArray
from .evidence import NAMES

BIAS = -4.803
WEIGHTS = {
    "unsupported": 0.182,
    "longest_gap": 0.088,
    "bare": 1.741,
    "click_off": 0.632,
    "clicks_off": 3.902,
    "misfit": 0.987,
    "jump": 0.846,
    "straight_on": 0.88,
    "both_on": 1.188,
    "goes_on": 7.374,
    "loose_end": 1.517,
    "merged": 1.974,
    "cost": 3.474,
    "scatter": 0.0,
    "two_clicks": 0.18,
    "colour_step": 4.838,
    "shared": 5.133,
}
"""Log-odds of failure for each step of a number (`evidence.Evidence.vector`)."""
FLAG_BELOW = 0.7
"""A trace whose confidence is lower than this is flagged."""


def doubts(vector: FloatArray) -> FloatArray:
    """What each number adds to the log-odds of failure, in the order of ``NAMES``."""
    return vector * np.array([WEIGHTS[name] for name in NAMES])


def chance(vector: FloatArray) -> float:
    """Chance that the trace is right."""
    return float(1.0 / (1.0 + np.exp(np.clip(BIAS + doubts(vector).sum(), -30.0, 30.0))))
