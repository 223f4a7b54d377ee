"""Ink on a page: strokes rasterised by their exact distance field, set type, and the colours they leave."""

import cv2
import numpy as np
from PIL import Image, ImageDraw, ImageFont

from .geometry import arc_mm, cut, dash, resample

FAR = 9.0


class Ink:
    """One colour of ink on one page. ``field`` holds distance to the nearest stroke's edge in px (negative inside)."""

    def __init__(self, page, colour=(20, 20, 22)):
        self.page = page
        self.colour = np.asarray(colour, float)
        width, height = page.size
        self.field = np.full((height, width), FAR, np.float32)
        self.type = np.zeros((height, width), np.float32)
        self.wiped = np.ones((height, width), np.float32)

    def stroke(self, line_mm, width_mm, *, pattern=(), gaps=()):
        """Draw a polyline given in mm; ``pattern`` dash and gap lengths in mm, ``gaps`` arc intervals left open."""
        line_mm = np.asarray(line_mm, float)
        fine = resample(line_mm, 0.4)
        for piece in cut(fine, dash(arc_mm(fine)[-1], pattern, gaps)):
            self._rasterise(resample(self.page.px(piece), 1.2), width_mm / 2 * self._scale())

    def strokes(self, lines_mm, width_mm):
        """Draw several polylines, as lettering is."""
        for line in lines_mm:
            if len(line) > 1:
                self._rasterise(resample(self.page.px(line), 1.2), width_mm / 2 * self._scale())

    def _scale(self):
        return np.sqrt(self.page.dpi_x * self.page.dpi_y) / 25.4

    def _rasterise(self, p, half_px):
        """Lower the field near each segment of a pixel polyline whose points lie about a pixel apart."""
        height, width = self.field.shape
        reach = int(np.ceil(half_px + 1.7))
        dy, dx = np.mgrid[-reach : reach + 1, -reach : reach + 1].reshape(2, -1)
        for i in range(0, len(p) - 1, 20000):
            a, b = p[i : i + 20000][:-1] if len(p) - i > 20000 else p[i:-1], p[i + 1 : i + 20001]
            a = a[: len(b)]
            b = b[: len(a)]
            e = b - a
            mid = np.rint((a + b) / 2).astype(int)
            x, y = mid[:, :1] + dx, mid[:, 1:] + dy
            ux, uy = x - a[:, :1], y - a[:, 1:]
            t = np.clip((ux * e[:, :1] + uy * e[:, 1:]) / np.maximum((e**2).sum(1, keepdims=True), 1e-12), 0, 1)
            d = np.hypot(ux - t * e[:, :1], uy - t * e[:, 1:]) - half_px
            ok = (x >= 0) & (y >= 0) & (x < width) & (y < height)
            np.minimum.at(self.field.reshape(-1), (y * width + x)[ok], d[ok].astype(np.float32))

    def set_type(self, text, at_mm, height_mm, *, turn=0.0, align=0.0, bold=0.0):
        """Set printed sans type, ``at_mm`` on the baseline, capital height in mm, ``turn`` anticlockwise in degrees."""
        em = 96
        mask, cap, baseline = _type_mask(text, em, bold)
        linear, origin = self.page.affine(at_mm)
        a = np.radians(turn)
        k = height_mm / cap
        spin = np.array([[np.cos(a), np.sin(a)], [-np.sin(a), np.cos(a)]]) * k
        m = linear @ spin
        shrink = 1 / np.sqrt(abs(np.linalg.det(m)))
        mask = cv2.GaussianBlur(mask, (0, 0), max(0.3, 0.42 * shrink))
        move = origin - m @ [align * mask.shape[1], baseline]
        height, width = self.field.shape
        corners = np.array([[0, 0], [mask.shape[1], 0], [0, mask.shape[0]], list(mask.shape[::-1])]) @ m.T + move
        x0, y0 = np.maximum(np.floor(corners.min(0)).astype(int) - 2, 0)
        x1, y1 = np.minimum(np.ceil(corners.max(0)).astype(int) + 3, [width, height])
        if x1 <= x0 or y1 <= y0:
            return
        part = cv2.warpAffine(mask, np.c_[m, move - [x0, y0]], (int(x1 - x0), int(y1 - y0)), flags=cv2.INTER_LINEAR)
        self.type[y0:y1, x0:x1] = np.maximum(self.type[y0:y1, x0:x1], part)

    def fill(self, polygon_mm):
        """Fill a polygon: a printed band or a tint block."""
        p = np.rint(self.page.px(polygon_mm) * 16).astype(np.int32)
        mask = np.zeros(self.field.shape, np.uint8)
        cv2.fillPoly(mask, [p], 255, cv2.LINE_AA, 4)
        self.type = np.maximum(self.type, mask.astype(np.float32) / 255)

    def wipe(self, polygon_mm):
        """Clear everything of this ink inside a polygon: a label's white ground over the grid."""
        p = np.rint(self.page.px(polygon_mm)).astype(np.int32)
        cv2.fillPoly(self.wiped, [p], 0.0)

    def coverage(self):
        """Share of each pixel under ink, 0..1."""
        return np.maximum(np.clip(0.5 - self.field, 0, 1), self.type) * self.wiped


def _type_mask(text, em, bold):
    """Raster of a line of type, its capital height and baseline in raster px. Missing letters are composed."""
    font, small = ImageFont.load_default(size=em), ImageFont.load_default(size=round(em * 0.62))
    baseline, cap = round(em * 1.1), -font.getbbox("H", anchor="ls")[1]
    image = Image.new("L", (int(font.getlength("M") * (len(text) + 2)), round(em * 1.6)))
    draw = ImageDraw.Draw(image)
    pen = em * 0.1
    start = pen
    for ch in text:
        plain = {"Ø": "O", "η": "n", "³": "3", "²": "2", "–": "-", "×": "x"}.get(ch, ch)
        use = small if ch in "³²" else font
        rise = cap * 0.42 if ch in "³²" else 0
        draw.text((pen, baseline - rise), plain, font=use, fill=255, anchor="ls", stroke_width=bold)
        box = draw.textbbox((pen, baseline), plain, font=use, anchor="ls")
        if ch == "Ø":
            draw.line(
                [(box[0] + em * 0.02, baseline + em * 0.04), (box[2] - em * 0.02, baseline - cap - em * 0.04)],
                fill=255,
                width=round(em * 0.07),
            )
        if ch == "η":
            draw.rectangle([box[2] - round(em * 0.085), baseline - em * 0.1, box[2], baseline + em * 0.2], fill=255)
        pen += use.getlength(plain)
    mask = np.asarray(image, np.float32)[:, round(start) : int(np.ceil(pen))] / 255
    return mask, cap, baseline
