"""A blueprint: white lines on blue, one impeller at three speeds, scanned sideways."""

import numpy as np

from . import ageing, letters, parts
from .chart import Axis, Manner, Panel, draw_curve, draw_frame, draw_grid, end_label
from .geometry import PageMap
from .ink import Ink
from .parts import Sheet
from .pumps import Pump

WHITE = (222, 230, 236)


def speeds():
    """MARROWBY PF 500: mixed-flow drainage pump with a three-speed motor."""
    pump = Pump(
        diameter_mm=480,
        speed_rpm=585,
        best_flow_m3h=1550,
        psi=0.62,
        best_efficiency=0.835,
        best_npshr_m=5.0,
        head_shape=(-0.12, -0.14, -0.10),
        rise=2.05,
    )
    page = PageMap(
        width_mm=297,
        height_mm=210,
        dpi_x=200,
        dpi_y=200,
        turn_deg=-0.8,
        stretch=(0.998, 1.003),
        waves=((0.18, 300, 1.2, 20, 80), (0.12, 190, 0.1, 85, 0)),
        shift_mm=(0.8, -0.4),
    )

    def flow(numbers):
        caption = "Q   CUBIC METRES PER HOUR"
        steps = {"lo": 0, "hi": 2500, "major": 500, "minor": 100, "fine": 50}
        return Axis(id="flow", quantity="flow", title="Q", unit="m3/h", numbers=numbers, caption=caption, **steps)

    head_axis = Axis(id="head", quantity="head", title="H", unit="m", lo=0, hi=16, major=2, minor=1, fine=0.5, caption="HEAD  H   METRES")
    power_axis = Axis(id="power", quantity="power", title="P", unit="kW", lo=0, hi=60, major=20, minor=10, fine=5, caption="P   KW")
    main = Panel(id="main", left=36, top=32, width=212, height=88, x=flow(False), y=[head_axis])
    lower = Panel(id="power", left=36, top=126, width=212, height=36, x=flow(True), y=[power_axis])
    curves = []
    for panel, letter, quantity in ((main, "H", "head"), (lower, "P", "power")):
        for n in (585, 485, 415):
            extra = {"label": {"by": "speed", "printed": str(n)}, "colour": WHITE}
            curves.append(
                parts.plot(pump, panel, letter, quantity, 480, (0.12, 1.3), speed_rpm=n, name=n, width_mm=0.5, label=f"{n}", extra=extra)
            )

    def paint(sheet):
        rng = np.random.default_rng(sheet.seed)
        shape = page.size[::-1]
        grid, line, pencil = (Ink(page, c) for c in ((176, 196, 218), WHITE, (226, 196, 90)))
        manner = Manner(frame=0.5, major=0.2, minor=0.14, fine=0.08, numbers=2.6, titles=2.6, pen=0.34)
        for p in (main, lower):
            draw_grid(grid, p, manner)
            draw_frame(line, p, manner, rng)
        for c in curves:
            draw_curve(line, c, manner, rng)
            end_label(line, c, manner, rng, height_mm=2.4, text=f"{c.label} R.P.M." if c.panel is main else c.label)
        line.strokes(letters.write("MARROWBY", (36, 22), 6.0, rng=rng), 0.85)
        line.strokes(letters.write("LAND DRAINAGE PUMPS", (86, 22), 2.4, rng=rng), 0.32)
        line.strokes(letters.write("MIXED FLOW PUMP  PF 500", (248, 21), 3.4, align=1.0, rng=rng), 0.42)
        line.strokes(letters.write("IMPELLER 480 MM  VANES 4", (248, 27.5), 2.3, align=1.0, rng=rng), 0.32)
        line.strokes(letters.write("MOTOR 10 - 12 - 14 POLES", (190, 27.5), 2.3, align=1.0, rng=rng), 0.32)
        rows = [
            [
                (0.30, "FOR", "QUERNLODE FEN"),
                (0.22, "STATION", "CROSS DRAIN"),
                (0.2, "DRAWN", "E. K."),
                (0.28, "DRAWING NO.", "M 7745  SHEET 3"),
            ],
        ]
        parts.title_block(line, line, line, 36, 183, 212, rows, rng, row_mm=10, text_mm=2.6, caption_mm=1.6, hand="guide", pen=0.36)
        parts.note(pencil, "winter level 3.1 m", (48, 112), 3.4, rng, turn=2, pen=0.4)
        base = ageing.paper(rng, shape, (46, 84, 138), grain=2.0, fibre=2.2, blotch=5.0, edge=-14)
        cloud = (3.2 * ageing.smooth_noise(rng, shape, 300) + 1.6 * ageing.smooth_noise(rng, shape, 60))[..., None]
        base += cloud * np.array([1.2, 1.0, 0.6], np.float32)
        base, loss = ageing.fold(base, page, [[74.5, 0], [73.8, 210]], rng, depth=-34, loss=0.25)
        for crease in ([[148.2, 0], [148.9, 210]], [[222.6, 0], [223.2, 210]], [[0, 105.4], [297, 104.8]]):
            base, more = ageing.fold(base, page, crease, rng, depth=-34, loss=0.25)
            loss = np.maximum(loss, more)
        base = ageing.stain(base, rng, (shape[1] * 0.86, shape[0] * 0.88), 190, colour=(120, 140, 150), strength=0.2)
        uneven = np.clip(0.1 + 0.12 * ageing.smooth_noise(rng, shape, 200), 0, 0.4)
        base = ageing.lay(base, grid, rng, bleed=0.6, strength=0.62, patchy=0.2, loss=np.maximum(loss, uneven))
        base = ageing.lay(base, line, rng, bleed=0.65, strength=0.92, patchy=0.12, loss=np.maximum(loss, 0.5 * uneven))
        base = ageing.lay(base, pencil, rng, bleed=0.5, strength=0.8, patchy=0.3, loss=loss)
        dust = ageing.specks(shape, rng, count=160, largest_px=2.0)[..., None]
        base = base * (1 - 0.5 * dust) + 0.5 * dust * np.array([150, 170, 196], np.float32)
        return parts.save_jpeg(np.rot90(base), (200, 200), quality=70)

    return Sheet(
        name="marrowby-pf-500",
        file="marrowby-pf-500.jpg",
        seed=7745,
        page=page,
        title="MARROWBY PF 500, three speeds",
        mode="colour",
        family={
            "law": "Q~n, H~n^2",
            "a": 1,
            "b": 2,
            "dmax_mm": 480,
            "nq": parts.family(pump)["nq"],
            "exact": True,
            "shifted": None,
            "mislabelled": None,
        },
        panels=[main, lower],
        curves=curves,
        sheet={"turn": 90, "document": "M 7745, sheet 3", "date": "1948", "kept_at": "plan chest, drawer 7"},
        pump={
            "maker": "Marrowby",
            "model": "PF 500",
            "type": "mixed flow, volute, single stage",
            "inlet": "single",
            "stages": 1,
            "speed_rpm": 585,
            "density_kgm3": 998.2,
        },
        paint=paint,
    )
