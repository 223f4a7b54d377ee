"""A drawn grid as the sheet layer hands it over: ink of bent lines and rough guides to them."""

from types import SimpleNamespace

import numpy as np

BOTTOM, LEFT = [(0.0, 0.0), (0.5, 0.0), (1.0, 0.0)], [(0.0, 0.0), (0.0, 0.4), (0.0, 1.0)]


class Guide:
    """A printed line's track, good to a pixel."""

    width_px, weight = 2.1, 0.8

    def __init__(self, points):
        self._points = points

    def points(self):
        return self._points


def paper(at, bend):
    x, y = at[..., 0], at[..., 1]
    return np.stack([x + bend * np.sin(y / 260.0), y + bend * np.cos(x / 300.0) * 0.8], -1)


def draw(ink, at, spread=0.9, level=200):
    """A line through points [n, 2], dense along it, drawn with a Gaussian profile."""
    upright = abs(at[-1, 0] - at[0, 0]) < abs(at[-1, 1] - at[0, 1])
    across, along = (0, 1) if upright else (1, 0)
    order = np.argsort(at[:, along])
    for whole in range(int(np.ceil(at[:, along].min())), int(at[:, along].max()) + 1):
        middle = np.interp(whole, at[order, along], at[order, across])
        near = np.arange(int(middle) - 4, int(middle) + 6)
        value = level * np.exp(-0.5 * ((near - middle) / spread) ** 2)
        place = (whole, near) if upright else (near, whole)
        ink[place] = np.maximum(ink[place], value)


def sheet(c, bend=0.0, lines=6, shape=(1300, 1200), rng=None, u_shares=None, v_shares=None):
    """Ink and lines of a grid at panel shares k / (lines - 1), or at the shares given."""
    rng = rng or np.random.default_rng(0)
    ink, guides = np.zeros(shape, np.float32), []
    t = np.linspace(0, 1, 3000)
    even = np.linspace(0, 1, lines)
    for shares, upright in ((even if u_shares is None else u_shares, True), (even if v_shares is None else v_shares, False)):
        for share in shares:
            at = paper(c.pixel(np.full_like(t, share), t) if upright else c.pixel(t, np.full_like(t, share)), bend)
            draw(ink, at)
            guides.append(Guide(at[:: len(t) // 60] + rng.uniform(-0.7, 0.7)))
    return SimpleNamespace(ink=np.clip(ink, 0, 255).astype(np.uint8), lines=tuple(guides))


def panel(c, rng, bend=0.0, bottom=BOTTOM, left=LEFT, grid="auto", id="main"):
    axes = {"q": c.axis("flow", "m3/h", bottom, 0, 100), "h": c.axis("head", "m", left, 0, 50)}
    for axis in axes.values():
        for mark in axis["marks"]:
            mark["at"] = list(paper(np.array(mark["at"]), bend) + rng.uniform(-1.5, 1.5, 2))
    return {"id": id, "axes": axes, "grid": grid}
