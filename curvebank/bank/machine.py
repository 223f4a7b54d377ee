"""What a delivered pump may deviate from its curve: the basis of the curve as a standard uncertainty.

Where the basis is an acceptance grade, its tolerance is taken as the half-width of a rectangular distribution,
u = t / sqrt(3) (JCGM 100, 4.3.7); where it is a measurement, the limit is taken as twice the standard uncertainty.
A flow tolerance acts through the slope of the curve.

Sources: grades of ISO 9906:2012 table 8 - 3B and 2B for flow and head seen in public text, the rest from memory; measurement limits of
ISO 9906, grade 1 and grade 2, from memory; NPSHr of ISO 9906:1999, from memory. Check them against your copy: each is a setting,
``machine.<basis>.<quantity>_pct`` and ``machine.<basis>.flow_pct``.
"""

import math

RECTANGULAR, EXPANDED = math.sqrt(3), 2.0
#  basis: (divisor, flow %, head %, power %, efficiency %, NPSHr %, NPSHr least m)
BASIS = {
    "catalogue": (RECTANGULAR, 9.0, 7.0, 9.0, 7.0, 6.0, 0.3),  # grade 3B
    "quotation": (RECTANGULAR, 8.0, 5.0, 8.0, 5.0, 6.0, 0.3),  # grade 2B
    "guaranteed": (RECTANGULAR, 5.0, 3.0, 4.0, 3.0, 3.0, 0.15),  # grade 1B
    "works test": (EXPANDED, 2.0, 1.5, 1.5, 3.2, 3.0, 0.15),  # measurement, grade 1
    "field test": (EXPANDED, 3.5, 5.5, 5.5, 6.4, 6.0, 0.3),  # measurement, grade 2
}
PLACE = {"head": 2, "power": 3, "input_power": 3, "efficiency": 4, "overall_efficiency": 4, "npshr": 5, "suction_lift": 5}


def machine_uncertainty(quantity, basis, flow_m3h, value, slope, u_print, settings):
    """Standard uncertainty of a delivered pump's value (float or array), in the quantity's unit.

    Parameters
    ----------
    quantity, basis : str
    flow_m3h, value, slope : float or array
        The reading and its slope dv/dQ there.
    u_print : float or array
        Standard uncertainty of the chart.
    settings : dict
        The settings of the revision.

    Examples
    --------
    A catalogue head of 40 m on a flat curve: 7 % as a rectangular half-width is 40 x 0.07 / sqrt(3) = 1.617 m.

    >>> round(machine_uncertainty("head", "catalogue", 100.0, 40.0, 0.0, 0.0, {}), 3)
    1.617
    """
    row = BASIS.get(basis, BASIS["catalogue"])
    divisor = row[0]
    flow_pct = float(settings.get(f"machine.{basis}.flow_pct", row[1]))
    value_pct = float(settings.get(f"machine.{basis}.{quantity}_pct", row[PLACE[quantity]]))
    least = float(settings.get(f"machine.{basis}.npshr_least_m", row[6])) if PLACE[quantity] == 5 else 0.0
    by_flow = slope * flow_m3h * (flow_pct / 100 / divisor)
    own = abs(value) * (value_pct / 100)
    if isinstance(own, float):
        return math.sqrt(u_print**2 + by_flow**2 + (max(own, least) / divisor) ** 2)
    import numpy as np

    return np.sqrt(u_print**2 + by_flow**2 + (np.maximum(own, least) / divisor) ** 2)
