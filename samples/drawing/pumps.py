"""Invented pumps: dimensionless curves, trim and speed laws, and efficiency contours, in canonical units.

Shapes are plausible for radial and mixed-flow volute pumps (shut-off head coefficient 0.5 to 0.65, power at shut-off
near half of that at best efficiency): common practice, no source. Power always closes: P = rho g Q H / eta.
"""

from dataclasses import dataclass

import numpy as np

GRAVITY_MS2 = 9.80665
WATER_KGM3 = 998.2


@dataclass(frozen=True, kw_only=True)
class Pump:
    """A pump type at its printed speed; lengths mm, flow m3/h, head m, speed 1/min, efficiency as a fraction."""

    diameter_mm: float
    speed_rpm: float
    best_flow_m3h: float
    psi: float
    best_efficiency: float
    best_npshr_m: float
    head_shape: tuple = (0.02, -0.16, -0.04)
    rise: float = 2.2
    flow_exponent: float = 1.1
    head_exponent: float = 2.1
    eta_top: float = 0.96
    eta_fall: float = 1.0
    stages: int = 1

    @property
    def shutoff_head_m(self):
        """Total head at zero flow and full diameter, from the head coefficient psi = g H / u^2 of one stage."""
        tip = np.pi * self.diameter_mm / 1000 * self.speed_rpm / 60
        return self.stages * self.psi * tip**2 / GRAVITY_MS2

    def _share(self, flow_m3h, diameter_mm, speed_rpm):
        r, n = diameter_mm / self.diameter_mm, (speed_rpm or self.speed_rpm) / self.speed_rpm
        return np.asarray(flow_m3h, float) / (self.best_flow_m3h * r**self.flow_exponent * n), r, n

    def flow(self, share, diameter_mm, speed_rpm=None):
        """Flow [m3/h] at a share of the best flow of that diameter and speed."""
        r, n = diameter_mm / self.diameter_mm, (speed_rpm or self.speed_rpm) / self.speed_rpm
        return np.asarray(share, float) * self.best_flow_m3h * r**self.flow_exponent * n

    def head(self, flow_m3h, diameter_mm, speed_rpm=None):
        """Total head [m]."""
        x, r, n = self._share(flow_m3h, diameter_mm, speed_rpm)
        a, b, c = self.head_shape
        return self.shutoff_head_m * r**self.head_exponent * n**2 * (1 + a * x + b * x**2 + c * x**3)

    def peak(self, diameter_mm):
        """Best efficiency of a diameter: highest a little below full size."""
        fall = self.eta_fall * (diameter_mm / self.diameter_mm - self.eta_top) ** 2
        return self.best_efficiency * (1 - fall)

    def efficiency(self, flow_m3h, diameter_mm, speed_rpm=None):
        """Efficiency as a fraction; its shape is a cubic in flow with its top at the best flow."""
        x, _, _ = self._share(flow_m3h, diameter_mm, speed_rpm)
        return self.peak(diameter_mm) * self._rise(x)

    def _rise(self, x):
        a = self.rise
        c = a - 2
        return a * x + (1 - a - c) * x**2 + c * x**3

    def power(self, flow_m3h, diameter_mm, speed_rpm=None, density_kgm3=WATER_KGM3):
        """Shaft power [kW]."""
        x, r, n = self._share(flow_m3h, diameter_mm, speed_rpm)
        a, b, c = self.head_shape
        head = self.shutoff_head_m * r**self.head_exponent * n**2 * (1 + a * x + b * x**2 + c * x**3)
        k = self.rise
        over = k + (1 - k - (k - 2)) * x + (k - 2) * x**2
        best = self.best_flow_m3h * r**self.flow_exponent * n / 3600
        return density_kgm3 * GRAVITY_MS2 * best * head / (self.peak(diameter_mm) * over) / 1000

    def npshr(self, flow_m3h):
        """Required net positive suction head [m] at full diameter and printed speed."""
        x = np.asarray(flow_m3h, float) / self.best_flow_m3h
        return self.best_npshr_m * (0.62 + 0.08 * x + 0.30 * x**2.6)

    def contour(self, level, smallest_mm, farthest=1.4):
        """Lines of constant efficiency between two diameters as a list of (flow, head, closed)."""
        r = np.linspace(smallest_mm / self.diameter_mm, 1, 4001)
        need = level / self.peak(r * self.diameter_mm)
        x = np.linspace(0, 1, 4001)
        left = np.interp(need, self._rise(x), x)
        y = np.linspace(farthest + 0.2, 1, 4001)
        right = np.interp(need, self._rise(y), y)
        real = need <= 1
        out = []
        edge = np.flatnonzero(np.diff(np.r_[0, real.astype(int), 0])).reshape(-1, 2)
        for lo, hi in edge:
            k = slice(lo, hi)
            bottom, top = lo > 0, hi < len(r)
            if bottom and top:
                branches = [(np.r_[left[k], right[k][::-1], left[lo]], np.r_[r[k], r[k][::-1], r[lo]], True)]
            elif bottom:
                branches = [(np.r_[left[k][::-1], right[k]], np.r_[r[k][::-1], r[k]], False)]
            elif top:
                branches = [(np.r_[left[k], right[k][::-1]], np.r_[r[k], r[k][::-1]], False)]
            else:
                branches = [(left[k], r[k], False), (right[k], r[k], False)]
            for xs, rs, closed in branches:
                keep = np.ones(len(xs), bool) if closed else xs <= farthest
                xs, rs = xs[keep], rs[keep]
                if len(xs) > 20:
                    out.append(
                        (
                            self.flow(xs, rs * self.diameter_mm),
                            self.head(self.flow(xs, rs * self.diameter_mm), rs * self.diameter_mm),
                            closed,
                        )
                    )
        return out
