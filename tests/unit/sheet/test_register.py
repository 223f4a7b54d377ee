"""Two scans of one paper, made from one drawn chart by known maps: what the registration says must be those maps."""

import chart
import cv2
import numpy as np
import pytest

from curvebank import sheet
from curvebank.errors import SheetError
from curvebank.sheet import register

INSIDE = np.stack(np.meshgrid(np.linspace(90, 810, 25), np.linspace(70, 620, 20)), axis=-1).reshape(-1, 2)


PAGE = chart.labelled()


def scan(pixels):
    return sheet.load(chart.png_of(pixels))


def by_plane(plane, size, page=PAGE, blur=0.0):
    page = cv2.GaussianBlur(page, (0, 0), blur) if blur else page
    return cv2.warpPerspective(page, plane, size, flags=cv2.INTER_CUBIC, borderValue=244)


def at(plane, points):
    q = np.c_[points, np.ones(len(points))] @ np.asarray(plane).T
    return q[:, :2] / q[:, 2:]


def turned(degrees, scale, width, height):
    """A turn about the page's middle to the middle of a page of another size."""
    m = np.eye(3)
    m[:2] = cv2.getRotationMatrix2D((449.5, 349.5), degrees, scale)
    m[:2, 2] += [width / 2 - 450, height / 2 - 350]
    return m


KEYSTONE = cv2.getPerspectiveTransform(
    np.float32([[0, 0], [900, 0], [900, 700], [0, 700]]), np.float32([[60, 30], [985, 5], [950, 770], [10, 720]])
)
PLANES = {
    "another resolution": (turned(0.8, 1.7, 1560, 1220), (1560, 1220), 0.0, None),
    "half the resolution": (turned(-1.1, 0.6, 560, 440), (560, 440), 0.7, None),
    "a quarter turn": (turned(90, 1.0, 700, 900), (700, 900), 0.0, None),
    "upside down, other margins": (turned(180.4, 1.0, 1100, 800), (1100, 800), 0.0, None),
    "a phone": (KEYSTONE, (1000, 800), 0.8, None),
    "black and white": (turned(0.5, 1.3, 1200, 920), (1200, 920), 0.0, "bit"),
    "a negative": (turned(0.5, 1.0, 900, 700), (900, 700), 0.0, "negative"),
    "noise and shade": (turned(-0.7, 1.0, 900, 700), (900, 700), 0.5, "shade"),
}


def worsened(pixels, how):
    if how == "bit":
        return np.where(pixels < 150, 0, 255).astype(np.uint8)
    if how == "negative":
        return 255 - pixels
    if how == "shade":
        noise = np.random.default_rng(5).normal(0, 12, pixels.shape)
        return np.clip(pixels * np.linspace(0.7, 1.0, pixels.shape[1]) + noise, 0, 255).astype(np.uint8)
    return pixels


@pytest.mark.parametrize("name", PLANES)
def test_a_plane_is_found_to_a_tenth_of_a_pixel(name):
    plane, size, blur, how = PLANES[name]
    found = register.match(scan(PAGE), scan(worsened(by_plane(plane, size, blur=blur), how)))
    miss = np.hypot(*(found(INSIDE) - at(plane, INSIDE)).T)
    assert np.sqrt(np.mean(miss**2)) < 0.1 and miss.max() < 0.3
    assert found.coverage > 0.8 and found.residual_px < 0.35 and found.sigma_px < 0.1
    assert found.scale == pytest.approx(np.sqrt(abs(np.linalg.det(plane[:2, :2]))), rel=0.1)
    assert found.local_scale(INSIDE) == pytest.approx(np.full(len(INSIDE), found.scale), rel=0.25)


def test_paper_that_lay_differently_is_followed():
    """A bend of 6 px, known exactly: each place of the new scan says where on the old one it looks."""
    y, x = np.mgrid[0:700, 0:900].astype(np.float64)

    def old_of(x, y):
        return x + 6 * np.sin(2.6 * x / 900 + 1.1 * y / 700), y + 5 * np.sin(3.1 * (x / 900) ** 2 + 0.7 * y / 700)

    u, v = old_of(x, y)
    bent = cv2.remap(PAGE, u.astype(np.float32), v.astype(np.float32), cv2.INTER_CUBIC, borderValue=244)
    found = register.match(scan(PAGE), scan(bent))
    back = np.stack(old_of(*found(INSIDE).T), axis=1)
    miss = np.hypot(*(back - INSIDE).T)
    assert np.sqrt(np.mean(miss**2)) < 0.1 and miss.max() < 0.4
    flat = register.match(scan(PAGE), scan(bent), bend=False)
    assert np.sqrt(np.mean(np.hypot(*(np.stack(old_of(*flat(INSIDE).T), axis=1) - INSIDE).T) ** 2)) > 0.3


def test_it_repeats_itself_to_the_bit():
    plane, size, blur, _ = PLANES["a phone"]
    new = scan(by_plane(plane, size, blur=blur))
    one, two = (register.match(scan(PAGE), new)(INSIDE) for _ in range(2))
    assert np.array_equal(one, two)


def test_prepared_sheets_do_as_well():
    plane, size, blur, _ = PLANES["another resolution"]
    old, new = scan(PAGE), scan(by_plane(plane, size, blur=blur))
    found = register.match(sheet.prepare(old), sheet.prepare(new))
    assert np.hypot(*(found(INSIDE) - at(plane, INSIDE)).T).max() < 0.15


def grid_alone(width, height):
    page = np.full((height, width), 245, np.uint8)
    for i in range(0, width, 40):
        cv2.line(page, (i + 20, 0), (i + 20, height), 110, 2)
    for i in range(0, height, 40):
        cv2.line(page, (0, i + 20), (width, i + 20), 110, 2)
    return page


def test_a_bare_grid_is_refused_as_it_fits_everywhere():
    with pytest.raises(SheetError) as refused:
        register.match(scan(grid_alone(900, 700)), scan(np.ascontiguousarray(grid_alone(900, 700)[10:660, 13:860])))
    assert refused.value.code in ("ambiguous-paper", "not-the-same-paper")
    assert refused.value.message[0].isupper() and refused.value.message.endswith(".")


@pytest.mark.parametrize("other", ["noise", "blank", "another sheet"])
def test_another_paper_is_refused(other):
    if other == "noise":
        page = np.random.default_rng(2).integers(0, 255, (700, 900)).astype(np.uint8)
    elif other == "blank":
        page = np.full((700, 900), 240, np.uint8)
    else:
        page = np.full((700, 900), 240, np.uint8)
        for i, line in enumerate(
            ["Minutes of the works meeting", "Present: all", "1. Spare bearings", "2. Paint of the hall", "3. Any other"]
        ):
            cv2.putText(page, line, (80, 120 + 90 * i), cv2.FONT_HERSHEY_COMPLEX, 1.1, 20, 2, cv2.LINE_AA)
    with pytest.raises(SheetError) as refused:
        register.match(scan(PAGE), scan(page))
    assert refused.value.code == "not-the-same-paper"
