"""The family picture: each curve carried to its neighbours' diameters, the gap that leaves and the doubt it should be held against."""

from collections.abc import Iterable, Mapping
from typing import Any

import numpy as np

from ..laws.affinity import carry
from ..laws.evidence import SPEED_PRIOR, TRIM_PRIOR
from ..records import Curve, Digitised, PumpInfo
from .context import Context, Family, Series
from .settings import resolve

POINTS = 60
_LABEL = {"diameter": "diameter_mm", "speed": "speed_rpm"}


def family_picture(curves: Iterable[Curve], settings: Mapping[str, Any] | None = None, *, pump: PumpInfo | None = None) -> dict[str, Any]:
    """Data for drawing affinity ghosts, ready for JSON.

    Parameters
    ----------
    curves : iterable of Curve
        Curves of one pump, any quantities.
    settings : mapping, optional
        Limits of the checks, as for ``checks.run``.
    pump : PumpInfo, optional
        Gives the speed of curves that state none.

    Returns
    -------
    dict
        ``{quantity: {verdict, over, exponents: {flow: [a, sd], value: [b, sd], measured: bool}, detectable_pct, curves: [...]}}``.
        A curve is ``{id, diameter_mm, speed_rpm, printed, agrees_mm, agrees_low_mm, agrees_high_mm, ghosts: [...]}``, ``agrees`` null
        where the label is not doubted. A ghost is ``{to_id, to_diameter_mm, points: [[flow_m3h, value], ...], gap, doubt, gap_at_m3h}``.
        ``gap`` is the largest difference between a ghost and the curve it should cover, ``doubt`` the standard uncertainty of it
        there; both in the quantity's unit, null without common flow.
        Several castings of one quantity are told apart as ``head (GROUP)``.

    Notes
    -----
    Ghosts use the family's own exponents where three or more diameters give them, else the middle of the published ones. The
    picture shows; the joint fit decides.
    """
    context = Context(Digitised(recipe_sha256="", page=None, pump=pump, curves=tuple(curves)), resolve(settings))
    out: dict[str, Any] = {}
    for f in context.families:
        name = f.quantity if f.group is None else f"{f.quantity} ({f.group})"
        out[name if name not in out else f"{name} {len(out)}"] = _one(f)
    return out


def _one(f: Family) -> dict[str, Any]:
    v = f.verdict
    over = "diameter" if len({s.diameter_mm for s in f.members}) > 1 else "speed"
    prior = (TRIM_PRIOR if over == "diameter" else SPEED_PRIOR)[f.quantity]
    a, sa, b, sb, measured = prior.flow, prior.flow_sd, prior.value, prior.value_sd, False
    if v is not None and over in v.exponents and len({getattr(s, _LABEL[over]) for s in f.members}) > 2:
        (a, sa), (b, sb) = v.exponents[over]["flow"], v.exponents[over]["value"]
        measured = True
    agrees = {}
    if v is not None and v.verdict == "mislabelled" and v.best is not None and v.best.kind == "diameter":
        agrees[v.best.curve] = v.best
    rows = []
    for i, s in enumerate(f.members):
        best = agrees.get(i)
        rows.append(
            {
                "id": s.curve.id,
                "diameter_mm": s.diameter_mm,
                "speed_rpm": s.speed_rpm,
                "printed": (s.curve.label or {}).get("printed") or (f"{s.diameter_mm:g}" if s.diameter_mm else None),
                "agrees_mm": best.agrees if best else None,
                "agrees_low_mm": best.agrees_low if best else None,
                "agrees_high_mm": best.agrees_high if best else None,
                "ghosts": [_ghost(s, f.members[j], over, a, sa, b, sb) for j in (i - 1, i + 1) if 0 <= j < len(f.members)],
            }
        )
    return {
        "verdict": v.verdict if v is not None else "cannot tell",
        "over": over,
        "exponents": {"flow": [a, sa], "value": [b, sb], "measured": measured},
        "detectable_pct": 100 * v.detectable if v is not None and v.detectable is not None else None,
        "curves": rows,
    }


def _ghost(s: Series, to: Series, over: str, a: float, sa: float, b: float, sb: float) -> dict[str, Any]:
    r = (getattr(to, _LABEL[over]) or 1.0) / (getattr(s, _LABEL[over]) or 1.0)
    pick = np.unique(np.linspace(0, len(s.flow) - 1, POINTS).round().astype(int))
    q, v = carry(s.flow, s.value, r, flow_exponent=a, value_exponent=b)
    if over == "diameter" and s.speed_rpm and to.speed_rpm and s.speed_rpm != to.speed_rpm:
        speed = {"head": 2.0, "power": 3.0, "efficiency": 0.0, "npshr": 2.0}[s.curve.quantity]
        q, v = carry(q, v, to.speed_rpm / s.speed_rpm, flow_exponent=1.0, value_exponent=speed)
    gap = doubt = at = None
    lo, hi = max(float(q[0]), to.lo), min(float(q[-1]), to.hi)
    if hi > lo:
        common = np.linspace(lo, hi, 50)
        ghost = np.interp(common, q, v)
        miss = ghost - to.at(common)
        k = int(np.argmax(np.abs(miss)))
        slope = float(np.gradient(ghost, common)[k])
        exponents = abs(np.log(r)) * np.hypot(sb * ghost[k], sa * slope * common[k])
        gap, at = float(miss[k]), float(common[k])
        own = np.interp(common[k], q, s.u)
        doubt = float(np.sqrt(own**2 + to.u_at(common[k : k + 1])[0] ** 2 + exponents**2))
    points = [[float(x), float(y)] for x, y in zip(q[pick], v[pick], strict=True)]
    return {"to_id": to.curve.id, "to_diameter_mm": to.diameter_mm, "points": points, "gap": gap, "doubt": doubt, "gap_at_m3h": at}
