"""A recipe and the bytes of its sheet to curves, fits and findings. Deterministic: no clock, no unseeded randomness, one thread.

One bad curve never sinks its sheet: a library error about a curve stays in that curve, one about a panel in the curves read on it,
and only what spoils everything (no sheet, no recipe) becomes the error of the whole.
"""

import importlib.metadata
from collections.abc import Callable
from dataclasses import replace
from typing import Any

import cv2
import scipy.linalg  # noqa: F401 - its BLAS must be loaded before threads are limited

from .. import axes, checks, recipe, sheet, trace
from ..errors import CurvebankError, SheetError, TraceError
from ..recipe import CurveModel, Recipe
from ..records import Curve, Digitised, PageInfo, PumpInfo, frozen
from . import curves as curve_maker
from . import masking
from .threads import one_thread

Progress = Callable[[float, str], None]
ALGORITHM = f"trace {trace.ALGORITHM}, sheet {sheet.ALGORITHM}"
"""Changes whenever the same recipe and sheet would give other traces: the names come from the parts that decide them."""

cv2.setNumThreads(1)
cv2.ocl.setUseOpenCL(False)


def made_by() -> dict[str, str]:
    """Versions that decide the numbers: a result is only comparable to the bit within one set of them."""
    names = {"numpy": "numpy", "scipy": "scipy", "opencv": "opencv-python-headless", "pillow": "pillow", "pypdfium2": "pypdfium2"}
    out = {"curvebank": importlib.metadata.version("curvebank")}
    for key, package in names.items():
        try:
            out[key] = importlib.metadata.version(package)
        except importlib.metadata.PackageNotFoundError:
            out[key] = cv2.__version__ if key == "opencv" else "not installed"
    return out | {"algorithm": ALGORITHM}


def pump_info(doc: Recipe) -> PumpInfo:
    """The pump as the records know it."""
    p = doc.pump
    return PumpInfo(
        maker=p.maker,
        model=p.model,
        key=p.catalogue_key,
        stages=p.stages,
        speed_rpm=p.speed_rpm,
        density_kgm3=p.density_kgm3,
        type=p.type,
        inlet=p.inlet,
    )


@one_thread
def run(
    doc: bytes | str | dict[str, Any],
    sheet_bytes: bytes | None,
    settings: dict[str, Any] | None = None,
    *,
    progress: Progress | None = None,
    prepared: Any = None,
    page: PageInfo | None = None,
) -> Digitised:
    """Digitise one sheet.

    Parameters
    ----------
    doc : bytes, str or dict
        The recipe. Bytes are hashed as they are.
    sheet_bytes : bytes or None
        The scan's file; None is allowed for a recipe of typed tables alone.
    settings : dict, optional
        Limits of the checks (``checks.DEFAULTS`` where left out).
    progress : callable, optional
        ``progress(share, text)``; may raise `Cancelled`, which passes through.
    prepared, page : optional
        A prepared sheet and its page from a cache, in place of decoding and preparing again.

    Returns
    -------
    Digitised
        ``error`` is set, and nothing raised, when recipe or sheet cannot be used at all.
    """
    tell: Progress = progress or (lambda share, text: None)
    sha = ""
    parsed: Recipe | None = None
    try:
        data = recipe.to_bytes(doc)
        sha = recipe.sha256(data)
        parsed = recipe.parse(data)
        return _run(parsed, sha, sheet_bytes, settings or {}, tell, prepared, page)
    except CurvebankError as e:
        if e.code == "cancelled":
            raise
        if isinstance(e, SheetError):
            e.path = e.path or "$.sheet"
        made: tuple[Curve, ...] = ()
        if parsed is not None:
            made = tuple(curve_maker.failed(c, pump_info(parsed), e, f"$.curves[{i}]") for i, c in enumerate(parsed.curves))
        return Digitised(
            recipe_sha256=sha,
            page=None,
            pump=pump_info(parsed) if parsed else None,
            curves=made,
            made_by=made_by(),
            error=e.to_dict(),
            sheet_file=parsed.sheet.file if parsed and parsed.sheet else None,
        )


def _run(
    doc: Recipe, sha: str, sheet_bytes: bytes | None, settings: dict[str, Any], tell: Progress, prepared: Any, page: PageInfo | None
) -> Digitised:
    pump = pump_info(doc)
    if doc.sheet is not None and prepared is None and (doc.panels or sheet_bytes is not None):
        if sheet_bytes is None:
            raise SheetError(f"The scan {doc.sheet.file} is not here. Put it beside the recipe.", path="$.sheet.file", code="no-such-file")
        tell(0.0, "reading the sheet")
        loaded = sheet.load(sheet_bytes, page=doc.sheet.page, dpi=doc.sheet.dpi, turn=doc.sheet.turn)
        page = loaded.info
        _check_identity(doc, page)
        prepared = sheet.prepare(loaded, progress=lambda share, text: tell(0.05 + 0.30 * share, text))
    elif page is not None:
        _check_identity(doc, page)
    if doc.sheet is not None and prepared is not None:
        prepared = sheet.mask(prepared, doc.sheet.masks)

    maps: dict[str, Any] = {}
    panel_errors: dict[str, CurvebankError] = {}
    for name, found in axes.calibrate_all(doc.panels, prepared).items():
        if isinstance(found, CurvebankError):
            panel_errors[name] = found
        else:
            maps[name] = found
    tell(0.40, "axes placed")

    made: dict[str, Curve] = {}
    for i, c in enumerate(doc.curves):
        if c.kind == "table":
            try:
                made[c.id] = curve_maker.from_table(c, pump)
            except CurvebankError as e:
                made[c.id] = curve_maker.failed(c, pump, e, f"$.curves[{i}].rows")
        elif c.panel in panel_errors:
            made[c.id] = curve_maker.failed(c, pump, panel_errors[c.panel], f"$.curves[{i}]")
    drawn = [c for c in doc.curves if c.id not in made]
    done = 0
    for panel in doc.panels:
        wanted = [c for c in drawn if c.panel == panel.id]
        if not wanted:
            continue
        share = (0.40 + 0.55 * done / len(drawn), 0.55 * len(wanted) / len(drawn))
        traces = trace.trace_panel(
            prepared,
            maps[panel.id],
            [clicks(c) for c in wanted],
            progress=lambda s, text, share=share: tell(share[0] + share[1] * s, text),  # type: ignore[misc]
        )
        for c, got in zip(wanted, traces, strict=True):
            made[c.id] = finish(doc, c, got, maps[panel.id], pump, prepared)
        done += len(wanted)

    panels = tuple(maps[panel.id].panel_result() for panel in doc.panels if panel.id in maps)
    error = None
    if doc.panels and not maps and all(c.kind != "table" for c in doc.curves):
        error = next(iter(panel_errors.values())).to_dict()
    result = Digitised(
        recipe_sha256=sha,
        page=page,
        pump=pump,
        panels=panels,
        curves=tuple(made[c.id] for c in doc.curves),
        made_by=made_by(),
        error=error,
        sheet_file=doc.sheet.file if doc.sheet else None,
    )
    tell(0.96, "checking against the laws of pumps")
    findings = tuple(checks.run(result, settings)) if error is None else ()
    tell(1.0, "done")
    return replace(result, findings=findings)


def clicks(c: CurveModel) -> trace.Clicks:
    """What the tracer needs of a curve; a closed line may repeat its first click at the end."""
    points = [tuple(p) for p in c.clicks]
    if c.closed and len(points) > 2 and points[0] == points[-1]:
        points = points[:-1]
    if c.kind == "table":
        raise TraceError("A typed table is not traced.", code="table")
    locked = tuple(trace.Locked(pixels=frozen(part.pixels, (-1, 2)), sigma_px=part.sigma_px) for part in c.locked)
    return trace.Clicks(id=c.id, points=points, closed=c.closed, ends=c.ends, kind=c.kind, guides=c.guides, locked=locked)


def finish(doc: Recipe, c: CurveModel, got: Any, panel_map: Any, pump: PumpInfo, prepared: Any) -> Curve:
    """A trace or its error to a curve; whatever goes wrong here stays in this curve."""
    i = next(k for k, other in enumerate(doc.curves) if other.id == c.id)
    if isinstance(got, CurvebankError):
        return curve_maker.failed(c, pump, got, f"$.curves[{i}].clicks")
    panel = doc.panel(c.panel)
    assert panel is not None
    try:
        made = curve_maker.from_trace(c, panel.axes, got, panel_map, pump, prepared.width_px)
        return replace(made, warnings=made.warnings + masking.on_curve(c, got, prepared))
    except CurvebankError as e:
        return curve_maker.failed(c, pump, e, f"$.curves[{i}]")
    except (ValueError, ArithmeticError) as e:
        return curve_maker.failed(c, pump, TraceError(f"The values along this line could not be made: {e}."), f"$.curves[{i}]")


def _check_identity(doc: Recipe, page: PageInfo) -> None:
    if doc.sheet and doc.sheet.sha256 and doc.sheet.sha256.lower() != page.sha256:
        raise SheetError(
            f"{doc.sheet.file} is not the scan this recipe was made on: its SHA-256 begins {page.sha256[:12]}, "
            f"the recipe says {doc.sheet.sha256[:12].lower()}. Use the original scan, or remove sheet.sha256 after looking at the marks.",
            path="$.sheet.sha256",
            code="sha256-mismatch",
        )
