"""The second engine: matplotlib's Agg rasteriser, exact area coverage of stroked vector paths, over-blended; then averaged and blurred.

A display pixel i of Agg covers [i, i + 1) from the left or bottom edge, so page x lies at (x + 0.5) scale
and page y at (height - y - 0.5) scale.
"""

import cv2
import numpy as np
from matplotlib.backends.backend_agg import RendererAgg
from matplotlib.path import Path
from matplotlib.transforms import IdentityTransform

from . import letters
from .paint import blank
from .scene import Blank, Scene, Stroke, Words, arc, cut

LARGE_PX = 12_000_000


def render(scene: Scene) -> np.ndarray:
    """Transmission 0..1 as the exact engine gives it, from twice the resolution (large pages: once)."""
    scale = 1 if scene.width * scene.height > LARGE_PX else 2
    width, height = scene.width * scale, scene.height * scale
    layer: RendererAgg | None = None
    out = np.ones((scene.height, scene.width, 3) if scene.coloured else (scene.height, scene.width), np.float32)
    for item in scene.items:
        if isinstance(item, Stroke):
            if layer is None:
                layer = RendererAgg(width, height, 72.0)
                layer.clear()
                _paper(layer, width, height)
            _stroke(layer, item, scale, scene.height)
            continue
        if layer is not None:
            out = out * _picture(layer, scale, scene)
            layer = None
        _patch(out, item, scene.blur)
    if layer is not None:
        out = out * _picture(layer, scale, scene)
    return out


def _paper(layer: RendererAgg, width: int, height: int) -> None:
    gc = layer.new_gc()
    gc.set_antialiased(False)
    gc.set_linewidth(0.0)
    box = Path([(0, 0), (width, 0), (width, height), (0, height), (0, 0)], closed=True)
    layer.draw_path(gc, box, IdentityTransform(), (1.0, 1.0, 1.0, 1.0))
    gc.restore()


def _stroke(layer: RendererAgg, item: Stroke, scale: int, height: int) -> None:
    gc = layer.new_gc()
    gc.set_antialiased(True)
    gc.set_snap(False)
    gc.set_linewidth(item.width * scale)
    gc.set_foreground((*item.colour, item.level), isRGBA=True)
    gc.set_capstyle("butt")
    gc.set_joinstyle("round")
    total = arc(item.line)[-1]
    whole = item.intervals is None
    parts = [(0.0, total)] if item.intervals is None else item.intervals
    for low, high in parts:
        line = item.line if whole else cut(item.line, low, high)
        xy = np.stack([(line[:, 0] + 0.5) * scale, (height - line[:, 1] - 0.5) * scale], 1)
        path = Path(np.concatenate([xy[:-1], xy[:1]]) if item.closed and whole else xy, closed=item.closed and whole)
        path.should_simplify = False
        layer.draw_path(gc, path, IdentityTransform())
    gc.restore()


def _picture(layer: RendererAgg, scale: int, scene: Scene) -> np.ndarray:
    rgba = np.asarray(layer.buffer_rgba())
    picture = rgba[..., :3] if scene.coloured else rgba[..., 0]
    out = picture.astype(np.float32) / 255
    if scene.blur > 0.2:
        # Optics come before the sensor's pixels: blurred after averaging, a sharp edge would sit up to 0.07 px off.
        out = cv2.GaussianBlur(out, (0, 0), scene.blur * scale)
    return cv2.resize(out, (scene.width, scene.height), interpolation=cv2.INTER_AREA) if scale > 1 else out


def _patch(out: np.ndarray, item: Words | Blank, blur: float) -> None:
    if isinstance(item, Blank):
        found, colour = blank(item, blur, out.shape[:2]), (1.0, 1.0, 1.0)
    else:
        made = letters.patch(item, blur, out.shape[:2])
        if made is None:
            return
        found, colour = made, item.colour
    rows, cols, cover = found
    part = out[rows, cols]
    if out.ndim == 2:
        part += cover * (np.float32(np.mean(colour)) - part)
    else:
        part += cover[..., None] * (np.float32(colour) - part)
