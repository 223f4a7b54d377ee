"""The recipe document as typed, frozen models: what a digitisation needs to be repeated without a screen.

Keys that begin ``x-`` are set aside on reading (they stay in the stored bytes); any other unknown key is refused.
Numbers are checked for being finite; what a number *means* (marks that cannot place an axis, clicks off the ink) is
judged by the layer that uses it, so that one bad curve never sinks its sheet.
"""

import re
import unicodedata
from typing import Annotated, Any, Literal

from pydantic import AfterValidator, BaseModel, BeforeValidator, ConfigDict, Field, model_validator

from .. import units
from ..records import CONTOURS

Number = Annotated[float, Field(strict=True, allow_inf_nan=False, ge=-1e12, le=1e12)]
"""Any pixel or printed value; beyond 1e12 a number is a slip, and squares of it would overflow."""
Positive = Annotated[float, Field(strict=True, allow_inf_nan=False, ge=1e-12, le=1e12)]
Pair = tuple[Number, Number]


def _not_blank(text: str) -> str:
    if not text.strip():
        raise ValueError("This text is blank.")
    return text


def _no_truth_value(value: Any) -> Any:
    if isinstance(value, bool):
        raise ValueError(f"{str(value).lower()} is not a number.")
    return value


Text = Annotated[str, Field(strict=True, min_length=1, max_length=500), AfterValidator(_not_blank)]


def _plain_id(text: str) -> str:
    if not re.fullmatch(r"[^\s/\\\x00-\x1f][^/\\\x00-\x1f]{0,79}", text):
        raise ValueError("An id is 1 to 80 characters without slashes or line breaks.")
    return text


def _bare_name(text: str) -> str:
    if "/" in text or "\\" in text or text in (".", "..") or "\x00" in text:
        raise ValueError("file is a bare name beside the recipe, without a folder.")
    return text


Id = Annotated[str, Field(strict=True), AfterValidator(_plain_id)]


class Node(BaseModel):
    """Base of every part: unknown keys refused, ``x-`` keys set aside, frozen."""

    model_config = ConfigDict(extra="forbid", frozen=True, populate_by_name=True)

    @model_validator(mode="before")
    @classmethod
    def _set_aside(cls, data: Any) -> Any:
        if isinstance(data, dict):
            return {k: v for k, v in data.items() if not (isinstance(k, str) and k.startswith("x-"))}
        return data


class MarkModel(Node):
    """A clicked point [px] and the printed value there."""

    at: Pair
    value: Number


class AxisModel(Node):
    """One printed scale. ``multiplier`` is a printed "x100"; a pressure scale for head needs ``density_kgm3``."""

    quantity: Literal["flow", "head", "efficiency", "power", "npshr", "suction_lift", "input_power", "overall_efficiency"]
    unit: Text
    scale: Literal["linear", "log10"] = "linear"
    marks: tuple[MarkModel, ...] = ()
    multiplier: Positive = 1.0
    density_kgm3: Positive | None = None


class LimitsModel(Node):
    """What the panel prints about its own range, in the flow axis's printed unit; ``duty_marks`` are printed (flow, value) points."""

    minimum_flow: Number | None = None
    end_of_curve: Number | None = None
    duty_marks: tuple[Pair, ...] = ()


class PanelModel(Node):
    """One plot area: axes by id, an optional outline polygon [px], and whether the printed grid may be used."""

    id: Id
    axes: dict[Id, AxisModel]
    grid: Literal["auto", "off"] = "auto"
    outline: Annotated[tuple[Pair, ...], Field(min_length=3)] | None = None
    limits: LimitsModel | None = None


class LabelModel(Node):
    """How the paper names the line: the variable it stands for and the text as printed."""

    by: Literal["diameter", "speed", "stages", "letter", "blade_angle", "pumps_running"]
    printed: Text


class FitModel(Node):
    """``order`` 1 to 8 or "auto"; ``through_zero`` only where the curve starts at no flow, no value (efficiency)."""

    order: Annotated[Literal["auto", 1, 2, 3, 4, 5, 6, 7, 8], BeforeValidator(_no_truth_value)] = "auto"
    through_zero: bool = False


class LockedModel(Node):
    """A stretch of the trace that stays exactly as it is: its pixels in order along the line, and their standard uncertainty [px]."""

    pixels: Annotated[tuple[Pair, ...], Field(min_length=2)]
    sigma_px: Positive | None = None


class CurveModel(Node):
    """One wanted line, contour, hand-drawn curve, set of test points or typed table."""

    id: Id
    quantity: Literal[
        "head",
        "efficiency",
        "power",
        "npshr",
        "suction_lift",
        "input_power",
        "overall_efficiency",
        "efficiency_contour",
        "power_contour",
        "npshr_contour",
    ]
    kind: Literal["line", "hand", "points", "table"] = "line"
    panel: Id | None = None
    x: Id | None = None
    y: Id | None = None
    value: Number | None = None
    diameter_mm: Positive | None = None
    speed_rpm: Positive | None = None
    label: LabelModel | None = None
    applies_to: Literal["this", "all", "unknown"] | None = None
    group: Text | None = None
    basis: Literal["catalogue", "quotation", "guaranteed", "works test", "field test"] = "catalogue"
    head_is: Literal["total", "per stage"] = "total"
    factor: Positive = 1.0
    clicks: tuple[Pair, ...] = ()
    closed: bool = False
    ends: Literal["ink", "click"] = "ink"
    guides: tuple[Pair, ...] = ()
    locked: tuple[LockedModel, ...] = ()
    rows: tuple[Pair, ...] = ()
    x_unit: Text | None = None
    y_unit: Text | None = None
    fit: FitModel = FitModel()

    @property
    def is_contour(self) -> bool:
        """True for a line of constant efficiency, power or NPSHr on the head-flow plane."""
        return self.quantity in CONTOURS

    @property
    def belongs_to(self) -> str:
        """``applies_to`` with its default: a line without a diameter is read for all diameters, a letter without mm for none."""
        if self.applies_to:
            return self.applies_to
        if self.diameter_mm is not None or self.is_contour:
            return "this"
        return "unknown" if self.label and self.label.by == "letter" else "all"


class LiquidModel(Node):
    """The liquid the sheet was drawn for, and whether the sheet states it."""

    density_kgm3: Positive | None = None
    temperature_c: Number | None = None
    viscosity_mm2s: Positive | None = None
    stated: bool | Text | None = None


class MaskModel(Node):
    """An area of the sheet that hides what is printed: a ``brush`` stroke ``width_px`` wide, or an ``outline`` polygon.

    What lies under a mask is not known; it is never taken for blank paper.
    """

    brush: Annotated[tuple[Pair, ...], Field(min_length=1)] | None = None
    width_px: Annotated[float, Field(strict=True, allow_inf_nan=False, ge=1, le=4000)] | None = None
    outline: Annotated[tuple[Pair, ...], Field(min_length=3)] | None = None

    @model_validator(mode="after")
    def _one_form(self) -> "MaskModel":
        if (self.brush is None) == (self.outline is None):
            raise ValueError("A mask is either a brush (points and width_px) or an outline (three points or more).")
        if (self.brush is None) != (self.width_px is None):
            raise ValueError("A brush needs its width_px; an outline has none.")
        return self


class SheetModel(Node):
    """The scan: a bare file name beside the recipe, a page, masked areas, and the paper register."""

    file: Annotated[Text, AfterValidator(_bare_name)]
    page: Annotated[int, Field(strict=True, ge=1)] = 1
    dpi: Annotated[float, Field(strict=True, ge=36, le=1200)] = 300
    turn: Annotated[Literal[0, 90, 180, 270], BeforeValidator(_no_truth_value)] = 0
    sha256: Annotated[str, Field(pattern=r"^[0-9a-fA-F]{64}$")] | None = None
    masks: tuple[MaskModel, ...] = ()
    liquid: LiquidModel | None = None
    document: Text | None = None
    issue: Text | None = None
    date: Text | None = None
    kept_at: Text | None = None
    lent_by: Text | None = None
    confidential: bool | None = None


class PumpModel(Node):
    """The pump the sheet is about; ``key`` defaults to MAKER-MODEL in capitals and never changes."""

    maker: Text
    model: Text
    key: Annotated[str, Field(pattern=r"^[A-Z0-9][A-Z0-9-]{0,79}$")] | None = None
    stages: Annotated[int, Field(strict=True, ge=1, le=100)] = 1
    speed_rpm: Positive | None = None
    density_kgm3: Positive = units.WATER_DENSITY_KGM3
    type: Text | None = None
    inlet: Literal["single", "double"] | None = None

    @property
    def catalogue_key(self) -> str:
        """The stated key, or the slug of maker and model."""
        return self.key or slug(f"{self.maker}-{self.model}")


class CorrectionModel(Node):
    """A correction printed in the margin, for instance efficiency per step of trim."""

    quantity: Text
    amount: Number
    condition: Text


class Recipe(Node):
    """The whole document (``"recipe": 1``)."""

    recipe: Literal[1]
    pump: PumpModel
    sheet: SheetModel | None = None
    panels: tuple[PanelModel, ...] = ()
    curves: tuple[CurveModel, ...] = ()
    corrections: tuple[CorrectionModel, ...] = ()

    def panel(self, panel_id: str | None) -> PanelModel | None:
        """The panel of that id, or None."""
        return next((p for p in self.panels if p.id == panel_id), None)


def slug(text: str) -> str:
    """A catalogue key from free text: ASCII letters and digits in capitals, joined by single hyphens.

    Examples
    --------
    >>> slug("Lark & Söhne - WM 150")
    'LARK-SOHNE-WM-150'
    """
    ascii_text = unicodedata.normalize("NFKD", text).encode("ascii", "ignore").decode()
    return re.sub(r"[^A-Z0-9]+", "-", ascii_text.upper()).strip("-")[:80]
