"""The tracer against the Cramer-Rao bound (``bound.py``) as lines of the report; needs no sheets."""

from typing import Any

import bound

from .cases import Case, Line, at_most


class Bound:
    """Standard deviation over the bound and bias, worst of the conditions."""

    name = "bound"

    def __init__(self, seeds: int) -> None:
        self.seeds = seeds
        self.rows: list[dict[str, Any]] = []

    def visit(self, case: Case) -> None:
        """Nothing on sheets."""

    def measured(self) -> list[dict[str, Any]]:
        self.rows = self.rows or [bound.measure(c, self.seeds) for c in bound.CONDITIONS]
        return self.rows

    def lines(self) -> list[Line]:
        rows = self.measured()
        return [
            at_most(
                "isolated lines: standard deviation / Cramer-Rao bound, worst (n: seeds)", max(r["ratio"] for r in rows), self.seeds, 1.5
            ),
            at_most("isolated lines: bias px, rms along the line, worst (n: seeds)", max(r["bias_px"] for r in rows), self.seeds, 0.01),
        ]

    def table(self) -> list[str]:
        return [
            f"width {r['width_px']} blur {r['blur_px']} noise {r['noise']}: sd {r['sd_px']:.5f} bound {r['bound_px']:.5f}"
            f" ratio {r['ratio']:.2f} bias {r['bias_px']:.5f} worst {r['bias_worst_px']:.5f}"
            for r in self.measured()
        ]
