"""Sheets in colour: a printed leaflet in four inks, and a works test inked on brown millimetre paper."""

import numpy as np

from . import ageing, letters, parts
from .chart import Axis, Manner, Panel, draw_curve, draw_frame, draw_grid, end_label, letter
from .geometry import PageMap
from .ink import Ink
from .parts import Sheet
from .pumps import Pump

BLUE, GREEN, RED, VIOLET, TEAL = (28, 62, 138), (24, 112, 66), (182, 38, 40), (112, 50, 128), (20, 104, 112)
INK, MADDER = (30, 30, 52), (138, 34, 30)


def printed():
    """QUILLON NT 80-200: a four-colour leaflet, slightly faded and warped."""
    pump = Pump(
        diameter_mm=209,
        speed_rpm=2900,
        best_flow_m3h=112,
        psi=0.585,
        best_efficiency=0.79,
        best_npshr_m=3.4,
        head_shape=(0.03, -0.17, -0.05),
        flow_exponent=1.13,
        head_exponent=2.12,
    )
    page = PageMap(
        dpi_x=200,
        dpi_y=200,
        turn_deg=-0.6,
        waves=((0.22, 330, 0.6, 80, 5), (0.10, 160, 2.6, 20, 85)),
        shift_mm=(0.5, 0.6),
        curl=(0.0, 0.9, 16.0),
    )

    def flow(numbers):
        return Axis(
            id="flow",
            quantity="flow",
            title="Q",
            unit="m3/h",
            lo=0,
            hi=180,
            major=20,
            minor=10,
            fine=5,
            numbers=numbers,
            caption="Flow Q  m³/h",
        )

    head_axis = Axis(id="head", quantity="head", title="H", unit="m", lo=0, hi=70, major=10, minor=5, caption="Head H  m")
    eta_axis = Axis(id="eta", quantity="efficiency", title="eta", unit="%", lo=0, hi=140, major=20, side="right", caption="Efficiency η  %")
    power_axis = Axis(id="power", quantity="power", title="P", unit="kW", lo=0, hi=30, major=5, minor=2.5, caption="Shaft power P  kW")
    npsh_axis = Axis(id="npshr", quantity="npshr", title="NPSHr", unit="m", lo=0, hi=12, major=2, side="right", caption="NPSHr  m")
    main = Panel(id="main", left=35, top=62, width=140, height=112, x=flow(False), y=[head_axis, eta_axis])
    lower = Panel(id="lower", left=35, top=181, width=140, height=60, x=flow(True), y=[power_axis, npsh_axis])
    diameters = (209, 196, 182, 169)
    curves = []

    def line(letter, panel, quantity, d, share, colour, **more):
        curves.append(parts.plot(pump, panel, letter, quantity, d, (share, 1.42), extra={"colour": colour}, **more))

    for d in diameters:
        line("H", main, "head", d, 0.03, BLUE, width_mm=0.5, label=f"Ø {d}")
    for d in (209, 169):
        line("E", main, "efficiency", d, 0.1, GREEN, k=1, width_mm=0.4, label=f"Ø {d}")
    for d in diameters:
        line("P", lower, "power", d, 0.03, RED, width_mm=0.4, label=f"{d}")
    line("N", lower, "npshr", 209, 0.3, VIOLET, k=1, width_mm=0.4, style="dashed", label="NPSHr Ø 209")

    def paint(sheet):
        rng = np.random.default_rng(sheet.seed)
        shape = page.size[::-1]
        inks = {c: Ink(page, c) for c in (BLUE, GREEN, RED, VIOLET)}
        tint, band, white, grid, black = (Ink(page, c) for c in ((252, 240, 200), TEAL, (246, 246, 240), (128, 168, 184), (40, 40, 44)))
        manner = Manner(frame=0.4, major=0.17, minor=0.12, fine=0.07, numbers=2.1, titles=2.2, hand="type")
        for p in (main, lower):
            tint.fill(p.rectangle())
            draw_grid(grid, p, manner)
            draw_frame(black, p, manner, rng)
        for c in curves:
            ink = inks[tuple(c.extra["colour"])]
            draw_curve(ink, c, manner, rng)
            if c.id in ("E-209", "E-169"):
                end_label(ink, c, manner, rng, height_mm=1.9, shift=(1.0, -1.8) if c.id == "E-209" else (-3.0, 3.0))
            elif c.id.startswith("N"):
                end_label(ink, c, manner, rng, height_mm=1.9, shift=(-13.0, 8.0))
            else:
                end_label(ink, c, manner, rng, height_mm=1.9 if c.panel is lower else 2.1)
        letter(inks[GREEN], "η", main.mm(30, 62, 1)[0] + [-1, 0], 2.6, manner, rng)
        letter(inks[BLUE], "H", main.mm(10, 64, 0)[0], 2.6, manner, rng)
        letter(inks[RED], "P", lower.mm(10, 16, 0)[0], 2.6, manner, rng)
        band.fill([[0, 16], [210, 16], [210, 40], [0, 40]])
        band.fill([[0, 268], [210, 268], [210, 271.5], [0, 271.5]])
        white.set_type("Quillon", (35, 32.2), 9.2, bold=2)
        white.set_type("NT 80-200", (175, 29.4), 5.6, align=1.0, bold=1)
        white.set_type("2900 1/min    50 Hz", (175, 35.8), 2.4, align=1.0)
        black.set_type("Norm pumps with spiral casing, closed impeller, clean water 20 °C", (35, 50.4), 2.2)
        black.set_type("Curves hold for 998 kg/m³.   Ø in mm.   Sheet NT 12.4   Edition 5/83", (35, 55.4), 1.8)
        black.set_type("Power limits: see motor list.  We may change dimensions and data without notice.", (35, 262.5), 1.6)
        base = ageing.paper(rng, shape, (247, 245, 238), grain=0.9, fibre=0.5, blotch=1.6, edge=6)
        y, x = np.ogrid[: shape[0], : shape[1]]
        sun = np.clip(1.15 - x / shape[1] * 1.3, 0, 1).astype(np.float32)
        base -= sun[..., None] * np.array([3, 7, 20], np.float32)
        base, loss = ageing.fold(base, page, [[0, 150.0], [210, 150.6]], rng, depth=20, loss=0.55)
        k = page.dpi_x / 25.4 / 2.35
        screen = 0.5 + 0.5 * np.cos(2 * np.pi * (x * 0.966 + y * 0.259) / k) * np.cos(2 * np.pi * (y * 0.966 - x * 0.259) / k)
        base = ageing.lay(base, tint, rng, bleed=0.6, strength=0.85, patchy=0.03, loss=np.maximum(loss, 0.22 * screen.astype(np.float32)))
        base = ageing.lay(base, grid, rng, bleed=0.45, strength=0.8, patchy=0.06, loss=loss)
        fade = np.maximum(loss, 0.12 * np.broadcast_to(sun, shape))
        base = ageing.lay(base, band, rng, bleed=0.5, strength=0.93, patchy=0.04, loss=fade)
        base = ageing.lay(base, white, rng, bleed=0.45, strength=0.95, patchy=0.02, loss=loss)
        for c in (GREEN, RED, VIOLET, BLUE):
            base = ageing.lay(base, inks[c], rng, bleed=0.5, strength=0.93, patchy=0.05, loss=fade)
        base = ageing.lay(base, black, rng, bleed=0.5, strength=0.94, patchy=0.05, loss=loss)
        for at in ((10.5, 108.5), (10.5, 188.5)):
            base = ageing.punch(base, page, at, rng, lid=(70, 68, 66))
        return parts.save_jpeg(base, (200, 200), quality=74)

    return Sheet(
        name="quillon-nt-80",
        file="quillon-nt-80.jpg",
        seed=802,
        page=page,
        title="Quillon NT 80-200, 2900 1/min",
        mode="colour",
        family=parts.family(pump),
        panels=[main, lower],
        curves=curves,
        sheet={
            "document": "NT 12.4",
            "issue": "5/83",
            "date": "1983-05",
            "kept_at": "office shelf, red binder 2",
            "liquid": {"density_kgm3": 998.2, "temperature_c": 20, "viscosity_mm2s": 1.004, "stated": "clean water 20 °C"},
        },
        pump={
            "maker": "Quillon",
            "model": "NT 80-200",
            "type": "volute, single stage, end suction",
            "inlet": "single",
            "stages": 1,
            "speed_rpm": 2900,
            "density_kgm3": 998.2,
        },
        paint=paint,
    )


def millimetre():
    """PELLWRIGHT TN 300: works test inked on brown millimetre paper, dashed and chain lines, laid askew on the glass."""
    pump = Pump(
        diameter_mm=440,
        speed_rpm=980,
        best_flow_m3h=820,
        psi=0.55,
        best_efficiency=0.77,
        best_npshr_m=4.1,
        head_shape=(0.02, -0.15, -0.06),
        flow_exponent=1.1,
        head_exponent=2.1,
        eta_top=1.0,
        eta_fall=0.6,
    )
    page = PageMap(
        dpi_x=200,
        dpi_y=200,
        turn_deg=1.9,
        stretch=(1.003, 0.997),
        waves=((0.20, 280, 0.2, 60, 30), (0.12, 140, 1.5, 100, 0)),
        shift_mm=(0.6, 0.4),
    )
    flow = Axis(
        id="flow", quantity="flow", title="Q", unit="m3/h", lo=0, hi=1400, major=100, minor=50, fine=10, caption="Delivery  Q  in  m³/h"
    )
    head_axis = Axis(
        id="head", quantity="head", title="H", unit="m", lo=0, hi=36, major=2, minor=1, fine=0.2, caption="Total head  H  in  m"
    )
    eta_axis = Axis(
        id="eta", quantity="efficiency", title="eta", unit="%", lo=0, hi=90, major=5, side="right", caption="Efficiency  η  in  %"
    )
    main = Panel(id="main", left=35, top=56, width=140, height=180, x=flow, y=[head_axis, eta_axis])
    test = {"basis": "works test"}
    curves = [
        parts.plot(pump, main, "H", "head", d, (0.06, 1.38), style=style, label=f"D = {d}", extra=test | {"colour": INK})
        for d, style in ((440, "solid"), (415, "dashed"), (390, "chain"))
    ]
    extra = test | {"colour": MADDER}
    eta = {"k": 1, "style": "long dashed", "width_mm": 0.4, "label": "η 440", "gap_at": 0.3}
    curves.append(parts.plot(pump, main, "E", "efficiency", 440, (0.1, 1.38), extra=extra, **eta))

    def paint(sheet):
        rng = np.random.default_rng(sheet.seed)
        shape = page.size[::-1]
        print_, frame, ink, red, pencil = (Ink(page, c) for c in ((170, 98, 44), (38, 36, 46), INK, MADDER, (84, 84, 92)))
        x0, x1, y0, y1 = 15, 195, 26, 276
        for i in range(x1 - x0 + 1):
            heavy = 0.26 if (i - 20) % 10 == 0 else 0.17 if (i - 20) % 5 == 0 else 0.085
            parts.ruled(print_, (x0 + i, x0 + i), (y0, y1), heavy)
        for i in range(y1 - y0 + 1):
            heavy = 0.26 if i % 10 == 0 else 0.17 if i % 5 == 0 else 0.085
            parts.ruled(print_, (x0, x1), (y0 + i, y0 + i), heavy)
        manner = Manner(frame=0.42, numbers=2.3, titles=2.9, pen=0.3, slant=0.26, ticks=1.2)
        draw_frame(frame, main, manner, rng)
        for c in curves:
            draw_curve(red if c.id == "E-440" else ink, c, manner, rng, label_mm=2.6)
        for c in curves[:3]:
            end_label(ink, c, manner, rng, height_mm=2.6, shift=(1.4, 0.6))
        q = pump.flow(np.array([0.1, 0.35, 0.6, 0.8, 1.0, 1.18, 1.34]), 440)
        for at in main.mm(q, pump.head(q, 440)):
            t = np.linspace(0, 2 * np.pi, 24)
            ink.stroke(at + np.stack([0.95 * np.cos(t), 0.95 * np.sin(t)], -1), 0.22)
        frame.strokes(letters.write("PELLWRIGHT", (36, 41), 5.4, rng=rng, slant=0.2), 0.75)
        frame.strokes(letters.write("Works test  TN 300    No. 418", (36, 49), 3.3, rng=rng, slant=0.26), 0.36)
        frame.strokes(letters.write("n = 980 /min", (174, 41), 3.6, align=1.0, rng=rng, slant=0.26), 0.4)
        frame.strokes(letters.write("Oct. 1936", (174, 49), 3.3, align=1.0, rng=rng, slant=0.26), 0.36)
        frame.strokes(letters.write("o  measured,  water by weir", (40, 262), 2.6, rng=rng, slant=0.26), 0.3)
        frame.strokes(letters.write("speed by counter,  power by dynamometer", (40, 268), 2.6, rng=rng, slant=0.26), 0.3)
        parts.note(frame, "J. Averell", (140, 266), 5.0, rng, turn=7, pen=0.4)
        parts.note(pencil, "now No. 1 at Town Sluice", (44, 232.5), 3.4, rng, turn=2, pen=0.34)
        parts.note(pencil, "390 fitted 1951", (44, 226), 3.4, rng, turn=2, pen=0.34)
        base = ageing.paper(rng, shape, (222, 203, 166), grain=1.2, fibre=1.4, blotch=3.6, edge=16)
        base = ageing.foxing(base, rng, spots=110, strength=0.2)
        base = ageing.stain(base, rng, (shape[1] * 0.93, shape[0] * 0.9), 260)
        base, loss = ageing.fold(base, page, [[105.6, 0], [104.4, 297]], rng, depth=24, loss=0.5)
        base, more = ageing.fold(base, page, [[0, 147.2], [210, 148.8]], rng, depth=24, loss=0.5)
        loss = np.maximum(loss, more)
        worn = np.clip(0.12 * ageing.smooth_noise(rng, shape, 150) + 0.08, 0, 0.4)
        base = ageing.lay(base, print_, rng, bleed=0.35, strength=0.62, patchy=0.14, loss=np.maximum(loss, worn))
        for layer in (frame, ink, red):
            base = ageing.lay(base, layer, rng, bleed=0.5, strength=0.9, patchy=0.1, loss=loss)
        base = ageing.lay(base, pencil, rng, bleed=0.4, strength=0.75, patchy=0.25, loss=loss)
        gap = _beyond(page, shape)
        base = base * (1 - gap) + gap * np.array([206, 206, 204], np.float32)
        return parts.save_jpeg(base, (200, 200), quality=60)

    return Sheet(
        name="pellwright-tn-300",
        file="pellwright-tn-300.jpg",
        seed=418,
        page=page,
        title="PELLWRIGHT TN 300, works test 418, n = 980 /min",
        mode="colour",
        family=parts.family(pump),
        panels=[main],
        curves=curves,
        sheet={"document": "works test 418", "date": "1936-10", "kept_at": "plan chest, drawer 3"},
        pump={
            "maker": "Pellwright",
            "model": "TN 300",
            "type": "volute, single stage",
            "inlet": "single",
            "stages": 1,
            "speed_rpm": 980,
            "density_kgm3": 998.2,
        },
        paint=paint,
    )


def _beyond(page, shape):
    """Where the glass shows beside the askew sheet [h, w, 1], with a soft shadow line."""
    out = ageing.outside(page, shape, (3.5, 4.0, 3.0, 3.5))
    return (1 / (1 + np.exp(-np.clip(out / 0.8, -30, 30))))[..., None].astype(np.float32)
