"""Benchmark: does a trace know when it went wrong? Failed and good traces by cause, how many are flagged, and what confidence is worth.

    python tests/bench/flags.py [--sheets DIR ...] [--drawn SEEDS] [--kinds ...] [--half 0|1] [--fit] [--hints] [--sigma]

Each DIR (default: samples/) holds NAME.recipe.json, the scan and NAME.truth.json; ``--drawn N`` adds N sheets of each kind of
tests/bench/drawn.py. Every curve is traced with 2, 3 and 5 good clicks and with clicks gone wrong (tests/bench/wrong.py). Failed: see
measures.score. Half of the sheets are for fitting, half for checking; the check half is what counts. ``--fit`` fits the weights of
curvebank/trace/confidence.py to the fitting half, prints them, and shows both halves judged with them. ``--hints`` adds the
click that a flagged failed trace asks for, put on the true line, and counts how many are cured. ``--sigma`` prints how often the stated
uncertainty covers instead (tests/bench/cover.py). Truth is read here and nowhere else.
"""

import argparse
import json
import os
import sys
from pathlib import Path
from typing import Any

for name in ("OMP_NUM_THREADS", "OPENBLAS_NUM_THREADS", "MKL_NUM_THREADS"):
    os.environ.setdefault(name, "1")

import numpy as np  # noqa: E402

HERE = Path(__file__).resolve().parent
sys.path.insert(0, str(HERE))
sys.path.insert(0, str(HERE.parents[1]))

import cover  # noqa: E402
import drawn  # noqa: E402
import measures  # noqa: E402
import run  # noqa: E402
import wrong  # noqa: E402

from curvebank import sheet, trace  # noqa: E402
from curvebank.errors import TraceError  # noqa: E402
from curvebank.records import Trace  # noqa: E402
from curvebank.trace import confidence, evidence, judge  # noqa: E402

FAILING_SHARE = 0.25
"""Share of failed traces that confidence is weighed for."""
SAVED_WEIGHT = 0.3
"""Weight in the fit of a trace that came out right although its clicks were wrong: a click that is passed over deserves a look."""


def sheets_of(folders: list[Path], seeds: int, kinds: list[str]) -> Any:
    """(name, page, truth, recipe or None) of every sheet asked for, one at a time."""
    for folder in folders:
        for file in sorted(folder.rglob("*.truth.json")):
            name = file.name.removesuffix(".truth.json")
            recipe = json.loads(file.with_name(f"{name}.recipe.json").read_text())
            page, _ = run.page_of(file.with_name(recipe["sheet"]["file"]), None, recipe["sheet"])
            yield name, page, json.loads(file.read_text()), recipe
    for kind in kinds:
        for seed in range(seeds):
            picture, truth = drawn.draw(kind, seed)
            yield f"{kind}-{seed}", run.page_of(None, picture, {})[0], truth, None


def row_of(name: str, case: wrong.Case, got: Trace | TraceError) -> dict[str, Any]:
    """What became of one case. A refusal is a failure that says so itself."""
    refused = isinstance(got, TraceError)
    row = measures.score(case.line, case.line_closed, np.zeros((0, 2)) if refused else got.pixels)
    if case.line_closed != case.closed:
        row["failed"] = True
    row.update(
        sheet=name, half=wrong.half_of(name), curve=case.curve, cause=case.cause, clicks=len(case.clicks), refused=refused,
        flagged=refused or got.flagged, confidence=0.0 if refused else got.confidence,
        honest=case.cause[0].isdigit(), hint=None if refused else got.hint_click,
        codes=[got.code] if refused else [n.code for n in got.warnings],
    )  # fmt: skip
    return row


def cases_of_sheet(name: str, prepared: sheet.Prepared, truth: dict[str, Any], recipe: dict[str, Any] | None, most: int) -> Any:
    """Trace everything on one sheet, at most ``most`` wrong cases a panel: (case, result, prepared sheet, panel, fixed traces) for each."""
    rng = np.random.default_rng([wrong.seed_of(name)])
    for panel in truth["panels"]:
        curves = [c for c in truth["curves"] if c["panel"] == panel["id"]]
        if not curves:
            continue
        outline = run.panel_of(truth, panel["id"], recipe)
        kept: dict[str, Trace] = {}
        for count in (3, 2, 5):
            mine = [c for c in curves if not (c["closed"] and count == 2)]
            wanted = [trace.Clicks(id=c["id"], points=wrong.good_clicks(c, count, rng), closed=c["closed"]) for c in mine]
            results = trace.trace_panel(prepared, outline, wanted) if wanted else []
            for c, w, got in zip(mine, wanted, results, strict=True):
                line = wrong.line_of(c)
                cause = f"{count} clicks" + (", loop" if c["closed"] else "")
                case = wrong.Case(cause, c["id"], np.asarray(w.points, float), c["closed"], line, c["closed"])
                if count == 3 and isinstance(got, Trace):
                    kept[c["id"]] = got
                yield case, got, prepared, outline, ()
        gone_wrong = list(wrong.wrong_cases(prepared, curves, rng, max(prepared.unit, 0.6)))
        rng.shuffle(gone_wrong)
        for case in gone_wrong[:most]:
            fixed = () if case.alone else tuple(t for key, t in kept.items() if key != case.curve)
            clicks = trace.Clicks(id=case.curve, points=case.clicks, closed=case.closed)
            on = case.prepared or prepared
            (got,) = trace.trace_panel(on, outline, [clicks], fixed=fixed)
            yield case, got, on, outline, fixed


class Vectors:
    """Keeps the evidence that confidence is made from, in the order in which traces are settled."""

    def __init__(self) -> None:
        self.kept: list[np.ndarray] = []
        self.chance = judge.chance
        judge.chance = self

    def __call__(self, vector: np.ndarray) -> float:
        self.kept.append(np.array(vector))
        return self.chance(vector)


def fitted(rows: list[dict[str, Any]], ridge: float = 0.004) -> tuple[float, dict[str, float]]:
    """Bias and weights, none below zero, of the penalised weighted logistic regression of failure on the evidence."""
    from scipy.optimize import minimize

    rows = [r for r in rows if not r["refused"]]
    x = np.array([r["vector"] for r in rows])
    y = np.array([r["failed"] for r in rows], float)
    weight = weights_of(rows) * np.where([r["failed"] or r["honest"] for r in rows], 1.0, SAVED_WEIGHT)
    weight /= weight.mean()
    scale = x.std(axis=0) + 1e-9
    a = np.c_[np.ones(len(x)), x / scale]

    def loss(b: np.ndarray) -> tuple[float, np.ndarray]:
        z = a @ b
        value = float((weight * (np.logaddexp(0, z) - y * z)).mean() + 0.5 * ridge * (b[1:] ** 2).sum())
        return value, a.T @ (weight * (1 / (1 + np.exp(-z)) - y)) / len(y) + np.r_[0.0, ridge * b[1:]]

    b = minimize(loss, np.zeros(a.shape[1]), jac=True, method="L-BFGS-B", bounds=[(None, None)] + [(0, None)] * x.shape[1]).x
    return float(b[0]), {name: round(float(v), 3) for name, v in zip(evidence.NAMES, b[1:] / scale, strict=True)}


def weights_of(rows: list[dict[str, Any]]) -> np.ndarray:
    """Weights that make failed traces FAILING_SHARE of all."""
    failed = np.array([r["failed"] for r in rows])
    return np.where(failed, FAILING_SHARE / max(failed.mean(), 1e-9), (1 - FAILING_SHARE) / max((~failed).mean(), 1e-9))


def judged_anew(rows: list[dict[str, Any]], bias: float, weights: dict[str, float]) -> None:
    """Confidence and flags of all rows by other weights."""
    step = np.array([weights[name] for name in evidence.NAMES])
    for r in rows:
        if not r["refused"]:
            r["confidence"] = float(1 / (1 + np.exp(np.clip(bias + r["vector"] @ step, -30, 30))))
            r["flagged"] = r["confidence"] < confidence.FLAG_BELOW


def cured(case: wrong.Case, got: Trace, prepared: sheet.Prepared, panel: Any, fixed: Any) -> bool | None:
    """Whether the click asked for, put on the true line, makes a failed trace good; None where no click was asked for."""
    if got.hint_click is None:
        return None
    i = int(np.argmin(np.hypot(*(case.line - got.hint_click).T)))
    place = lambda xy: int(np.argmin(np.hypot(*(case.line - xy).T)))  # noqa: E731
    at = [place(xy) for xy in case.clicks]
    k = (
        next((j for j, row in enumerate(at) if row > i), len(at))
        if at[0] <= at[-1]
        else next((j for j, row in enumerate(at) if row < i), len(at))
    )
    clicks = trace.Clicks(id=case.curve, points=np.insert(case.clicks, k, case.line[i], axis=0), closed=case.closed)
    (again,) = trace.trace_panel(prepared, panel, [clicks], fixed=fixed)
    return isinstance(again, Trace) and not measures.score(case.line, case.line_closed, again.pixels)["failed"]


def sigma_of_sheet(name: str, prepared: sheet.Prepared, truth: dict[str, Any], recipe: dict[str, Any] | None, into: cover.Cover) -> None:
    """Count the rows of the good traces at 3 and 5 clicks."""
    rng = np.random.default_rng([wrong.seed_of(name)])
    paper = cover.paper_of(prepared)
    for panel in truth["panels"]:
        curves = [c for c in truth["curves"] if c["panel"] == panel["id"]]
        for count in (3, 5):
            wanted = [trace.Clicks(id=c["id"], points=wrong.good_clicks(c, count, rng), closed=c["closed"]) for c in curves]
            results = trace.trace_panel(prepared, run.panel_of(truth, panel["id"], recipe), wanted) if wanted else []
            for c, got in zip(curves, results, strict=True):
                if isinstance(got, Trace) and not measures.score(wrong.line_of(c), c["closed"], got.pixels)["failed"]:
                    others = [wrong.line_of(o) for o in curves if o["id"] != c["id"]]
                    into.trace(got, c, others, paper, max(prepared.unit, 0.6))


def auc(failed: np.ndarray, confidence: np.ndarray) -> float:
    """Chance that a failed trace has less confidence than a good one."""
    from scipy.stats import rankdata

    rank = rankdata(-confidence)
    n, m = int(failed.sum()), int((~failed).sum())
    return float((rank[failed].sum() - n * (n + 1) / 2) / max(n * m, 1)) if n and m else float("nan")


def table(rows: list[dict[str, Any]]) -> dict[str, Any]:
    """Print flags by cause and the worth of confidence; the figures in one dictionary."""
    failed = np.array([r["failed"] for r in rows])
    flagged = np.array([r["flagged"] for r in rows])
    confidence = np.array([r["confidence"] for r in rows])
    print(f"{'cause':22s} {'failed':>7s} {'flagged':>8s} {'refused':>8s} {'good':>6s} {'flagged':>8s}")
    for cause in sorted({r["cause"] for r in rows}):
        mine = np.array([r["cause"] == cause for r in rows])
        refused = sum(r["refused"] for r in rows if r["cause"] == cause)
        bad, fine = mine & failed, mine & ~failed
        print(f"{cause:22s} {bad.sum():7d} {(bad & flagged).sum():8d} {refused:8d} {fine.sum():6d} {(fine & flagged).sum():8d}")
    weight = weights_of(rows)
    honest = np.array([r["honest"] for r in rows])
    print("confidence   n  said  true (weighed)")
    for low, high in zip((0, 0.2, 0.5, 0.8, 0.9, 0.95, 0.98), (0.2, 0.5, 0.8, 0.9, 0.95, 0.98, 1.01), strict=True):
        inside = (confidence >= low) & (confidence < high)
        if inside.any():
            w = weight[inside]
            said, true = (w * confidence[inside]).sum() / w.sum(), (w * ~failed[inside]).sum() / w.sum()
            print(f"  {low:.2f}-{min(high, 1):.2f} {inside.sum():4d} {said:6.3f} {true:6.3f}")
    out = {
        "failed": int(failed.sum()), "good": int((~failed).sum()),
        "failed_flagged": float(flagged[failed].mean()) if failed.any() else None,
        "failed_flagged_not_refused": float(np.mean([r["flagged"] for r in rows if r["failed"] and not r["refused"]])),
        "good_flagged": float(flagged[~failed & honest].mean()), "saved_flagged": float(flagged[~failed & ~honest].mean()),
        "auc_of_good_clicks": auc(failed[failed | honest], confidence[failed | honest]), "auc": auc(failed, confidence),
        "brier": float((weight * (confidence - ~failed) ** 2).sum() / weight.sum()),
    }  # fmt: skip
    print(json.dumps(out))
    return out


def main() -> int:
    ask = argparse.ArgumentParser(description=__doc__, formatter_class=argparse.RawDescriptionHelpFormatter)
    ask.add_argument("--sheets", type=Path, nargs="*", default=[HERE.parents[1] / "samples"])
    ask.add_argument("--drawn", type=int, default=4, help="sheets of each kind to draw")
    ask.add_argument("--kinds", nargs="*", default=list(drawn.KINDS))
    ask.add_argument("--half", type=int, choices=(0, 1), help="only the fitting (0) or the checking (1) half")
    ask.add_argument("--most", type=int, default=30, help="wrong cases a panel")
    ask.add_argument("--fit", action="store_true", help="fit the weights to the fitting half and judge with them")
    ask.add_argument("--hints", action="store_true", help="add the click asked for to failed traces of right clicks")
    ask.add_argument("--sigma", action="store_true", help="how often the stated uncertainty covers")
    ask.add_argument("--json", type=Path)
    asked = ask.parse_args()
    rows: list[dict[str, Any]] = []
    vectors, covers = Vectors(), (cover.Cover(), cover.Cover())
    for name, page, truth, recipe in sheets_of(asked.sheets, asked.drawn, asked.kinds):
        if asked.half is not None and wrong.half_of(name) != asked.half:
            continue
        prepared = sheet.prepare(page)
        if asked.sigma:
            sigma_of_sheet(name, prepared, truth, recipe, covers[wrong.half_of(name)])
            print(f"{name:24s}", flush=True)
            continue
        vectors.kept.clear()
        mine, kept = [], iter(vectors.kept)
        for case, got, on, panel, fixed in cases_of_sheet(name, prepared, truth, recipe, asked.most):
            mine.append(row_of(name, case, got))
            mine[-1]["vector"] = None if isinstance(got, TraceError) else next(kept)
            right = mine[-1]["honest"] or case.cause in ("obliterated", "sloppy clicks", "bunched loop clicks")
            if asked.hints and mine[-1]["failed"] and isinstance(got, Trace) and right:
                known = len(vectors.kept)
                mine[-1]["cured"] = cured(case, got, on, panel, fixed)
                del vectors.kept[known:]
        rows += mine
        bad = [r for r in mine if r["failed"]]
        print(f"{name:24s} {len(mine):4d} traces {len(bad):4d} failed {sum(r['flagged'] for r in bad):4d} flagged", flush=True)
    if asked.sigma:
        for half, title in ((0, "fitting half"), (1, "checking half")):
            covers[half].table(title)
        return 0
    if asked.hints:
        tried = [r["cured"] for r in rows if r.get("cured") is not None]
        print(f"\nthe click asked for cures {sum(tried)} of {len(tried)} failed traces of right clicks")
    if asked.fit:
        bias, weights = fitted([r for r in rows if r["half"] == 0])
        print(f"\nBIAS = {bias:.3f}\nWEIGHTS = {json.dumps(weights, indent=4)}")
        judged_anew(rows, bias, weights)
    for half, title in ((0, "fitting half"), (1, "checking half")):
        part = [r for r in rows if r["half"] == half]
        if part:
            print(f"\n{title}: {len(part)} traces")
            table(part)
    if asked.json:
        asked.json.write_text(json.dumps(rows, default=lambda v: v.tolist()))
    return 0


if __name__ == "__main__":
    sys.exit(main())
