"""How near the tracer comes to the Cramer-Rao bound: isolated lines of known width, blur and noise.

    python tests/bench/bound.py [--seeds 400] [--json FILE]

The true middle is a cubic spline of ``DOF`` coefficients in its own knots. The bound is that of an unbiased estimator in the same spline
space: the Fisher matrix of all pixels for displacements along the spline's basis functions, with paper level and line height unknown as
well (width and blur known). The tracer is told nothing: it finds width, blur, noise and its own smoothness. Standard deviation and bias
are those of the traced middle across the line, over the seeds at each place, then the root mean square along the line (its outermost 3 %
left out); the bias is freed of what so many seeds leave of the noise. One row across a Gaussian profile of standard deviation s has the
bound (noise / height) sqrt(2 s / sqrt(pi)) px (``one_row_bound``), to which the pixel sum is held by a test.
"""

import argparse
import json
import os
import sys
from dataclasses import dataclass
from pathlib import Path
from typing import Any

for name in ("OMP_NUM_THREADS", "OPENBLAS_NUM_THREADS", "MKL_NUM_THREADS"):
    os.environ.setdefault(name, "1")

import numpy as np  # noqa: E402
from scipy.interpolate import BSpline  # noqa: E402
from scipy.special import ndtr  # noqa: E402

HERE = Path(__file__).resolve().parent
sys.path.insert(0, str(HERE))
sys.path.insert(0, str(HERE.parents[1]))

from papers.paint import project, stroke  # noqa: E402
from papers.scene import Stroke, arc  # noqa: E402

from curvebank import sheet, trace  # noqa: E402
from curvebank.errors import TraceError  # noqa: E402

DOF = 8
KNOTS = np.r_[[0.0] * 4, np.linspace(0, 1, DOF - 2)[1:-1], [1.0] * 4]
LENGTH, PITCH, MARGIN = 900, 48.0, 40
PAPER = 235.0
TRIM = 0.03


def basis(t: np.ndarray) -> np.ndarray:
    """The cubic B-splines of the true line at t in 0..1: [n, DOF]."""
    return BSpline.design_matrix(np.clip(t, 0, 1), KNOTS, 3).toarray()


def _head_curve() -> np.ndarray:
    """Coefficients [px] of the spline nearest to a head curve that rises a little and falls steeper and steeper."""
    t = np.linspace(0, 1, 400)
    return np.linalg.lstsq(basis(t), 20.0 + 150.0 * t**2.4 - 18.0 * np.sin(np.pi * t), rcond=None)[0]


SHAPE = _head_curve()


@dataclass(frozen=True)
class Condition:
    """Line width and blur [px], noise over height of the line (before rounding to 8 bits), height in grey steps."""

    width: float
    blur: float
    noise: float
    height: float = 190.0

    @property
    def sigma(self) -> float:
        """Noise in grey steps, with that of rounding to whole steps."""
        return float(np.hypot(self.noise * self.height, np.sqrt(1 / 12)))


CONDITIONS = (
    Condition(3.0, 0.7, 0.02),
    Condition(3.0, 0.7, 0.05),
    Condition(3.0, 1.2, 0.10),
    Condition(1.5, 0.7, 0.05),
    Condition(5.5, 0.9, 0.05),
)


def true_line(offset: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
    """The line [n, 2] moved by ``offset``, about a vertex a pixel, and the parameter of each vertex."""
    t = np.linspace(0, 1, LENGTH + 1)
    return np.stack([MARGIN + LENGTH * t + offset[0], MARGIN + basis(t) @ SHAPE + offset[1]], 1), t


def one_row_bound(s: float, noise_over_height: float) -> float:
    """Least standard deviation [px] of the middle of a Gaussian profile from one row of unit pixels of white noise."""
    return float(noise_over_height * np.sqrt(2 * s / np.sqrt(np.pi)))


def profile_slope(d: np.ndarray, width: float, blur: float) -> np.ndarray:
    """d/dd of the cross profile of a line that is ``width`` wide, blurred by a Gaussian."""
    z = [((d + h) / blur) for h in (width / 2, -width / 2)]
    return (np.exp(-0.5 * z[0] ** 2) - np.exp(-0.5 * z[1] ** 2)) / (blur * np.sqrt(2 * np.pi))


def bound(c: Condition, at: np.ndarray) -> np.ndarray:
    """Least standard deviation [px] across the line at parameters ``at``, for an unbiased estimate in the spline space."""
    line, t = true_line(np.zeros(2))
    reach = c.width / 2 + 5 * c.blur + 1
    low, high = np.floor(line.min(0) - reach).astype(int), np.ceil(line.max(0) + reach).astype(int)
    y, x = np.mgrid[low[1] : high[1] + 1, low[0] : high[0] + 1]
    px = np.stack([x.ravel(), y.ravel()], 1).astype(float)
    rough = np.interp(px[:, 0], line[:, 0], line[:, 1])
    px = px[np.abs(px[:, 1] - rough) < 2.2 * reach]
    dist, s = project(px, line)
    keep = dist < reach
    px, s = px[keep], s[keep]
    e = np.gradient(line, axis=0)
    normal = np.stack([-e[:, 1], e[:, 0]], 1) / np.hypot(*e.T)[:, None]
    length = arc(line)
    where = np.interp(s, length, t)
    foot = np.stack([np.interp(s, length, line[:, k]) for k in (0, 1)], 1)
    across = np.stack([np.interp(s, length, normal[:, k]) for k in (0, 1)], 1)
    d = ((px - foot) * across).sum(1)
    level = ndtr((d + c.width / 2) / c.blur) - ndtr((d - c.width / 2) / c.blur)
    by = np.concatenate([-c.height * profile_slope(d, c.width, c.blur)[:, None] * basis(where), level[:, None], np.ones((len(d), 1))], 1)
    spread = np.linalg.inv(by.T @ by / c.sigma**2)[:DOF, :DOF]
    rows = basis(at)
    return np.sqrt(np.einsum("ni,ij,nj->n", rows, spread, rows))


class _Box:
    def __init__(self, width: int, height: int) -> None:
        self.outline = np.array([[0, 0], [width, 0], [width, height], [0, height]], float)

    def inside(self, xy: Any) -> np.ndarray:
        return np.ones(len(np.asarray(xy)), bool)


def misses(c: Condition, seeds: int, at: np.ndarray, rng: np.random.Generator, a_sheet: int = 8) -> np.ndarray:
    """Signed distance [px] of the traced middle from the true one at parameters ``at``, one row a seed; NaN rows where it was lost."""
    out = []
    while len(out) < seeds:
        count = min(a_sheet, seeds - len(out))
        width, height = LENGTH + 2 * MARGIN, int(MARGIN * 2 + SHAPE.max() + PITCH * (a_sheet - 1)) + 1
        grey = np.full((height, width), PAPER)
        lines = []
        for k in range(count):
            line, t = true_line(np.array([0.0, PITCH * k]) + rng.uniform(-0.5, 0.5, 2))
            y, x, cover = stroke(Stroke(line, c.width), c.blur, (height, width))
            grey[y, x] -= c.height * cover
            lines.append((line, t))
        grey = np.clip(np.rint(grey + rng.normal(0, c.noise * c.height, grey.shape)), 0, 255).astype(np.uint8)
        prepared = sheet.prepare(_sheet(grey))
        asked = [
            trace.Clicks(id=f"{k}", points=(line[[12, len(line) // 2, -13]] + rng.uniform(-1, 1, (3, 2))).tolist())
            for k, (line, _) in enumerate(lines)
        ]
        for (line, t), got in zip(lines, trace.trace_panel(prepared, _Box(width, height), asked), strict=True):
            out.append(np.full(len(at), np.nan) if isinstance(got, TraceError) else _signed(line, t, got.pixels, at))
    return np.array(out)


def _sheet(grey: np.ndarray) -> sheet.Sheet:
    import io

    from PIL import Image

    buffer = io.BytesIO()
    Image.fromarray(grey).save(buffer, "PNG")
    return sheet.load(buffer.getvalue())


def _signed(line: np.ndarray, t: np.ndarray, pixels: np.ndarray, at: np.ndarray) -> np.ndarray:
    """Across the true line, where each traced pixel lies, interpolated to ``at``."""
    length = arc(line)
    _, s = project(pixels, line)
    e = np.gradient(line, axis=0)
    normal = np.stack([-e[:, 1], e[:, 0]], 1) / np.hypot(*e.T)[:, None]
    foot = np.stack([np.interp(s, length, line[:, k]) for k in (0, 1)], 1)
    across = np.stack([np.interp(s, length, normal[:, k]) for k in (0, 1)], 1)
    order = np.argsort(s)
    return np.interp(at, np.interp(s, length, t)[order], ((pixels - foot) * across).sum(1)[order])


def measure(c: Condition, seeds: int, seed: int = 7) -> dict[str, float]:
    """Standard deviation, bound and bias [px], root mean squares along the line, and how many traces were lost."""
    at = np.linspace(TRIM, 1 - TRIM, 120)
    found = misses(c, seeds, at, np.random.default_rng([seed, int(1000 * c.noise), int(10 * c.width)]))
    kept = found[np.isfinite(found).all(1)]
    spread, middle = kept.std(0, ddof=1), kept.mean(0)
    sd, least = float(np.sqrt((spread**2).mean())), float(np.sqrt((bound(c, at) ** 2).mean()))
    left = float((middle**2).mean() - (spread**2).mean() / len(kept))
    return {
        "width_px": c.width, "blur_px": c.blur, "noise": c.noise, "seeds": len(kept), "lost": len(found) - len(kept),
        "sd_px": sd, "bound_px": least, "ratio": sd / least, "bias_px": float(np.sqrt(max(left, 0.0))),
        "bias_worst_px": float(np.abs(middle).max()), "bias_mean_px": float(middle.mean()),
    }  # fmt: skip


def main() -> int:
    ask = argparse.ArgumentParser(description=__doc__, formatter_class=argparse.RawDescriptionHelpFormatter)
    ask.add_argument("--seeds", type=int, default=400)
    ask.add_argument("--only", type=int, nargs="*", help="numbers of the conditions, from 0")
    ask.add_argument("--json", type=Path)
    asked = ask.parse_args()
    rows = []
    print("width blur noise  seeds lost   sd px    bound px  ratio   bias rms  worst    mean")
    for k, c in enumerate(CONDITIONS):
        if asked.only and k not in asked.only:
            continue
        r = measure(c, asked.seeds)
        rows.append(r)
        state = f"{c.width:5.1f} {c.blur:4.1f} {c.noise:5.2f}  {r['seeds']:5d} {r['lost']:4d}  {r['sd_px']:.5f}  {r['bound_px']:.5f}"
        bias = f"{r['bias_px']:.5f}  {r['bias_worst_px']:.5f} {r['bias_mean_px']:+.5f}"
        print(f"{state}  {r['ratio']:5.2f}  {bias}", flush=True)
    if asked.json:
        asked.json.write_text(json.dumps(rows, indent=1))
    return 0


if __name__ == "__main__":
    sys.exit(main())
