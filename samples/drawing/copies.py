"""Sheets that went through an office machine: a photocopy of a copy, and a fax in US units."""

import io

import cv2
import numpy as np
from PIL import Image

from . import ageing, letters, parts
from .chart import Axis, Manner, Panel, draw_curve, draw_frame, draw_grid, end_label
from .geometry import PageMap
from .ink import Ink
from .parts import Sheet
from .pumps import Pump


def photocopy():
    """ORMSGARTH D 400: a third-generation copy, gray, specked, with starved toner and a black glass edge."""
    pump = Pump(
        diameter_mm=400,
        speed_rpm=1450,
        best_flow_m3h=600,
        psi=0.56,
        best_efficiency=0.845,
        best_npshr_m=4.8,
        head_shape=(0.0, -0.13, -0.055),
        flow_exponent=1.08,
        head_exponent=2.11,
    )
    page = PageMap(
        dpi_x=200,
        dpi_y=200,
        turn_deg=0.85,
        stretch=(1.004, 0.998),
        shear=0.0015,
        waves=((0.16, 260, 2.2, 88, 85), (0.09, 170, 0.2, 12, 10)),
        curl=(0.0, 1.3, 18.0),
        shift_mm=(1.6, -0.8),
    )

    def flow(numbers):
        return Axis(
            id="flow",
            quantity="flow",
            title="Q",
            unit="m3/h",
            lo=0,
            hi=900,
            major=100,
            minor=50,
            fine=10,
            numbers=numbers,
            caption="Q  in  m³/h",
        )

    head_axis = Axis(id="head", quantity="head", title="H", unit="m", lo=0, hi=60, major=10, minor=5, fine=1, caption="H  in  m")
    eta_axis = Axis(id="eta", quantity="efficiency", title="eta", unit="%", lo=0, hi=120, major=20, side="right", caption="η  in  %")
    power_axis = Axis(id="power", quantity="power", title="P", unit="kW", lo=0, hi=120, major=20, minor=10, fine=5, caption="P  in  kW")
    main = Panel(id="main", left=37, top=58, width=144, height=120, x=flow(False), y=[head_axis, eta_axis])
    lower = Panel(id="power", left=37, top=184, width=144, height=48, x=flow(True), y=[power_axis])
    diameters = (400, 380, 360, 340)
    curves = [parts.plot(pump, main, "H", "head", d, (0.0, 1.38), label=f"{d} Ø") for d in diameters]
    curves.append(parts.plot(pump, main, "E", "efficiency", 400, (0.1, 1.38), k=1, width_mm=0.4, label="η", gap_at=0.28))
    curves += [parts.plot(pump, lower, "P", "power", d, (0.0, 1.38), width_mm=0.4, label=f"{d} Ø") for d in (400, 340)]

    def paint(sheet):
        rng = np.random.default_rng(sheet.seed)
        shape = page.size[::-1]
        grid, line, pen = (Ink(page, c) for c in ((40, 40, 40), (20, 20, 20), (30, 30, 30)))
        manner = Manner(frame=0.5, major=0.2, minor=0.13, fine=0.07, numbers=2.4, titles=2.6, pen=0.3, slant=0.26)
        for p in (main, lower):
            draw_grid(grid, p, manner)
            draw_frame(line, p, manner, rng)
        for c in curves:
            draw_curve(line, c, manner, rng, label_mm=2.8, grid=grid)
        for c in curves[:4]:
            end_label(line, c, manner, rng, height_mm=2.3)
        for c in curves[5:]:
            end_label(line, c, manner, rng, height_mm=2.2, shift=(-3.0, -2.6), align=1.0)
        line.strokes(letters.write("ORMSGARTH", (37, 34), 7.0, rng=rng, slant=0.18), 1.0)
        line.strokes(letters.write("Engine & Pump Works", (37.6, 40.4), 2.5, rng=rng, slant=0.26), 0.3)
        line.strokes(letters.write("Split casing pump  D 400", (181, 32), 3.6, align=1.0, rng=rng, slant=0.26), 0.42)
        line.strokes(letters.write("n = 1450 /min     clean water", (181, 38.4), 2.5, align=1.0, rng=rng, slant=0.26), 0.3)
        line.strokes(letters.write("impeller diameters in mm", (181, 44.0), 2.1, align=1.0, rng=rng, slant=0.26), 0.28)
        parts.ruled(line, (37, 181), (48, 48), 0.55)
        parts.ruled(line, (37, 181), (49.1, 49.1), 0.2)
        rows = [[(0.3, "Drawn", "R. T.   3.2.59"), (0.34, "Drawing no.", "O-D 2217 c"), (0.36, "Replaces", "O-D 2217 b")]]
        parts.title_block(line, line, line, 37, 252, 144, rows, rng, row_mm=10, text_mm=2.6, caption_mm=1.6, hand="guide")
        parts.note(pen, "High Lift No. 2", (120, 66), 4.0, rng, turn=2, pen=0.45)
        parts.note(pen, "ask for bigger motor?", (50, 225.5), 3.2, rng, turn=3, pen=0.4)
        base = ageing.paper(rng, shape, (232, 231, 229), grain=2.2, fibre=1.6, blotch=4.0, edge=24)
        base, loss = ageing.fold(base, page, [[0, 147.5], [210, 150]], rng, depth=70, loss=0.9)
        base, more = ageing.fold(base, page, [[104.2, 0], [105.6, 297]], rng, depth=58, loss=0.8)
        loss = np.maximum(loss, more)
        starved = ageing.toner(shape, rng, banding=0.09, cloud=0.11)
        fade = np.clip(1.12 * starved, 0.25, 1.2)
        base = ageing.lay(base, grid, rng, bleed=0.55, strength=0.72, patchy=0.16, loss=np.maximum(loss, np.clip(1.2 - fade, 0, 0.8)))
        base = ageing.lay(base, line, rng, bleed=0.7, strength=0.97, patchy=0.12, loss=np.maximum(loss, np.clip(0.78 - fade, 0, 0.5)))
        base = ageing.lay(base, pen, rng, bleed=0.7, strength=0.85, patchy=0.3, loss=loss)
        for y in (108.5, 188.5):
            base = ageing.punch(base, page, (10.5, y), rng, lid=(24, 24, 24))
        page_gray = parts.gray(base)
        page_gray = page_gray * (1 - 0.9 * ageing.specks(shape, rng, count=900, largest_px=3.4))
        out = ageing.outside(page, shape, (2.2, 3.4, 0.4, 1.0)) + 0.8 * ageing.smooth_noise(rng, shape, 130)
        glass = 1 / (1 + np.exp(-np.clip(out / 1.8, -30, 30)))
        page_gray = page_gray * (1 - glass) + glass * (34 + 14 * ageing.smooth_noise(rng, shape, 12))
        haze = (
            20 * np.clip(ageing.smooth_noise(rng, shape, 260) + 0.4 * ageing.smooth_noise(rng, shape, 40), 0, 2)
            + 7 * np.clip(starved - 1, 0, 1) * 10
        )
        pepper = 15 * np.clip(rng.standard_normal(shape, dtype=np.float32) - 1.7, 0, 3) * (1 + haze / 12)
        copy = ageing.copy_curve(page_gray - haze - pepper, rng, blur=0.6, dark=92, light=196, floor=26, roof=244, grain=7.0)
        return parts.save_jpeg(copy, (200, 200), quality=58)

    return Sheet(
        name="ormsgarth-d-400",
        file="ormsgarth-d-400.jpg",
        seed=2217,
        page=page,
        title="ORMSGARTH D 400, n = 1450 /min",
        mode="gray",
        family=parts.family(pump),
        panels=[main, lower],
        curves=curves,
        sheet={"document": "O-D 2217", "issue": "c", "date": "1959-02-03", "kept_at": "engine house, green binder"},
        pump={
            "maker": "Ormsgarth",
            "model": "D 400",
            "type": "split casing, single stage",
            "inlet": "double",
            "stages": 1,
            "speed_rpm": 1450,
            "density_kgm3": 998.2,
        },
        paint=paint,
    )


def fax():
    """STAVERING 6x5 FS: US units, sent by fax; one bit a pixel, 204 x 196 dpi, Group 4."""
    inches = {330.2: '13"', 311.15: '12 1/4"', 292.1: '11 1/2"', 273.05: '10 3/4"'}
    pump = Pump(
        diameter_mm=330.2,
        speed_rpm=1770,
        best_flow_m3h=1400 * parts.CANONICAL["gal/min(US)"],
        psi=0.565,
        best_efficiency=0.815,
        best_npshr_m=4.4,
        head_shape=(0.01, -0.14, -0.05),
    )
    page = PageMap(
        width_mm=1728 / 204 * 25.4,
        height_mm=2156 / 196 * 25.4,
        dpi_x=204,
        dpi_y=196,
        turn_deg=-0.55,
        stretch=(1.0, 1.006),
        waves=((0.14, 310, 0.9, 90, 90),),
        shift_mm=(0.7, 1.5),
    )

    def flow(numbers):
        return Axis(
            id="flow",
            quantity="flow",
            title="Q",
            unit="gal/min(US)",
            lo=0,
            hi=2000,
            major=200,
            minor=100,
            numbers=numbers,
            caption="U.S. GALLONS PER MINUTE",
        )

    head_axis = Axis(id="head", quantity="head", title="H", unit="ft", lo=0, hi=200, major=20, minor=10, caption="TOTAL HEAD IN FEET")
    eta_axis = Axis(
        id="eta", quantity="efficiency", title="eta", unit="%", lo=0, hi=100, major=10, side="right", caption="EFFICIENCY, PER CENT"
    )
    power_axis = Axis(id="power", quantity="power", title="BHP", unit="hp", lo=0, hi=80, major=20, minor=10, caption="B.H.P.")
    main = Panel(id="main", left=35, top=64, width=146, height=120, x=flow(False), y=[head_axis, eta_axis])
    lower = Panel(id="power", left=35, top=190, width=146, height=44, x=flow(True), y=[power_axis])
    curves = []
    for panel, letter, quantity, diameters in ((main, "H", "head", inches), (lower, "P", "power", (330.2, 273.05))):
        for d in diameters:
            text = inches[d]
            name = text[:-1].replace(" ", "-").replace("/", ".")
            label = {"by": "diameter", "printed": text}
            curves.append(
                parts.plot(pump, panel, letter, quantity, d, (0.04, 1.36), name=name, width_mm=0.5, label=text, extra={"label": label})
            )
    eff = parts.plot(
        pump,
        main,
        "E",
        "efficiency",
        330.2,
        (0.1, 1.36),
        k=1,
        name="13",
        width_mm=0.45,
        style="long dashed",
        label='EFF. 13"',
        gap_at=0.27,
    )
    curves.insert(4, eff)

    def paint(sheet):
        rng = np.random.default_rng(sheet.seed)
        shape = page.size[::-1]
        grid, line, typed = (Ink(page, c) for c in ((70, 70, 70), (15, 15, 15), (20, 20, 20)))
        manner = Manner(frame=0.5, major=0.17, minor=0.13, numbers=2.7, titles=2.7, pen=0.36)
        for p in (main, lower):
            draw_grid(grid, p, manner)
            draw_frame(line, p, manner, rng)
        for c in curves:
            draw_curve(line, c, manner, rng, grid=grid)
        for c in curves[:4]:
            end_label(line, c, manner, rng, height_mm=2.6)
        for c in curves[5:]:
            end_label(line, c, manner, rng, height_mm=2.5)
        line.strokes(letters.write("STAVERING", (35, 40), 7.4, rng=rng), 1.1)
        line.strokes(letters.write("PUMP & FOUNDRY", (35.5, 46.6), 2.9, rng=rng), 0.42)
        line.strokes(letters.write("SIZE  6 x 5 FS", (181, 38), 4.2, align=1.0, rng=rng), 0.55)
        line.strokes(letters.write("1770 R.P.M.    SINGLE SUCTION", (181, 45), 2.7, align=1.0, rng=rng), 0.4)
        line.strokes(letters.write("IMPELLER C-88   MAX. DIA. 13 IN.   SP. GR. 1.0", (181, 51.5), 2.5, align=1.0, rng=rng), 0.38)
        parts.ruled(line, (35, 181), (56, 56), 0.6)
        rows = [[(0.5, "CUSTOMER", "QUERNLODE FEN W.W."), (0.27, "CURVE", "S-4410"), (0.23, "DATE", "11-7-88")]]
        parts.title_block(line, line, typed, 35, 252, 146, rows, rng, row_mm=11, text_mm=2.9, caption_mm=2.1)
        base = ageing.paper(rng, shape, (236, 236, 236), grain=3.0, fibre=2.0, blotch=6.0, edge=30)
        starved = np.clip(1.1 * ageing.toner(shape, rng, banding=0.05, cloud=0.1, streaks=2), 0.3, 1.2)
        base = ageing.lay(base, grid, rng, bleed=0.4, strength=0.88, patchy=0.12, loss=np.clip(1.02 - starved, 0, 0.7))
        base = ageing.lay(base, line, rng, bleed=0.5, strength=0.97, patchy=0.1)
        base = ageing.lay(base, typed, rng, bleed=0.5, strength=0.95, patchy=0.2)
        page_gray = parts.gray(base)
        page_gray = page_gray * (1 - ageing.specks(shape, rng, count=420, largest_px=2.0))
        rough = cv2.GaussianBlur(page_gray, (0, 0), 0.45) + 15 * rng.standard_normal(shape, dtype=np.float32)
        black = rough < 150 + 8 * ageing.smooth_noise(rng, shape, 120)
        black = _machine_line(black)
        for y in np.sort(rng.choice(np.arange(120, shape[0] - 20), 5, replace=False)):
            x0 = int(rng.uniform(0, 0.7) * shape[1])
            black[y, x0:] = black[y - 1, x0:]
        out = io.BytesIO()
        Image.fromarray(~black).save(out, "TIFF", compression="group4", dpi=(204, 196))
        return out.getvalue()

    return Sheet(
        name="stavering-6x5",
        file="stavering-6x5.tif",
        seed=4410,
        page=page,
        title="STAVERING 6 x 5 FS, 1770 rpm",
        mode="bit",
        family=parts.family(pump),
        panels=[main, lower],
        curves=curves,
        sheet={"document": "S-4410", "date": "1988-11-07", "kept_at": "office, fax tray 1988"},
        pump={
            "maker": "Stavering",
            "model": "6x5 FS",
            "type": "volute, single stage, end suction",
            "inlet": "single",
            "stages": 1,
            "speed_rpm": 1770,
            "density_kgm3": 998.2,
        },
        paint=paint,
    )


def _machine_line(black):
    """The sending machine's own line along the top edge: put on after scanning, so it is square to the page."""
    flat = PageMap(width_mm=black.shape[1] / 204 * 25.4, height_mm=12, dpi_x=204, dpi_y=196)
    ink = Ink(flat)
    ink.strokes(letters.write("NOV 08 '88 10:42   STAVERING SALES OFFICE" + 25 * " " + "P.02/03", (12, 7.5), 2.2, hand="typed"), 0.3)
    cover = ink.coverage() > 0.5
    black[: cover.shape[0]] = np.where(cover.any(1)[:, None], cover, black[: cover.shape[0]])
    return black
