"""One traced line to one curve: pixels to engineering values, the parts of its uncertainty, its fit."""

from typing import Any

import numpy as np

from .. import fit, units
from ..errors import CurvebankError, FitError, TraceError
from ..fit import uncertainty
from ..recipe import AxisModel, CurveModel
from ..records import CONTOURS, Curve, Fit, FloatArray, Notice, PumpInfo, Trace, frozen

SAME_SCALE = (
    {"head", "npshr", "suction_lift"},
    {"efficiency", "overall_efficiency"},
    {"power", "input_power"},
)
"""Quantities that share units, so that one printed axis may serve either."""


PEN_WANDER = 0.05
"""How far a drawn line strays locally from the curve it stands for, as a share of its width (common practice, no source).
A trace is often far better than the pen was: without this a fit would follow the pen's wander with a needless order."""


def base(model: CurveModel, pump: PumpInfo | None, *, x_unit: str = "m3/h", y_unit: str = "m") -> dict[str, Any]:
    """The fields of a curve that the recipe alone decides."""
    return dict(
        id=model.id,
        quantity=model.quantity,
        panel=model.panel,
        diameter_mm=model.diameter_mm,
        speed_rpm=model.speed_rpm or (pump.speed_rpm if pump else None),
        level=model.value,
        label=model.label.model_dump() if model.label else None,
        applies_to=model.belongs_to,
        group=model.group,
        basis=model.basis,
        head_is=model.head_is,
        kind=model.kind,
        printed_x_unit=x_unit,
        printed_y_unit=y_unit,
        factor=model.factor,
        x_axis=model.x,
        y_axis=model.y,
    )


def failed(model: CurveModel, pump: PumpInfo | None, error: CurvebankError, path: str) -> Curve:
    """The curve that says why it could not be made; nothing the user gave is lost."""
    return Curve(**base(model, pump), error={**error.to_dict(), "path": error.path or path})


def value_scale(model: CurveModel, axis: AxisModel, stages: int) -> tuple[float, tuple[Notice, ...]]:
    """Factor from the axis's canonical value to the curve's canonical value, and what there is to say about it.

    A line drawn at ``factor`` times its value on an axis of another quantity ("4.6 P" on the efficiency axis) is read in the axis's printed
    numbers; without a factor such a line keeps the axis's own values and says so. Heads printed per stage become heads of the whole pump.
    """
    wanted = CONTOURS.get(model.quantity, model.quantity)
    notices: tuple[Notice, ...] = ()
    if model.is_contour:
        scale = 1.0
    elif axis.quantity == wanted or any({axis.quantity, wanted} <= group for group in SAME_SCALE):
        scale = 1.0 / model.factor
    elif model.factor != 1.0:
        scale = 1.0 / (units.factor(axis.quantity, axis.unit, density_kgm3=axis.density_kgm3) * model.factor)
    else:
        scale = 1.0
        notices = (
            Notice(
                code="mixed-axis",
                message=f"This {wanted} line is read on the {axis.quantity} axis and keeps that axis's values. "
                f"State its factor if the paper prints one.",
            ),
        )
    on_head = axis.quantity == "head" and (wanted == "head" or model.is_contour)
    if model.head_is == "per stage" and on_head and stages > 1:
        scale *= stages
        notices += (Notice(code="per-stage", message=f"The paper prints head per stage; the values here are for all {stages} stages."),)
    return scale, notices


def from_trace(model: CurveModel, axes: dict[str, AxisModel], trace: Trace, panel_map: Any, pump: PumpInfo, line_width_px: float) -> Curve:
    """Points, uncertainty and fit of one traced line.

    The parts of the uncertainty are those of JCGM 100 at equal flow: calibration and drawing are shared by all points of the line,
    reading is not. A contour has no value at equal flow where it turns back, so there the head component alone is taken.
    A fit that cannot be made is a warning, not the loss of the trace.
    """
    assert model.x is not None and model.y is not None
    ids = (model.x, model.y)
    scale, notices = value_scale(model, axes[model.y], pump.stages)
    pixels = np.asarray(trace.pixels)
    stretch = np.array([1.0, scale])[:, None]
    points = np.asarray(panel_map.from_pixels(pixels, ids)) * stretch[:, 0]
    pixel_size = np.asarray(panel_map.pixel_size(pixels, ids)) * stretch
    basis = np.asarray(panel_map.shared_basis(pixels, ids)) * stretch
    if model.is_contour:
        per_px = np.hypot(pixel_size[:, 1, 0], pixel_size[:, 1, 1])
        slope = np.zeros(len(points))
    else:
        per_px = uncertainty.reading_sigma(pixels, 1.0, pixel_size)
        slope = np.nan_to_num(uncertainty.slopes(points), nan=0.0)
    calibration = uncertainty.calibration_part(basis, panel_map.parameter_covariance, slope)
    drawing_px = uncertainty.DRAWING_SHARE_OF_LINE * (trace.line_width_px or line_width_px)
    drawing = uncertainty.common_shift(per_px, drawing_px)
    reading = np.asarray(trace.sigma_px) * per_px
    parts = {"calibration": uncertainty.shared_sigma(calibration), "drawing": uncertainty.shared_sigma(drawing)}
    sigma = np.sqrt(parts["calibration"] ** 2 + reading**2 + parts["drawing"] ** 2)
    fitted: Fit | None = None
    misfit = np.zeros(1)
    if not model.is_contour:
        try:
            fitted = fit.fit_curve(
                points[:, 0],
                points[:, 1],
                np.hypot(reading, PEN_WANDER * (trace.line_width_px or line_width_px) * per_px),
                uncertainty.stack(calibration, drawing),
                order=model.fit.order,
                through_zero=model.fit.through_zero,
                correlation_px=correlation(trace),
            )
            misfit = points[:, 1] - fitted.value(points[:, 0])
        except FitError as e:
            notices += (Notice(code="fit", message=f"No polynomial stands for this curve: {e.message}"),)
    return Curve(
        **base(model, pump, x_unit=axes[model.x].unit, y_unit=axes[model.y].unit),
        trace=trace,
        points=frozen(points),
        sigma=frozen(sigma),
        spread=uncertainty.spread(reading, parts["calibration"], parts["drawing"], misfit),
        fit=fitted,
        warnings=tuple(trace.warnings) + notices,
    )


def correlation(trace: Trace) -> float:
    """Length [px] over which neighbouring readings are one: a few line widths, never under 4 px."""
    return max(4.0, 3.0 * (trace.line_width_px or 3.0))


def from_table(model: CurveModel, pump: PumpInfo) -> Curve:
    """A curve typed from a certificate: rows in printed units, no paper geometry.

    The uncertainty of a typed number is half its last digit taken as a rectangular distribution (JCGM 100, 4.3.7).
    """
    if len(model.rows) < 2:
        raise TraceError("A table needs two rows or more.", code="too-few-rows")
    assert model.x_unit is not None and model.y_unit is not None
    rows = np.array(model.rows, dtype=float)
    rows = rows[np.argsort(rows[:, 0], kind="stable")]
    to_q, to_v = units.factor("flow", model.x_unit), units.factor(model.quantity, model.y_unit)
    scale = to_v / model.factor * (pump.stages if model.head_is == "per stage" and model.quantity == "head" else 1)
    points = np.column_stack([rows[:, 0] * to_q, rows[:, 1] * scale])
    typed = last_digit(rows[:, 1]) / np.sqrt(12.0) * scale
    slope = np.gradient(points[:, 1], points[:, 0]) if np.all(np.diff(points[:, 0]) > 0) else np.zeros(len(points))
    sigma = np.hypot(typed, slope * last_digit(rows[:, 0]) / np.sqrt(12.0) * to_q)
    notices: tuple[Notice, ...] = ()
    fitted: Fit | None = None
    try:
        fitted = fit.fit_curve(
            points[:, 0],
            points[:, 1],
            sigma,
            None,
            order=model.fit.order,
            through_zero=model.fit.through_zero,
            correlation_px=1.0,
        )
    except FitError as e:
        notices = (Notice(code="fit", message=f"No polynomial stands for this table: {e.message}"),)
    none = np.zeros(1)
    return Curve(
        **base(model, pump, x_unit=model.x_unit, y_unit=model.y_unit),
        points=frozen(points),
        sigma=frozen(sigma),
        spread=uncertainty.spread(sigma, none, none, points[:, 1] - fitted.value(points[:, 0]) if fitted else none),
        fit=fitted,
        warnings=notices,
    )


def last_digit(values: FloatArray) -> float:
    """The step of the last digit that the typed column uses: 0.1 for 12.5, 41.0, 7.3."""
    places = max((len(text.partition(".")[2]) for text in (f"{v:.10g}" for v in values) if "e" not in text), default=0)
    return float(10.0**-places)
