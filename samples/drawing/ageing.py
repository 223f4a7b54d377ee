"""What forty years in a drawing store do to paper: texture, stains, folds, holes, stamps, and the copier's own marks.

All of it changes brightness only. Where ink lies is decided before, by the page map.
"""

import cv2
import numpy as np

cv2.setNumThreads(1)


def smooth_noise(rng, shape, cell_px):
    """Gaussian noise of unit variance that varies over about ``cell_px`` pixels."""
    h, w = (max(4, int(np.ceil(n / cell_px)) + 3) for n in shape)
    field = cv2.resize(rng.standard_normal((h, w)).astype(np.float32), (shape[1], shape[0]), interpolation=cv2.INTER_CUBIC)
    return field / max(float(field.std()), 1e-6)


def paper(rng, shape, colour=(240, 238, 232), *, grain=1.6, fibre=1.2, blotch=2.0, edge=5.0):
    """A sheet of paper [h, w, 3] float32, 0..255."""
    tone = grain * rng.standard_normal(shape, dtype=np.float32)
    fibres = cv2.GaussianBlur(rng.standard_normal(shape, dtype=np.float32), (0, 0), sigmaX=4.0, sigmaY=0.8)
    tone = cv2.GaussianBlur(tone, (0, 0), 0.7) * 1.6 + fibre * fibres / max(float(fibres.std()), 1e-6)
    tone += blotch * (0.6 * smooth_noise(rng, shape, 220) + 0.4 * smooth_noise(rng, shape, 60))
    y, x = np.ogrid[: shape[0], : shape[1]]
    near = np.minimum(np.minimum(x, shape[1] - 1 - x), np.minimum(y, shape[0] - 1 - y)).astype(np.float32)
    tone -= edge * np.exp(-near / (0.02 * shape[1] + 1)) * (1 + 0.35 * smooth_noise(rng, shape, 90))
    return np.asarray(colour, np.float32) + tone[..., None] * np.array([1.0, 1.02, 1.12], np.float32)


def lay(base, ink, rng, *, bleed=0.45, strength=0.95, patchy=0.08, loss=None):
    """Lay one ink on the paper: the ink spreads a little and lies unevenly. ``loss`` [h, w] 0..1 takes ink away."""
    cover = ink.coverage()
    if bleed:
        cover = cv2.GaussianBlur(cover, (0, 0), bleed)
    density = strength * (1 - patchy * np.clip(np.abs(smooth_noise(rng, cover.shape, 26)) + 0.3 * smooth_noise(rng, cover.shape, 3), 0, 3))
    if loss is not None:
        density = density * (1 - loss)
    a = np.clip(cover * density, 0, 1)[..., None]
    return base * (1 - a) + ink.colour.astype(np.float32) * a


def _distance(page, line_mm, shape):
    """Signed distance [h, w] in px to the straight line through two paper points, and the running share along it."""
    a, b = page.px(line_mm)
    e = (b - a) / np.hypot(*(b - a))
    y, x = np.ogrid[: shape[0], : shape[1]]
    across = ((x - a[0]) * e[1] - (y - a[1]) * e[0]).astype(np.float32)
    along = ((x - a[0]) * e[0] + (y - a[1]) * e[1]).astype(np.float32)
    return across, along / np.hypot(*(b - a))


def fold(base, page, line_mm, rng, *, depth=16.0, loss=0.5):
    """A fold across the sheet: one side catches light, the crease is scuffed. Returns the paper and the ink loss."""
    across, _ = _distance(page, line_mm, base.shape[:2])
    wobble = 0.6 * smooth_noise(rng, base.shape[:2], 40)
    d = across + wobble
    px = page.dpi_x / 200
    shade = -depth * np.exp(-((d / (1.3 * px)) ** 2)) - 0.35 * depth * np.exp(-np.abs(d) / (14 * px)) * (d > 0)
    shade += 0.3 * depth * np.exp(-np.abs(d) / (9 * px)) * (d < 0)
    scuff = np.clip(smooth_noise(rng, base.shape[:2], 7) * 0.6 + 0.25, 0, 1)
    return base + shade[..., None], loss * np.exp(-((d / (1.6 * px)) ** 2)) * scuff


def punch(base, page, at_mm, rng, *, radius_mm=2.9, lid=(58, 57, 55)):
    """A filing hole: the lid of the scanner shows through, with a torn light rim and a thin shadow."""
    c = page.px(at_mm)[0]
    y, x = np.ogrid[: base.shape[0], : base.shape[1]]
    turn = np.arctan2(y - c[1], x - c[0])
    r = radius_mm * page.dpi_x / 25.4 * (1 + 0.012 * np.sin(3 * turn + rng.uniform(0, 6)))
    d = np.hypot(x - c[0], (y - c[1]) * page.dpi_x / page.dpi_y) - r
    hole = np.clip(0.5 - d / 1.4, 0, 1)[..., None].astype(np.float32)
    shadow = (-20 * np.exp(-np.abs(d - 1.5) / 2.2) * (0.6 + 0.4 * np.sin(turn - 2.2)))[..., None].astype(np.float32)
    depth = (18 * np.exp(-np.abs(d) / 6.0) * (0.5 + 0.5 * np.sin(turn - 0.8)))[..., None].astype(np.float32)
    return (base + shadow) * (1 - hole) + (np.asarray(lid, np.float32) - depth) * hole


def staple(base, page, at_mm, turn_deg, rng, *, length_mm=11.0):
    """Marks of a staple: two holes, a rust line between them and the soft shadow of the turned corner."""
    a = np.radians(turn_deg)
    half = length_mm / 2 * np.array([np.cos(a), np.sin(a)])
    ends = np.array([np.asarray(at_mm) - half, np.asarray(at_mm) + half])
    across, along = _distance(page, ends, base.shape[:2])
    inside = (np.clip(along * 40 + 0.5, 0, 1) * np.clip((1 - along) * 40 + 0.5, 0, 1)).astype(np.float32)
    k = page.dpi_x / 200
    wire = inside * np.clip(1.6 * k - np.abs(across) + 0.5, 0, 1)
    light = inside * np.exp(-(((across + 1.1 * k) / (1.0 * k)) ** 2))
    shade = inside * np.exp(-np.abs(across - 3 * k) / (3.2 * k)) * (across > 0)
    base = base - 46 * shade[..., None]
    base = base * (1 - 0.72 * wire[..., None]) + 0.72 * wire[..., None] * np.array([82, 80, 79], np.float32)
    return base + 70 * light[..., None] * wire[..., None]


def ring(base, page, at_mm, rng, *, radius_mm=37.0, colour=(150, 108, 62), strength=0.2):
    """The ring of a mug that stood on the sheet."""
    c = page.px(at_mm)[0]
    y, x = np.ogrid[: base.shape[0], : base.shape[1]]
    turn = np.arctan2(y - c[1], x - c[0])
    k = page.dpi_x / 25.4
    r = radius_mm * k * (1 + 0.006 * np.sin(2 * turn + 1) + 0.004 * np.sin(5 * turn))
    d = (np.hypot(x - c[0], y - c[1]) - r) / k
    rim = np.exp(-((d / 0.55) ** 2)) + 0.45 * np.exp(-(((d + 1.6) / 1.5) ** 2)) * (d < 0.3)
    open_part = np.clip(0.62 + 0.5 * np.sin(turn + rng.uniform(0, 6)) + 0.3 * smooth_noise(rng, base.shape[:2], 50), 0, 1)
    a = (strength * rim * open_part)[..., None].astype(np.float32)
    return base * (1 - a) + a * np.asarray(colour, np.float32)


def foxing(base, rng, *, spots=60, strength=0.16, colour=(168, 120, 70)):
    """Brown age spots."""
    h, w = base.shape[:2]
    field = np.zeros((h, w), np.float32)
    for _ in range(spots):
        cx, cy = rng.uniform(0, w), rng.uniform(0, h)
        r = rng.gamma(2.0, 2.2) * w / 1650 + 1.2
        x0, x1, y0, y1 = int(max(cx - 5 * r, 0)), int(min(cx + 5 * r + 1, w)), int(max(cy - 5 * r, 0)), int(min(cy + 5 * r + 1, h))
        y, x = np.ogrid[y0:y1, x0:x1]
        field[y0:y1, x0:x1] += rng.uniform(0.3, 1) * np.exp(-(((x - cx) ** 2 + (y - cy) ** 2) / (2 * r * r)))
    a = (strength * np.clip(field, 0, 1.4))[..., None]
    return base * (1 - a) + a * np.asarray(colour, np.float32)


def stain(base, rng, at_px, radius_px, *, colour=(176, 140, 92), strength=0.22):
    """A dried water mark with its darker shore."""
    y, x = np.ogrid[: base.shape[0], : base.shape[1]]
    d = np.hypot(x - at_px[0], (y - at_px[1]) * 1.15) / radius_px + 0.16 * smooth_noise(rng, base.shape[:2], radius_px / 2.2)
    d += 0.03 * smooth_noise(rng, base.shape[:2], radius_px / 9)
    a = strength * (0.4 * (1 / (1 + np.exp((d - 1) * 40))) + 0.8 * np.exp(-(((d - 0.985) / 0.022) ** 2)))
    return base * (1 - a[..., None]) + a[..., None].astype(np.float32) * np.asarray(colour, np.float32)


def specks(shape, rng, *, count=500, largest_px=3.2):
    """Dust and toner specks as coverage [h, w]; few are large."""
    out = np.zeros(shape, np.float32)
    for _ in range(count):
        r = 0.45 + (largest_px - 0.45) * rng.beta(0.7, 7)
        cx, cy = rng.uniform(0, shape[1]), rng.uniform(0, shape[0])
        k = int(np.ceil(r * 2 + 2))
        x0, x1, y0, y1 = max(int(cx) - k, 0), min(int(cx) + k + 1, shape[1]), max(int(cy) - k, 0), min(int(cy) + k + 1, shape[0])
        y, x = np.ogrid[y0:y1, x0:x1]
        a = rng.uniform(0, np.pi)
        u, v = (x - cx) * np.cos(a) + (y - cy) * np.sin(a), (y - cy) * np.cos(a) - (x - cx) * np.sin(a)
        d = np.hypot(u, v * rng.uniform(1, 2.2)) - r
        out[y0:y1, x0:x1] = np.maximum(out[y0:y1, x0:x1], np.clip(0.5 - d, 0, 1) * rng.uniform(0.5, 1))
    return out


def toner(shape, rng, *, banding=0.1, cloud=0.12, streaks=3):
    """How densely a worn copier lays toner [h, w], about 1: drum banding, clouds, dry streaks along the feed."""
    y = np.arange(shape[0], dtype=np.float32)
    period = shape[0] / 6.3
    out = 1 + banding * np.sin(2 * np.pi * y / period + rng.uniform(0, 6))[:, None] * np.ones((1, shape[1]), np.float32)
    out += cloud * smooth_noise(rng, shape, 180) + 0.5 * cloud * smooth_noise(rng, shape, 24)
    x = np.arange(shape[1], dtype=np.float32)
    for _ in range(streaks):
        at, wide = rng.uniform(0.1, 0.9) * shape[1], rng.uniform(3, 14)
        lane = np.exp(-(((x - at) / wide) ** 2))[None, :] * np.clip(0.5 + 0.5 * smooth_noise(rng, (shape[0], 8), 160)[:, :1], 0, 1)
        out -= rng.uniform(0.1, 0.3) * lane
    return out.astype(np.float32)


def copy_curve(gray, rng, *, blur=0.8, dark=96.0, light=176.0, floor=22.0, roof=247.0, grain=9.0):
    """A copier's hard tone curve on a gray page 0..255: nearly black and white with a short ramp between."""
    soft = (
        cv2.GaussianBlur(gray, (0, 0), blur)
        + grain * cv2.GaussianBlur(rng.standard_normal(gray.shape, dtype=np.float32), (0, 0), 0.8) * 1.5
    )
    t = np.clip((soft - dark) / (light - dark), 0, 1)
    return floor + (roof - floor) * (t * t * (3 - 2 * t))


def outside(page, shape, inset_mm):
    """How far [px] each pixel lies beyond the paper's own edges (negative on the paper)."""
    left, top, right, bottom = inset_mm
    x0, y0, x1, y1 = left, top, page.width_mm - right, page.height_mm - bottom
    t = np.linspace(0, 1, 12)[:, None]
    corners = np.array([[x0, y0], [x1, y0], [x1, y1], [x0, y1], [x0, y0]], float)
    rim = np.vstack([a + t * (b - a) for a, b in zip(corners[:-1], corners[1:], strict=True)])
    mask = np.zeros(shape, np.uint8)
    cv2.fillPoly(mask, [np.rint(page.px(rim)).astype(np.int32)], 255)
    return cv2.distanceTransform(255 - mask, cv2.DIST_L2, 3) - cv2.distanceTransform(mask, cv2.DIST_L2, 3)


def to_bytes(image):
    """Rounded and clipped uint8."""
    return np.clip(np.rint(image), 0, 255).astype(np.uint8)
