"""What requests must look like. Documents stay open objects: an unfinished draft is allowed to be wrong."""

import math
from typing import Annotated, Any, Literal

from flask_openapi import FileStorage
from pydantic import AfterValidator, BaseModel, ConfigDict, Field, StringConstraints, field_validator, model_validator


def _quarter(turn: int) -> int:
    if turn not in (0, 90, 180, 270):
        raise ValueError("turn is 0, 90, 180 or 270 degrees clockwise")
    return turn


Sha = Annotated[str, StringConstraints(pattern=r"^[0-9a-f]{64}$")]
Token = Annotated[str, StringConstraints(pattern=r"^[A-Za-z0-9_.:-]{1,100}$")]
Label = Annotated[str, StringConstraints(max_length=200)]
Line = Annotated[str, StringConstraints(strip_whitespace=True, min_length=1, max_length=500)]
PumpKey = Annotated[str, StringConstraints(pattern=r"^[A-Z0-9][A-Z0-9-]{0,79}$")]
Number = Annotated[float, Field(allow_inf_nan=False)]
Count = Annotated[int, Field(ge=1, le=2**53)]
Turn = Annotated[int, AfterValidator(_quarter), Field(json_schema_extra={"enum": [0, 90, 180, 270]})]
Dpi = Annotated[float, Field(ge=36, le=1200, allow_inf_nan=False)]


class Strict(BaseModel):
    """Unknown keys are refused: a misspelt key is a fault, not a wish."""

    model_config = ConfigDict(extra="forbid")


class ProblemModel(BaseModel):
    """RFC 9457 problem details; the only shape an error has under /api."""

    type: str
    title: str
    status: int
    detail: str
    code: str
    path: str | None = None


class SheetForm(BaseModel):
    """A sheet's file, as multipart/form-data."""

    file: FileStorage


class PagePath(BaseModel):
    """A page of a sheet."""

    sha256: Sha
    page: Annotated[int, Field(ge=1, le=100_000)]


class TilePath(PagePath):
    """A tile: zoom, column, row."""

    z: Annotated[int, Field(ge=0, le=30)]
    x: Annotated[int, Field(ge=0, le=10**6)]
    y: Annotated[int, Field(ge=0, le=10**6)]


class PageQuery(BaseModel):
    """How the page is decoded: resolution of a PDF [1/inch], turn clockwise [degrees]."""

    dpi: Dpi = 300
    turn: Turn = 0


class DraftPath(BaseModel):
    """A draft."""

    draft: Token


class SheetChoice(Strict):
    """The sheet a new draft starts from."""

    sha256: Sha
    page: Annotated[int, Field(ge=1, le=100_000)] = 1
    file: Annotated[str, StringConstraints(max_length=255)] | None = None
    dpi: Dpi = 300
    turn: Turn = 0


class NewDraft(Strict):
    """A draft starts from a sheet, from a document, or from a stored revision: exactly one of the three."""

    sheet: SheetChoice | None = None
    doc: dict[str, Any] | None = None
    sheet_sha256: Sha | None = None
    from_pump: PumpKey | None = None
    revision: Count | None = None
    action_id: Token | None = None

    @model_validator(mode="after")
    def _one_origin(self) -> "NewDraft":
        if sum(x is not None for x in (self.sheet, self.doc, self.from_pump)) != 1:
            raise ValueError("Give one of sheet, doc or from_pump")
        return self


class NewStep(Strict):
    """One action: the whole document after it, and the step it was made on."""

    doc: dict[str, Any]
    base_step: Count
    action_id: Token
    label: Label = ""


class Head(Strict):
    """The step that undo, redo or a jump leads to."""

    step: Count


class JobPath(BaseModel):
    """A job."""

    job: Token


class PreviewQuestion(Strict):
    """A panel and perhaps a curve, as a recipe has them; ``seq`` comes back, so that late answers can be dropped.

    ``masks`` are the sheet's and ``sheet`` is the page (those of the draft where left out). ``live``: a point is under the hand, and what
    it does not touch of the curve's last trace may stay; the answer is for the eye, the next question without ``live`` follows the whole
    line.
    """

    panel: dict[str, Any]
    curve: dict[str, Any] | None = None
    masks: list[dict[str, Any]] | None = None
    live: bool = False
    sheet: SheetChoice | None = None
    seq: Annotated[int, Field(ge=0, le=2**53)] = 0


class CarryRequest(Strict):
    """The other scan of the same paper: a sheet that lies on the desk or in the bank."""

    sheet: SheetChoice


Place = Annotated[list[Number], Field(min_length=2, max_length=2)]
Tie = Annotated[list[Place], Field(min_length=2, max_length=2)]


class JoinRequest(Strict):
    """The second half of the sheet, and points [px] that are the same place on both: ``[[first x, y], [second x, y]]``."""

    sheet: SheetChoice
    ties: Annotated[list[Tie], Field(max_length=50)] | None = None


class OutcomePath(DraftPath):
    """What a job of a draft gave."""

    job: Token


class SnapQuery(BaseModel):
    """A place on the page and how far what is printed may lie from it [px]."""

    x: Number
    y: Number
    radius: Annotated[float, Field(gt=0, le=60, allow_inf_nan=False)] = 8


class ResultQuery(BaseModel):
    """The step whose result is wanted; the head where left out."""

    step: Count | None = None


class SaveRequest(Strict):
    """Who saves what why. ``key`` defaults to the recipe's, ``step`` to the head."""

    key: PumpKey | None = None
    who: Line
    why: Line
    save_key: Token
    release: bool = False
    step: Count | None = None


class PumpsQuery(BaseModel):
    """What the catalogue shows: a word of key, maker or model, a state, a page."""

    q: Annotated[str, StringConstraints(max_length=200)] = ""
    state: Literal["draft", "submitted", "released", "superseded", "withdrawn"] | None = None
    cursor: Annotated[str, StringConstraints(max_length=100)] = ""
    limit: Annotated[int, Field(ge=1, le=500)] = 50


class PumpPath(BaseModel):
    """A pump, by its key or a former key."""

    key: PumpKey


class RevisionPath(PumpPath):
    """A revision of a pump."""

    number: Count


Quantity = Literal["head", "efficiency", "power", "npshr", "suction_lift", "input_power", "overall_efficiency"]
Positive = Annotated[float, Field(gt=0, le=1e6, allow_inf_nan=False)]


class ValuesQuery(BaseModel):
    """Flows [m3/h] separated by commas; diameter [mm] and speed [1/min] as the quantity needs them."""

    quantity: Quantity
    flow_m3h: Annotated[str, StringConstraints(min_length=1, max_length=60_000)]
    diameter_mm: Positive | None = None
    speed_rpm: Positive | None = None
    outside: Literal["nan", "extrapolate"] = "nan"

    @field_validator("flow_m3h")
    @classmethod
    def _finite(cls, text: str) -> str:
        try:
            ok = all(math.isfinite(float(part)) for part in text.split(","))
        except ValueError:
            ok = False
        if not ok:
            raise ValueError("flow_m3h is numbers separated by commas, like 0,50,100.5")
        return text

    @property
    def flows(self) -> list[float]:
        """The flows as numbers [m3/h]."""
        return [float(part) for part in self.flow_m3h.split(",")]


class DutyQuery(BaseModel):
    """A system curve: static head [m], friction [m/(m3/h)^exponent], and the wheel it meets."""

    static_head_m: Number
    friction_m_per_m3h2: Annotated[float, Field(ge=0, allow_inf_nan=False)]
    diameter_mm: Positive | None = None
    speed_rpm: Positive | None = None
    exponent: Annotated[float, Field(ge=0.5, le=3, allow_inf_nan=False)] = 2.0


class ExportQuery(BaseModel):
    """The form of a download: traced points or fits as a CSV table, or the whole revision as JSON."""

    format: Literal["csv-points", "csv-fits", "json"]


class NewEvent(Strict):
    """Who does what to a revision, and why; ``finding`` is the key of the finding that is waived."""

    kind: Literal["submitted", "released", "withdrawn", "commented", "waived"]
    who: Line
    why: Line
    finding: Annotated[str, StringConstraints(pattern=r"^[0-9a-f]{16}$")] | None = None


class SettingsChange(Strict):
    """Settings to change, by name, and who changes them."""

    settings: dict[Token, bool | Number | str | None]
    who: Line
