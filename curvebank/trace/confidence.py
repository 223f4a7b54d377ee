"""From evidence to the chance that a trace follows the wanted line throughout: a logistic model with no weight below zero.

Refit with ``python tests/bench/flags.py --fit`` (with ``--sheets`` and ``--drawn`` as the pool) and copy what it prints; the checking
half of the pool shows what the new weights are worth.
"""

import numpy as np

from ..records import FloatArray
from .evidence import NAMES

BIAS = -5.079
WEIGHTS = {
    "unsupported": 0.37,
    "longest_gap": 0.216,
    "bare": 1.274,
    "click_off": 0.649,
    "clicks_off": 4.205,
    "misfit": 0.792,
    "jump": 1.09,
    "straight_on": 0.716,
    "both_on": 0.0,
    "goes_on": 8.313,
    "loose_end": 1.583,
    "merged": 12.295,
    "cost": 2.236,
    "scatter": 0.0,
    "two_clicks": 0.22,
    "colour_step": 5.629,
    "shared": 2.595,
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
