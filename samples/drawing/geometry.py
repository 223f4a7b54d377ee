"""Where a point of the ideal drawing lands on the scan: one exact map for the ink and for the record of truth."""

from dataclasses import dataclass, field

import numpy as np


@dataclass(frozen=True, kw_only=True)
class PageMap:
    """Paper (mm from the top-left corner, y down) to pixels (centre of the top-left pixel is (0, 0)).

    ``turn_deg`` is clockwise about the middle of the page. ``waves`` are (amplitude mm, wavelength mm, phase rad,
    direction deg, push deg): damp paper and an uneven feed. ``curl`` is (edge mm, depth mm, decay mm): the page bends
    away from the glass towards its left edge, which shortens it there. ``tilt`` (1/mm, 1/mm) and ``barrel`` (1/mm^2) are
    those of a hand-held camera: farther parts shrink, and straight lines bow outwards.
    """

    width_mm: float = 210.0
    height_mm: float = 297.0
    dpi_x: float = 200.0
    dpi_y: float = 200.0
    turn_deg: float = 0.0
    stretch: tuple = (1.0, 1.0)
    shift_mm: tuple = (0.0, 0.0)
    shear: float = 0.0
    waves: tuple = field(default=())
    curl: tuple | None = None
    tilt: tuple = (0.0, 0.0)
    barrel: float = 0.0

    @property
    def size(self):
        """Width and height of the scan in pixels."""
        return round(self.width_mm * self.dpi_x / 25.4), round(self.height_mm * self.dpi_y / 25.4)

    def px(self, mm):
        """Pixels [n, 2] of points [n, 2] on the paper in mm."""
        p = np.array(mm, float).reshape(-1, 2)
        moved = p.copy()
        for amplitude, wavelength, phase, direction, push in self.waves:
            d, s = np.radians(direction), np.radians(push)
            w = amplitude * np.sin(2 * np.pi * (p[:, 0] * np.cos(d) + p[:, 1] * np.sin(d)) / wavelength + phase)
            moved += np.stack([w * np.cos(s), w * np.sin(s)], -1)
        if self.curl:
            edge, depth, decay = self.curl
            moved[:, 0] += depth * np.exp(-(p[:, 0] - edge) / decay)
        middle = np.array([self.width_mm / 2, self.height_mm / 2])
        q = (moved - middle) * self.stretch
        q[:, 0] += self.shear * q[:, 1]
        q = q / (1 + q @ np.asarray(self.tilt))[:, None]
        q = q * (1 - self.barrel * (q**2).sum(1))[:, None]
        a = np.radians(self.turn_deg)
        q = q @ np.array([[np.cos(a), np.sin(a)], [-np.sin(a), np.cos(a)]]) + middle + self.shift_mm
        return q * [self.dpi_x / 25.4, self.dpi_y / 25.4] - 0.5

    def affine(self, at_mm):
        """Linear part [2, 2] and pixel of the map at one point: small things such as letters are set with it."""
        at = np.asarray(at_mm, float)
        p = self.px(np.array([at, at + [0.5, 0], at + [0, 0.5]]))
        return np.stack([(p[1] - p[0]) / 0.5, (p[2] - p[0]) / 0.5], -1), p[0]


def arc_mm(line):
    """Running length along a polyline [n, 2]."""
    return np.r_[0, np.cumsum(np.hypot(*np.diff(line, axis=0).T))]


def resample(line, step):
    """The polyline at an even step, ends kept."""
    s = arc_mm(line)
    keep = np.r_[True, np.diff(s) > 0]
    s, line = s[keep], line[keep]
    t = np.linspace(0, s[-1], max(2, int(np.ceil(s[-1] / step)) + 1))
    return np.stack([np.interp(t, s, line[:, k]) for k in (0, 1)], -1)


def cut(line, pieces):
    """The parts of a polyline between (from, to) arc lengths."""
    s = arc_mm(line)
    out = []
    for a, b in pieces:
        a, b = max(a, 0.0), min(b, s[-1])
        if b <= a:
            continue
        inside = (s > a) & (s < b)
        ends = np.array([[np.interp(t, s, line[:, k]) for k in (0, 1)] for t in (a, b)])
        out.append(np.vstack([ends[:1], line[inside], ends[1:]]))
    return out


def dash(length, pattern, gaps=()):
    """Arc-length pieces of a dashed line, with gaps for labels taken out. An empty pattern is a solid line."""
    if pattern:
        pieces, at, k = [], 0.0, 0
        while at < length:
            if k % 2 == 0:
                pieces.append((at, min(at + pattern[k % len(pattern)], length)))
            at += pattern[k % len(pattern)]
            k += 1
    else:
        pieces = [(0.0, length)]
    for lo, hi in gaps:
        pieces = [q for a, b in pieces for q in ((a, min(b, lo)), (max(a, hi), b)) if q[1] - q[0] > 1e-9]
    return pieces
