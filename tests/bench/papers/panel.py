"""Axes and panels of a drawn chart: printed scales, their ticks, and where values lie in drawing px."""

from dataclasses import dataclass, field

import numpy as np

RANGES = {
    "flow": ("m3/h", [(60, 10), (100, 20), (140, 20), (160, 20), (250, 50), (300, 50), (500, 100), (600, 100)]),
    "head": ("m", [(20, 5), (40, 10), (50, 10), (80, 20), (100, 20)]),
    "power": ("kW", [(8, 2), (20, 5), (40, 10), (80, 20)]),
    "efficiency": ("%", [(100, 20), (90, 10)]),
    "npshr": ("m", [(8, 2), (10, 2), (12, 2)]),
}
IMPERIAL = {
    "flow": ("gal/min(US)", [(500, 100), (800, 100), (1200, 200), (2500, 500)]),
    "head": ("ft", [(80, 20), (120, 20), (200, 50), (300, 50)]),
    "power": ("hp", [(10, 2), (25, 5), (60, 10), (100, 20)]),
}
LOG_RANGES = {"flow": ("m3/h", [(10, 200), (20, 500), (30, 600)]), "head": ("m", [(5, 100), (3, 80), (10, 200)])}


@dataclass
class Axis:
    """One printed scale; ``side`` is bottom, left, right, top or a number of mm below the panel for further flow scales."""

    quantity: str
    unit: str
    low: float
    high: float
    step: float
    side: str
    scale: str = "linear"
    offset_mm: float = 0.0

    def share(self, value: np.ndarray | float) -> np.ndarray:
        """Where a value lies, 0 at the low end, 1 at the high end."""
        if self.scale == "log":
            return np.log10(np.asarray(value, float) / self.low) / np.log10(self.high / self.low)
        return (np.asarray(value, float) - self.low) / (self.high - self.low)

    def value(self, share: np.ndarray) -> np.ndarray:
        """The value at a share of the axis."""
        if self.scale == "log":
            return self.low * (self.high / self.low) ** np.asarray(share, float)
        return self.low + np.asarray(share, float) * (self.high - self.low)

    def ticks(self) -> np.ndarray:
        """Labelled values."""
        if self.scale == "log":
            all_of = np.concatenate([f * np.array([1.0, 2, 3, 5, 7]) for f in 10.0 ** np.arange(-1, 5)])
            return all_of[(all_of >= self.low - 1e-9) & (all_of <= self.high + 1e-9)]
        first = np.ceil(self.low / self.step - 1e-9) * self.step
        return np.arange(first, self.high + 1e-6 * self.step, self.step) + 0.0

    def minors(self, parts: int) -> np.ndarray:
        """Unlabelled grid values."""
        if self.scale == "log":
            fine = np.concatenate([f * np.r_[1:2:0.2, 2:5:0.5, 5:10:1.0] for f in 10.0 ** np.arange(-1, 5)])
        else:
            fine = np.arange(np.floor(self.low / self.step), np.ceil(self.high / self.step) + 1, 1 / parts) * self.step
        fine = fine[(fine >= self.low - 1e-9) & (fine <= self.high + 1e-9)]
        return fine[np.abs(fine[:, None] - self.ticks()[None]).min(1) > 1e-6 * self.high]


@dataclass
class Panel:
    """A plot area ``box`` (x0, y0, x1, y1) in drawing px, with one flow axis, further flow scales, and value axes."""

    id: str
    box: tuple[float, float, float, float]
    x: Axis
    ys: list[Axis]
    more_x: list[Axis] = field(default_factory=list)
    shares_flow_below: bool = False

    def px(self, q: np.ndarray | float, v: np.ndarray | float) -> np.ndarray:
        """Shares of the axes to drawing px [n, 2]."""
        x0, y0, x1, y1 = self.box
        q, v = np.broadcast_arrays(np.asarray(q, float), np.asarray(v, float))
        return np.stack([x0 + q * (x1 - x0), y1 - v * (y1 - y0)], -1)

    def tick_px(self, axis: Axis, values: np.ndarray, per_mm: float) -> np.ndarray:
        """Where values of an axis are printed along it."""
        s = axis.share(values)
        x0, y0, x1, y1 = self.box
        if axis.quantity == "flow":
            height = y1 - y0
            return self.px(s, (height if axis.side == "top" else -axis.offset_mm * per_mm) / height)
        return self.px(1 + axis.offset_mm * per_mm / (x1 - x0) if axis.side == "right" else 0.0, s)


def pick_axis(
    rng: np.random.Generator, quantity: str, side: str, scale: str = "linear", imperial: bool = False, broken: bool = False
) -> Axis:
    """A scale with round ends; a broken one begins far from zero."""
    if scale == "log":
        unit, choices = LOG_RANGES[quantity]
        low, high = choices[int(rng.integers(len(choices)))]
        return Axis(quantity, unit, low, high, 1.0, side, "log")
    unit, choices = (IMPERIAL if imperial and quantity in IMPERIAL else RANGES)[quantity]
    high, step = choices[int(rng.integers(len(choices)))]
    low = step * np.floor(0.3 * high / step) if broken else 0.0
    return Axis(quantity, unit, float(low), float(high), float(step), side)
