"""The two directions of a panel, from how the marks lie: along an axis line, or scattered over crossings."""

import numpy as np

from ..errors import CalibrationError
from ..records import FloatArray
from .marks import ACROSS_FLOW, ALONG_FLOW, AxisMarks

LINED_UP_PX = 6.0
LINED_UP_SHARE = 0.012
"""Marks are on one printed line if none is further off than this many pixels, or this share of their extent (warped paper)."""
LEAN_LIMIT_DEG = 25.0
"""Axis lines that meet at less than 90 degrees minus this are not both axis lines: one set of marks is scattered."""
PARALLEL_DEG = 5.0


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


def directions_of(axes: dict[str, AxisMarks], path: str) -> tuple[FloatArray, dict[str, bool], list[tuple[str, str]]]:
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
            if turn < PARALLEL_DEG:
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
            other_way = grow[1 - d]
            reference = other_way if other_way is not None else _gradient(axes[of[1 - d][0]])
            base = flat[0] if flat else reference
            grow[d] = np.array([-base[1], base[0]])
    return np.array(grow), lined, notices


def _angle_deg(a: FloatArray, b: FloatArray) -> float:
    """Angle between two directions, 0 to 90 degrees."""
    return float(np.degrees(np.arcsin(np.clip(abs(a[0] * b[1] - a[1] * b[0]), 0, 1))))


def _off_page(a: FloatArray) -> float:
    """How far a direction is from the page's own, 0 to 1."""
    return float(np.abs(a).min() / np.abs(a).max())


def check_values(axes: dict[str, AxisMarks], lined: dict[str, bool]) -> None:
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


def check_advance(axes: dict[str, AxisMarks], oblique: np.ndarray) -> None:
    """Marks of an axis must differ along it."""
    for a in axes.values():
        if np.ptp(a.at @ oblique[a.direction]) < LINED_UP_PX:
            raise CalibrationError(
                f"The marks of the {a.id} axis lie side by side, not along it. Check to which axis they belong.",
                path=f"{a.path}.marks",
                code="parallel",
            )
