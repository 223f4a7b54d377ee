"""Clicks that go wrong, and paper that does: the cases a trace must doubt, made from sheets with known truth.

Every case names its curve and its cause; the wanted line is the one most of its clicks lie on.
"""

import zlib
from collections.abc import Iterator
from dataclasses import dataclass, replace
from typing import Any

import cv2
import numpy as np
from scipy.spatial import cKDTree

from curvebank.sheet import Prepared

SPOILS = ("-bit", "-copy", "-photo", "-small")
"""Endings that name another reproduction of one sheet: all of them stay in one half of the pool."""


@dataclass(frozen=True)
class Case:
    """One curve asked for: its clicks, why they may go wrong, and the line that is wanted."""

    cause: str
    curve: str
    clicks: np.ndarray
    closed: bool
    line: np.ndarray
    line_closed: bool
    alone: bool = False
    prepared: Prepared | None = None


def half_of(sheet: str) -> int:
    """0 (fitting) or 1 (checking): whole sheets, with all their reproductions, fall on one side."""
    kind, _, seed = sheet.rpartition("-")
    if kind and seed.isdigit() and len(seed) < 3:
        return int(seed) % 2
    for ending in SPOILS:
        sheet = sheet.removesuffix(ending)
    return seed_of(sheet) % 2


def seed_of(sheet: str) -> int:
    """A seed that belongs to the sheet's name."""
    return zlib.crc32(sheet.encode())


def line_of(curve: dict[str, Any]) -> np.ndarray:
    return np.asarray(curve["line"], float)[:, :2]


def along(line: np.ndarray, share: float) -> np.ndarray:
    """Point at a share of a polyline's length."""
    s = np.r_[0.0, np.cumsum(np.hypot(*np.diff(line, axis=0).T))]
    return np.array([np.interp(share * s[-1], s, line[:, k]) for k in (0, 1)])


def good_clicks(curve: dict[str, Any], count: int, rng: np.random.Generator) -> np.ndarray:
    """Clicks [count, 2] spread along a curve, each coordinate within 3 px of it."""
    line = line_of(curve)
    shares = rng.uniform() + np.arange(count) / count if curve["closed"] else np.linspace(0.01, 0.99, count)
    if not curve["closed"] and rng.random() < 0.3:
        shares[0], shares[-1] = rng.uniform(0.01, 0.05), rng.uniform(0.95, 0.99)
    at = np.stack([along(line, share % 1.0) for share in shares])
    return at + rng.uniform(-3, 3, at.shape)


def wrong_cases(prepared: Prepared, curves: list[dict[str, Any]], rng: np.random.Generator, scale: float) -> Iterator[Case]:
    """All wrong cases of the curves [truth entries] of one panel; ``scale`` is 1 for lines 3 px wide."""
    trees = {c["id"]: cKDTree(line_of(c)) for c in curves}
    for number, curve in enumerate(curves):
        line = line_of(curve)
        base = Case("", curve["id"], np.zeros((0, 2)), curve["closed"], line, curve["closed"], alone=bool(number % 2))
        if curve["closed"]:
            yield from _loops(base, line, rng)
            continue
        for count in (3, 5):
            given = good_clicks(curve, count, rng)
            which = int(rng.integers(0, count))
            moved = _onto_neighbour(given[which], curve["id"], curves, trees, rng, scale)
            if moved is not None:
                yield _with(base, "neighbour", given, which, moved)
            moved = _onto_printed(given[which], prepared, trees[curve["id"]], rng, scale)
            if moved is not None and count == 3:
                yield _with(base, "grid line", given, which, moved)
            moved = _onto_crossing(line, curve["id"], curves, trees, rng, scale)
            if moved is not None and count == 5:
                inner = int(np.argmin(np.hypot(*(given[1:-1] - moved).T))) + 1
                yield _with(base, "crossing curve", given, inner, moved)
        yield from _mixed(base, curve, curves, rng)
        hidden = _obliterated(prepared, line, rng, scale)
        yield replace(base, cause="obliterated", clicks=good_clicks(curve, 3 if number % 2 else 2, rng), prepared=hidden)
        sloppy = good_clicks(curve, 3, rng)
        yield replace(base, cause="sloppy clicks", clicks=sloppy + rng.uniform(-6, 6, sloppy.shape) * scale)


def _with(base: Case, cause: str, clicks: np.ndarray, which: int, at: np.ndarray) -> Case:
    moved = clicks.copy()
    moved[which] = at
    return replace(base, cause=cause, clicks=moved)


def _loops(base: Case, line: np.ndarray, rng: np.random.Generator) -> Iterator[Case]:
    """A loop clicked at two places as an open line, and at three places close together."""
    start = float(rng.uniform())
    ring = np.stack([along(line, (start + k) % 1.0) for k in (0.0, 0.5)])
    yield replace(base, cause="two-click loop", clicks=ring + rng.uniform(-2, 2, ring.shape), closed=False)
    near = np.stack([along(line, (start + k) % 1.0) for k in (0.0, 0.12, 0.24)])
    yield replace(base, cause="bunched loop clicks", clicks=near + rng.uniform(-2, 2, near.shape))


def _onto_neighbour(
    click: np.ndarray, mine: str, curves: list[dict[str, Any]], trees: dict[str, cKDTree], rng: np.random.Generator, scale: float
) -> np.ndarray | None:
    """The click moved onto the nearest other curve."""
    found = []
    for c in curves:
        if c["id"] != mine:
            gap, i = trees[c["id"]].query(click)
            at = trees[c["id"]].data[i]
            if gap < 200 * scale and trees[mine].query(at)[0] > 8 * scale:
                found.append((gap, at))
    return None if not found else min(found, key=lambda f: f[0])[1] + rng.uniform(-2, 2, 2) * scale


def _onto_printed(click: np.ndarray, prepared: Prepared, tree: cKDTree, rng: np.random.Generator, scale: float) -> np.ndarray | None:
    """The click moved onto a printed line some way off its curve."""
    found = []
    for printed in prepared.lines:
        points = printed.points()
        gap = np.hypot(*(points - click).T)
        i = int(np.argmin(gap))
        if 10 * scale < gap[i] < 90 * scale and tree.query(points[i])[0] > 10 * scale:
            found.append((gap[i], points[i]))
    return None if not found else found[int(rng.integers(len(found)))][1] + rng.uniform(-1, 1, 2)


def _onto_crossing(
    line: np.ndarray, mine: str, curves: list[dict[str, Any]], trees: dict[str, cKDTree], rng: np.random.Generator, scale: float
) -> np.ndarray | None:
    """A point on a curve that crosses, 15 to 80 px beyond the crossing."""
    found = []
    for c in curves:
        if c["id"] == mine:
            continue
        gap = trees[c["id"]].query(line)[0]
        if gap.min() > 1.5:
            continue
        other = line_of(c)
        off = trees[mine].query(other)[0]
        cross = line[int(np.argmin(gap))]
        near = (np.hypot(*(other - cross).T) < 80 * scale) & (off > 9 * scale)
        if near.any():
            found.append(other[int(rng.choice(np.flatnonzero(near)))])
    return None if not found else found[int(rng.integers(len(found)))] + rng.uniform(-2, 2, 2) * scale


def _mixed(base: Case, curve: dict[str, Any], curves: list[dict[str, Any]], rng: np.random.Generator) -> Iterator[Case]:
    """Clicks on two curves: begun on one and ended on another, and neighbours swapped half way."""
    line = base.line
    others = [c for c in curves if c["id"] != curve["id"] and not c["closed"]]
    if not others:
        return
    middle = along(line, 0.5)
    others.sort(key=lambda c: float(np.hypot(*(line_of(c) - middle).T).min()))
    for cause, count, other in (("two curves", 2, others[int(rng.integers(len(others)))]), ("swapped neighbours", 5, others[0])):
        mine, theirs = good_clicks(curve, count, rng), good_clicks(other, count, rng)
        k = count - count // 2
        clicks = np.vstack([mine[:k], theirs[k:]])
        if np.hypot(*np.diff(clicks, axis=0).T).min() > 20:
            yield replace(base, cause=cause, clicks=clicks)


def _obliterated(prepared: Prepared, line: np.ndarray, rng: np.random.Generator, scale: float) -> Prepared:
    """The page with a stretch of the line blotted out or painted over."""
    at = along(line, float(rng.uniform(0.3, 0.7)))
    length = float(np.hypot(*np.diff(line, axis=0).T).sum())
    size = (int(rng.uniform(0.05, 0.14) * length), int(rng.uniform(25, 60) * scale))
    paint = 255 if rng.random() < 0.4 else 0
    pages = []
    for k, page in enumerate((prepared.ink, prepared.clean, prepared.printed)):
        page = page.copy()
        cv2.ellipse(page, (int(at[0]), int(at[1])), size, float(rng.uniform(0, 60)) if not k else 20.0, 0, 360, paint if k < 2 else 0, -1)
        page.setflags(write=False)
        pages.append(page)
    return replace(prepared, ink=pages[0], clean=pages[1], printed=pages[2])
