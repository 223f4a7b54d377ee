"""How flat paper comes to lie on the page: smooth maps of points [n, 2] in px, composed. They act before painting, so truth stays exact."""

from collections.abc import Callable
from dataclasses import dataclass, field

import numpy as np

Map = Callable[[np.ndarray], np.ndarray]


@dataclass
class Placement:
    """Maps applied one after the other; ``words`` keeps what was done."""

    width: int
    height: int
    maps: list[Map] = field(default_factory=list)
    words: list[str] = field(default_factory=list)

    def __call__(self, xy: np.ndarray) -> np.ndarray:
        """Drawing px to page px."""
        out = np.asarray(xy, float)
        for m in self.maps:
            out = m(out)
        return out

    @property
    def middle(self) -> np.ndarray:
        return np.array([self.width / 2, self.height / 2])

    def stretch(self, rng: np.random.Generator, bend_px: float) -> None:
        """Slow waves of about ``bend_px`` px over the page, as paper that was damp or a scanner's uneven feed."""
        waves = [(rng.uniform(0.4, 1.2, 2), rng.uniform(0, 6.28, 2), rng.normal(0, bend_px / 2.2, 2)) for _ in range(3)]
        size = np.array([self.width, self.height])

        def bend(xy: np.ndarray) -> np.ndarray:
            out = xy.copy()
            for f, phase, amount in waves:
                out = out + np.sin(2 * np.pi * ((xy / size) @ f) + phase[0])[:, None] * amount
            return out

        self._add(bend, f"stretch {bend_px:.1f}")

    def turn(self, degrees: float) -> None:
        """A turn about the middle of the page."""
        c, s = np.cos(np.radians(degrees)), np.sin(np.radians(degrees))
        self._add(lambda xy: self.middle + (xy - self.middle) @ np.array([[c, s], [-s, c]]), f"turn {degrees:.2f}")

    def shear(self, amount: float, squeeze: float) -> None:
        """A copier's drum: one direction longer by ``squeeze``, rows slipped by ``amount``."""
        matrix = np.array([[1.0, 0.0], [amount, 1.0 + squeeze]])
        self._add(lambda xy: self.middle + (xy - self.middle) @ matrix, f"shear {amount:.4f} {squeeze:.4f}")

    def curl(self, depth_px: float, lift_px: float) -> None:
        """A page that rises towards a book's spine at the left: it shortens across and bows along, like a cylinder seen from above."""
        reach = 0.45 * self.width

        def bow(xy: np.ndarray) -> np.ndarray:
            near = np.clip(1 - xy[:, 0] / reach, 0, None) ** 2
            x = xy[:, 0] + depth_px * near
            y = xy[:, 1] + lift_px * near * (xy[:, 1] - self.middle[1]) / self.middle[1] + 0.4 * lift_px * near
            return np.stack([x, y], 1)

        self._add(bow, f"curl {depth_px:.1f}")

    def fold(self, at_x: float, slope: float, kink: float, slip_px: float) -> None:
        """A crease from top to bottom near ``at_x``: the right part turned by ``kink`` and pushed by ``slip_px`` over a few px."""

        def crease(xy: np.ndarray) -> np.ndarray:
            side = xy[:, 0] - at_x - slope * (xy[:, 1] - self.middle[1])
            beyond = np.logaddexp(0.0, side / 4.0) * 4.0
            step = 1 / (1 + np.exp(-np.clip(side / 4.0, -60, 60)))
            return xy + np.stack([-0.002 * beyond - slip_px * step, kink * beyond], 1)

        self._add(crease, f"fold {kink:.4f}")

    def camera(self, rng: np.random.Generator, keystone: float, barrel: float) -> None:
        """A photo taken at an angle, with a lens that bends lines a little."""
        k = rng.uniform(0.5, 1.0, 2) * rng.choice([-1, 1], 2) * keystone

        def shoot(xy: np.ndarray) -> np.ndarray:
            v = (xy - self.middle) / (1 + ((xy - self.middle) / self.middle) @ k)[:, None]
            r2 = ((v / self.middle.max()) ** 2).sum(1, keepdims=True)
            return self.middle + v * (1 - abs(keystone)) * (1 + barrel * r2)

        self._add(shoot, f"camera {keystone:.3f}")

    def _add(self, m: Map, words: str) -> None:
        self.maps.append(m)
        self.words.append(words)
