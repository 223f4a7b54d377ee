"""Two halves of one drawn chart, the second turned by 0.7 degrees and darker: joined, they read as the whole does."""

import io
import json

import chart
import cv2
import numpy as np
import pytest
from click.testing import CliRunner
from PIL import Image

from curvebank import digitise, sheet
from curvebank.cli import main
from curvebank.desk import joining
from curvebank.errors import SheetError
from curvebank.sheet.join import join, similarity

WHOLE = chart.labelled()


def cut(x0, y0, x1, y1):
    return np.ascontiguousarray(WHOLE[y0:y1, x0:x1])


def turned(x0, y0, x1, y1, degrees=0.7, margin=12):
    """A part of the page laid askew on another scanner: darker, with a margin. Gives pixels and the map from the page to them."""
    m = np.eye(3)
    m[:2] = cv2.getRotationMatrix2D(((x0 + x1) / 2, (y0 + y1) / 2), degrees, 1.0)
    m[:2, 2] += [margin - x0, margin - y0]
    size = (x1 - x0 + 2 * margin, y1 - y0 + 2 * margin)
    out = cv2.warpPerspective(WHOLE, m, size, flags=cv2.INTER_CUBIC, borderValue=250)
    return np.clip(out * 0.85 + 6, 0, 255).astype(np.uint8), m


def scan(pixels):
    return sheet.load(chart.png_of(pixels))


def at(plane, points):
    q = np.c_[points, np.ones(len(points))] @ np.asarray(plane).T
    return q[:, :2] / q[:, 2:]


EVERYWHERE = np.stack(np.meshgrid(np.linspace(0, 899, 7), np.linspace(0, 699, 6)), axis=-1).reshape(-1, 2)
LEFT, RIGHT, TOP, BOTTOM = (0, 0, 520, 700), (400, 0, 900, 700), (0, 0, 900, 420), (0, 320, 900, 700)


@pytest.mark.parametrize(("first", "second"), [(LEFT, RIGHT), (TOP, BOTTOM)])
def test_the_second_half_is_laid_where_it_belongs_and_the_first_stays(first, second):
    half, true = turned(*second)
    one = cut(*first)
    made = join(scan(one), scan(half))
    assert made.found == "ink" and not made.swapped and made.offset == (0, 0)
    assert np.hypot(*(at(made.plane, EVERYWHERE) - at(true, EVERYWHERE)).T).max() < 0.15
    assert made.residual_px < 0.1
    # Unchanged to the bit before the overlap, and as good as the page itself beyond it.
    height, width = (first[3], second[0] - 20) if first == LEFT else (second[1] - 20, first[2])
    assert np.array_equal(made.pixels[:height, :width], WHOLE[:height, :width])
    away = np.abs(made.pixels[: WHOLE.shape[0] - 20, : WHOLE.shape[1] - 20].astype(int) - WHOLE[:-20, :-20])
    assert np.percentile(away, 99) < 45 and np.median(away) < 6


def test_joined_halves_read_as_the_whole(chart_recipe):
    half, _ = turned(*RIGHT)
    made = joining.join(chart.png_of(cut(*LEFT)), chart.png_of(half))
    joined, whole = (digitise.run(chart_recipe, data) for data in (made.png, chart.png_of(WHOLE)))
    for a, b in zip(joined.curves, whole.curves, strict=True):
        assert a.error is None and b.error is None
        top = chart.TOP_HEAD_M if a.quantity == "head" else 1.0
        true = chart.efficiency if a.quantity == "efficiency" else lambda q, d=a.diameter_mm: chart.head_m(q, d)
        misses = [np.sqrt(np.mean((c.points[:, 1] - true(c.points[:, 0])) ** 2)) / top for c in (a, b)]
        assert misses[0] < misses[1] + 3e-4 and misses[0] < 1e-3


def test_the_second_comes_first_where_it_lies_to_the_left():
    half, _ = turned(*RIGHT)
    made = joining.join(chart.png_of(half), chart.png_of(cut(*LEFT)))
    assert made.report["swapped"] and "came first" in made.report["message"]
    picture = np.array(Image.open(io.BytesIO(made.png)))
    assert np.array_equal(picture[:700, :380], WHOLE[:, :380])


def test_a_butt_joint_needs_ties():
    left, right = cut(0, 0, 450, 700), cut(450, 0, 900, 700)
    with pytest.raises(SheetError, match="as ties") as refused:
        join(scan(left), scan(right))
    assert refused.value.code == "no-overlap"
    # Points at the cut itself: just beyond the first half's edge in its own terms.
    ties = [[[449, 80], [-0.4, 80]], [[449, 600], [-0.4, 600]]]
    made = join(scan(left), scan(right), ties=ties)
    assert made.found == "ties" and made.residual_px is None and made.overlap[0] <= 2
    assert np.array_equal(made.pixels[:700, :449], left[:, :449])
    assert np.abs(made.pixels[:600, 470:880].astype(int) - WHOLE[:600, 471:881]).mean() < 12


def test_ties_that_are_off_by_a_few_px_are_put_right_by_the_print():
    half, true = turned(*RIGHT)
    points = np.array([[430.0, 90], [500, 610], [450, 330]])
    rough = at(true, points) + [[2.0, -1.5], [-1.8, 2.2], [1.0, 1.0]]
    made = join(scan(cut(*LEFT)), scan(half), ties=np.stack([points, rough], axis=1))
    assert made.found == "ink"
    assert np.hypot(*(at(made.plane, EVERYWHERE) - at(true, EVERYWHERE)).T).max() < 0.15


@pytest.mark.parametrize(
    ("ties", "words"),
    [
        ([[[1, 2], [3, 4]]], "One tie"),
        ([[[430, 90], [430, 90]], [[431, 92], [431, 92]]], "too close"),
        ([[[430, 90], [430, 90]], [[5000, 92], [31, 92]]], "Tie 2 lies off the first scan"),
        ([[[430, 90], [40, 100]], [[500, 610], [110, 620]], [[450, 330], [450, 600]]], "contradicts"),
        ([[1, 2]], "pair of points"),
    ],
)
def test_ties_that_fix_nothing_are_refused(ties, words):
    with pytest.raises(SheetError, match=words) as refused:
        join(scan(cut(*LEFT)), scan(turned(*RIGHT)[0]), ties=ties)
    assert refused.value.code == "ties"


def test_similarity_is_exact_on_exact_points():
    here = np.array([[0.0, 0], [100, 20], [40, 300]])
    plane = np.array([[0.9, -0.3, 12], [0.3, 0.9, -7], [0, 0, 1]])
    assert np.allclose(similarity(here, at(plane, here)), plane)


def test_colour_joins_grey_and_the_file_says_what_it_is_made_of(tmp_path):
    half, _ = turned(*RIGHT)
    colour = np.repeat(half[..., None], 3, axis=2)
    colour[5:40, 200:300] = [180, 40, 40]
    (tmp_path / "a.png").write_bytes(chart.png_of(cut(*LEFT)))
    (tmp_path / "b.png").write_bytes(chart.png_of(colour))
    arguments = ["join", str(tmp_path / "a.png"), str(tmp_path / "b.png"), "--out", str(tmp_path / "ab.png")]
    done = CliRunner().invoke(main, [*arguments, "--json"])
    assert done.exit_code == 0, done.output
    told = json.loads(done.output)
    picture = Image.open(tmp_path / "ab.png")
    assert picture.mode == "RGB" and picture.text["Joined from"] == f"{told['first_sha256']} {told['second_sha256']}"
    first = (tmp_path / "ab.png").read_bytes()
    assert CliRunner().invoke(main, arguments).exit_code == 0 and (tmp_path / "ab.png").read_bytes() == first
    for bad, code, words in (
        ([*arguments[:3], "--out", str(tmp_path / "a.png")], 1, "one of the halves"),
        ([*arguments[:3], "--out", str(tmp_path / "x.jpg")], 1, "must end in .png"),
        ([*arguments, "--tie", "1,2,3"], 2, "not x1,y1:x2,y2"),
        (["join", str(tmp_path / "none.png"), *arguments[2:]], 1, "none.png cannot be read"),
    ):
        done = CliRunner().invoke(main, bad)
        assert done.exit_code == code and words in done.output
