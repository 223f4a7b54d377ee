"""The map of one panel: pixels to canonical values and back, with the uncertainty of the marks behind it."""

from collections.abc import Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np

from ..errors import CalibrationError
from ..records import FloatArray, GridReport, Notice, PanelResult, frozen
from . import plane
from .marks import AxisMarks
from .warp import Warp

LN10 = float(np.log(10.0))
MAP_SIDE = 9


@dataclass(frozen=True, slots=True, eq=False)
class Scale:
    """One axis on the plane: ``level = centre + half * (c - alpha) / beta`` (c: panel coordinate), ``value = factor * printed(level)``.

    ``own`` is the index of alpha in the parameter vector (beta follows), or None where alpha = 0 and beta = 1 by definition.
    """

    marks: AxisMarks
    direction: int
    centre: float
    half: float
    own: int | None

    def level(self, c: FloatArray, parameters: FloatArray) -> FloatArray:
        if self.own is None:
            return self.centre + self.half * c
        return self.centre + self.half * (c - parameters[self.own]) / parameters[self.own + 1]

    def level_derivatives(self, c: FloatArray, parameters: FloatArray) -> tuple[FloatArray, FloatArray]:
        """d level / d c [n] and d level / d parameters [n, p]."""
        by_p = np.zeros((len(c), len(parameters)))
        if self.own is None:
            return np.full(len(c), self.half), by_p
        beta = parameters[self.own + 1]
        by_p[:, self.own] = -self.half / beta
        by_p[:, self.own + 1] = -self.half * (c - parameters[self.own]) / beta**2
        return np.full(len(c), self.half / beta), by_p

    def value(self, level: FloatArray) -> FloatArray:
        return self.marks.factor * self.marks.printed(level)

    def value_slope(self, level: FloatArray) -> FloatArray:
        return self.value(level) * LN10 if self.marks.log else np.full(len(level), self.marks.factor)

    def coordinate(self, value: FloatArray, parameters: FloatArray) -> FloatArray:
        printed = value / self.marks.factor
        if self.marks.log:
            with np.errstate(divide="ignore", invalid="ignore"):
                printed = np.log10(printed)
        c = (printed - self.centre) / self.half
        return c if self.own is None else parameters[self.own] + parameters[self.own + 1] * c


class PanelMap:
    """Pixels <-> values of one panel.

    ``axis_ids`` is a pair, flow axis first or not: the answer's columns follow it. Values are canonical (m3/h, m, kW, fraction).
    The parameters are the plane (six affine or eight projective numbers, for pixels shifted and scaled) and the scale pairs of
    further axes; `shared_basis` gives the Jacobian by them, so that a fit can keep the calibration error shared by all its points.
    """

    def __init__(
        self,
        panel_id: str,
        parameters: FloatArray,
        covariance: FloatArray,
        scales: dict[str, Scale],
        *,
        plane_size: int,
        shift: FloatArray,
        size: float,
        outline: FloatArray,
        mark_residuals: dict[str, FloatArray],
        click_sigma_px: float,
        grid: GridReport,
        notices: tuple[Notice, ...] = (),
        suspects: Sequence[dict[str, Any]] = (),
        warps: dict[int, Warp] | None = None,
    ):
        self.id = panel_id
        self.parameters, self.parameter_covariance = frozen(parameters), frozen(covariance)
        self.scales, self.warps = dict(scales), dict(warps or {})
        self.plane_size, self.shift, self.size = plane_size, frozen(shift), float(size)
        self.outline = frozen(outline, (-1, 2))
        self.mark_residuals = {k: frozen(v) for k, v in mark_residuals.items()}
        every = np.concatenate(list(self.mark_residuals.values()))
        self.residual_px, self.worst_px = float(np.sqrt(np.mean(every**2))), float(every.max())
        self.click_sigma_px = float(click_sigma_px)
        self.grid, self.notices, self.suspects = grid, tuple(notices), list(suspects)

    @property
    def projective(self) -> bool:
        """True where lines of one direction may converge (a photo taken at an angle)."""
        return self.plane_size == 8

    @property
    def axis_ids(self) -> tuple[str, ...]:
        return tuple(self.scales)

    def _plane(self, xy: Any) -> tuple[FloatArray, FloatArray]:
        """Coordinates on the flat plane and with the bend of the paper, [n, 2] each."""
        at = (np.asarray(xy, dtype=np.float64).reshape(-1, 2) - self.shift) / self.size
        flat = plane.coordinates(self.parameters[: self.plane_size], at)
        return flat, self._bent(flat)

    def _bent(self, flat: FloatArray) -> FloatArray:
        uv = flat.copy()
        for d, w in self.warps.items():
            uv[:, d] += w.terms(flat) @ self.parameters[w.first : w.first + w.size]
        return uv

    def _bend_slopes(self, flat: FloatArray) -> FloatArray:
        """d (bent coordinates) / d (flat coordinates) [n, 2, 2]."""
        out = np.tile(np.eye(2), (len(flat), 1, 1))
        for d, w in self.warps.items():
            out[:, d] += np.einsum("nks,k->ns", w.slopes(flat), self.parameters[w.first : w.first + w.size])
        return out

    def _flattened(self, uv: FloatArray) -> FloatArray:
        """The inverse of the bend, by Newton steps (it is small)."""
        flat = uv.copy()
        good = np.all(np.isfinite(uv), axis=1)
        for _ in range(12 if self.warps else 0):
            miss = self._bent(flat[good]) - uv[good]
            flat[good] -= np.linalg.solve(self._bend_slopes(flat[good]), miss[..., None])[..., 0]
            if not miss.size or np.abs(miss).max() < 1e-13:
                break
        return flat

    def _pair(self, axis_ids: Sequence[str]) -> list[Scale]:
        for name in axis_ids:
            if name not in self.scales:
                raise CalibrationError(f"The panel {self.id} has no axis {name!r}. It has: {', '.join(self.scales)}.", code="no-axis")
        return [self.scales[name] for name in axis_ids]

    def from_pixels(self, xy: Any, axis_ids: Sequence[str]) -> FloatArray:
        """Canonical values [n, 2] of pixels [n, 2]."""
        _, uv = self._plane(xy)
        return np.stack([s.value(s.level(uv[:, s.direction], self.parameters)) for s in self._pair(axis_ids)], -1)

    def to_pixels(self, values: Any, axis_ids: Sequence[str]) -> FloatArray:
        """Pixels [n, 2] of canonical values [n, 2]; NaN where a log10 scale has no such value."""
        values = np.asarray(values, dtype=np.float64).reshape(-1, 2)
        pair = self._pair(axis_ids)
        if pair[0].direction == pair[1].direction:
            raise CalibrationError(
                f"{axis_ids[0]} and {axis_ids[1]} run the same way: a point needs a flow axis and a value axis.", code="parallel"
            )
        uv = np.empty_like(values)
        for k, s in enumerate(pair):
            uv[:, s.direction] = s.coordinate(values[:, k], self.parameters)
        return plane.pixels(self.parameters[: self.plane_size], self._flattened(uv)) * self.size + self.shift

    def pixel_size(self, xy: Any, axis_ids: Sequence[str]) -> FloatArray:
        """d value / d pixel [n, 2, 2]: rows are the two axes, columns x and y."""
        flat, uv = self._plane(xy)
        _, by_uv = plane.pixel_derivatives(self.parameters[: self.plane_size], flat)
        by_pixel = self._bend_slopes(flat) @ np.linalg.inv(by_uv) / self.size
        out = np.empty((len(uv), 2, 2))
        for k, s in enumerate(self._pair(axis_ids)):
            c = uv[:, s.direction]
            slope, _ = s.level_derivatives(c, self.parameters)
            out[:, k] = (s.value_slope(s.level(c, self.parameters)) * slope)[:, None] * by_pixel[:, s.direction]
        return out

    def shared_basis(self, xy: Any, axis_ids: Sequence[str]) -> FloatArray:
        """d value / d parameters [n, 2, p] at fixed pixels; with ``parameter_covariance`` [p, p] this is JCGM 100 eq. 13."""
        flat, uv = self._plane(xy)
        theta = self.parameters[: self.plane_size]
        by_theta, by_uv = plane.pixel_derivatives(theta, flat)
        # A fixed pixel: 0 = d pixel/d theta + d pixel/d uv . d uv/d theta.
        uv_by_theta = -np.linalg.solve(by_uv, by_theta)
        out = np.zeros((len(uv), 2, len(self.parameters)))
        for k, s in enumerate(self._pair(axis_ids)):
            c = uv[:, s.direction]
            slope, by_scale = s.level_derivatives(c, self.parameters)
            warp = self.warps.get(s.direction)
            if warp is None:
                by_scale[:, : self.plane_size] += slope[:, None] * uv_by_theta[:, s.direction]
            else:
                # The plane is fixed where printed lines place the direction; the bend carries its uncertainty.
                by_scale[:, warp.first : warp.first + warp.size] = slope[:, None] * warp.terms(flat)
            out[:, k] = s.value_slope(s.level(c, self.parameters))[:, None] * by_scale
        return out

    def covariance(self, xy: Any, axis_ids: Sequence[str]) -> FloatArray:
        """Calibration covariance [n, 2, 2] of the canonical values at pixels [n, 2]."""
        basis = self.shared_basis(xy, axis_ids)
        return np.einsum("nap,pq,nbq->nab", basis, self.parameter_covariance, basis)

    def inside(self, xy: Any) -> np.ndarray:
        """Whether pixels lie within the outline (even-odd rule), bool [n]."""
        xy = np.asarray(xy, dtype=np.float64).reshape(-1, 2)
        x, y = xy[:, 0], xy[:, 1]
        hit = np.zeros(len(xy), dtype=bool)
        for (x1, y1), (x2, y2) in zip(self.outline, np.roll(self.outline, -1, axis=0), strict=True):
            if y1 != y2:
                hit ^= ((y1 > y) != (y2 > y)) & (x < x1 + (y - y1) * (x2 - x1) / (y2 - y1))
        return hit

    def panel_result(self) -> PanelResult:
        """The panel as the result format wants it, with a 9 x 9 map that covers the outline."""
        theta = self.parameters[: self.plane_size]
        corners, _ = self._plane(self.outline)
        u, v = (np.linspace(corners[:, d].min(), corners[:, d].max(), MAP_SIDE) for d in (0, 1))
        uv = np.stack(np.meshgrid(u, v), -1).reshape(-1, 2)
        at = plane.pixels(theta, uv) * self.size + self.shift
        bent = self._bent(uv)
        values = {name: frozen(s.value(s.level(bent[:, s.direction], self.parameters))) for name, s in self.scales.items()}
        return PanelResult(
            id=self.id,
            outline=self.outline,
            map_pixels=frozen(at),
            map_values=values,
            covariance=self.parameter_covariance,
            residual_px=self.residual_px,
            worst_px=self.worst_px,
            grid=self.grid,
            warnings=self.notices,
        )
