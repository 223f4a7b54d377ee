"""Do the printed diameters and speeds of a family agree with its curves?

The joint fit gives log scales (q_i, h_i) with their covariance. Labels that are right put them on q = a x + c x^2, h = b x + d x^2 with
x = ln(D / D_middle): a and b have broad published priors, c and d let the exponents drift over the trim, and each curve may
miss by a small discrepancy, what the law leaves out. All of that is Gaussian, so the marginal likelihood of "labels are right" and of
each alternative, one label off by d, one curve displaced, two labels exchanged, is closed form. The best alternative wins when it
gains more than a threshold.
"""

from collections.abc import Callable, Sequence
from dataclasses import dataclass, field

import numpy as np

from ..errors import LawError
from ..records import FloatArray
from .evidence import SPEED_PRIOR, TRIM_PRIOR, LabelModel, Prior
from .joint import FamilyCurve, Scales, joint_scales

THRESHOLD = 5.5
MARGIN = 2.0
DISPLACED_ODDS = 2.0
"""Log prior odds of a wrong label against a displaced curve: labels are misread far more often than lines are drawn off their place."""


@dataclass(frozen=True, kw_only=True, slots=True)
class Alternative:
    """One explanation: ``kind`` is diameter, speed, value, flow or exchanged.

    ``shift`` is the log change that agrees, with its 95 % limits (of the label, or of the curve's value or flow scale).
    ``gain`` is the log likelihood gained over "labels are right". ``printed`` and ``agrees`` are in mm or 1/min for a label, else None.
    """

    kind: str
    curve: int
    other: int | None = None
    shift: float
    low: float
    high: float
    gain: float
    printed: float | None = None
    agrees: float | None = None
    agrees_low: float | None = None
    agrees_high: float | None = None


@dataclass(frozen=True, kw_only=True, slots=True, eq=False)
class Verdict:
    """What a family says of its labels.

    ``verdict`` is ``sound``, ``mislabelled`` (a diameter or speed), ``displaced`` (one curve's value or flow scale), ``exchanged`` (two
    labels), ``one of these`` (several explanations nearly alike) or ``cannot tell`` (two curves). ``detectable`` is the
    smallest relative error of a diameter (or speed) that this family would show; ``unexplained`` tells that no single explanation fits.
    ``gain_of(kind, curve, shift)`` is the log likelihood gained if that label were off by ``shift``, so that families of several
    quantities with the same labels can be added up.
    """

    verdict: str
    alternatives: tuple[Alternative, ...]
    scales: Scales
    exponents: dict[str, dict[str, tuple[float, float]]]
    detectable: float | None
    unexplained: bool = False
    gains: dict[str, float] = field(default_factory=dict)
    gain_of: Callable[[str, int, float], float] | None = None

    @property
    def best(self) -> Alternative | None:
        """The explanation that fits best, None for a sound family."""
        return self.alternatives[0] if self.alternatives else None


def _profile(score: Callable[[FloatArray], FloatArray], grid: FloatArray) -> tuple[float, float, float, float]:
    """Best shift, 95 % limits (log likelihood 1.92 below the best) and the log likelihood there."""
    values = score(grid)
    i = int(np.argmax(values))
    step = min(0.02, float(np.diff(grid[max(0, i - 1) : i + 2]).max()))
    inner = grid[i] + step * np.linspace(-1, 1, 41)
    fine = score(inner)
    j = int(np.clip(np.argmax(fine), 1, 39))
    e = step / 20
    # vertex and curvature of the parabola through the three highest points: the profile is close to one there
    bend = float(2 * fine[j] - fine[j - 1] - fine[j + 1]) / e**2
    lean = float(fine[j + 1] - fine[j - 1]) / (2 * e)
    best = float(inner[j]) + (float(np.clip(lean / bend, -e, e)) if bend > 0 else 0.0)
    reach = 1.96 / np.sqrt(bend) if bend > 0 else float(np.ptp(grid))
    return best, best - reach, best + reach, float(fine[j]) + (0.5 * lean**2 / bend if bend > 0 else 0.0)


def _grid(model: LabelModel, p: Prior, x: FloatArray, k: int) -> FloatArray:
    """Shifts of label k to try: small ones finely, and those around where the other curves' values put it, however far that is."""
    small = np.concatenate([np.arange(0.004, 0.12, 0.004), np.arange(0.12, 0.3, 0.02)])
    others = np.delete(np.arange(x.size), k)
    implied = float(np.median(x[others] + (model.value[k] - model.value[others]) / p.value)) - x[k]
    near = implied + np.arange(-0.12, 0.121, 0.008)
    grid = np.concatenate([-small, small, near[np.abs(near) > 0.3]])
    return np.unique(grid.round(6))


def judge_family(
    curves: Sequence[FamilyCurve],
    *,
    quantity: str = "head",
    threshold: float = THRESHOLD,
    margin: float = MARGIN,
    trim_prior: Prior | None = None,
    speed_prior: Prior | None = None,
    order: int = 5,
) -> Verdict:
    """Judge the labels of one family of one quantity.

    Parameters
    ----------
    curves : sequence of FamilyCurve
        Two or more curves of one quantity and casting, each with a diameter [mm] and a speed [1/min] (either may be None for all).
    quantity : str
        ``head``, ``power``, ``efficiency`` or ``npshr``: chooses the priors.
    threshold : float
        Log likelihood an alternative must gain before it is believed.
    margin : float
        Alternatives within this of the best are named with it.
    trim_prior, speed_prior : Prior, optional
        Instead of ``TRIM_PRIOR[quantity]`` and ``SPEED_PRIOR[quantity]``.
    order : int
        Degree of the common shape.

    Returns
    -------
    Verdict

    Raises
    ------
    LawError
        Fewer than two curves, an unknown quantity, or labels that do not vary at all.

    Notes
    -----
    A constant factor on all heads or flows changes no relative scale: this check cannot see a wrong unit. With two curves there is no
    third to side with; a contradiction is reported as one of these two, agreement as ``cannot tell``.

    Examples
    --------
    >>> q = np.linspace(5, 100, 60)
    >>> def curve(r, printed):
    ...     return FamilyCurve(id=str(printed), flow=q * r, value=r**2 * (50 - 0.05 * q - 0.0015 * q**2), sigma=0.08, diameter_mm=printed)
    >>> v = judge_family([curve(d / 340, p) for d, p in ((340, 340), (326, 326), (309, 300), (296, 296), (280, 280))])
    >>> v.verdict, v.best.printed, round(v.best.agrees)
    ('mislabelled', 300, 309)
    """
    if quantity not in TRIM_PRIOR:
        raise LawError(f"No family rule for {quantity!r}. Known: {', '.join(TRIM_PRIOR)}.")
    curves = sorted(curves, key=lambda c: (-(c.diameter_mm or 0.0), -(c.speed_rpm or 0.0)))
    labels: dict[str, FloatArray] = {}
    for kind, given in (("diameter", [c.diameter_mm for c in curves]), ("speed", [c.speed_rpm for c in curves])):
        if all(g is not None and g > 0 for g in given):
            x = np.log(np.array(given, dtype=np.float64))
            if np.ptp(x) > 1e-9:
                labels[kind] = x - x[0]
    if not labels:
        raise LawError("All curves carry the same diameter and speed: there is no family to judge.")
    trim = (trim_prior or TRIM_PRIOR[quantity]) if "diameter" in labels else None
    speed = (speed_prior or SPEED_PRIOR[quantity]) if "speed" in labels else None
    kinds: list[str] = [k for k in ("diameter", "speed") if k in labels]
    xs = [labels[k] for k in kinds]
    priors = [p for p in (trim, speed) if p is not None]
    start_flow = np.sum([p.flow * x for p, x in zip(priors, xs, strict=True)], axis=0)
    start_value = np.sum([p.value * x for p, x in zip(priors, xs, strict=True)], axis=0)
    scales = joint_scales(curves, start_flow, start_value, order=order)
    try:
        model = LabelModel(scales, trim, speed)
        sound = float(model.score(xs))
        alternatives = _alternatives(model, curves, kinds, xs, sound)
    except np.linalg.LinAlgError as e:
        raise LawError("The curves leave their scales undetermined, so their labels cannot be judged.") from e
    detectable = max(np.sqrt(2 * threshold / model.information(xs, 0, k)) for k in range(len(curves)))
    best = alternatives[0]

    def gain_of(kind: str, curve: int, shift: float) -> float:
        moved = [x.copy() for x in xs]
        moved[kinds.index(kind)][curve] += shift
        return float(model.score(moved)) - sound

    gains = {f"{a.kind}:{curves[a.curve].id}": a.gain for a in alternatives}
    used = xs
    named: tuple[Alternative, ...] = ()
    if best.gain < threshold:
        verdict = "cannot tell" if len(curves) == 2 else "sound"
    else:
        named = tuple(a for a in alternatives if a.gain > best.gain - margin)
        used = _labels_of(best, kinds, xs)
        if len(curves) == 2 or len({frozenset((a.curve, a.other)) - {None} for a in named}) > 1:
            verdict = "one of these"
        else:
            verdict = {"diameter": "mislabelled", "speed": "mislabelled", "exchanged": "exchanged"}.get(best.kind, "displaced")
    shift = _displacement(best, len(curves)) if named else None
    left = model.distance(used, shift)
    limit = 2 * (len(curves) - 1) + 6 * np.sqrt(4 * (len(curves) - 1))
    exponents = {
        kind: {"flow": (a, sa), "value": (b, sb)}
        for kind, (a, sa, b, sb) in zip(kinds, model.exponents(used if verdict in ("mislabelled", "exchanged") else xs), strict=True)
    }
    return Verdict(
        verdict=verdict,
        alternatives=named,
        scales=scales,
        exponents=exponents,
        detectable=float(detectable),
        unexplained=bool(left > limit),
        gains=gains,
        gain_of=gain_of,
    )


def _labels_of(alternative: Alternative, kinds: list[str], xs: list[FloatArray]) -> list[FloatArray]:
    """Log labels after the alternative is accepted."""
    out = [x.copy() for x in xs]
    if alternative.kind in kinds:
        out[kinds.index(alternative.kind)][alternative.curve] += alternative.shift
    elif alternative.kind == "exchanged" and alternative.other is not None:
        for x in out:
            x[[alternative.curve, alternative.other]] = x[[alternative.other, alternative.curve]]
    return out


def _displacement(alternative: Alternative, n: int) -> tuple[int, float] | None:
    if alternative.kind == "flow":
        return alternative.curve, alternative.shift
    if alternative.kind == "value":
        return n + alternative.curve, alternative.shift
    return None


def _alternatives(
    model: LabelModel, curves: Sequence[FamilyCurve], kinds: list[str], xs: list[FloatArray], sound: float
) -> list[Alternative]:
    """Every single explanation, best first."""
    n, out = len(curves), []
    for k in range(n):
        for which, kind in enumerate(kinds):

            def moved(d: FloatArray, k: int = k, which: int = which) -> FloatArray:
                many = [np.broadcast_to(x, (d.size, n)).copy() for x in xs]
                many[which][:, k] += d
                return model.score(many)

            shift, low, high, top = _profile(moved, _grid(model, model.priors[which], xs[which], k))
            c = curves[k]
            printed = c.diameter_mm if kind == "diameter" else c.speed_rpm
            assert printed is not None
            out.append(
                Alternative(
                    kind=kind,
                    curve=k,
                    shift=shift,
                    low=low,
                    high=high,
                    gain=top - sound,
                    printed=printed,
                    agrees=float(printed * np.exp(shift)),
                    agrees_low=float(printed * np.exp(low)),
                    agrees_high=float(printed * np.exp(high)),
                )
            )
        for kind, column in (("value", n + k), ("flow", k)):
            shift, sd, gain = model.displacement(xs, column)
            out.append(
                Alternative(kind=kind, curve=k, shift=shift, low=shift - 1.96 * sd, high=shift + 1.96 * sd, gain=gain - DISPLACED_ODDS)
            )
        for j in range(k + 1, n):
            swapped = [x.copy() for x in xs]
            for x in swapped:
                x[[k, j]] = x[[j, k]]
            gain = float(model.score(swapped)) - sound
            if gain > 0:
                out.append(Alternative(kind="exchanged", curve=k, other=j, shift=float(xs[0][j] - xs[0][k]), low=0.0, high=0.0, gain=gain))
    return sorted(out, key=lambda a: -a.gain)
