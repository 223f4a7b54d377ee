"""A sheet photographed with a hand-held camera: impellers known by letter only, perspective, shadow, a binder's bend."""

import cv2
import numpy as np

from . import ageing, parts
from .chart import Axis, Manner, Panel, draw_curve, draw_frame, draw_grid, end_label
from .geometry import PageMap
from .ink import Ink
from .parts import Sheet
from .pumps import Pump

WHEELS = {"A": 219, "B": 205, "C": 190}
"""What the letters mean. The sheet does not say, so neither does the recipe."""


def lettered():
    """GARROWELL KG 65: a page in a binder, photographed on a bench; wheels A, B, C without diameters."""
    pump = Pump(
        diameter_mm=WHEELS["A"],
        speed_rpm=2920,
        best_flow_m3h=74,
        psi=0.575,
        best_efficiency=0.735,
        best_npshr_m=3.1,
        head_shape=(0.04, -0.19, -0.04),
        flow_exponent=1.12,
        head_exponent=2.1,
    )
    page = PageMap(
        dpi_x=210,
        dpi_y=210,
        turn_deg=-1.3,
        stretch=(0.93, 0.93),
        tilt=(0.00016, -0.00028),
        barrel=4.0e-7,
        waves=((0.25, 340, 0.8, 75, 85), (0.12, 190, 2.0, 15, 5)),
        curl=(0.0, -2.0, 26.0),
        shift_mm=(1.0, 2.0),
    )
    flow = Axis(id="flow", quantity="flow", title="Q", unit="m3/h", lo=0, hi=120, major=20, minor=10, fine=5, caption="Capacity  Q   m³/h")
    head_axis = Axis(id="head", quantity="head", title="H", unit="m", lo=0, hi=80, major=10, minor=5, caption="Head  H   m")
    eta_axis = Axis(
        id="eta", quantity="efficiency", title="eta", unit="%", lo=0, hi=160, major=20, minor=10, side="right", caption="Efficiency  η   %"
    )
    main = Panel(id="main", left=42, top=62, width=130, height=150, x=flow, y=[head_axis, eta_axis])
    curves = []
    for letter, d in WHEELS.items():
        extra = {"label": {"by": "letter", "printed": letter}, "applies_to": "unknown"}
        curves.append(parts.plot(pump, main, "H", "head", d, (0.05, 1.38), name=letter, width_mm=0.5, label=letter, extra=extra))
        curves[-1].diameter_mm = None
    eta = {"k": 1, "name": "A", "width_mm": 0.4, "style": "dashed", "label": "η A", "gap_at": 0.3}
    curves.append(
        parts.plot(
            pump, main, "E", "efficiency", WHEELS["A"], (0.1, 1.38), extra=extra | {"label": {"by": "letter", "printed": "A"}}, **eta
        )
    )
    curves[-1].diameter_mm = None

    def paint(sheet):
        rng = np.random.default_rng(sheet.seed)
        shape = page.size[::-1]
        grid, line, typed, pen = (Ink(page, c) for c in ((150, 156, 160), (34, 34, 40), (52, 50, 60), (30, 52, 130)))
        manner = Manner(frame=0.5, major=0.2, minor=0.13, fine=0.09, numbers=2.7, titles=2.8, hand="type")
        draw_grid(grid, main, manner)
        draw_frame(line, main, manner, rng)
        for c in curves:
            draw_curve(line, c, manner, rng, label_mm=2.6, grid=grid)
            if c.quantity == "head":
                end_label(line, c, manner, rng, height_mm=3.2, at="start", shift=(3.0, -3.0))
        line.set_type("Garrowell", (42, 40), 7.0, bold=2)
        line.set_type("Borehole and boost pumps", (42.3, 46.4), 2.2)
        line.set_type("KG 65", (172, 38.6), 5.6, align=1.0, bold=1)
        line.set_type("n = 2920 1/min   50 Hz   wheels A  B  C", (172, 46.0), 2.4, align=1.0)
        parts.ruled(line, (42, 172), (52, 52), 0.6)
        rows = [[(0.36, "Sheet", "KG-65/3"), (0.34, "Printed", "8.77"), (0.30, "Page", "27")]]
        parts.title_block(line, line, typed, 42, 238, 130, rows, rng, row_mm=9, text_mm=2.4, caption_mm=1.6)
        parts.note(pen, "which wheel is in?  open it!", (60, 202), 4.2, rng, turn=3, pen=0.42)
        base = ageing.paper(rng, shape, (236, 230, 216), grain=1.6, fibre=1.2, blotch=2.6, edge=6)
        base = ageing.foxing(base, rng, spots=26, strength=0.12)
        base = ageing.lay(base, grid, rng, bleed=0.6, strength=0.7, patchy=0.1)
        base = ageing.lay(base, line, rng, bleed=0.6, strength=0.93, patchy=0.07)
        base = ageing.lay(base, typed, rng, bleed=0.65, strength=0.85, patchy=0.22)
        base = ageing.lay(base, pen, rng, bleed=0.6, strength=0.85, patchy=0.18)
        for at in ((9.5, 68.5), (9.5, 148.5), (9.5, 228.5)):
            base = ageing.punch(base, page, at, rng, lid=(96, 80, 62))
        return parts.save_jpeg(_photograph(base, page, rng), (210, 210), quality=72)

    return Sheet(
        name="garrowell-kg-65",
        file="garrowell-kg-65.jpg",
        seed=6527,
        page=page,
        title="Garrowell KG 65, 2920 1/min, wheels A, B, C",
        mode="colour",
        family=parts.family(pump),
        panels=[main],
        curves=curves,
        sheet={"document": "KG-65/3", "issue": "8.77", "date": "1977-08", "kept_at": "filter house, binder, page 27"},
        pump={
            "maker": "Garrowell",
            "model": "KG 65",
            "type": "volute, single stage, end suction",
            "inlet": "single",
            "stages": 1,
            "speed_rpm": 2920,
            "density_kgm3": 998.2,
        },
        paint=paint,
    )


def _photograph(base, page, rng):
    """Bench behind the page, one lamp, the shadow of the holder, the bend's shade, lens falloff and a soft focus."""
    shape = base.shape[:2]
    y, x = np.ogrid[: shape[0], : shape[1]]
    grain = cv2.GaussianBlur(rng.standard_normal(shape, dtype=np.float32), (0, 0), sigmaX=60, sigmaY=1.6)
    bench = np.array([104, 78, 54], np.float32) + (7 * grain / grain.std())[..., None] * np.array([1, 0.85, 0.65], np.float32)
    out = ageing.outside(page, shape, (0.5, 0.5, 0.5, 0.5))
    bench *= (1 - 0.45 * np.exp(-np.clip(out, 0, None) / 16))[..., None]
    beyond = (1 / (1 + np.exp(-np.clip(out / 0.9, -30, 30))))[..., None].astype(np.float32)
    picture = base * (1 - beyond) + bench * beyond
    lamp = 1.05 - 0.30 * ((x / shape[1] - 0.72) ** 2 + 0.8 * (y / shape[0] - 0.25) ** 2)
    edge = (y - 0.55 * shape[0] - 0.5 * x + 40 * np.sin(x / 170)) / 95
    shadow = 1 - 0.24 / (1 + np.exp(-np.clip(edge, -30, 30)))
    inner = -np.minimum(out, 0) / page.dpi_x * 25.4
    bend = 1 - 0.28 * np.exp(-((x / page.dpi_x * 25.4 - 12) ** 2) / 130) * (inner > 0)
    light = (lamp * shadow * bend).astype(np.float32)[..., None]
    picture = picture * light * np.array([1.0, 0.985, 0.95], np.float32)
    picture = cv2.GaussianBlur(picture, (0, 0), 0.55)
    noise = cv2.GaussianBlur(rng.standard_normal((*shape, 3), dtype=np.float32), (0, 0), 0.7)
    return picture + 2.2 * noise
