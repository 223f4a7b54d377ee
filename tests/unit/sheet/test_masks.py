"""Masks painted over a sheet: what they cover, what they leave, and what is refused."""

import chart
import numpy as np
import pytest

from curvebank import sheet
from curvebank.errors import SheetError

BRUSH = {"brush": [[200.0, 300.0], [260.0, 300.0]], "width_px": 20.0}
OUTLINE = {"outline": [[400, 400], [450, 400], [450, 480], [400, 480]]}


@pytest.fixture(scope="module")
def prepared():
    return sheet.prepare(sheet.load(chart.png()))


def test_no_masks_is_the_same_sheet(prepared):
    assert sheet.mask(prepared, []) is prepared
    assert "masked" not in prepared.arrays()


def test_a_brush_covers_a_stroke_with_round_ends_and_nothing_else(prepared):
    covered = sheet.mask(prepared, [BRUSH])
    y, x = np.mgrid[0 : chart.HEIGHT, 0 : chart.WIDTH]
    away = np.hypot(x - np.clip(x, 200, 260), y - 300)
    assert covered.masked[away < 9].all() and not covered.masked[away > 11.5].any()
    for name in ("ink", "clean", "printed"):
        before, after = getattr(prepared, name), getattr(covered, name)
        assert not after[covered.masked].any()
        assert np.array_equal(before[~covered.masked], after[~covered.masked])
        assert not after.flags.writeable
    assert prepared.masked is None and prepared.ink[290:310, 195:265].any()


def test_an_outline_one_point_and_a_second_mask_add_up(prepared):
    both = sheet.mask(sheet.mask(prepared, [OUTLINE]), [{"brush": [[600, 200]], "width_px": 11}])
    assert both.masked[440, 425] and both.masked[200, 604] and not both.masked[200, 607] and not both.masked[440, 453]


def test_points_under_a_mask(prepared):
    covered = sheet.mask(prepared, [OUTLINE])
    assert sheet.under_mask(covered, [[425.4, 440.2], [500, 440], [-50, 3], [5000, 5000]]).tolist() == [True, False, False, False]
    assert not sheet.under_mask(prepared, [[425, 440]]).any()


def test_a_stroke_may_run_over_the_edge_but_not_lie_elsewhere(prepared):
    edge = sheet.mask(prepared, [{"brush": [[-10, 5], [40, 5]], "width_px": 8}])
    assert edge.masked[5, 0] and edge.masked.sum() < 500
    with pytest.raises(SheetError, match=r"Point 2 of mask 2 \(5000, 10\) is off the page of 900 x 700") as refused:
        sheet.mask(prepared, [BRUSH, {"outline": [[5, 5], [5000, 10], [5, 30]]}])
    assert refused.value.path == "$.sheet.masks[1].outline[1]" and refused.value.code == "mask"


def test_masked_sheets_go_through_arrays(prepared, tmp_path):
    covered = sheet.mask(prepared, [BRUSH])
    again = sheet.Prepared.from_arrays(covered.arrays())
    assert np.array_equal(again.masked, covered.masked)
    for name, array in prepared.arrays().items():
        np.save(tmp_path / f"{name}.npy", array)
    mapped = sheet.Prepared.from_arrays({p.stem: np.load(p, mmap_mode="r") for p in tmp_path.glob("*.npy")})
    from_map = sheet.mask(mapped, [BRUSH])
    assert isinstance(from_map.ink, np.memmap) and from_map.ink.mode == "c"
    assert np.array_equal(from_map.ink, covered.ink) and np.array_equal(from_map.clean, covered.clean)
    assert np.array_equal(np.load(tmp_path / "ink.npy"), prepared.ink)
