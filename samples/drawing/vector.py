"""A page written as PDF by hand: the same strokes as ink on paper, but as vectors, on page 2 of 2."""

import zlib

import numpy as np

from . import letters, parts
from .chart import Axis, Manner, Panel, draw_curve, draw_frame, draw_grid, end_label
from .geometry import PageMap, arc_mm, cut, dash, resample
from .parts import Sheet
from .pumps import Pump

# A4 just short of 2480 x 3508 px at 300 dpi, so that a renderer that rounds up lands there exactly.
WIDTH_PT, HEIGHT_PT = 595.199, 841.919
POINTS_PER_MM = 72 / 25.4


class Pen:
    """One gray of a PDF page with the interface of ``ink.Ink``: strokes in mm from the top-left corner."""

    def __init__(self, page, gray=0.0):
        self.page = page
        self.out = [f"{gray:g} G {gray:g} g 1 J 1 j"]

    def _points(self, line):
        p = np.asarray(line, float) * POINTS_PER_MM
        return [f"{x:.3f} {HEIGHT_PT - y:.3f}" for x, y in p]

    def strokes(self, lines_mm, width_mm):
        """Draw several polylines."""
        self.out.append(f"{width_mm * POINTS_PER_MM:.3f} w")
        for line in lines_mm:
            if len(line) > 1:
                first, *rest = self._points(line)
                self.out.append(f"{first} m " + " ".join(f"{p} l" for p in rest) + " S")

    def stroke(self, line_mm, width_mm, *, pattern=(), gaps=()):
        """Draw a polyline with dashes and label gaps."""
        line = np.asarray(line_mm, float)
        if len(line) > 2:
            line = resample(line, 0.5)
        self.strokes(cut(line, dash(arc_mm(line)[-1], pattern, gaps)), width_mm)

    def set_type(self, text, at_mm, height_mm, *, turn=0.0, align=0.0, bold=0):
        """Text in Helvetica (bold when asked), left-aligned, level."""
        if turn or align:
            raise ValueError("set type on a PDF page is level and left-aligned; letter it with strokes instead")
        safe = text.replace("\\", r"\\").replace("(", r"\(").replace(")", r"\)")
        x, y = at_mm[0] * POINTS_PER_MM, HEIGHT_PT - at_mm[1] * POINTS_PER_MM
        size = height_mm / 0.718 * POINTS_PER_MM
        self.out.append(f"BT /F{2 if bold else 1} {size:.2f} Tf {x:.2f} {y:.2f} Td ({safe}) Tj ET")

    def wipe(self, polygon_mm):
        """White ground under a label."""
        first, *rest = self._points(polygon_mm)
        self.out.append(f"q 1 g {first} m " + " ".join(f"{p} l" for p in rest) + " f Q")


def pdf(pages, title):
    """Bytes of a PDF 1.4 file; each page is a list of pens."""
    streams = [zlib.compress("\n".join("\n".join(["q", *pen.out, "Q"]) for pen in pens).encode("cp1252"), 9) for pens in pages]
    first = 5
    kids = " ".join(f"{first + 2 * i} 0 R" for i in range(len(pages)))
    font = "<< /Type /Font /Subtype /Type1 /BaseFont /{} /Encoding /WinAnsiEncoding >>"
    objects = [
        b"<< /Type /Catalog /Pages 2 0 R >>",
        f"<< /Type /Pages /Kids [{kids}] /Count {len(pages)} >>".encode(),
        font.format("Helvetica").encode(),
        font.format("Helvetica-Bold").encode(),
    ]
    for i, data in enumerate(streams):
        objects.append(
            f"<< /Type /Page /Parent 2 0 R /MediaBox [0 0 {WIDTH_PT} {HEIGHT_PT}] /Contents {first + 2 * i + 1} 0 R "
            f"/Resources << /Font << /F1 3 0 R /F2 4 0 R >> >> >>".encode()
        )
        objects.append(f"<< /Length {len(data)} /Filter /FlateDecode >>\nstream\n".encode() + data + b"\nendstream")
    objects.append(f"<< /Title ({title}) >>".encode("cp1252"))
    out, offsets = bytearray(b"%PDF-1.4\n%\xe2\xe3\xcf\xd3\n"), []
    for i, body in enumerate(objects, 1):
        offsets.append(len(out))
        out += f"{i} 0 obj\n".encode() + body + b"\nendobj\n"
    start = len(out)
    out += f"xref\n0 {len(objects) + 1}\n0000000000 65535 f \n".encode()
    out += b"".join(f"{o:010d} 00000 n \n".encode() for o in offsets)
    out += f"trailer\n<< /Size {len(objects) + 1} /Root 1 0 R /Info {len(objects)} 0 R >>\nstartxref\n{start}\n%%EOF\n".encode()
    return bytes(out)


LETTER = (
    ("Ebbrook Pump Company", 5.0, 38, True),
    ("Sales office", 2.4, 45, False),
    ("Quernlode Fen Drainage & Town Water Works", 2.7, 70, False),
    ("The Engineer, Cross Drain Station", 2.7, 76, False),
    ("12 September 1997", 2.7, 90, False),
    ("Your inquiry of 1 September: replacement for low lift pump No. 5", 2.7, 104, True),
    ("Please find on the next page the characteristic of our type VL 200, as plotted for you today.", 2.7, 114, False),
    ("We propose the impeller of 325 mm diameter. It can be exchanged for 345 mm should the inlet", 2.7, 120, False),
    ("level in the Cross Drain be lowered as you expect.", 2.7, 126, False),
    ("Power is stated at the shaft for clean water of 998 kg/m³. NPSH required is stated at 3 % head drop", 2.7, 136, False),
    ("for the largest impeller alone.", 2.7, 142, False),
    ("Page 1 of 2", 2.2, 280, False),
)


def plotted():
    """EBBROOK VL 200: a plotter drawing of 1997 as the second page of a PDF letter."""
    pump = Pump(
        diameter_mm=345,
        speed_rpm=1470,
        best_flow_m3h=420,
        psi=0.57,
        best_efficiency=0.84,
        best_npshr_m=4.9,
        head_shape=(0.02, -0.16, -0.05),
        flow_exponent=1.09,
        head_exponent=2.12,
    )
    page = PageMap(width_mm=2480 / 300 * 25.4, height_mm=3508 / 300 * 25.4, dpi_x=300, dpi_y=300)

    def flow(numbers):
        return Axis(
            id="flow",
            quantity="flow",
            title="Q",
            unit="m3/h",
            lo=0,
            hi=600,
            major=100,
            minor=20,
            numbers=numbers,
            caption="FLOW  Q  [m³/h]",
        )

    def panel(name, top, height, last=False, **axis):
        return Panel(id=name, left=34, top=top, width=142, height=height, x=flow(last), y=[Axis(**axis)])

    head = panel("head", 52, 96, id="head", quantity="head", title="H", unit="m", lo=0, hi=48, major=8, minor=2, caption="HEAD  H  [m]")
    power = panel(
        "power", 154, 48, id="power", quantity="power", title="P", unit="kW", lo=0, hi=60, major=20, minor=5, caption="SHAFT POWER  P  [kW]"
    )
    npsh = panel(
        "npshr", 208, 32, True, id="npshr", quantity="npshr", title="NPSHr", unit="m", lo=0, hi=8, major=2, minor=1, caption="NPSHr  [m]"
    )
    curves = [parts.plot(pump, head, "H", "head", d, (0.05, 1.34), label=f"Ø{d}") for d in (345, 325, 305, 285)]
    for d, style in ((345, "solid"), (325, "dashed"), (305, "chain"), (285, "dotted")):
        curves.append(parts.plot(pump, power, "P", "power", d, (0.05, 1.34), width_mm=0.35, style=style, label=f"Ø{d}"))
    curves.append(parts.plot(pump, npsh, "N", "npshr", 345, (0.3, 1.34), width_mm=0.35, label="Ø345"))
    panels = [head, power, npsh]

    def paint(sheet):
        rng = np.random.default_rng(sheet.seed)
        cover = Pen(page)
        for text, size, y, bold in LETTER:
            cover.set_type(text, (30, y), size, bold=bold)
        parts.ruled(cover, (30, 180), (50, 50), 0.4)
        parts.note(cover, "R. Thornley", (30, 166), 5.0, rng, turn=4, pen=0.4)
        grid, line = Pen(page, 0.62), Pen(page, 0.0)
        manner = Manner(frame=0.35, major=0.14, minor=0.07, numbers=2.3, titles=2.4, pen=0.25)
        for p in panels:
            draw_grid(grid, p, manner)
            draw_frame(line, p, manner, None)
        for c in curves:
            draw_curve(line, c, manner, None)
            end_label(line, c, manner, None, height_mm=2.2 if c.panel is head else 1.9)
        line.strokes(letters.write("EBBROOK", (34, 32), 6.0), 0.8)
        line.strokes(letters.write("PUMP COMPANY", (34.4, 38), 2.2), 0.25)
        line.strokes(letters.write("TYPE VL 200", (176, 31), 4.0, align=1.0), 0.4)
        line.strokes(letters.write("1470 1/min   998 kg/m³   ISO 2548 C", (176, 38), 2.3, align=1.0), 0.25)
        parts.ruled(line, (34, 176), (43, 43), 0.5)
        rows = [[(0.4, "Customer", "Quernlode Fen"), (0.3, "Plot", "VL200-97-0912"), (0.3, "Page", "2 of 2")]]
        parts.title_block(
            line, line, line, 34, 258, 142, rows, np.random.default_rng(1), row_mm=9, text_mm=2.3, caption_mm=1.5, hand="guide"
        )
        return pdf([[cover], [grid, line]], sheet.title)

    return Sheet(
        name="ebbrook-vl-200",
        file="ebbrook-vl-200.pdf",
        seed=912,
        page=page,
        title="EBBROOK VL 200, 1470 1/min",
        mode="vector",
        family=parts.family(pump),
        panels=panels,
        curves=curves,
        sheet={
            "page": 2,
            "dpi": 300,
            "document": "VL200-97-0912",
            "date": "1997-09-12",
            "kept_at": "station computer, letters 1997",
            "liquid": {"density_kgm3": 998.2, "temperature_c": 20, "viscosity_mm2s": 1.004, "stated": "clean water, 998 kg/m³"},
        },
        pump={
            "maker": "Ebbrook",
            "model": "VL 200",
            "type": "volute, single stage, end suction",
            "inlet": "single",
            "stages": 1,
            "speed_rpm": 1470,
            "density_kgm3": 998.2,
        },
        paint=paint,
    )
