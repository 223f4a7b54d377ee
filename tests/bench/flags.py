"""Benchmark: does a trace know when it went wrong? Failed and good traces by cause, how many are flagged, and what confidence is worth.

    python tests/bench/flags.py [--sheets DIR ...] [--drawn SEEDS] [--kinds ...] [--half 0|1] [--json FILE]

Each DIR (default: samples/) holds NAME.recipe.json, the scan and NAME.truth.json; ``--drawn N`` adds N sheets of each kind of
tests/bench/drawn.py. Every curve is traced with 2, 3 and 5 good clicks and with clicks gone wrong (tests/bench/wrong.py). Failed: see
measures.score. Half of the sheets are for fitting, half for checking; the check half is what counts. Truth is read here and nowhere else.
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

import drawn  # noqa: E402
import measures  # noqa: E402
import run  # noqa: E402
import wrong  # noqa: E402

from curvebank import sheet, trace  # noqa: E402
from curvebank.errors import TraceError  # noqa: E402
from curvebank.records import Trace  # noqa: E402

FAILING_SHARE = 0.1
"""Share of failed traces that confidence is weighed for; the pool holds far more of them than a day's work does."""


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
        codes=[got.code] if refused else [n.code for n in got.warnings], hint=None if refused else got.hint_click,
    )  # fmt: skip
    return row


def cases_of_sheet(name: str, page: sheet.Sheet, truth: dict[str, Any], recipe: dict[str, Any] | None) -> Any:
    """Trace everything on one sheet: (case, result, prepared sheet, panel, fixed traces) for each."""
    prepared = sheet.prepare(page)
    rng = np.random.default_rng([wrong.seed_of(name)])
    for panel in truth["panels"]:
        curves = [c for c in truth["curves"] if c["panel"] == panel["id"]]
        if not curves:
            continue
        outline = run.panel_of(truth, panel["id"], recipe)
        kept: dict[str, Trace] = {}
        for count in ("3", "2", "5"):
            mine = [c for c in curves if count in c["clicks"] and not (c["closed"] and count == "2")]
            wanted = [trace.Clicks(id=c["id"], points=c["clicks"][count], closed=c["closed"]) for c in mine]
            results = trace.trace_panel(prepared, outline, wanted) if wanted else []
            for c, w, got in zip(mine, wanted, results, strict=True):
                line = wrong.line_of(c)
                cause = f"{count} clicks" + (", loop" if c["closed"] else "")
                case = wrong.Case(cause, c["id"], np.asarray(w.points, float), c["closed"], line, c["closed"])
                if count == "3" and isinstance(got, Trace):
                    kept[c["id"]] = got
                yield case, got, prepared, outline, ()
        for case in wrong.wrong_cases(prepared, curves, rng, max(prepared.unit, 0.6)):
            fixed = () if case.alone else tuple(t for key, t in kept.items() if key != case.curve)
            clicks = trace.Clicks(id=case.curve, points=case.clicks, closed=case.closed)
            on = case.prepared or prepared
            (got,) = trace.trace_panel(on, outline, [clicks], fixed=fixed)
            yield case, got, on, outline, fixed


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
    weight = np.where(failed, FAILING_SHARE / max(failed.mean(), 1e-9), (1 - FAILING_SHARE) / max((~failed).mean(), 1e-9))
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
        "good_flagged": float(flagged[~failed].mean()) if (~failed).any() else None, "auc": auc(failed, confidence),
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
    ask.add_argument("--json", type=Path)
    asked = ask.parse_args()
    rows = []
    for name, page, truth, recipe in sheets_of(asked.sheets, asked.drawn, asked.kinds):
        if asked.half is not None and wrong.half_of(name) != asked.half:
            continue
        mine = [row_of(name, case, got) for case, got, *_ in cases_of_sheet(name, page, truth, recipe)]
        rows += mine
        bad = [r for r in mine if r["failed"]]
        print(f"{name:24s} {len(mine):4d} traces {len(bad):4d} failed {sum(r['flagged'] for r in bad):4d} flagged", flush=True)
    for half, title in ((0, "fitting half"), (1, "checking half")):
        part = [r for r in rows if r["half"] == half]
        if part:
            print(f"\n{title}: {len(part)} traces")
            table(part)
    if asked.json:
        asked.json.write_text(json.dumps(rows, default=float))
    return 0


if __name__ == "__main__":
    sys.exit(main())
