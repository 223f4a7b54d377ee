"""Which order: an information criterion on effective readings (neighbouring pixels are one reading).

N ln(RSS / N) + penalty, with N effective readings and k coefficients (the variance counted as one). The penalty is the
stricter of 2 k + 2 k (k + 1) / (N - k - 1) (AICc, Hurvich and Tsai 1989, doi:10.1093/biomet/76.2.297), which guards few
points, and k ln N (Schwarz 1978, doi:10.1214/aos/1176344136), which guards many. The residual variance gets a floor: misses
well below what a reading can tell buy no higher order.
"""

from collections.abc import Callable

import numpy as np

from ..errors import FitError
from ..records import FloatArray
from . import basis
from .robust import robust_weights
from .solver import least_squares

NEARLY = 2.0
"""Orders within this of the best are as good (Burnham and Anderson 2002): the lowest is taken."""
FLOOR_SHARE = 0.25
"""Floor of the residual variance in units of the reading variance: half a standard uncertainty."""


def choose(
    t: FloatArray,
    v: FloatArray,
    s: FloatArray,
    *,
    sigma_known: bool,
    effective: float,
    most: int,
    zero_at: float | None,
    acceptable: Callable[[FloatArray], bool],
) -> int:
    """The order from 1 to ``most``. ``acceptable`` may refuse an order by its scaled coefficients."""
    floor = FLOOR_SHARE if sigma_known else (1e-12 * max(float(np.abs(v).max()), 1e-300)) ** 2
    scores: list[tuple[float, int]] = []
    for order in range(1, most + 1):
        columns = basis.design(t, order, zero_at)
        k = columns.shape[1] + 1
        if effective - k - 1 <= 0:
            break
        try:
            found = least_squares(columns, v, robust_weights(columns, v, s) / s)
        except FitError:
            break
        if acceptable(basis.expand(found.coefficients, zero_at)):
            penalty = max(2 * k + 2 * k * (k + 1) / (effective - k - 1), k * float(np.log(effective)))
            scores.append((effective * float(np.log(found.rss / len(v) + floor)) + penalty, order))
    if not scores:
        return 1
    best = min(score for score, _ in scores)
    return next(order for score, order in scores if score <= best + NEARLY)
