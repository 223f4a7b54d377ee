"""Axes, panels and curves of a chart on paper: where values lie in mm, and how frame, grid and lines are inked."""

from dataclasses import dataclass, field

import numpy as np

from . import letters
from .geometry import arc_mm


@dataclass(kw_only=True)
class Axis:
    """One printed scale. ``major`` steps carry numbers, ``minor`` and ``fine`` steps only grid lines."""

    id: str
    quantity: str
    title: str
    unit: str
    lo: float
    hi: float
    major: float
    minor: float | None = None
    fine: float | None = None
    side: str = "left"
    numbers: bool = True
    form: str = "{:g}"
    caption: str | None = None

    @property
    def ticks(self):
        """Values that carry a number, lowest first."""
        return [self.lo + i * self.major for i in range(round((self.hi - self.lo) / self.major) + 1)]

    def steps(self, step):
        """Values of the grid lines at a step."""
        return [self.lo + i * step for i in range(round((self.hi - self.lo) / step) + 1)] if step else []


@dataclass(kw_only=True)
class Panel:
    """A plot area: ``left``, ``top``, ``width``, ``height`` in mm on the paper; values in printed units."""

    id: str
    left: float
    top: float
    width: float
    height: float
    x: Axis
    y: list
    grid: str = "auto"

    def mm(self, flow, value, k=0):
        """Place on the paper [n, 2] in mm of printed flow and printed value of the k-th value axis."""
        ax, ay = self.x, self.y[k]
        u = (np.asarray(flow, float) - ax.lo) / (ax.hi - ax.lo)
        v = (np.asarray(value, float) - ay.lo) / (ay.hi - ay.lo)
        u, v = np.broadcast_arrays(u, v)
        return np.stack([self.left + u * self.width, self.top + (1 - v) * self.height], -1).reshape(-1, 2)

    def rectangle(self, *, n=21):
        """Outline in mm, clockwise from the top left, n points a side."""
        x0, y0, x1, y1 = self.left, self.top, self.left + self.width, self.top + self.height
        t = np.linspace(0, 1, n)[:-1]
        corners = np.array([[x0, y0], [x1, y0], [x1, y1], [x0, y1], [x0, y0]])
        return np.vstack([a + t[:, None] * (b - a) for a, b in zip(corners[:-1], corners[1:], strict=True)])


@dataclass(kw_only=True)
class Curve:
    """One printed line: flow and value in printed units, and what recipe and truth say of it."""

    id: str
    panel: Panel
    quantity: str
    flow: np.ndarray
    value: np.ndarray
    y_axis: int = 0
    diameter_mm: float | None = None
    speed_rpm: float = 0.0
    level: float | None = None
    closed: bool = False
    style: str = "solid"
    width_mm: float = 0.45
    label: str = ""
    gap_at: float | None = None
    gap_mm: float = 0.0
    note: str = ""
    extra: dict = field(default_factory=dict)

    @property
    def line_mm(self):
        """The drawn centreline on the paper [n, 2] in mm."""
        return self.panel.mm(self.flow, self.value, self.y_axis)


DASHES = {
    "solid": (),
    "dashed": (3.4, 1.4),
    "long dashed": (6.5, 1.6),
    "chain": (6.0, 1.2, 0.8, 1.2),
    "dotted": (0.9, 1.1),
}


@dataclass(kw_only=True)
class Manner:
    """How a house draws: pen widths [mm], letter heights [mm] and the hand of its lettering ("guide" or "type")."""

    frame: float = 0.45
    major: float = 0.18
    minor: float = 0.1
    fine: float = 0.07
    numbers: float = 2.3
    titles: float = 2.7
    pen: float = 0.26
    hand: str = "guide"
    slant: float = 0.0
    ticks: float = 1.4
    bold: float = 0


def letter(ink, text, at, height, manner, rng, *, turn=0.0, align=0.0):
    """Write a text in the house's manner, given the middle of its height."""
    a = np.radians(turn)
    at = np.asarray(at, float) + 0.5 * height * np.array([np.sin(a), np.cos(a)])
    if manner.hand == "type":
        ink.set_type(text, at, height, turn=turn, align=align, bold=manner.bold)
    else:
        lines = letters.write(text, at, height, hand=manner.hand, turn=turn, align=align, slant=manner.slant, rng=rng)
        ink.strokes(lines, manner.pen)


def draw_grid(ink, panel, manner):
    """Grid lines of a panel, finest first."""
    for axis, along_x in ((panel.x, True), (panel.y[0], False)):
        drawn = set()
        for step, pen in ((axis.major, manner.major), (axis.minor, manner.minor), (axis.fine, manner.fine)):
            for v in axis.steps(step):
                if pen and round(v, 6) not in drawn:
                    drawn.add(round(v, 6))
                    ends = panel.mm([v, v], [panel.y[0].lo, panel.y[0].hi]) if along_x else panel.mm([panel.x.lo, panel.x.hi], [v, v])
                    ink.stroke(ends, pen)


def draw_frame(ink, panel, manner, rng, *, x_title=True):
    """Frame, ticks, numbers and titles of a panel."""
    r = panel.rectangle(n=11)
    ink.stroke(np.vstack([r, r[:1]]), manner.frame)
    bottom = panel.top + panel.height
    for v in panel.x.ticks:
        at = panel.mm(v, panel.y[0].lo)[0]
        ink.stroke([at, at + [0, manner.ticks]], manner.frame * 0.7)
        if panel.x.numbers:
            letter(ink, panel.x.form.format(v), at + [0, manner.ticks + 0.9 + manner.numbers / 2], manner.numbers, manner, rng, align=0.5)
    if panel.x.numbers and x_title:
        at = [panel.left + panel.width / 2, bottom + manner.ticks + 3.2 + manner.numbers + manner.titles / 2]
        letter(ink, panel.x.caption or f"{panel.x.title}  [{panel.x.unit}]", at, manner.titles, manner, rng, align=0.5)
    for axis in panel.y:
        right = axis.side == "right"
        out = 1 if right else -1
        k = panel.y.index(axis)
        widest = 0.0
        for v in axis.ticks:
            at = panel.mm(panel.x.hi if right else panel.x.lo, v, k)[0]
            ink.stroke([at, at + [out * manner.ticks, 0]], manner.frame * 0.7)
            text = axis.form.format(v)
            widest = max(widest, letters.width_mm(text, manner.numbers))
            letter(ink, text, at + [out * (manner.ticks + 0.8), 0], manner.numbers, manner, rng, align=0.0 if right else 1.0)
        edge = panel.left + panel.width if right else panel.left
        at = [edge + out * (manner.ticks + widest + 4.0), panel.top + panel.height / 2]
        letter(ink, axis.caption or f"{axis.title}  [{axis.unit}]", at, manner.titles, manner, rng, turn=90, align=0.5)


def draw_curve(ink, curve, manner, rng, *, label_mm=2.3, grid=None):
    """The line of a curve with its label gap, the label upright along the line, and a wiped ground in the grid."""
    line = curve.line_mm
    length = arc_mm(line)[-1]
    gaps = []
    if curve.gap_at is not None:
        width = letters.width_mm(curve.label, label_mm)
        half = (curve.gap_mm or width + 1.6) / 2
        at = curve.gap_at * length
        gaps = [(at - half, at + half)]
        s = arc_mm(line)
        spot = np.array([np.interp(at, s, line[:, k]) for k in (0, 1)])
        ahead = np.array([np.interp(at + 1, s, line[:, k]) - np.interp(at - 1, s, line[:, k]) for k in (0, 1)])
        angle = np.degrees(np.arctan2(-ahead[1], ahead[0]))
        angle = angle - 180 if angle > 90 else angle + 180 if angle < -90 else angle
        letter(ink, curve.label, spot, label_mm, manner, rng, turn=angle, align=0.5)
        if grid is not None:
            a = np.radians(angle)
            along, up = np.array([np.cos(a), -np.sin(a)]), np.array([np.sin(a), np.cos(a)])
            w, h = width / 2 + 0.5, label_mm / 2 + 0.5
            grid.wipe(np.array([spot + i * w * along + j * h * up for i, j in ((-1, -1), (1, -1), (1, 1), (-1, 1))]))
    ink.stroke(line, curve.width_mm, pattern=DASHES[curve.style], gaps=gaps)


def end_label(ink, curve, manner, rng, *, height_mm=2.3, at="end", shift=(1.2, 0.0), align=0.0, text=None):
    """Write a curve's label at the start or end of its line."""
    spot = curve.line_mm[-1 if at == "end" else 0] + np.asarray(shift, float)
    letter(ink, text or curve.label, spot, height_mm, manner, rng, align=align)
