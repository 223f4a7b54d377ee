"""How often a family of curves is accused, caught and rightly named, on simulated charts. Run by hand:

    python tests/bench/family.py [--families 60] [--seed 1] [--noise 0.3]

Each family has a base head curve of random form (some drooping), exponents drawn from the published range that drift over the trim, a
shape that changes with the trim, drawing noise that is smooth along the line, calibration errors that the sheet shares, its own
flow range for each curve and, on request, tail ends that run into the neighbour's line. Truth is known by construction.
"""

import argparse
import time
from dataclasses import dataclass

import numpy as np

from curvebank.checks.settings import LIMITS
from curvebank.laws.joint import FamilyCurve
from curvebank.laws.labels import Verdict, judge_family


@dataclass(frozen=True)
class Chart:
    """Curves as read, the diameters they truly have, and what was done to them: (kind, index by falling diameter, log shift)."""

    curves: list[FamilyCurve]
    true_mm: list[float]
    fault: tuple[str, int, float] | None


def smooth_noise(rng: np.random.Generator, t: np.ndarray, sd: float, length: float) -> np.ndarray:
    """Gaussian noise of standard deviation ``sd`` along t in 0..1 with correlation length ``length``."""
    knots = np.linspace(0, 1, 60)
    kernel = np.exp(-0.5 * ((knots[:, None] - knots) / length) ** 2) + 1e-9 * np.eye(60)
    return np.interp(t, knots, sd * np.linalg.cholesky(kernel) @ rng.normal(size=60))


def chart(
    rng: np.random.Generator,
    count: int,
    *,
    noise_pct: float = 0.3,
    fault: str | None = None,
    size: float = 0.0,
    speed: bool = False,
    merge: bool = False,
    exact: bool = False,
    trace_pct: float = 0.05,
) -> Chart:
    """One simulated family; ``fault`` is None, label, head, flow or exchange."""
    step = rng.uniform(0.035, 0.09, count - 1)
    diameters = np.round(rng.uniform(180, 450) * np.exp(-np.concatenate([[0.0], np.cumsum(step)])))
    if speed:
        diameters = np.round(
            rng.choice([1450.0, 2900.0, 3500.0]) * np.exp(-np.concatenate([[0.0], np.cumsum(rng.uniform(0.06, 0.2, count - 1))]))
        )
    x = np.log(diameters / diameters[0])
    a, b = rng.uniform(1.0, 1.35), rng.uniform(1.95, 2.35)
    drift_a, drift_b, bend = rng.uniform(-0.15, 0.15), rng.uniform(-0.15, 0.15), rng.uniform(-0.07, 0.07)
    if speed or exact:
        a, b, drift_a, drift_b, bend = 1.0, 2.0, 0.0, 0.0, 0.0
    part = x / x[-1]
    q_log, h_log = (a + drift_a * part) * x, (b + drift_b * part) * x
    h0, q0 = rng.uniform(15, 90), rng.uniform(40, 900)
    drop, power, droop = rng.uniform(0.25, 0.55), rng.uniform(1.5, 3.0), rng.choice([0.0, 0.0, 1.0]) * rng.uniform(0.0, 0.04)

    def shape(u: np.ndarray, stretch: float) -> np.ndarray:
        return 1 - drop * stretch * np.abs(u) ** power + 4 * droop * u * (1 - u)

    axis_h, axis_q = h0 * rng.uniform(1.05, 1.3), q0 * 1.2
    k = int(rng.integers(count))
    shift = float(rng.choice([-1.0, 1.0])) * size
    done: tuple[str, int, float] | None = None
    if fault in ("head", "flow"):
        done = (fault, k, shift)
        if fault == "head":
            h_log[k] += shift
        else:
            q_log[k] += shift
    calibration_q, calibration_h = np.exp(rng.normal(0, 0.005, 2))
    offset_q, offset_h = rng.normal(0, 0.002, 2) * (axis_q, axis_h)
    lines = []
    for i in range(count):
        lo, hi = rng.uniform(0.0, 0.15), rng.uniform(0.85, 1.08)
        u = np.linspace(lo, hi, 400)
        q, h = q0 * np.exp(q_log[i]) * u, h0 * np.exp(h_log[i]) * shape(u, 1 + bend * part[i])
        t = (u - lo) / (hi - lo)
        h = h + axis_h * (smooth_noise(rng, t, noise_pct / 100, rng.uniform(0.1, 0.3)) + rng.normal(0, trace_pct / 100, 400))
        lines.append((q, h))
    if merge:
        i = int(rng.integers(count - 1))
        (q, h), (q2, h2) = lines[i], lines[i + 1]
        start = q[int(rng.uniform(0.85, 0.93) * q.size)]
        tail = (q > start) & (q < q2.max())
        h[tail] = np.interp(q[tail], q2, h2)
    printed = diameters.copy()
    if fault == "label":
        printed[k] = printed[k] * np.exp(shift)
        done = ("label", k, shift)
    if fault == "exchange":
        k = int(rng.integers(count - 1))
        printed[[k, k + 1]] = printed[[k + 1, k]]
        done = ("exchange", k, 0.0)
    floor = LIMITS["family_reading_pct"].value / 100
    curves = [
        FamilyCurve(
            id=f"c{i}",
            flow=(q + offset_q) * calibration_q,
            value=(h + offset_h) * calibration_h,
            sigma=max(axis_h * float(np.hypot(0.0019, trace_pct / 100)), floor * max(float(h.max()) for _, h in lines)),
            diameter_mm=None if speed else float(printed[i]),
            speed_rpm=float(printed[i]) if speed else 1450.0,
        )
        for i, (q, h) in enumerate(lines)
    ]
    return Chart(curves, [float(d) for d in diameters], done)


def outcome(c: Chart, v: Verdict) -> dict[str, bool]:
    """What the verdict says, held against the truth."""
    errors = v.verdict in ("mislabelled", "displaced", "exchanged")
    warned = v.verdict == "one of these"
    named = right = listed = False
    order = {curve.id: k for k, curve in enumerate(c.curves)}
    if c.fault is not None:
        kind, k, _ = c.fault
        for i, a in enumerate(v.alternatives):
            where = order[v.scales.curves[a.curve].id]
            same = where == k or (a.other is not None and order[v.scales.curves[a.other].id] == k)
            kinds = {"label": ("diameter", "speed"), "head": ("value",), "flow": ("flow",), "exchange": ("exchanged",)}[kind]
            if same and a.kind in kinds:
                listed = True
                if i == 0 and errors:
                    named = True
                    right = kind != "label" or (a.agrees is not None and abs(a.agrees / c.true_mm[k] - 1) < 0.01)
    return {"error": errors, "warned": warned, "caught": errors or warned, "named": named, "within": right, "listed": listed}


def row(count: int, families: int, seed: int, **how: object) -> dict[str, float]:
    """Rates over ``families`` charts, in per cent."""
    total: dict[str, int] = {}
    for i in range(families):
        rng = np.random.default_rng([seed, count, i])
        c = chart(rng, count, **how)  # type: ignore[arg-type]
        for name, yes in outcome(c, judge_family(c.curves)).items():
            total[name] = total.get(name, 0) + yes
    return {name: 100.0 * n / families for name, n in total.items()}


def main() -> None:
    """Print one line for each kind of chart."""
    p = argparse.ArgumentParser(description=__doc__, formatter_class=argparse.RawDescriptionHelpFormatter)
    p.add_argument("--families", type=int, default=60)
    p.add_argument("--seed", type=int, default=1)
    p.add_argument("--only", default="", help="rows whose name contains this")
    p.add_argument("--noise", type=float, default=0.3, help="drawing noise in %% of the axis")
    args = p.parse_args()
    rows: list[tuple[str, dict[str, object]]] = [
        ("sound", {}),
        ("sound, exact laws", {"exact": True}),
        ("sound, tails merge", {"merge": True}),
        ("label off 3 %", {"fault": "label", "size": 0.03}),
        ("label off 3 %, tails merge", {"fault": "label", "size": 0.03, "merge": True}),
        ("label off 2 %", {"fault": "label", "size": 0.02}),
        ("label off 5 %", {"fault": "label", "size": 0.05}),
        ("head displaced 3 %", {"fault": "head", "size": 0.03}),
        ("head displaced 6 %", {"fault": "head", "size": 0.06}),
        ("flow displaced 5 %", {"fault": "flow", "size": 0.05}),
        ("two labels exchanged", {"fault": "exchange"}),
        ("speeds, sound", {"speed": True}),
        ("speed label off 2 %", {"speed": True, "fault": "label", "size": 0.02}),
    ]
    print(f"{args.families} families a row, drawing noise {args.noise} % of axis; figures in %")
    print(f"{'chart':28} {'curves':>6} {'error':>6} {'warned':>6} {'caught':>6} {'named':>6} {'<1 %':>6} {'listed':>6}")
    started = time.perf_counter()
    for name, how in (r for r in rows if args.only in r[0]):
        for count in (2, 3, 4, 5, 6):
            if how.get("fault") == "exchange" and count == 2:
                continue
            r = row(count, args.families, args.seed, noise_pct=args.noise, **how)
            print(
                f"{name:28} {count:6d} " + " ".join(f"{r[k]:6.0f}" for k in ("error", "warned", "caught", "named", "within", "listed")),
                flush=True,
            )
    print(f"{time.perf_counter() - started:.0f} s")


if __name__ == "__main__":
    main()
