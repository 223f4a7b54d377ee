"""The result format in checks of our own: what a reader of NAME.result.json may rely on, whatever the recipe was."""

import json
import math

GROUPS = ("calibration-", "trace-", "fit-", "family-", "energy-", "plausible-", "complete-", "catalogue-", "provenance-")
TOP = {"result", "sheet", "recipe_sha256", "made_by", "error", "panels", "curves", "findings"}
CURVE = {"id", "pixels", "points", "sigma_px", "sigma", "confidence", "flagged", "spread", "warnings", "error", "fit"}
FIT = {"order", "domain", "coefficients", "mid", "half", "scaled", "covariance", "sigma", "max_miss", "max_miss_pct"}
FINDING = {"rule", "severity", "subject", "message", "measured", "limit", "source", "action"}


def faults(result, recipe=None):
    """Every broken promise as one line of text; an empty list is a sound result. ``recipe`` is the document it was made from."""
    try:
        json.dumps(result, allow_nan=False, ensure_ascii=False).encode()
    except (TypeError, ValueError) as e:
        return [f"not strict JSON: {e}"]
    return list(_faults(result, recipe))


def _faults(result, recipe):
    if missing := TOP - set(result):
        yield f"keys missing: {sorted(missing)}"
        return
    if result["result"] != 1:
        yield "not format 1"
    if result["error"] is not None:
        yield from _error(result["error"], "result")
    if recipe is not None and (result["error"] is None or result["curves"]):
        wanted = [c["id"] for c in recipe["curves"]]
        if [c["id"] for c in result["curves"]] != wanted:
            yield f"curves are {[c['id'] for c in result['curves']]}, not {wanted}"
    for p in result["panels"]:
        yield from _panel(p)
    for c in result["curves"]:
        yield from _curve(c)
    for f in result["findings"]:
        if missing := FINDING - set(f):
            yield f"finding lacks {sorted(missing)}"
        elif not f["rule"].startswith(GROUPS) or f["severity"] not in ("error", "warning", "note") or not f["message"]:
            yield f"finding {f['rule']} {f['severity']}"


def _error(error, at):
    if set(error) != {"code", "message", "path"} or not error["code"] or len(error["message"]) < 10:
        yield f"{at}: error {error}"
    elif error["path"] is not None and not error["path"].startswith("$"):
        yield f"{at}: error path {error['path']}"


def _panel(p):
    pixels, values = p["map"]["pixels"], p["map"]["values"]
    if len(pixels) != 81 or any(len(v) != 2 for v in pixels) or len(values) < 2 or any(len(v) != 81 for v in values.values()):
        yield f"panel {p['id']}: map is not 9 x 9"
    if {"used", "lines", "residual_px", "why"} - set(p["grid"]) or not p["residual_px"] >= 0 or not p["worst_px"] >= 0:
        yield f"panel {p['id']}: grid or residuals"
    yield from _warnings(p)


def _warnings(part):
    for w in part["warnings"]:
        if set(w) != {"code", "message", "stretch"} or not w["message"]:
            yield f"{part['id']}: warning {w}"


def _curve(c):
    at = f"curve {c['id']}"
    if missing := CURVE - set(c):
        yield f"{at}: lacks {sorted(missing)}"
        return
    yield from _warnings(c)
    n = len(c["points"])
    if len(c["pixels"]) != n or len(c["sigma"]) != n or len(c["sigma_px"]) != n:
        yield f"{at}: lengths differ"
    numbers = [v for row in (*c["pixels"], *c["points"]) for v in row] + c["sigma"] + c["sigma_px"]
    if not all(isinstance(v, (int, float)) and math.isfinite(v) for v in numbers):
        yield f"{at}: a number is not finite"
    elif min(c["sigma"] + c["sigma_px"], default=0) < 0 or not 0 <= c["confidence"] <= 1:
        yield f"{at}: uncertainty or confidence out of range"
    if c["error"] is not None:
        yield from _error(c["error"], at)
        if n or c["fit"] is not None:
            yield f"{at}: failed, yet has points or a fit"
    elif not n:
        yield f"{at}: neither points nor an error"
    if set(c["spread"]) != {"calibration", "reading", "drawing", "fit"}:
        yield f"{at}: spread"
    if c["fit"] is not None:
        yield from _fit(c["fit"], at)


def _fit(f, at):
    if missing := FIT - set(f):
        yield f"{at}: fit lacks {sorted(missing)}"
        return
    k, (lo, hi) = f["order"] + 1, f["domain"]
    if not (1 <= f["order"] <= 8 and lo < hi and f["half"] > 0):
        yield f"{at}: order {f['order']}, domain {lo} to {hi}, half {f['half']}"
        return
    if len(f["coefficients"]) != k or len(f["scaled"]) != k or len(f["covariance"]) != k or any(len(r) != k for r in f["covariance"]):
        yield f"{at}: fit lengths"
        return
    for share in (0.0, 0.3, 0.7, 1.0):
        q = lo + share * (hi - lo)
        terms = [a * q**i for i, a in enumerate(f["coefficients"])]
        scaled = sum(a * ((q - f["mid"]) / f["half"]) ** i for i, a in enumerate(f["scaled"]))
        # Plain powers lose digits by cancelling: a few dozen roundings of the largest term is all they may lose.
        room = 1e-13 * max(map(abs, terms)) * k + 1e-9 * max(map(abs, f["scaled"]))
        if not abs(sum(terms) - scaled) <= room:
            yield f"{at}: plain {sum(terms)!r} and scaled {scaled!r} differ at {q}"
