"""Sheets in SI units: stacked panels, and the family with one wrong diameter."""

import numpy as np

from . import ageing, parts
from .chart import Axis, Manner, Panel, draw_curve, draw_frame, draw_grid, end_label
from .geometry import PageMap
from .ink import Ink
from .parts import Sheet
from .pumps import Pump


def stacked():
    """LARK WM 150: head, efficiency, power and NPSHr over one flow axis, a cream data sheet with a filing hole."""
    pump = Pump(diameter_mm=330, speed_rpm=1480, best_flow_m3h=270, psi=0.58, best_efficiency=0.825, best_npshr_m=4.3)
    page = PageMap(
        dpi_x=250,
        dpi_y=250,
        turn_deg=-0.35,
        waves=((0.10, 240, 0.4, 70, 10), (0.07, 150, 2.0, 15, 95)),
        curl=(0.0, -1.1, 14.0),
        shift_mm=(0.4, -0.3),
    )
    left, width = 36.0, 140.0

    def flow_axis(numbers):
        return Axis(
            id="flow", quantity="flow", title="Q", unit="m3/h", lo=0, hi=400, major=50, minor=10, numbers=numbers, caption="Flow Q   m³/h"
        )

    def panel(name, top, height, axis, last=False):
        return Panel(id=name, left=left, top=top, width=width, height=height, x=flow_axis(last), y=[axis])

    head = panel(
        "head", 50, 82, Axis(id="head", quantity="head", title="H", unit="m", lo=0, hi=50, major=10, minor=2, caption="Head H   m")
    )
    eta = panel(
        "efficiency",
        138,
        36,
        Axis(id="eta", quantity="efficiency", title="eta", unit="%", lo=0, hi=100, major=20, minor=10, caption="η   %"),
    )
    power = panel(
        "power", 180, 36, Axis(id="power", quantity="power", title="P", unit="kW", lo=0, hi=50, major=10, minor=5, caption="Power P   kW")
    )
    npsh = panel(
        "npshr",
        222,
        27,
        Axis(id="npshr", quantity="npshr", title="NPSHr", unit="m", lo=0, hi=12, major=4, minor=1, caption="NPSHr  m"),
        last=True,
    )
    diameters = (330, 310, 290, 270)
    curves = [parts.plot(pump, head, "H", "head", d, (0.05, 1.36), label=f"Ø {d}") for d in diameters]
    curves += [parts.plot(pump, eta, "E", "efficiency", d, (0.12, 1.36), width_mm=0.4, label=f"Ø {d}") for d in (330, 270)]
    curves += [parts.plot(pump, power, "P", "power", d, (0.05, 1.36), density_kgm3=999.1, width_mm=0.4, label=f"Ø {d}") for d in diameters]
    curves.append(parts.plot(pump, npsh, "N", "npshr", 330, (0.3, 1.36), width_mm=0.4, label="Ø 330"))
    panels = [head, eta, power, npsh]

    def paint(sheet):
        rng = np.random.default_rng(sheet.seed)
        shape = page.size[::-1]
        grid, line, typed, violet, pencil = (
            Ink(page, c) for c in ((118, 124, 128), (26, 27, 31), (36, 38, 52), (84, 66, 140), (92, 92, 98))
        )
        manner = Manner(frame=0.4, major=0.16, minor=0.09, numbers=2.1, titles=2.2, hand="type")
        for p in panels:
            draw_grid(grid, p, manner)
            draw_frame(line, p, manner, rng)
        for c in curves:
            draw_curve(line, c, manner, rng, grid=grid)
            if c.panel is head:
                end_label(line, c, manner, rng, height_mm=2.1)
            if c.panel is power:
                end_label(line, c, manner, rng, height_mm=1.7, shift=(1.0, 0.3))
        end_label(line, curves[4], manner, rng, height_mm=1.7, shift=(1.0, 0.2))
        end_label(line, curves[5], manner, rng, height_mm=1.7, shift=(1.0, 0.6))
        end_label(line, curves[-1], manner, rng, height_mm=1.7)
        line.set_type("LARK", (left, 33.5), 8.4, bold=3)
        for k in range(3):
            parts.ruled(line, (left + 39.5, left + 60 - 4 * k), (26.2 + 3.3 * k,) * 2, 0.9)
        line.set_type("Pumps for water works and drainage", (left, 39.6), 2.1)
        line.set_type("Performance  WM 150", (left + width, 30.6), 4.2, align=1.0, bold=1)
        line.set_type("volute casing pump, single stage, single entry", (left + width, 36.0), 1.9, align=1.0)
        line.set_type("n = 1480 rev/min", (left + width, 41.4), 2.6, align=1.0)
        parts.ruled(line, (left, left + width), (44.2, 44.2), 0.5)
        rows = [
            [(0.30, "Type", "WM 150 - 330"), (0.25, "Curve No.", "LK 3071 / 2"), (0.2, "Issue", "B"), (0.25, "Date", "14 MAR 1971")],
            [
                (0.30, "Liquid", "clear water 15 °C"),
                (0.25, "Density", "1.0 kg/dm³"),
                (0.2, "Vanes", "6"),
                (0.25, "Works order", "71/0482-3"),
            ],
        ]
        parts.title_block(line, line, typed, left, 264, width, rows, rng)
        line.set_type("Values apply to pumps in new condition. Power at the coupling, without allowance.", (left, 281.6), 1.45)
        words = [("QUERNLODE FEN", 1.0), ("DRAINAGE & WATER WORKS", 0.72), ("RECEIVED 22 MAR 1971", 0.9)]
        parts.stamp(violet, (70, 117), words, rng, turn=6, height_mm=2.5)
        parts.note(pencil, "pumps 1 & 2, Cross Drain", (112, 58.0), 2.7, rng, turn=1.5, pen=0.26)
        parts.note(pencil, "no. 2 trimmed to 311, Nov 78", (112, 63.2), 2.7, rng, turn=1.0, pen=0.26)
        base = ageing.paper(rng, shape, (231, 226, 212), grain=1.0, fibre=0.8, blotch=1.8)
        base = ageing.foxing(base, rng, spots=50, strength=0.13)
        base, loss = ageing.fold(base, page, [[0, 149], [210, 148.2]], rng, depth=15, loss=0.45)
        base = ageing.ring(base, page, (158, 262), rng, strength=0.16)
        base = ageing.lay(base, grid, rng, strength=0.75, patchy=0.1, loss=loss)
        base = ageing.lay(base, line, rng, strength=0.95, patchy=0.06, loss=loss)
        base = ageing.lay(base, typed, rng, strength=0.85, patchy=0.22, loss=loss)
        base = ageing.lay(base, violet, rng, strength=0.8, loss=np.maximum(loss, parts.worn(shape, rng)))
        base = ageing.lay(base, pencil, rng, strength=0.75, patchy=0.2, loss=loss)
        for y in (108.5, 188.5):
            base = ageing.punch(base, page, (11.5, y), rng)
        return parts.save_jpeg(base, (250, 250), quality=70)

    return Sheet(
        name="lark-wm-150",
        file="lark-wm-150.jpg",
        seed=150,
        page=page,
        title="LARK WM 150, n = 1480 rev/min",
        mode="colour",
        family=parts.family(pump),
        panels=panels,
        curves=curves,
        sheet={
            "document": "LK 3071 / 2",
            "issue": "B",
            "date": "1971-03-14",
            "kept_at": "drawing store, box 14",
            "liquid": {"density_kgm3": 999.1, "temperature_c": 15, "viscosity_mm2s": 1.14, "stated": "clear water 15 °C"},
        },
        pump={
            "maker": "Lark",
            "model": "WM 150",
            "key": "LARK-WM-150",
            "type": "volute, single stage, end suction",
            "inlet": "single",
            "stages": 1,
            "speed_rpm": 1480,
            "density_kgm3": 999.1,
        },
        paint=paint,
    )


def mislabelled():
    """TARNBECK ST 65-250: five diameters, one typed wrong by 3 %, a small gray scan of a carbon copy."""
    pump = Pump(
        diameter_mm=264,
        speed_rpm=2900,
        best_flow_m3h=96,
        psi=0.56,
        best_efficiency=0.765,
        best_npshr_m=3.9,
        head_shape=(0.05, -0.21, -0.03),
        flow_exponent=1.12,
        head_exponent=2.08,
    )
    page = PageMap(dpi_x=200, dpi_y=200, turn_deg=0.42, waves=((0.12, 300, 1.1, 85, 0), (0.06, 130, 0.3, 5, 80)), shift_mm=(-1.2, 0.8))
    flow = Axis(id="flow", quantity="flow", title="Q", unit="m3/h", lo=0, hi=160, major=20, minor=10, fine=2, caption="DELIVERY   Q   m³/h")
    head_axis = Axis(
        id="head", quantity="head", title="H", unit="m", lo=0, hi=120, major=20, minor=10, fine=2, caption="TOTAL HEAD   H   m"
    )
    eta_axis = Axis(
        id="eta", quantity="efficiency", title="eta", unit="%", lo=0, hi=120, major=20, minor=10, side="right", caption="EFFICIENCY   η   %"
    )
    main = Panel(id="main", left=36, top=62, width=144, height=150, x=flow, y=[head_axis, eta_axis])
    printed = {264: 264, 250: 250, 236: 243, 222: 222, 208: 208}
    curves = [
        parts.plot(
            pump,
            main,
            "H",
            "head",
            d,
            (0.04, 1.42),
            shown=shown,
            label=f"{shown}",
            gap_at=0.12 + 0.012 * (264 - d) / 14,
            gap_mm=9.0,
            note="" if d == shown else f"printed {shown}, drawn for {d}",
        )
        for d, shown in printed.items()
    ]
    curves.append(parts.plot(pump, main, "E", "efficiency", 264, (0.08, 1.42), k=1, style="long dashed", width_mm=0.4, label="η 264"))

    def paint(sheet):
        rng = np.random.default_rng(sheet.seed)
        shape = page.size[::-1]
        grid, line, typed, stamp = (Ink(page, c) for c in ((92, 92, 96), (30, 30, 36), (44, 44, 58), (90, 90, 104)))
        manner = Manner(frame=0.5, major=0.2, minor=0.14, fine=0.0, numbers=2.5, titles=2.5, pen=0.3)
        draw_grid(grid, main, manner)
        draw_frame(line, main, manner, rng)
        for c in curves[:-1]:
            draw_curve(line, c, manner, rng, label_mm=2.5, grid=grid)
        draw_curve(line, curves[-1], manner, rng)
        end_label(line, curves[-1], manner, rng, height_mm=2.5, shift=(1.4, 0.8))
        for k in range(3):
            r = 5.6 - 1.5 * k
            t = np.linspace(0, np.pi, 50)
            line.stroke(np.stack([42 - 5.6 + r + 1.5 * k + r * np.cos(t) * 1.0, 40 - r * np.sin(t)], -1), 0.55)
        line.strokes(parts.letters.write("TARNBECK", (52, 40), 6.0, rng=rng), 0.85)
        line.strokes(parts.letters.write("CENTRIFUGAL PUMPS", (52, 45.5), 2.0, rng=rng), 0.26)
        line.strokes(parts.letters.write("TYPE  ST 65-250", (180, 37), 4.0, align=1.0, rng=rng), 0.45)
        line.strokes(parts.letters.write("2900 REV/MIN    ONE STAGE", (180, 43.5), 2.3, align=1.0, rng=rng), 0.3)
        line.strokes(parts.letters.write("IMPELLER DIAMETERS IN MM", (41, 58.0), 2.0, rng=rng), 0.26)
        parts.ruled(line, (36, 180), (50, 50), 0.6)
        rows = [
            [(0.42, "FOR", "Quernlode Fen No. 4"), (0.3, "CURVE", "T 1188"), (0.28, "DATE", "9.6.1964")],
            [(0.42, "LIQUID", "clean cold water"), (0.3, "SUCTION / DELIVERY", "80 / 65 mm"), (0.28, "DRAWN   CHECKED", "PVM    -")],
        ]
        parts.title_block(line, line, typed, 36, 236, 144, rows, rng, row_mm=9, text_mm=2.3, caption_mm=1.5)
        parts.stamp(stamp, (150, 80), [("COPY", 1.6)], rng, turn=9, height_mm=4.0, pen=0.5)
        base = ageing.paper(rng, shape, (226, 225, 222), grain=1.4, fibre=1.4, blotch=3.0, edge=14)
        base, loss = ageing.fold(base, page, [[0, 98.5], [210, 99.3]], rng, depth=13, loss=0.5)
        base, more = ageing.fold(base, page, [[0, 197.0], [210, 196.2]], rng, depth=11, loss=0.4)
        loss = np.maximum(loss, more)
        base = ageing.lay(base, grid, rng, bleed=0.5, strength=0.62, patchy=0.16, loss=loss)
        base = ageing.lay(base, line, rng, bleed=0.62, strength=0.9, patchy=0.12, loss=loss)
        base = ageing.lay(base, typed, rng, bleed=0.7, strength=0.8, patchy=0.25, loss=loss)
        base = ageing.lay(base, stamp, rng, bleed=0.6, strength=0.8, loss=np.maximum(loss, parts.worn(shape, rng)))
        page_gray = parts.gray(base)
        page_gray = page_gray * (1 - 0.7 * ageing.specks(shape, rng, count=160, largest_px=2.2))
        page_gray = ageing.staple(page_gray[..., None].repeat(3, 2), page, (19, 17), -42, rng)[..., 0]
        return parts.save_jpeg(page_gray, (200, 200), quality=68)

    return Sheet(
        name="tarnbeck-st-65",
        file="tarnbeck-st-65.jpg",
        seed=651,
        page=page,
        title="TARNBECK ST 65-250, 2900 rev/min",
        mode="gray",
        family=parts.family(pump, mislabelled={"true": 236, "shown": 243}),
        panels=[main],
        curves=curves,
        sheet={"document": "T 1188", "date": "1964-06-09", "kept_at": "booster house, pump file 4"},
        pump={
            "maker": "Tarnbeck",
            "model": "ST 65-250",
            "type": "volute, single stage, end suction",
            "inlet": "single",
            "stages": 1,
            "speed_rpm": 2900,
        },
        paint=paint,
    )
