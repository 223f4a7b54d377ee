"""From evidence to the chance that a trace follows the wanted line throughout: a logistic model with no weight below zero.

Refit with ``python tests/bench/flags.py --fit`` (with ``--sheets`` and ``--drawn`` as the pool) and copy what it prints; the checking
half of the pool shows what the new weights are worth.
"""

import numpy as np

from ..records import FloatArray
from .evidence import NAMES

BIAS = -4.69
WEIGHTS = {
    "unsupported": 0.324,
    "longest_gap": 0.322,
    "bare": 1.163,
    "click_off": 0.601,
    "clicks_off": 4.061,
    "misfit": 1.015,
    "jump": 0.741,
    "straight_on": 0.744,
    "both_on": 2.403,
    "goes_on": 6.178,
    "loose_end": 1.501,
    "merged": 1.986,
    "cost": 1.801,
    "scatter": 0.0,
    "two_clicks": 0.0,
    "colour_step": 3.19,
    "shared": 3.82,
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
