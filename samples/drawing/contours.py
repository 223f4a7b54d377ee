"""A composite chart: a head family with lines of constant efficiency drawn over it, open and closed."""

import numpy as np

from . import ageing, letters, parts
from .chart import Axis, Curve, Manner, Panel, draw_curve, draw_frame, draw_grid, end_label
from .geometry import PageMap
from .ink import Ink
from .parts import Sheet
from .pumps import Pump

LEVELS = {0.60: (0.375,), 0.70: (0.375,), 0.76: (0.36,), 0.80: (0.36, 0.4), 0.82: (0.375,), 0.84: (0.71,), 0.85: (0.27,)}


def composite():
    """CORVANE DV 250: five diameters and seven efficiencies on one landscape sheet, drawn in ink on linen."""
    pump = Pump(
        diameter_mm=410,
        speed_rpm=1480,
        best_flow_m3h=700,
        psi=0.6,
        best_efficiency=0.854,
        best_npshr_m=5.6,
        head_shape=(0.03, -0.17, -0.045),
        flow_exponent=1.06,
        head_exponent=2.1,
        eta_top=0.915,
        eta_fall=2.6,
    )
    page = PageMap(
        width_mm=297,
        height_mm=210,
        dpi_x=220,
        dpi_y=220,
        turn_deg=0.5,
        waves=((0.18, 350, 1.8, 10, 85), (0.10, 180, 0.9, 75, 5)),
        shift_mm=(-0.5, 0.4),
        curl=(0.0, -1.4, 20.0),
    )
    flow = Axis(id="flow", quantity="flow", title="Q", unit="m3/h", lo=0, hi=1100, major=100, minor=20, caption="Quantity  Q   m³/h")
    head_axis = Axis(id="head", quantity="head", title="H", unit="m", lo=10, hi=70, major=10, minor=2, caption="Total head  H   m")
    main = Panel(id="main", left=36, top=38, width=220, height=126, x=flow, y=[head_axis])
    diameters = (410, 390, 370, 350, 330)
    curves = [parts.plot(pump, main, "H", "head", d, (0.06, 1.4), width_mm=0.5, label=f"Ø {d}") for d in diameters]
    for level, places in LEVELS.items():
        for k, (q, h, closed) in enumerate(pump.contour(level, 330)):
            curves.append(
                Curve(
                    id=f"E-{100 * level:g}" + ("" if k == 0 else f"-{k + 1}"),
                    panel=main,
                    quantity="efficiency_contour",
                    flow=q,
                    value=h,
                    speed_rpm=1480,
                    level=level,
                    closed=closed,
                    width_mm=0.3,
                    label=f"{100 * level:g} %" if len(places) > k else "",
                    gap_at=places[k] if len(places) > k else None,
                )
            )

    def paint(sheet):
        rng = np.random.default_rng(sheet.seed)
        shape = page.size[::-1]
        grid, line, fine, red, pencil = (Ink(page, c) for c in ((112, 120, 128), (24, 26, 34), (24, 26, 34), (150, 40, 36), (80, 84, 96)))
        manner = Manner(frame=0.5, major=0.17, minor=0.1, numbers=2.4, titles=2.7, pen=0.28)
        draw_grid(grid, main, manner)
        draw_frame(line, main, manner, rng)
        for c in curves:
            draw_curve(line if c.quantity == "head" else fine, c, manner, rng, label_mm=2.1, grid=grid)
            if c.quantity == "head":
                end_label(line, c, manner, rng, height_mm=2.4)
        line.strokes(letters.write("CORVANE", (36, 24), 6.2, rng=rng), 0.95)
        line.strokes(letters.write("HYDRAULIC MACHINERY", (36.4, 29.6), 2.1, rng=rng), 0.28)
        line.strokes(letters.write("DOUBLE ENTRY PUMP  DV 250", (256, 23), 3.6, align=1.0, rng=rng), 0.42)
        line.strokes(letters.write("n = 1480 rev/min    clean water    η of pump alone", (256, 29.6), 2.3, align=1.0, rng=rng), 0.28)
        parts.ruled(line, (36, 256), (33, 33), 0.6)
        rows = [
            [
                (0.22, "DRAWN", "H. Mott"),
                (0.18, "DATE", "27.11.52"),
                (0.22, "DRAWING", "DV 250 - 17"),
                (0.38, "STATION", "Quernlode Fen, High Lift No. 3"),
            ]
        ]
        parts.title_block(line, line, line, 36, 184, 220, rows, rng, row_mm=9.5, text_mm=2.4, caption_mm=1.5, hand="guide")
        parts.stamp(
            red,
            (68, 147),
            [("QUERNLODE FEN", 1.0), ("ENGINEER'S OFFICE", 0.72), ("18 DEC 1952", 0.9)],
            rng,
            turn=-5,
            height_mm=2.7,
            round_shape=True,
        )
        parts.note(pencil, "duty 640 x 44", (150, 56), 3.2, rng, turn=3, pen=0.32)
        cross = main.mm(640, 44)[0]
        for a in (40, 130):
            u = 2.6 * np.array([np.cos(np.radians(a)), np.sin(np.radians(a))])
            pencil.stroke(np.array([cross - u, cross + u]), 0.3)
        base = ageing.paper(rng, shape, (214, 219, 214), grain=1.3, fibre=1.0, blotch=3.0, edge=14)
        weave_y, weave_x = np.ogrid[: shape[0], : shape[1]]
        base += (1.3 * np.cos(weave_x * 2.15) + 1.3 * np.cos(weave_y * 2.05))[..., None].astype(np.float32)
        base = ageing.foxing(base, rng, spots=45, strength=0.14)
        base = ageing.stain(base, rng, (shape[1] * 0.04, shape[0] * 0.97), 330, colour=(150, 128, 92), strength=0.25)
        base, loss = ageing.fold(base, page, [[148, 0], [149, 210]], rng, depth=20, loss=0.5)
        base, more = ageing.fold(base, page, [[0, 104.6], [297, 105.4]], rng, depth=16, loss=0.4)
        loss = np.maximum(loss, more)
        base = ageing.lay(base, grid, rng, bleed=0.4, strength=0.6, patchy=0.12, loss=loss)
        for layer in (line, fine):
            base = ageing.lay(base, layer, rng, bleed=0.45, strength=0.94, patchy=0.08, loss=loss)
        base = ageing.lay(base, red, rng, bleed=0.5, strength=0.72, loss=np.maximum(loss, parts.worn(shape, rng, 0.4)))
        base = ageing.lay(base, pencil, rng, bleed=0.4, strength=0.75, patchy=0.22, loss=loss)
        for x in (108.5, 188.5):
            base = ageing.punch(base, page, (x, 201), rng)
        return parts.save_jpeg(base, (220, 220), quality=66)

    return Sheet(
        name="corvane-dv-250",
        file="corvane-dv-250.jpg",
        seed=25017,
        page=page,
        title="CORVANE DV 250, n = 1480 rev/min, lines of constant efficiency",
        mode="colour",
        family=parts.family(pump),
        panels=[main],
        curves=curves,
        sheet={"document": "DV 250 - 17", "date": "1952-11-27", "kept_at": "plan chest, drawer 1"},
        pump={
            "maker": "Corvane",
            "model": "DV 250",
            "type": "split casing, single stage",
            "inlet": "double",
            "stages": 1,
            "speed_rpm": 1480,
            "density_kgm3": 998.2,
        },
        paint=paint,
    )
