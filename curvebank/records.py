"""The records that layers hand to each other: frozen, keyword-only, canonical units, read-only arrays.

Nothing here computes. Arrays are float64 and made read-only on the way in; ``eq=False`` where a record holds arrays,
because comparing arrays with ``==`` has no one answer. Pixel convention: x right, y down, the centre of the top-left pixel is (0, 0).
"""

import hashlib
from dataclasses import dataclass, field
from typing import Any, Literal

import numpy as np
import numpy.typing as npt

FloatArray = npt.NDArray[np.float64]
Severity = Literal["error", "warning", "note"]
CONTOURS = {"efficiency_contour": "efficiency", "power_contour": "power", "npshr_contour": "npshr"}
"""Contour quantity -> the quantity whose constant level it draws on the head-flow plane."""


def frozen(values: Any, shape: tuple[int, ...] | None = None) -> FloatArray:
    """A read-only float64 copy of ``values``, reshaped if ``shape`` is given (empty input is allowed)."""
    a = np.array(values, dtype=np.float64)
    if shape is not None:
        a = a.reshape(shape)
    a.setflags(write=False)
    return a


@dataclass(frozen=True, kw_only=True, slots=True)
class Mark:
    """A clicked point [px] whose value the user typed, in the axis's printed unit."""

    at: tuple[float, float]
    value: float


@dataclass(frozen=True, kw_only=True, slots=True)
class Notice:
    """A warning that stays with a curve or panel: ``{code, message, stretch}``; stretch is (i0, i1) or None."""

    code: str
    message: str
    stretch: tuple[int, int] | None = None


@dataclass(frozen=True, kw_only=True, slots=True)
class PageInfo:
    """One decoded page: size [px] after EXIF and ``turn``, resolution [dots per inch] or None where the file says nothing."""

    sha256: str
    page: int
    width: int
    height: int
    dpi_x: float | None
    dpi_y: float | None
    media: str
    turn: int = 0
    pages: int = 1


@dataclass(frozen=True, kw_only=True, slots=True, eq=False)
class GridReport:
    """What the printed grid gave the calibration; ``why`` says in words why it was or was not used."""

    used: bool
    lines: int
    residual_px: float | None
    why: str


@dataclass(frozen=True, kw_only=True, slots=True, eq=False)
class PanelResult:
    """One calibrated panel.

    ``map_pixels`` [81, 2] is a 9 x 9 grid of pixels over the panel (row by row), ``map_values`` the canonical value of each
    axis there [81]. ``covariance`` [a, a] belongs to ``parameters``, the numbers of the panel map. ``outline`` [n, 2] px.
    """

    id: str
    outline: FloatArray
    map_pixels: FloatArray
    map_values: dict[str, FloatArray]
    covariance: FloatArray
    residual_px: float
    worst_px: float
    grid: GridReport
    warnings: tuple[Notice, ...] = ()
    error: dict[str, Any] | None = None


@dataclass(frozen=True, kw_only=True, slots=True, eq=False)
class Trace:
    """The centreline of one printed curve: ``pixels`` [n, 2] about 1 px apart, ``sigma_px`` [n] one standard uncertainty across the line.

    ``stretches`` are (first index, last index, reason) of doubtful parts; ``confidence`` is the estimated chance that the
    trace follows the wanted line throughout; ``hint_click`` is the single extra click that would settle a doubt, or None.
    """

    pixels: FloatArray
    sigma_px: FloatArray
    closed: bool = False
    confidence: float = 1.0
    flagged: bool = False
    stretches: tuple[tuple[int, int, str], ...] = ()
    warnings: tuple[Notice, ...] = ()
    hint_click: tuple[float, float] | None = None
    source: str = "ink"
    line_width_px: float | None = None


@dataclass(frozen=True, kw_only=True, slots=True, eq=False)
class Fit:
    """A polynomial in t = (flow - mid) / half over lo <= flow <= hi [m3/h].

    ``scaled`` [order + 1] are coefficients in t with ``covariance``; ``plain`` the same curve in powers of flow, lowest first.
    ``sigma`` is one standard uncertainty of the fitted value (all parts, root mean square over the domain), ``max_miss``
    the largest distance to the traced points, both in the curve's unit; ``max_miss_pct`` in % of the largest value.
    """

    order: int
    lo: float
    hi: float
    mid: float
    half: float
    scaled: FloatArray
    covariance: FloatArray
    plain: FloatArray
    sigma: float
    max_miss: float
    max_miss_pct: float
    through_zero: bool = False

    def value(self, flow_m3h: Any) -> FloatArray:
        """The polynomial at any flow (no domain check here: callers guard the domain)."""
        t = (np.asarray(flow_m3h, dtype=np.float64) - self.mid) / self.half
        return np.asarray(np.polynomial.polynomial.polyval(t, self.scaled), dtype=np.float64)

    def uncertainty(self, flow_m3h: Any) -> FloatArray:
        """Standard uncertainty of the fitted value: sqrt(phi V phi'), JCGM 100 eq. 13."""
        t = (np.asarray(flow_m3h, dtype=np.float64) - self.mid) / self.half
        phi = np.polynomial.polynomial.polyvander(t.ravel(), self.order).reshape(*t.shape, self.order + 1)
        variance = np.einsum("...i,ij,...j->...", phi, self.covariance, phi)
        return np.asarray(np.sqrt(np.maximum(variance, 0.0)), dtype=np.float64)


@dataclass(frozen=True, kw_only=True, slots=True, eq=False)
class Curve:
    """One quantity against flow at one impeller diameter and speed, or one contour (points are then flow and head; ``level`` is its value).

    ``points`` [n, 2] and ``sigma`` [n] are in canonical units and as long as ``trace.pixels``; empty where the curve failed,
    and then ``error`` is ``{code, message, path}``. ``spread`` are the parts of the typical uncertainty, in the curve's unit:
    calibration, reading, drawing, fit.
    """

    id: str
    quantity: str
    panel: str | None = None
    diameter_mm: float | None = None
    speed_rpm: float | None = None
    level: float | None = None
    label: dict[str, str] | None = None
    applies_to: str = "this"
    group: str | None = None
    basis: str = "catalogue"
    head_is: str = "total"
    kind: str = "line"
    printed_x_unit: str = "m3/h"
    printed_y_unit: str = "m"
    factor: float = 1.0
    trace: Trace | None = None
    points: FloatArray = field(default_factory=lambda: frozen([], (0, 2)))
    sigma: FloatArray = field(default_factory=lambda: frozen([], (0,)))
    spread: dict[str, float] = field(default_factory=dict)
    fit: Fit | None = None
    warnings: tuple[Notice, ...] = ()
    error: dict[str, Any] | None = None
    x_axis: str | None = None
    y_axis: str | None = None

    @property
    def is_contour(self) -> bool:
        """True for a line of constant efficiency, power or NPSHr on the head-flow plane."""
        return self.quantity in CONTOURS


@dataclass(frozen=True, kw_only=True, slots=True)
class Finding:
    """What a check says. ``subject`` is ``curve:ID``, ``axis:PANEL/AXIS``, ``panel:ID``, ``family:QUANTITY`` or ``pump``."""

    rule: str
    severity: Severity
    subject: str
    message: str
    measured: float | None = None
    limit: float | None = None
    unit: str = ""
    source: str = ""
    action: str = ""
    where: dict[str, Any] = field(default_factory=dict)

    @property
    def key(self) -> str:
        """Sixteen hex digits that name this finding in every revision: sha256(rule, subject)."""
        return hashlib.sha256(f"{self.rule}\n{self.subject}".encode()).hexdigest()[:16]


@dataclass(frozen=True, kw_only=True, slots=True)
class PumpInfo:
    """What a recipe says of its pump; ``key`` is the catalogue key and never changes."""

    maker: str
    model: str
    key: str
    stages: int = 1
    speed_rpm: float | None = None
    density_kgm3: float = 998.2
    type: str | None = None
    inlet: str | None = None


@dataclass(frozen=True, kw_only=True, slots=True, eq=False)
class Digitised:
    """Everything one recipe and one sheet give. ``page`` and ``pump`` are None only where the whole recipe failed (``error`` says why)."""

    recipe_sha256: str
    page: PageInfo | None
    pump: PumpInfo | None
    panels: tuple[PanelResult, ...] = ()
    curves: tuple[Curve, ...] = ()
    findings: tuple[Finding, ...] = ()
    made_by: dict[str, str] = field(default_factory=dict)
    error: dict[str, Any] | None = None
    sheet_file: str | None = None
    """Name of the scan as the recipe gives it."""
