"""What every rule looks at: the records, the limits, and each curve as an ordered series; built once a run."""

from collections.abc import Iterator
from dataclasses import dataclass
from functools import cached_property

import numpy as np

from ..errors import LawError
from ..laws.evidence import TRIM_PRIOR
from ..laws.joint import FamilyCurve
from ..laws.labels import Verdict, judge_family
from ..records import Curve, Digitised, FloatArray

COMPARABLE_LABELS = (None, "diameter", "speed")
"""Lines told apart by letter, blade angle, stages or pumps running are never compared by the affinity laws."""


@dataclass(frozen=True, slots=True, eq=False)
class Series:
    """A curve by rising flow: flow [n], value [n], standard uncertainty u [n], all in canonical units."""

    curve: Curve
    flow: FloatArray
    value: FloatArray
    u: FloatArray
    speed_rpm: float | None

    @property
    def lo(self) -> float:
        """Lowest traced flow [m3/h]."""
        return float(self.flow[0])

    @property
    def hi(self) -> float:
        """Highest traced flow [m3/h]."""
        return float(self.flow[-1])

    @property
    def diameter_mm(self) -> float | None:
        """Printed diameter [mm]."""
        return self.curve.diameter_mm

    def at(self, flow: FloatArray) -> FloatArray:
        """Value at flows inside the traced range."""
        return np.interp(flow, self.flow, self.value)

    def u_at(self, flow: FloatArray) -> FloatArray:
        """Standard uncertainty at flows inside the traced range."""
        return np.interp(flow, self.flow, self.u)


def series_of(curve: Curve, speed_rpm: float | None, cells: int = 120) -> Series | None:
    """The curve in ``cells`` means by rising flow, or None where it has no usable points."""
    p = curve.points
    if curve.error is not None or curve.is_contour or len(p) < 2 or not np.all(np.isfinite(p)):
        return None
    q, v = p[:, 0], p[:, 1]
    s = curve.sigma if len(curve.sigma) == len(p) else np.zeros(len(p))
    span = float(q.max() - q.min())
    if not span > 0:
        return None
    if len(p) <= cells:
        order = np.argsort(q, kind="stable")
        return Series(curve, q[order], v[order], s[order], speed_rpm)
    cell = np.minimum((cells * (q - q.min()) / span).astype(int), cells - 1)
    n = np.bincount(cell, minlength=cells)
    full = n > 0

    def mean(a: FloatArray) -> FloatArray:
        return np.bincount(cell, a, cells)[full] / n[full]

    # the mean of cells shortens the curve by half a cell at each end; the end points themselves are kept
    ends = [int(np.argmin(q)), int(np.argmax(q))]
    flow = np.concatenate([[q[ends[0]]], mean(q), [q[ends[1]]]])
    value = np.concatenate([[v[ends[0]]], mean(v), [v[ends[1]]]])
    u = np.concatenate([[s[ends[0]]], mean(s), [s[ends[1]]]])
    rising = np.concatenate([[True], np.diff(flow) > 0])
    return Series(curve, flow[rising], value[rising], u[rising], speed_rpm)


@dataclass(frozen=True, slots=True, eq=False)
class Family:
    """Curves of one quantity, casting and basis whose labels can be compared.

    ``verdict`` is that of the joint fit, None where it could not be made; ``why`` then says so.
    """

    quantity: str
    group: str | None
    members: tuple[Series, ...]
    verdict: Verdict | None
    why: str = ""


class Context:
    """Records under check. Series and family verdicts are made on first use and kept."""

    def __init__(self, digitised: Digitised, limits: dict[str, float]):
        self.digitised = digitised
        self.limits = limits
        self.pump = digitised.pump

    def speed_of(self, curve: Curve) -> float | None:
        """The curve's speed [1/min], else the pump's."""
        return curve.speed_rpm or (self.pump.speed_rpm if self.pump else None)

    @cached_property
    def series(self) -> tuple[Series, ...]:
        """Every usable curve, contours left out."""
        made = (series_of(c, self.speed_of(c)) for c in self.digitised.curves)
        return tuple(s for s in made if s is not None)

    def of(self, quantity: str) -> list[Series]:
        """Usable curves of one quantity in its own unit, largest diameter first.

        A line that keeps the values of another quantity's axis is left out: its numbers are no head, power or efficiency.
        """
        found = [s for s in self.series if s.curve.quantity == quantity and not any(n.code == "mixed-axis" for n in s.curve.warnings)]
        return sorted(found, key=lambda s: -(s.diameter_mm or 0.0))

    @property
    def density_kgm3(self) -> float:
        """Density the power scale was drawn for [kg/m3]."""
        return self.pump.density_kgm3 if self.pump else 998.2

    @property
    def stages(self) -> int:
        """Stages of the pump."""
        return self.pump.stages if self.pump else 1

    @cached_property
    def families(self) -> tuple[Family, ...]:
        """Every family of two or more comparable curves."""
        return tuple(self._families())

    def _families(self) -> Iterator[Family]:
        groups: dict[tuple[str, str | None, str], list[Series]] = {}
        for s in self.series:
            c = s.curve
            by = (c.label or {}).get("by")
            if c.quantity not in TRIM_PRIOR or c.diameter_mm is None or c.applies_to != "this" or by not in COMPARABLE_LABELS:
                continue
            groups.setdefault((c.quantity, c.group, c.basis), []).append(s)
        for (quantity, group, _), members in groups.items():
            if len(members) < 2:
                continue
            members = sorted(members, key=lambda s: (-(s.diameter_mm or 0.0), -(s.speed_rpm or 0.0)))
            largest = max(float(np.abs(s.value).max()) for s in members)
            try:
                verdict = judge_family(
                    [self.family_curve(s, largest) for s in members],
                    quantity=quantity,
                    threshold=self.limits["family_threshold"],
                    margin=self.limits["family_margin"],
                    order=_order(members),
                )
                yield Family(quantity, group, tuple(members), verdict)
            except LawError as e:
                yield Family(quantity, group, tuple(members), None, e.message)

    def family_curve(self, s: Series, largest: float) -> FamilyCurve:
        """The series with the part of its uncertainty that the sheet's curves do not share.

        The hand that drew a small curve was no steadier than for a large one, so the floor is a share of ``largest``, the family's
        largest value. Stretches that the trace itself doubts are left out as long as half the curve remains.
        """
        spread = s.curve.spread
        own = float(np.sqrt(sum(spread.get(part, 0.0) ** 2 for part in ("reading", "drawing", "fit"))))
        floor = self.limits["family_reading_pct"] / 100 * largest
        keep = np.ones(len(s.flow), dtype=bool)
        for i0, i1, _ in s.curve.trace.stretches if s.curve.trace else ():
            q = s.curve.points[max(0, i0) : i1 + 1, 0]
            if q.size:
                keep &= (s.flow < q.min()) | (s.flow > q.max())
        if keep.sum() < max(4, 0.5 * keep.size):
            keep[:] = True
        typical = own if own > 0 else float(np.median(s.u))
        return FamilyCurve(
            id=s.curve.id,
            flow=s.flow[keep],
            value=s.value[keep],
            sigma=max(typical, floor),
            diameter_mm=s.diameter_mm,
            speed_rpm=s.speed_rpm,
        )


def _order(members: list[Series]) -> int:
    """Degree of the common shape: 5, less where curves are typed tables of few rows."""
    return int(max(2, min(5, min(len(s.flow) for s in members) - 2)))
