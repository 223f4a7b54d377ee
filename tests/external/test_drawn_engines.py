"""The drawn sheets of the benchmark: two ways to turn lines into pixels agree about where a line is, and with the truth."""

import sys
from pathlib import Path

import numpy as np
import pytest

sys.path.insert(0, str(Path(__file__).resolve().parents[1] / "bench"))

pytest.importorskip("matplotlib")
from papers import agg, paint  # noqa: E402
from papers.kinds import sheet_of  # noqa: E402
from papers.scene import Scene, Stroke  # noqa: E402

ENGINES = {"distance to every pixel": paint.render, "area coverage": agg.render}


def wave(phase: float) -> np.ndarray:
    x = np.linspace(10.3, 229.6, 800)
    return np.stack([x, 60.0 + 25 * np.sin(x / 60 + phase)], 1)


def centroid_misses(light: np.ndarray, line: np.ndarray) -> np.ndarray:
    """Column centroids of the ink minus the line, away from its ends."""
    ink = 1 - light.astype(float)
    y = np.arange(light.shape[0])[:, None]
    columns = np.arange(25, 216)
    at = (ink * y).sum(0)[columns] / ink.sum(0)[columns]
    return at - np.interp(columns, line[:, 0], line[:, 1])


@pytest.mark.parametrize("width", [1.2, 3.0, 5.5])
@pytest.mark.parametrize("engine", list(ENGINES))
def test_centre_of_ink_is_the_true_line(engine: str, width: float) -> None:
    line = wave(0.3)
    for flip in (False, True):
        scene = Scene(120 if flip else 240, 240 if flip else 120, 0.7, items=[Stroke(line[:, ::-1] if flip else line, width)])
        light = ENGINES[engine](scene)
        misses = centroid_misses(light.T if flip else light, line)
        assert abs(misses.mean()) < 0.003
        assert np.sqrt((misses**2).mean()) < 0.006


def test_engines_agree_to_a_hundredth_of_a_pixel() -> None:
    scene = Scene(240, 120, 0.7, items=[Stroke(wave(1.1), 3.0)])
    a, b = (centroid_misses(engine(scene), wave(1.1)) for engine in ENGINES.values())
    assert np.abs(a - b).max() < 0.01


@pytest.mark.parametrize("kind", ["ordinary", "fax-normal"])
def test_truth_marks_the_ink(kind: str) -> None:
    """On a finished sheet the paper is darker on the true lines than beside them, and the recipe's clicks lie within 3 px of them."""
    made = sheet_of(kind, 0)
    grey = made.pixels.astype(float) * (255 if made.pixels.dtype == bool else 1)
    for c in made.truth["curves"]:
        line = np.array(c["line"])[:, :2]
        e = np.gradient(line, axis=0)
        n = np.stack([-e[:, 1], e[:, 0]], 1) / np.hypot(*e.T)[:, None]
        on, off = (grey[tuple(np.rint(line + k * n).astype(int).T[::-1])].mean() for k in (0, 7))
        assert on < off - 60
        for x, y in c["clicks"]["3"]:
            assert np.hypot(*(line - (x, y)).T).min() < 3 * np.sqrt(2) + 1
