"""Family rules: do printed diameters, speeds and curves agree with each other?"""

from collections.abc import Iterator

import numpy as np

from ..laws.evidence import TRIM_PRIOR
from ..laws.labels import Alternative
from ..records import Finding, Severity
from .context import Context, Family, Series
from .words import QUANTITY_WORDS, flows, listed, number, panel_of, printed_mm

SOURCE = "joint fit of one shape to all curves; exponents of published trim rules"
JUDGED = ("head", "power")
"""Quantities whose labels are judged. Efficiency and NPSHr change too little with the trim to tell one diameter from another."""


def _agrees(a: Alternative) -> str:
    """ "309 mm (307.8 to 310.1)"."""
    assert a.agrees is not None and a.agrees_low is not None and a.agrees_high is not None
    unit = "mm" if a.kind == "diameter" else "1/min"
    places = 1 if a.agrees < 100 else 0
    return f"{a.agrees:.{places}f} {unit} ({a.agrees_low:.1f} to {a.agrees_high:.1f})"


def _printed(a: Alternative) -> str:
    assert a.printed is not None
    return f"{printed_mm(a.printed)} {'mm' if a.kind == 'diameter' else '1/min'}"


def _explain(a: Alternative, family: Family) -> str:
    """One explanation as half a sentence."""
    s = family.members[a.curve]
    what = QUANTITY_WORDS[family.quantity]
    if a.kind in ("diameter", "speed"):
        return f"the curve printed {_printed(a)} behaves like {_agrees(a)}"
    if a.kind == "exchanged":
        assert a.other is not None
        return f"the labels {printed_mm(s.diameter_mm or 0)} mm and {printed_mm(family.members[a.other].diameter_mm or 0)} mm are exchanged"
    side = ("above" if a.shift > 0 else "below") if a.kind == "value" else ("to the right of" if a.shift > 0 else "to the left of")
    axis = what if a.kind == "value" else "flow"
    size = abs(np.expm1(a.shift)) * 100
    doubt = (a.high - a.low) / 3.92 * 100
    printed = printed_mm(s.diameter_mm or 0)
    return f"the {what} curve printed {printed} mm lies {number(size, 2)} % ± {number(doubt, 1)} % {side} its place in {axis}"


def _where(family: Family, members: list[int]) -> dict[str, object]:
    chosen = [family.members[i].curve for i in members]
    return {"panel": panel_of(chosen), "curves": [c.id for c in chosen]}


def _subject(family: Family) -> str:
    """The family's name; castings are told apart by their group."""
    return f"family:{family.quantity}" + (f"/{family.group}" if family.group else "")


def _best(family: Family) -> Alternative | None:
    return family.verdict.best if family.verdict is not None else None


def _settled(context: Context, family: Family) -> Alternative | None:
    """The one label that the other quantity's curves of the same wheels single out where this family alone names several."""
    v = family.verdict
    named = [a for a in v.alternatives if a.kind == "diameter"] if v is not None else []
    labels = [s.diameter_mm for s in family.members]
    for other in context.families:
        w = other.verdict
        if (
            other.quantity == family.quantity
            or other.quantity not in JUDGED
            or other.group != family.group
            or w is None
            or w.gain_of is None
        ):
            continue
        if [s.diameter_mm for s in other.members] != labels or "diameter" not in w.exponents or not named:
            continue
        theirs = {a.curve: w.gain_of("diameter", a.curve, a.shift) for a in named}
        total = sorted(named, key=lambda a: -(a.gain + theirs[a.curve]))
        lead = total[0].gain + theirs[total[0].curve]
        runner = total[1].gain + theirs[total[1].curve] if len(total) > 1 else 0.0
        if theirs[total[0].curve] > context.limits["family_margin"] and lead - runner > context.limits["family_margin"]:
            return total[0]
    return None


def diameter_label(context: Context) -> Iterator[Finding]:
    """family-diameter-label: one printed diameter (or speed) disagrees with the others, and which would agree."""
    for f in context.families:
        v = f.verdict
        if v is None or f.quantity not in JUDGED or not v.alternatives:
            continue
        best = v.alternatives[0]
        what = QUANTITY_WORDS[f.quantity]
        settled = _settled(context, f) if v.verdict == "one of these" else None
        if v.verdict == "mislabelled" or settled is not None:
            best = settled or best
            also = " The power curves of the same wheels say so too." if settled is not None and f.quantity == "head" else ""
            also = " The head curves of the same wheels say so too." if settled is not None and f.quantity == "power" else also
            rule = "family-diameter-label" if best.kind == "diameter" else "family-speed-label"
            agreed = f"{best.agrees:.0f} {'mm' if best.kind == 'diameter' else '1/min'}"
            action = f"Check the original, then file it as {agreed} or give the reason."
            curve = f.members[best.curve].curve
            yield Finding(
                rule=rule,
                severity="error",
                subject=f"curve:{curve.id}",
                message=f"The {what} curve printed {_printed(best)} behaves like {_agrees(best)}.{also} {action}",
                measured=round(best.agrees or 0.0, 2),
                limit=best.printed,
                unit="mm" if best.kind == "diameter" else "1/min",
                source=SOURCE,
                action=action,
                where=_where(f, [best.curve]),
            )
        elif v.verdict == "exchanged":
            assert best.other is not None
            action = "Look which line carries which diameter, then exchange the two labels or give the reason."
            yield Finding(
                rule="family-diameter-label",
                severity="error",
                subject=f"curve:{f.members[best.curve].curve.id}",
                message=f"{_explain(best, f)[0].upper()}{_explain(best, f)[1:]}, as the {what} curves lie. {action}",
                measured=round(best.gain, 1),
                limit=context.limits["family_threshold"],
                unit="ln likelihood",
                source=SOURCE,
                action=action,
                where=_where(f, [best.curve, best.other]),
            )
        elif v.verdict == "one of these":
            action = "Check these labels on the original."
            one_of = listed([_explain(a, f) for a in v.alternatives[:4]], "or")
            yield Finding(
                rule="family-diameter-label",
                severity="warning",
                subject=_subject(f),
                message=f"The {what} curves and their labels do not agree, and the sheet cannot tell which is off. "
                f"One of these: {one_of}. {action}",
                measured=round(best.gain, 1),
                limit=context.limits["family_threshold"],
                unit="ln likelihood",
                source=SOURCE,
                action=action,
                where=_where(f, sorted({a.curve for a in v.alternatives})),
            )


def displaced(context: Context) -> Iterator[Finding]:
    """family-displaced: one curve's head or flow is off as a whole, not along the line a wrong diameter would take."""
    for f in context.families:
        best = _best(f)
        if f.verdict is None or best is None or f.verdict.verdict != "displaced" or f.quantity not in JUDGED:
            continue
        text = _explain(best, f)
        action = "Look whether the trace follows this line and whether it is read on its own scale, then correct it or give the reason."
        yield Finding(
            rule="family-displaced",
            # a line off its place is rarer than a wrong label, so an accusation needs more
            severity="error" if best.gain > context.limits["family_threshold"] + 2.0 else "warning",
            subject=f"curve:{f.members[best.curve].curve.id}",
            message=f"{text[0].upper()}{text[1:]}; no other diameter would explain it. {action}",
            measured=round(float(np.expm1(best.shift)), 5),
            limit=round((best.high - best.low) / 3.92, 5),
            unit="1",
            source=SOURCE,
            action=action,
            where=_where(f, [best.curve]),
        )


def unexplained(context: Context) -> Iterator[Finding]:
    """family-unexplained: no single wrong label or displaced curve makes the family fit."""
    for f in context.families:
        if f.verdict is None or not f.verdict.unexplained or f.quantity not in JUDGED:
            continue
        what = QUANTITY_WORDS[f.quantity]
        action = "Check every label, and give different castings their own group."
        yield Finding(
            rule="family-unexplained",
            severity="warning",
            subject=_subject(f),
            message=f"The {what} curves do not belong to one family even when one label is doubted: more than one may be off. {action}",
            source=SOURCE,
            action=action,
            where=_where(f, list(range(len(f.members)))),
        )


def exponents(context: Context) -> Iterator[Finding]:
    """family-exponents: the exponents the family shows, and whether published trims show such."""
    for f in context.families:
        v = f.verdict
        if v is None or f.quantity not in JUDGED or v.verdict not in ("sound", "cannot tell"):
            continue
        what = QUANTITY_WORDS[f.quantity]
        where = _where(f, list(range(len(f.members))))
        if "diameter" not in v.exponents:
            continue
        (a, sa), (b, sb) = v.exponents["diameter"]["flow"], v.exponents["diameter"]["value"]
        prior = TRIM_PRIOR[f.quantity]
        stray = abs(b - prior.value) - 2 * prior.value_sd
        base = f"Over the diameters, {what} follows D^{b:.2f} ± {sb:.2f} and flow D^{a:.2f} ± {sa:.2f}"
        two = len(f.members) == 2
        if stray > 2 * sb:
            action = "Check the diameters at both ends and that all lines are one casting."
            yield Finding(
                rule="family-exponents",
                severity="warning",
                subject=_subject(f),
                message=f"{base}; published trims of one casting lie near D^{prior.value:.2f} ± {prior.value_sd:.2f}. {action}",
                measured=round(b, 4),
                limit=prior.value,
                unit="1",
                source=SOURCE,
                action=action,
                where=where,
            )
        elif two:
            action = "Trust the labels only as far as the paper does."
            yield Finding(
                rule="family-exponents",
                severity="note",
                subject=_subject(f),
                message=f"{base}. Two curves cannot tell a wrong label from an unusual wheel. {action}",
                measured=round(b, 4),
                limit=prior.value,
                unit="1",
                source=SOURCE,
                action=action,
                where=where,
            )


def order_of_diameters(context: Context) -> Iterator[Finding]:
    """family-order: at equal flow and speed a larger wheel gives more head and takes more power."""
    limit = context.limits["family_order_pct"] / 100
    for f in context.families:
        if f.quantity not in JUDGED:
            continue
        for i, big in enumerate(f.members):
            for small in f.members[i + 1 :]:
                if big.speed_rpm != small.speed_rpm or (big.diameter_mm or 0) <= (small.diameter_mm or 0):
                    continue
                found = _crossing(big, small, limit)
                if found is None:
                    continue
                lo, hi, worst, doubt = found
                what = QUANTITY_WORDS[f.quantity]
                action = "Look whether two labels are exchanged or a trace took its neighbour's line."
                # a full exchange is judged by the joint fit; power of low specific speed wheels may truly cross at run-out
                severity: Severity = "error" if f.quantity == "head" and worst > 2 * limit else "warning"
                yield Finding(
                    rule="family-order",
                    severity=severity,
                    subject=f"curve:{small.curve.id}",
                    message=f"Ø {printed_mm(small.diameter_mm or 0)} shows more {what} than Ø {printed_mm(big.diameter_mm or 0)} "
                    f"{flows(lo, hi)}, by up to {number(worst * 100, 2)} % ± {number(doubt * 100, 1)} %. A smaller wheel cannot. {action}",
                    measured=round(worst, 5),
                    limit=limit,
                    unit="1",
                    source="affinity: head and power rise with diameter at equal flow",
                    action=action,
                    where={"panel": panel_of([small.curve, big.curve]), "curves": [small.curve.id, big.curve.id]},
                )
                break


def _crossing(big: Series, small: Series, limit: float) -> tuple[float, float, float, float] | None:
    """Stretch of flow where the smaller wheel lies above, the largest excess and its doubt, both relative."""
    lo, hi = max(big.lo, small.lo), min(big.hi, small.hi)
    if hi <= lo:
        return None
    q = np.linspace(lo, hi, 100)
    scale = float(np.abs(big.value).max())
    excess = (small.at(q) - big.at(q)) / scale
    doubt = np.hypot(small.u_at(q), big.u_at(q)) / scale
    over = excess > limit + 2 * doubt
    if over.mean() < 0.03:
        return None
    worst = int(np.argmax(excess))
    return float(q[over].min()), float(q[over].max()), float(excess[worst]), float(doubt[worst])
