"""Panels with known truth for the calibration tests."""

import numpy as np
import pytest


class Chart:
    """An invented panel: a true map, and marks clicked on it with chosen noise."""

    def __init__(self, *, corner=(190.0, 1180.0), width=860.0, height=830.0, turn_deg=0.0, shear_deg=0.0, keystone=(0.0, 0.0)):
        a, b = np.radians(turn_deg), np.radians(turn_deg + shear_deg)
        self.o = np.array(corner)
        self.e1 = width * np.array([np.cos(a), np.sin(a)])
        self.e2 = height * np.array([np.sin(b), -np.cos(b)])
        self.g = np.array(keystone)

    def pixel(self, u, v):
        """Pixel of panel shares 0..1 along and up."""
        u, v = np.asarray(u, float), np.asarray(v, float)
        top = self.o + np.multiply.outer(u, self.e1) + np.multiply.outer(v, self.e2)
        return top / (1 + self.g[0] * u + self.g[1] * v)[..., None]

    def axis(self, quantity, unit, places, low, high, *, rng=None, noise=1.5, log=False, typed=None, **more):
        """Marks at panel shares ``places`` [(u, v)], with values of a scale from ``low`` to ``high``."""
        marks = []
        for i, (u, v) in enumerate(places):
            share = u if quantity == "flow" else v
            value = low * (high / low) ** share if log else low + (high - low) * share
            at = self.pixel(u, v) + (rng.uniform(-noise, noise, 2) if rng is not None else 0.0)
            marks.append({"at": [float(at[0]), float(at[1])], "value": float(value if typed is None else typed[i])})
        return {"quantity": quantity, "unit": unit, "scale": "log10" if log else "linear", "marks": marks, **more}

    def grid(self, n=5):
        u, v = (x.ravel() for x in np.meshgrid(np.linspace(0, 1, n), np.linspace(0, 1, n)))
        return u, v, self.pixel(u, v)


BOTTOM = [(0.0, 0.0), (0.5, 0.0), (1.0, 0.0)]
LEFT = [(0.0, 0.0), (0.0, 0.4), (0.0, 1.0)]
RIGHT = [(1.0, 0.0), (1.0, 0.5), (1.0, 1.0)]


@pytest.fixture
def chart():
    return Chart
