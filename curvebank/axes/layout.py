"""Which mark says what: marks become observations on the panel plane, with unknown coordinates shared where marks line up.

A flow mark fixes u and leaves v open; flow marks clicked along one printed line share that v, and so show the direction
of the lines of constant v, and the other way round. Marks scattered over grid crossings leave one open coordinate each.
One click that serves two axes fixes both. A second value axis has its own scale ``v = alpha + beta z`` on the same plane.
"""

from dataclasses import dataclass, replace

import numpy as np

from ..records import FloatArray
from .directions import LINED_UP_PX, LINED_UP_SHARE, check_advance, check_values, directions_of
from .marks import AxisMarks

Term = tuple[str, float]
"""A coordinate: (axis id, z) for a typed value, or ("", number) for an open one."""


@dataclass(frozen=True, slots=True, eq=False)
class Slot:
    """One axis on the plane: ``z = (level - centre) / half`` and, unless it is the first of its direction, ``c = alpha + beta z``.

    ``own`` is the index of alpha among the scale parameters, or None for the reference axis; ``twin`` names the axis whose
    marks (the same clicks) this one shares.
    """

    marks: AxisMarks
    centre: float
    half: float
    own: int | None = None
    twin: str | None = None

    @property
    def z(self) -> FloatArray:
        return (self.marks.level - self.centre) / self.half


@dataclass(frozen=True, slots=True, eq=False)
class Layout:
    """Observations of one panel: clicks ``at`` [n, 2] px with ``terms[i] = (u term, v term)``.

    ``position`` [n, 2] are the clicks in oblique coordinates along ``directions`` (rows), shifted and scaled like the plane's
    pixels; ``open_direction`` and ``lined_up`` tell of each open coordinate its direction and whether several clicks share it;
    ``rows_of`` gives the clicks of each axis's marks; ``alignments`` are (direction, click, click) whose coordinate is one printed line
    although their terms differ (a flow axis whose ends are clicked as ticks of two value axes).
    """

    slots: dict[str, Slot]
    at: FloatArray
    terms: tuple[tuple[Term, Term], ...]
    open_direction: tuple[int, ...]
    lined_up: tuple[bool, ...]
    position: FloatArray
    directions: FloatArray
    shift: FloatArray
    size: float
    rows_of: dict[str, tuple[int, ...]]
    notices: tuple[tuple[str, str], ...] = ()
    alignments: tuple[tuple[int, int, int], ...] = ()

    @property
    def scales(self) -> int:
        """Number of scale parameters."""
        return sum(2 for s in self.slots.values() if s.own is not None)

    def term_row(self, term: Term, plane_size: int, size: int) -> tuple[float, FloatArray]:
        """A coordinate as constant + row @ x."""
        name, z = term
        row = np.zeros(size)
        if not name:
            row[plane_size + self.scales + int(z)] = 1.0
            return 0.0, row
        own = self.slots[name].own
        if own is None:
            return float(z), row
        row[plane_size + own], row[plane_size + own + 1] = 1.0, z
        return 0.0, row

    def with_value(self, name: str, mark: int, level: float) -> "Layout":
        """The same layout with another value at one mark."""
        slot = self.slots[name]
        return self._with_term(self.rows_of[name][mark], slot.marks.direction, (name, (level - slot.centre) / slot.half))

    def with_open(self, name: str, mark: int) -> "Layout":
        """The same layout with the value of one mark left open, as the last open coordinate."""
        d = self.slots[name].marks.direction
        out = self._with_term(self.rows_of[name][mark], d, ("", float(len(self.open_direction))))
        return replace(out, open_direction=(*self.open_direction, d), lined_up=(*self.lined_up, False))

    def _with_term(self, row: int, d: int, term: Term) -> "Layout":
        pair = (term, self.terms[row][1]) if d == 0 else (self.terms[row][0], term)
        return replace(self, terms=(*self.terms[:row], pair, *self.terms[row + 1 :]))

    def first_guess(self) -> FloatArray:
        """Affine start of all parameters, one direction at a time."""
        theta, scales = np.zeros(6), np.zeros(self.scales)
        opened = np.zeros(len(self.open_direction))
        for d in (0, 1):
            reference: tuple[float, float] | None = None
            for name, slot in self.slots.items():
                rows = [i for i, pair in enumerate(self.terms) if pair[d][0] == name]
                if slot.marks.direction != d or slot.twin is not None:
                    continue
                zero, slope = _middle_line(np.array([self.terms[i][d][1] for i in rows]), self.position[rows, d])
                if reference is None or slot.own is None:
                    reference = (zero, slope)
                    theta[2 + 2 * d : 4 + 2 * d] = slope * self.directions[d]
                    theta[0:2] += zero * self.directions[d]
                else:
                    scales[slot.own : slot.own + 2] = (zero - reference[0]) / reference[1], slope / reference[1]
            for k, e in enumerate(self.open_direction):
                if e == d and reference is not None:
                    rows = [i for i, pair in enumerate(self.terms) if pair[d] == ("", float(k))]
                    opened[k] = (float(np.mean(self.position[rows, d])) - reference[0]) / reference[1]
        return np.concatenate([theta, scales, opened])


def arrange(axes: dict[str, AxisMarks], path: str) -> Layout:
    """Sort the marks of a panel into observations.

    Raises
    ------
    CalibrationError
        ``collinear`` where all marks lie on one line, ``parallel`` where two axes run the same way, ``equal-values`` where
        marks along one axis line repeat a value.
    """
    everything = np.concatenate([a.at for a in axes.values()])
    shift = everything.mean(0)
    size = float(np.hypot(*np.ptp(everything, axis=0)) / 2) or 1.0
    slots = _slots(axes)
    directions, lined, notices = directions_of(axes, path)
    check_values(axes, lined)
    check_advance(axes, np.linalg.inv(directions.T))
    return _observations(axes, slots, lined, directions, shift, size, tuple(notices))


def _slots(axes: dict[str, AxisMarks]) -> dict[str, Slot]:
    slots: dict[str, Slot] = {}
    own = 0
    for name, a in axes.items():
        centre, half = float((a.level.max() + a.level.min()) / 2), float(np.ptp(a.level) / 2)
        peers = [s for s in slots.values() if s.marks.direction == a.direction and s.twin is None]
        twin = next((s.marks.id for s in peers if _same_clicks(s.marks, a)), None)
        slots[name] = Slot(a, centre, half, own if peers and twin is None else None, twin)
        own += 2 if peers and twin is None else 0
    return slots


def _same_clicks(a: AxisMarks, b: AxisMarks) -> bool:
    if len(a.at) != len(b.at):
        return False
    order_a, order_b = np.lexsort(a.at.T), np.lexsort(b.at.T)
    if np.abs(a.at[order_a] - b.at[order_b]).max() > 0.01:
        return False
    la, lb = a.level[order_a], b.level[order_b]
    line = np.polynomial.polynomial.polyfit(la - la.mean(), lb, 1)
    miss = lb - np.polynomial.polynomial.polyval(la - la.mean(), line)
    return bool(np.abs(miss).max() <= 1e-6 * np.ptp(lb))


def _middle_line(z: FloatArray, position: FloatArray) -> tuple[float, float]:
    """Line through points by the median of pairwise slopes (Theil 1950, Sen 1968): a wrong value among several does not turn it."""
    i, j = np.triu_indices(len(z), 1)
    rise, run = position[j] - position[i], z[j] - z[i]
    if not np.any(run):
        return float(np.median(position)), 1.0
    slope = float(np.median(rise[run != 0] / run[run != 0]))
    if slope == 0:
        slope = float(np.ptp(position) / np.ptp(z))
    return float(np.median(position - slope * z)), slope


def _observations(
    axes: dict[str, AxisMarks],
    slots: dict[str, Slot],
    lined: dict[str, bool],
    directions: FloatArray,
    shift: FloatArray,
    size: float,
    notices: tuple[tuple[str, str], ...],
) -> Layout:
    at: list[FloatArray] = []
    terms: list[list[Term | None]] = []
    rows_of: dict[str, tuple[int, ...]] = {}
    for name, a in axes.items():
        d, twin, rows = a.direction, slots[name].twin is not None, []
        for i, place in enumerate(a.at):
            row = next((k for k, p in enumerate(at) if np.abs(p - place).max() < 0.01 and (twin or terms[k][d] is None)), None)
            if row is None:
                row = len(at)
                at.append(place)
                terms.append([None, None])
            if not twin:
                terms[row][d] = (name, float(slots[name].z[i]))
            rows.append(row)
        rows_of[name] = tuple(rows)
    points = np.array(at)
    oblique = np.linalg.inv(directions.T)
    position = ((points - shift) / size) @ oblique.T
    open_direction: list[int] = []
    lined_up: list[bool] = []
    for name, a in axes.items():
        d = 1 - a.direction
        rows_open = [r for r in dict.fromkeys(rows_of[name]) if terms[r][d] is None]
        reach = max(LINED_UP_PX, 2 * LINED_UP_SHARE * size) / size
        for group in [rows_open] if lined[name] and rows_open else _clusters(rows_open, position[:, d], reach):
            for r in group:
                terms[r][d] = ("", float(len(open_direction)))
            open_direction.append(d)
            lined_up.append(len(group) > 1)
    pairs = tuple((u, v) for u, v in terms if u is not None and v is not None)
    aligned: list[tuple[int, int, int]] = []
    for name, a in axes.items():
        if lined[name]:
            d = 1 - a.direction
            one_each = list({terms[r][d]: r for r in rows_of[name]}.values())
            aligned += [(d, r, q) for r, q in zip(one_each, one_each[1:], strict=False)]
    return Layout(
        slots, points, pairs, tuple(open_direction), tuple(lined_up), position, directions, shift, size, rows_of, notices, tuple(aligned)
    )


def _clusters(rows: list[int], position: FloatArray, reach: float) -> list[list[int]]:
    """Rows whose positions follow each other closer than ``reach``."""
    groups: list[list[int]] = []
    for r in sorted(rows, key=lambda k: position[k]):
        if groups and position[r] - position[groups[-1][-1]] < reach:
            groups[-1].append(r)
        else:
            groups.append([r])
    return groups
