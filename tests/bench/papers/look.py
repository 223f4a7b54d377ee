"""All choices that make a kind of sheet: paper, pen, grid, content, and what happened to the page since."""

from dataclasses import dataclass, field


@dataclass
class Damage:
    """What print, paper and scanner did; zero or False is off. Lengths in px of the final page."""

    noise: float = 3.0
    jpeg: int | None = 85
    paper: float = 240.0
    ink_depth: float = 0.87
    mottle: float = 4.0
    drop_out: float = 0.0
    speckle: float = 0.0
    copies: int = 0
    lighting: float = 0.0
    spine_shade: float = 0.0
    crease: bool = False
    one_bit: bool = False
    halftone: bool = False
    negative: bool = False
    blueprint: bool = False
    scratches: int = 0
    post_blur: float = 0.5
    sharpen: float = 0.0


@dataclass
class Look:
    """One kind's choices. Widths are mm on paper; a range is drawn from."""

    page_mm: tuple[float, float] = (148.0, 210.0)
    dpi: int = 200
    dpi_y: int | None = None
    line_mm: tuple[float, float] = (0.22, 0.34)
    blur_px: tuple[float, float] = (0.5, 0.8)
    engine: str = "any"
    content: tuple[str, ...] = ("heads", "efficiency")
    geometry: str | None = None
    wheels: tuple[int, int] = (3, 5)
    loops: tuple[int, int] = (1, 2)
    panels: int = 1
    grid: str = "light"
    parts: tuple[int, ...] = (2, 4, 5)
    scale: str = "linear"
    imperial: bool = False
    broken: bool = False
    flow_scales: bool = False
    coloured: str = ""
    styles: tuple[str, ...] = ("solid",)
    dashed_share: float = 0.0
    solid_then_dashed: bool = False
    gaps: float = 0.15
    gap_kind: str = "any"
    leaders: bool = False
    hatching: bool = False
    stamp: bool = False
    writing: bool = False
    wobble_mm: float = 0.0
    snapped: bool = False
    paper_moves: dict[str, float] = field(default_factory=dict)
    damage: Damage = field(default_factory=Damage)
    clean: bool = False
