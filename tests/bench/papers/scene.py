"""What is drawn, engine-independent: strokes with intervals of ink, words, blanked boxes.

All in page px, in the order they are put on paper."""

from dataclasses import dataclass, field

import numpy as np

BLACK = (0.0, 0.0, 0.0)
DASHES = {"dashed": (7.0, 4.0), "dotted": (1.3, 2.6), "dashdot": (7.0, 2.6, 1.5, 2.6), "long": (14.0, 3.5)}
"""Ink and gap lengths in line widths."""


@dataclass
class Stroke:
    """A line of ``width`` px along ``line`` [n, 2], inked in ``intervals`` of its arc length (None: all of it). ``level`` is ink 0..1."""

    line: np.ndarray
    width: float
    level: float = 1.0
    colour: tuple[float, float, float] = BLACK
    intervals: np.ndarray | None = None
    closed: bool = False


@dataclass
class Words:
    """Text centred at a page point, ``size`` px high, turned by ``angle`` degrees (clockwise on screen)."""

    text: str
    at: tuple[float, float]
    size: float
    angle: float = 0.0
    level: float = 1.0
    colour: tuple[float, float, float] = BLACK


@dataclass
class Blank:
    """A box of bare paper: ``half`` (half width, half height) px about ``at``, turned by ``angle`` degrees."""

    at: tuple[float, float]
    half: tuple[float, float]
    angle: float = 0.0


@dataclass
class Scene:
    """Everything on one page of ``width`` x ``height`` px; ``blur`` is the sigma [px] of printing and optics together."""

    width: int
    height: int
    blur: float
    coloured: bool = False
    items: list[Stroke | Words | Blank] = field(default_factory=list)


def arc(line: np.ndarray) -> np.ndarray:
    """Arc length along a polyline."""
    return np.r_[0.0, np.cumsum(np.hypot(*np.diff(line, axis=0).T))]


def resample(line: np.ndarray, step: float) -> np.ndarray:
    """A polyline with vertices about ``step`` apart."""
    s = arc(line)
    at = np.linspace(0, s[-1], max(int(s[-1] / step), 1) + 1)
    return np.stack([np.interp(at, s, line[:, k]) for k in (0, 1)], 1)


def along(line: np.ndarray, share: float) -> np.ndarray:
    """The point at a share of the length."""
    s = arc(line)
    return np.array([np.interp(share * s[-1], s, line[:, k]) for k in (0, 1)])


def dash_intervals(length: float, dash: tuple[float, ...], width: float, start: float = 0.0) -> np.ndarray:
    """Inked intervals [n, 2] from ``start`` to ``length``, the pattern stretched a little so that the line ends with a whole dash."""
    parts = np.array(dash) * width
    span, period = length - start, parts.sum()
    count = max(round((span - parts[0]) / period), 1)
    parts = parts * span / (count * period + parts[0])
    edges = start + np.r_[0.0, np.cumsum(np.tile(parts, count + 1))]
    pairs = edges[: 2 * ((len(edges) - 1) // 2)].reshape(-1, 2)
    return np.clip(pairs[pairs[:, 0] < length - 1e-6], start, length)


def without(intervals: np.ndarray, low: float, high: float) -> np.ndarray:
    """Intervals with the stretch from ``low`` to ``high`` taken out."""
    out = []
    for a, b in intervals:
        if b <= low or a >= high:
            out.append((a, b))
            continue
        out += [(a, low)] if a < low else []
        out += [(high, b)] if b > high else []
    return np.array(out).reshape(-1, 2)


def cut(line: np.ndarray, low: float, high: float) -> np.ndarray:
    """The part of a polyline between two arc lengths."""
    s = arc(line)
    inner = (s > low + 1e-9) & (s < high - 1e-9)
    ends = np.stack([np.interp([low, high], s, line[:, k]) for k in (0, 1)], 1)
    return np.concatenate([ends[:1], line[inner], ends[1:]])
