"""Traces against truth at 2, 3 and 5 clicks: RMS, failures, ends, and what the stated uncertainty covers."""

import time
from collections import Counter
from typing import Any

import measures
import numpy as np

from curvebank import trace
from curvebank.errors import TraceError

from .cases import Case, Line, at_least, at_most, between

ENDS_PX = 3.0
LOST_SHARE = 0.02


class Box:
    """A stand-in for a panel whose axes could not be placed: the box of its true outline."""

    def __init__(self, polygon: Any) -> None:
        xy = np.asarray(polygon, float)
        self.low, self.high = xy.min(0) - 40, xy.max(0) + 40
        self.outline = np.array([self.low, [self.high[0], self.low[1]], self.high, [self.low[0], self.high[1]]])

    def inside(self, xy: Any) -> np.ndarray:
        xy = np.asarray(xy, float)
        return ((xy >= self.low) & (xy <= self.high)).all(axis=1)


def panel_map(case: Case, panel: dict[str, Any]) -> Any:
    return case.maps("auto").get(panel["id"]) or Box(panel["polygon"])


class Traces:
    """Rows of every curve at each number of clicks."""

    name = "traces"

    def __init__(self, clicks: list[str]) -> None:
        self.clicks = clicks
        self.rows: list[dict[str, Any]] = []

    def visit(self, case: Case) -> None:
        classes = case.classes()
        for n in self.clicks:
            for panel in case.truth["panels"]:
                mine = [c for c in case.truth["curves"] if c["panel"] == panel["id"] and n in c["clicks"]]
                mine = [c for c in mine if not (c["closed"] and int(n) < 3)]
                if not mine:
                    continue
                wanted = [trace.Clicks(id=c["id"], points=c["clicks"][n], closed=c["closed"]) for c in mine]
                start = time.process_time()
                got = trace.trace_panel(case.prepared, panel_map(case, panel), wanted)
                each = (time.process_time() - start) / len(mine)
                self.rows += [_row(case, classes[c["id"]], n, c, g) | {"seconds": each} for c, g in zip(mine, got, strict=True)]

    def lines(self) -> list[Line]:
        out: list[Line] = []
        for n in self.clicks:
            rows = [r for r in self.rows if r["clicks"] == n]
            plain = [r for r in rows if r["class"] == "ordinary" and not r["hard"]]
            if n == "3":
                good = _good(plain)
                out.append(at_most("ordinary, 3 clicks: RMS px, median", _quantile(good, 50), len(plain), 0.02))
                out.append(at_most("ordinary, 3 clicks: RMS px, 99 %", _quantile(good, 99), len(plain), 0.3))
                out.append(at_most("ordinary, 3 clicks: failed", _failed(plain, count=True), len(plain), 0))
                ends = [e for r in rows if not r["failed"] and r["ends"] and r["class"] != "merging" for e in r["ends"]]
                near = float(np.mean([e <= ENDS_PX for e in ends])) if ends else None
                out.append(at_least("ends within 3 px of the ink's end, share (3 clicks, all sheets)", near, len(ends), 0.95))
                easy = [e for r in plain if not r["failed"] and r["ends"] for e in r["ends"]]
                near = float(np.mean([e <= ENDS_PX for e in easy])) if easy else None
                out.append(at_least("ends within 3 px of the ink's end, share (3 clicks, ordinary)", near, len(easy), 0.95))
            if n == "2":
                out.append(at_most("ordinary, 2 clicks: failed, share", _failed(plain), len(plain), 0.01))
            loops = [r for r in rows if r["class"] == "loop"]
            if n == "5":
                easy = [r for r in loops if not r["hard"]]
                out.append(at_most("loops, 5 clicks: RMS px, worst", _quantile(_good(easy), 100), len(easy), 0.15))
                out.append(at_most("loops, 5 clicks: failed", _failed(easy, count=True), len(easy), 0))
            if n == "3" and loops:
                out.append(Line("loops, 3 clicks: failed, share", _failed(loops), len(loops)))
            merging = [r for r in rows if r["class"] == "merging" and not r["hard"]]
            if n in ("3", "5"):
                out.append(at_most(f"merging, {n} clicks: failed, share", _failed(merging), len(merging), 0.10 if n == "3" else 0.02))
                lost = float(np.mean([r["off"] > LOST_SHARE for r in merging])) if merging else None
                out.append(Line(f"merging, {n} clicks: more than 2 % of the length over 6 px off, share", lost, len(merging)))
            contours = [r for r in rows if r["class"] == "contour" and not r["hard"]]
            if contours:
                out.append(Line(f"open contours, {n} clicks: failed, share", _failed(contours), len(contours)))
            hard = [r for r in rows if r["hard"]]
            if n == "3":
                share = _failed(hard)
                out.append(at_least("hard sheets, 3 clicks: good, share", None if share is None else 1 - share, len(hard), 0.9))
                fine = [r for r in hard if r["dpi"] >= 150]
                share = _failed(fine)
                out.append(
                    at_least("hard sheets of 150 dpi and up, 3 clicks: good, share", None if share is None else 1 - share, len(fine), 0.9)
                )
        out += self._coverage()
        return out

    def _coverage(self) -> list[Line]:
        rows = [r for r in self.rows if r["clicks"] == ("3" if "3" in self.clicks else self.clicks[0]) and r.get("rows")]
        total = sum(r["rows"] for r in rows)
        out = []
        for words, low, high, key in (("one", 0.60, 0.76, "within_1"), ("two", 0.91, 0.98, "within_2")):
            share = sum(r[key] for r in rows) / total if total else None
            line = between(f"sigma_px covers within {words}, pooled over curves (n: curves)", share, len(rows), low, high)
            line.reached = line.reached if len(rows) >= 100 else None
            out.append(line)
        failed = [r for r in self.rows if r["failed"]]
        good = [r for r in self.rows if not r["failed"]]
        flagged = float(np.mean([r["flagged"] for r in failed])) if failed else None
        false = float(np.mean([r["flagged"] for r in good])) if good else None
        out.append(at_least("failed traces here: flagged, share", flagged, len(failed), 0.9))
        out.append(at_most("good traces here: flagged, share", false, len(good), 0.05))
        return out

    def table(self) -> list[str]:
        """Failures by kind of sheet and number of clicks."""
        count, bad = Counter(), Counter()
        for r in self.rows:
            key = (r["kind"], r["clicks"])
            count[key] += 1
            bad[key] += r["failed"]
        kinds = sorted({k for k, _ in count})
        out = [f"{'kind':18s}" + "".join(f" {n + ' clicks':>12s}" for n in self.clicks) + "   rms median at 3"]
        for k in kinds:
            good = [r["rms"] for r in self.rows if r["kind"] == k and r["clicks"] == "3" and not r["failed"]]
            cells = "".join(f" {bad[k, n]:5d} of {count[k, n]:3d}" for n in self.clicks)
            out.append(f"{k:18s}{cells}   {np.median(good) if good else float('nan'):.3f}")
        return out

    def failures(self) -> list[str]:
        """Every failed curve at 3 clicks and more in words."""
        out = []
        for r in self.rows:
            if r["failed"] and r["clicks"] != "2":
                rms = "-" if r["rms"] is None else f"{r['rms']:.2f}"
                why = r["error"] or (
                    f"rms {rms} coverage {r['coverage']:.3f} over {r['over']:.1f}{' switched' if r['switched'] else ''}"
                    f"{' to ' + r['to'] if r['to'] else ''}"
                )
                flag = "" if r["flagged"] else " NOT FLAGGED"
                out.append(
                    f"{r['sheet']:20s} {r['curve']} {r['clicks']} clicks {r['class']:9s} {r['quantity']:14s} {r['style']:12s} {why}{flag}"
                )
        return out


def _row(case: Case, kind: str, n: str, c: dict[str, Any], got: Any) -> dict[str, Any]:
    line = np.asarray(c["line"], float)
    bad = isinstance(got, TraceError)
    row = measures.score(line, c["closed"], np.zeros((0, 2)) if bad else got.pixels)
    row.update(
        sheet=case.name, kind=case.truth.get("kind", case.name), hard=case.hard, dpi=case.truth.get("dpi", 300), curve=c["id"], clicks=n,
        quantity=c["quantity"], style=c["style"], width_px=c["width_px"], flagged=bad or got.flagged, error=str(got) if bad else None,
        confidence=0.0 if bad else got.confidence, to=None if bad or not row["switched"] else _switched_to(case, c, got.pixels),
    )  # fmt: skip
    row["class"] = kind
    if not bad and not row["failed"]:
        z = measures.signed_over_sigma(line, got.pixels, got.sigma_px)
        row["within_1"], row["within_2"], row["rows"] = int((z <= 1).sum()), int((z <= 2).sum()), len(z)
    return row


def _switched_to(case: Case, c: dict[str, Any], pixels: np.ndarray) -> str:
    """Which other curve the trace lies on where it left its own; "no curve" where none."""
    away = measures.distance(pixels, np.asarray(c["line"], float)[:, :2])[0] > measures.SWITCH_PX
    best, name = 0.0, "no curve"
    for o in case.truth["curves"]:
        if o["panel"] == c["panel"] and o["id"] != c["id"] and away.any():
            share = float((measures.distance(pixels[away], np.asarray(o["line"], float)[:, :2])[0] < 3).mean())
            best, name = (share, o["id"]) if share > max(best, 0.3) else (best, name)
    return name


def _good(rows: list[dict[str, Any]]) -> list[float]:
    return [r["rms"] for r in rows if not r["failed"]]


def _quantile(values: list[float], q: float) -> float | None:
    return float(np.percentile(values, q)) if values else None


def _failed(rows: list[dict[str, Any]], count: bool = False) -> float | None:
    if not rows:
        return None
    n = sum(r["failed"] for r in rows)
    return float(n) if count else n / len(rows)
