"""Which mark says what: marks become observations on the panel plane, with unknown coordinates shared where marks line up.

A flow mark fixes u and leaves v open; flow marks clicked along one printed line share that v, and so show the direction
of the lines of constant v, and the other way round. Marks scattered over grid crossings leave one open coordinate each.
One click that serves two axes fixes both. A second value axis has its own scale ``v = alpha + beta z`` on the same plane.
"""

from dataclasses import dataclass, field

import numpy as np

from ..errors import CalibrationError
from ..records import FloatArray
from .marks import ACROSS_FLOW, ALONG_FLOW, AxisMarks

LINED_UP_PX = 6.0
LINED_UP_SHARE = 0.012
"""Marks are on one printed line if none is further off than this many pixels, or this share of their extent (warped paper)."""
LEAN_LIMIT_DEG = 25.0
"""Axis lines that meet at less than 90 degrees minus this are not both axis lines: one set of marks is scattered."""


@dataclass(slots=True, eq=False)
class Slot:
    """One axis on the plane: ``z = (level - centre) / half`` and, unless it is the first of its direction, ``v = alpha + beta z``.

    ``own`` is the index of alpha among the scale parameters, or None for the reference axis; ``twin`` names the axis whose
    marks (the same clicks) this one shares, in which case ``level = twin_offset + twin_slope * level of the twin``.
    """

    marks: AxisMarks
    centre: float
    half: float
    own: int | None = None
    twin: str | None = None

    @property
    def z(self) -> FloatArray:
        return (self.marks.level - self.centre) / self.half


@dataclass(slots=True, eq=False)
class Layout:
    """Observations of one panel. Arrays run over clicks: ``axis[d]`` is the slot that fixes coordinate d or None, ``z[d]`` its value
    there, ``open[d]`` the number of the open coordinate. ``open_direction`` says for each open coordinate which it is."""

    slots: dict[str, Slot]
    at: FloatArray
    axis: tuple[list[str | None], list[str | None]]
    z: FloatArray
    open: np.ndarray
    open_direction: list[int]
    lined_up: list[bool]
    start: FloatArray
    directions: FloatArray
    shift: FloatArray
    size: float
    marks_of: dict[str, list[int]] = field(default_factory=dict)
    notices: list[tuple[str, str]] = field(default_factory=list)


def arrange(axes: dict[str, AxisMarks], path: str) -> Layout:
    """Sort the marks of a panel into observations and give a first affine guess.

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
    directions, lined, notices = _directions(axes, path)
    _check_equal(axes, lined)
    start = _first_guess(axes, slots, directions, shift, size, path)
    layout = _observations(axes, slots, lined, directions, start, shift, size)
    layout.notices = notices
    return layout


def _slots(axes: dict[str, AxisMarks]) -> dict[str, Slot]:
    slots: dict[str, Slot] = {}
    own = 0
    for name, a in axes.items():
        slot = Slot(a, float((a.level.max() + a.level.min()) / 2), float(np.ptp(a.level) / 2))
        peers = [s for s in slots.values() if s.marks.direction == a.direction and s.twin is None]
        twin = next((s for s in peers if _same_clicks(s.marks, a)), None)
        if twin is not None:
            slot.twin = twin.marks.id
        elif peers:
            slot.own, own = own, own + 2
        slots[name] = slot
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


def _line(at: FloatArray) -> tuple[FloatArray, float, float]:
    """Direction of the best line through points, their extent along it and the largest distance from it [px]."""
    r = at - at.mean(0)
    along = np.linalg.svd(r, full_matrices=False)[2][0]
    return along, float(np.ptp(r @ along)), float(np.abs(r @ np.array([-along[1], along[0]])).max())


def _gradient(a: AxisMarks) -> FloatArray:
    """Direction in which the values of scattered marks rise: plane through (x, y, level)."""
    r = a.at - a.at.mean(0)
    g = np.linalg.lstsq(r, a.level - a.level.mean(), rcond=None)[0]
    return g / (np.hypot(*g) or 1.0)


def _directions(axes: dict[str, AxisMarks], path: str) -> tuple[FloatArray, dict[str, bool], list[tuple[str, str]]]:
    """Unit vectors along which u and v grow (rows), and which axes have their marks on one line."""
    lines = {name: _line(a.at) for name, a in axes.items()}
    lined = {n: off <= max(LINED_UP_PX, LINED_UP_SHARE * extent) for n, (_, extent, off) in lines.items()}
    notices: list[tuple[str, str]] = []
    of = {d: [n for n, a in axes.items() if a.direction == d] for d in (ALONG_FLOW, ACROSS_FLOW)}
    everything = np.concatenate([a.at for a in axes.values()])
    along, extent, off = _line(everything)
    if off <= max(LINED_UP_PX, LINED_UP_SHARE * extent):
        first = axes[of[ALONG_FLOW][0]]
        raise CalibrationError(
            "All marks of the panel lie on one line, so they cannot place two axes. Put the marks of the other axis along its own line.",
            path=f"{first.path}.marks",
            code="collinear",
        )

    def best(d: int) -> FloatArray | None:
        """Direction of growth in d: the longest set of lined-up marks."""
        names = [n for n in of[d] if lined[n]]
        return max(((lines[n][1], lines[n][0]) for n in names), key=lambda pair: pair[0])[1] if names else None

    grow = [best(ALONG_FLOW), best(ACROSS_FLOW)]
    if grow[0] is not None and grow[1] is not None:
        turn = _angle_deg(grow[0], grow[1])
        if turn < 90 - LEAN_LIMIT_DEG:
            if turn < 5:
                other = axes[of[ACROSS_FLOW][0]]
                raise CalibrationError(
                    f"The marks of the {other.id} axis run the same way as those of the {of[ALONG_FLOW][0]} axis. "
                    "The two axes must cross: check which marks belong to which axis.",
                    path=f"{other.path}.marks",
                    code="parallel",
                )
            # One set runs obliquely over the panel: the one that fits the page worse is taken as scattered over crossings.
            d = int(_off_page(grow[1]) > _off_page(grow[0]))
            for n in of[d]:
                lined[n] = False
            grow[d] = None
            notices.append(
                ("calibration-direction", f"The {' and '.join(of[d])} marks do not run along one axis line; right angles are assumed.")
            )
    for d in (0, 1):
        if grow[d] is None:
            # Scattered marks of the other direction show it: lines of equal v are level where v does not change.
            flat = [_gradient(axes[n]) for n in of[1 - d] if not lined[n] and len(axes[n].typed) >= 3 and lines[n][2] > 0.05 * lines[n][1]]
            reference = grow[1 - d] if grow[1 - d] is not None else (_gradient(axes[of[1 - d][0]]))
            base = flat[0] if flat else reference
            grow[d] = np.array([-base[1], base[0]])
    return np.array(grow), lined, notices


def _angle_deg(a: FloatArray, b: FloatArray) -> float:
    """Angle between two directions, 0 to 90 degrees."""
    return float(np.degrees(np.arcsin(np.clip(abs(a[0] * b[1] - a[1] * b[0]), 0, 1))))


def _off_page(a: FloatArray) -> float:
    """How far a direction is from the page's own, 0 to 1."""
    return float(np.abs(a).min() / np.abs(a).max())


def _check_equal(axes: dict[str, AxisMarks], lined: dict[str, bool]) -> None:
    for name, a in axes.items():
        if not lined[name]:
            continue
        for i in range(len(a.typed)):
            for j in range(i):
                if a.typed[i] == a.typed[j] and np.hypot(*(a.at[i] - a.at[j])) > LINED_UP_PX:
                    raise CalibrationError(
                        f"Marks {j + 1} and {i + 1} of the {name} axis both say {a.typed[i]:g} at different places. Correct one.",
                        path=f"{a.path}.marks[{i}].value",
                        code="equal-values",
                    )


def _first_guess(
    axes: dict[str, AxisMarks], slots: dict[str, Slot], directions: FloatArray, shift: FloatArray, size: float, path: str
) -> FloatArray:
    """Affine start in scaled pixels, from oblique coordinates along the two directions; also starts alpha and beta."""
    oblique = np.linalg.inv(directions.T)
    theta = np.zeros(6)
    scales: list[float] = []
    for d in (0, 1):
        reference: tuple[float, float] | None = None
        for name, slot in slots.items():
            a = axes[name]
            if a.direction != d or slot.twin is not None:
                continue
            position = ((a.at - shift) / size) @ oblique.T[:, d]
            zero, slope = np.polynomial.polynomial.polyfit(slot.z, position, 1)
            if abs(slope) * size < LINED_UP_PX:
                raise CalibrationError(
                    f"The marks of the {name} axis do not move along it as their values grow. Check values and axis.",
                    path=f"{a.path}.marks",
                    code="parallel",
                )
            if reference is None:
                reference = (zero, slope)
                theta[2 + 2 * d : 4 + 2 * d] = slope * directions[d]
                theta[0:2] += zero * directions[d]
            else:
                scales += [(zero - reference[0]) / reference[1], slope / reference[1]]
    own = sum(2 for s in slots.values() if s.own is not None)
    ordered = np.zeros(own)
    k = 0
    for d in (0, 1):
        for slot in slots.values():
            if slot.own is not None and slot.marks.direction == d:
                ordered[slot.own : slot.own + 2] = scales[k : k + 2]
                k += 2
    return np.concatenate([theta, ordered])


def _observations(
    axes: dict[str, AxisMarks],
    slots: dict[str, Slot],
    lined: dict[str, bool],
    directions: FloatArray,
    start: FloatArray,
    shift: FloatArray,
    size: float,
) -> Layout:
    at: list[FloatArray] = []
    names: tuple[list[str | None], list[str | None]] = ([], [])
    z: list[list[float]] = []
    marks_of: dict[str, list[int]] = {}
    for name, a in axes.items():
        d, marks_of[name] = a.direction, []
        for i, place in enumerate(a.at):
            row = next((k for k, p in enumerate(at) if np.abs(p - place).max() < 0.01), None)
            if row is not None and names[d][row] is not None and slots[name].twin is None:
                row = None
            if row is None:
                row = len(at)
                at.append(place)
                names[0].append(None)
                names[1].append(None)
                z.append([0.0, 0.0])
            if slots[name].twin is None:
                names[d][row] = name
                z[row][d] = float(slots[name].z[i])
            marks_of[name].append(row)
    points = np.array(at)
    open_ = np.full((len(at), 2), -1)
    open_direction: list[int] = []
    lined_up: list[bool] = []
    opened: list[float] = []
    oblique = np.linalg.inv(directions.T)
    position = ((points - shift) / size) @ oblique.T
    steps = np.array([np.hypot(*start[2:4]), np.hypot(*start[4:6])]) * np.sign([start[2:4] @ directions[0], start[4:6] @ directions[1]])
    zero = oblique @ start[0:2]
    for name, a in axes.items():
        if slots[name].twin is not None:
            continue
        d = 1 - a.direction
        rows = [r for r in dict.fromkeys(marks_of[name]) if names[d][r] is None and open_[r, d] < 0]
        reach = max(LINED_UP_PX, 2 * LINED_UP_SHARE * size) / size
        for group in [rows] if lined[name] and rows else _clusters(rows, position[:, d], reach):
            for r in group:
                open_[r, d] = len(opened)
            opened.append(float((np.mean(position[group, d]) - zero[d]) / steps[d]))
            open_direction.append(d)
            lined_up.append(len(group) > 1)
    return Layout(
        slots,
        points,
        names,
        np.array(z),
        open_,
        open_direction,
        lined_up,
        np.concatenate([start, opened]),
        directions,
        shift,
        size,
        marks_of,
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
