"""Transmission 0..1 to the bytes of a scan: toner, copies, creases, light, halftone, thresholds, noise, compression."""

import cv2
import numpy as np

from .look import Damage


def field(rng: np.random.Generator, shape: tuple[int, int], cell: float, size: float) -> np.ndarray:
    """A smooth random field of standard deviation ``size`` whose patches are ``cell`` px wide."""
    h, w = shape
    coarse = rng.normal(0, size, (max(int(h / cell), 3), max(int(w / cell), 3))).astype(np.float32)
    return cv2.resize(coarse, (w, h), interpolation=cv2.INTER_CUBIC)


def spoil(light: np.ndarray, d: Damage, rng: np.random.Generator, unit: float) -> np.ndarray:
    """uint8 page, grey or RGB, or bool (True is paper) for one bit. ``unit`` is dpi / 300: patches keep their size on paper."""
    shape = light.shape[:2]
    ink = 1 - light
    if d.halftone:
        ink = _halftone(ink, rng, unit)
    if d.drop_out:
        gain = np.clip(
            1 + field(rng, shape, 12 * unit + 2, 0.8 * d.drop_out) + field(rng, shape, 4 * unit + 1, 0.5 * d.drop_out), 0.05, 1.3
        )
        ink = np.clip(ink * (gain[..., None] if ink.ndim == 3 else gain), 0, 1)
    for _ in range(d.copies):
        ink = _copied(ink, rng, unit)
    page = (d.paper + field(rng, shape, 150 * unit + 20, d.mottle)).astype(np.float32)
    if d.lighting:
        y, x = np.mgrid[0 : 1 : shape[0] * 1j, 0 : 1 : shape[1] * 1j].astype(np.float32)
        spot = rng.uniform(0.2, 0.8, 2)
        page *= 1 - d.lighting + d.lighting * np.exp(-2.0 * ((x - spot[0]) ** 2 + (y - spot[1]) ** 2))
    if d.spine_shade:
        x = np.linspace(0, 1, shape[1], dtype=np.float32)[None, :]
        page *= 1 - d.spine_shade * np.exp(-x / 0.09)
    if d.crease:
        page += _crease(rng, shape, unit)
    if d.speckle:
        _speckle(ink, rng, d.speckle)
    if d.blueprint:
        return _blueprint(ink, page, d, rng)
    if ink.ndim == 3:
        page = page[..., None]
    grey = page * (1 - d.ink_depth * ink)
    if d.negative:
        grey = 250 - grey
        _scratch(grey, rng, d.scratches)
    if d.post_blur:
        grey = cv2.GaussianBlur(grey, (0, 0), d.post_blur)
    if d.sharpen:
        grey += d.sharpen * (grey - cv2.GaussianBlur(grey, (0, 0), 1.5))
    grey += rng.normal(0, max(d.noise, 0.3), grey.shape).astype(np.float32)
    if d.one_bit:
        return grey >= rng.uniform(125, 170)
    out = np.clip(np.rint(grey), 0, 255).astype(np.uint8)
    return squeeze(out, d.jpeg)


def squeeze(out: np.ndarray, quality: int | None) -> np.ndarray:
    """Through JPEG and back (RGB or grey)."""
    if quality is None:
        return out
    sent = out[..., ::-1] if out.ndim == 3 else out
    back = cv2.imdecode(cv2.imencode(".jpg", sent, [cv2.IMWRITE_JPEG_QUALITY, quality])[1], cv2.IMREAD_UNCHANGED)
    return np.ascontiguousarray(back[..., ::-1]) if out.ndim == 3 else back


def _copied(ink: np.ndarray, rng: np.random.Generator, unit: float) -> np.ndarray:
    """One pass through a copier: optics, a steep curve with an uneven threshold, toner that does not fill."""
    soft = cv2.GaussianBlur(ink, (0, 0), rng.uniform(0.8, 1.3) * unit + 0.25)
    level = rng.uniform(0.33, 0.48) + field(rng, ink.shape[:2], 300 * unit + 20, 0.03) + field(rng, ink.shape[:2], 2.2 * unit + 1, 0.05)
    level = level[..., None] if ink.ndim == 3 else level
    return (1 / (1 + np.exp(-(soft - level) / rng.uniform(0.07, 0.11)))).astype(np.float32)


def _crease(rng: np.random.Generator, shape: tuple[int, int], unit: float) -> np.ndarray:
    """A dark and a bright side along a near-vertical and a near-horizontal fold."""
    h, w = shape
    y, x = np.mgrid[0:h, 0:w].astype(np.float32)
    out = np.zeros(shape, np.float32)
    for side, length in (
        (x - w * rng.uniform(0.4, 0.6) + rng.normal(0, 0.01) * y, w),
        (y - h * rng.uniform(0.4, 0.6) + rng.normal(0, 0.01) * x, h),
    ):
        t = side / (3.0 * unit + 1)
        out += -rng.uniform(35, 70) * np.exp(-0.5 * t**2) + rng.uniform(6, 14) * np.exp(-0.5 * ((t - 2.5) / 1.5) ** 2)
        out -= rng.uniform(3, 8) * np.exp(-np.abs(side) / (0.05 * length))
    return out


def _speckle(ink: np.ndarray, rng: np.random.Generator, per_megapixel: float) -> None:
    """Dots of toner and holes in it."""
    h, w = ink.shape[:2]
    for _ in range(int(per_megapixel * h * w / 1e6)):
        at = (int(rng.integers(w)), int(rng.integers(h)))
        tone = float(rng.uniform(0.35, 0.95) if rng.random() < 0.8 else 0.0)
        cv2.circle(ink, at, int(rng.choice([0, 0, 1, 1, 2])), (tone,) * 3 if ink.ndim == 3 else tone, -1)


def _halftone(ink: np.ndarray, rng: np.random.Generator, unit: float) -> np.ndarray:
    """Tones (ink that is not full) as dots of a screen at 45 degrees; full ink stays solid."""
    h, w = ink.shape[:2]
    pitch = rng.uniform(3.6, 5.2) * unit + 0.8
    a = np.radians(45 + rng.uniform(-3, 3))
    y, x = np.mgrid[0:h, 0:w].astype(np.float32)
    u, v = (x * np.cos(a) + y * np.sin(a)) / pitch, (-x * np.sin(a) + y * np.cos(a)) / pitch
    screen = 0.5 - 0.25 * (np.cos(2 * np.pi * u) + np.cos(2 * np.pi * v))
    dots = 1 / (1 + np.exp(-(cv2.GaussianBlur(ink, (0, 0), 0.3 * pitch) - screen) / 0.1))
    solid = np.clip((ink - 0.55) / 0.3, 0, 1)
    return (solid + (1 - solid) * dots * (ink > 0.03)).astype(np.float32)


def _scratch(grey: np.ndarray, rng: np.random.Generator, count: int) -> None:
    """Bright and dark hairs of a film."""
    h, w = grey.shape[:2]
    for _ in range(count):
        a = np.array([rng.uniform(0, w), rng.uniform(0, h)])
        turn = np.radians(rng.normal(90, 6))
        b = a + rng.uniform(0.05, 0.3) * h * np.array([np.cos(turn), np.sin(turn)])
        cv2.line(grey, tuple(a.astype(int).tolist()), tuple(b.astype(int).tolist()), float(rng.choice([25.0, 215.0])), 1, cv2.LINE_AA)


def _blueprint(ink: np.ndarray, page: np.ndarray, d: Damage, rng: np.random.Generator) -> np.ndarray:
    """White lines on uneven blue."""
    ink = ink.max(axis=2) if ink.ndim == 3 else ink
    blotch = field(rng, ink.shape, 60, 0.05) + (page / max(d.paper, 1) - 1) * 2
    ground = np.array([45.0, 75.0, 150.0]) * (1 + blotch[..., None])
    out = ground + (np.array([225.0, 230.0, 240.0]) - ground) * (d.ink_depth * ink)[..., None]
    out = cv2.GaussianBlur(out.astype(np.float32), (0, 0), max(d.post_blur, 0.3)) + rng.normal(0, d.noise, out.shape)
    return squeeze(np.clip(np.rint(out), 0, 255).astype(np.uint8), d.jpeg)
