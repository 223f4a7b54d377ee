"""The kinds of sheets: what each stresses. ``sheet_of(kind, seed)`` draws one; a seed changes everything a kind leaves open."""

from dataclasses import dataclass, replace
from typing import Any

import cv2
import numpy as np

from . import agg, paint
from .chart import compose
from .damage import spoil
from .look import Damage, Look
from .record import recipe_of, truth_of

A5, A5L, A4, A4L = (148.0, 210.0), (210.0, 148.0), (210.0, 297.0), (297.0, 210.0)
OWN = ("heads", "efficiencies", "power", "npshr")

KINDS: dict[str, Look] = {
    "clean": Look(content=("heads", "efficiency", "power"), damage=Damage(noise=2.0, jpeg=None), clean=True),
    "ordinary": Look(content=("heads", "efficiency", "power"), grid="light", damage=Damage(jpeg=80)),
    "worn": Look(
        content=("heads", "efficiency", "npshr"), grid="same", dashed_share=0.25, styles=("dashed", "dashdot"), gaps=0.4,
        paper_moves={"stretch": 3.0}, damage=Damage(noise=6.0, jpeg=75, post_blur=0.7),
    ),
    "poor": Look(
        content=("heads", "efficiency", "power"), grid="same", line_mm=(0.17, 0.34), gaps=0.3, paper_moves={"stretch": 8.0, "turn": 1.0},
        damage=Damage(noise=8.0, jpeg=50, drop_out=0.35, post_blur=0.7),
    ),
    "a4-clean": Look(page_mm=A4, dpi=300, content=(*OWN, "contours"), clean=True, damage=Damage(noise=2.0, jpeg=90)),
    "a4-worn": Look(
        page_mm=A4, dpi=300, content=(*OWN, "contours"), grid="same", dashed_share=0.25, styles=("dashed", "dashdot"), gaps=0.4,
        paper_moves={"stretch": 3.0}, damage=Damage(noise=6.0, jpeg=75, post_blur=0.8),
    ),
    "a4-poor": Look(
        page_mm=A4L, dpi=300, content=(*OWN, "contours"), grid="same", line_mm=(0.17, 0.34), gaps=0.3,
        paper_moves={"stretch": 8.0, "turn": 1.0}, damage=Damage(noise=8.0, jpeg=50, drop_out=0.35, post_blur=0.8),
    ),
    "merge-rise": Look(content=("heads", "merging"), geometry="rise", grid="same", damage=Damage(jpeg=75)),
    "merge-touch": Look(content=("heads", "merging"), geometry="touch", damage=Damage(jpeg=75)),
    "merge-asymptote": Look(content=("heads", "merging"), geometry="asymptote", grid="same", damage=Damage(jpeg=75)),
    "merge-tail": Look(content=("heads", "merging"), geometry="tail", damage=Damage(jpeg=75)),
    "merge-trims": Look(page_mm=A5L, dpi=300, content=("efficiencies",), wheels=(4, 5), damage=Damage(jpeg=75)),
    "shell": Look(page_mm=A4L, dpi=200, content=("heads", "contours"), wheels=(5, 5), loops=(1, 3), gaps=0.5, damage=Damage(jpeg=80)),
    "nested": Look(content=("heads", "loops"), loops=(3, 4), grid="same", gaps=0.3, damage=Damage(jpeg=75)),
    "ushapes": Look(content=("heads", "ushapes"), grid="same", gaps=0.4, damage=Damage(jpeg=75)),
    "dense": Look(content=("dense", "efficiency"), line_mm=(0.2, 0.28)),
    "steep": Look(content=("steep",), grid="same"),
    "loglog": Look(content=("log",), scale="log", grid="same"),
    "mm": Look(content=("heads", "efficiency"), grid="mm", line_mm=(0.3, 0.4), dpi=200, wobble_mm=0.04, damage=Damage(mottle=6.0)),
    "mm-colour": Look(
        content=("heads", "efficiency"), grid="mm", coloured="green-mm", line_mm=(0.3, 0.4), page_mm=A5L, damage=Damage(mottle=6.0, jpeg=80)
    ),
    "ticks": Look(content=("heads", "power"), grid="ticks"),
    "broken": Look(content=("heads",), broken=True, grid="same"),
    "stacked": Look(page_mm=A4, dpi=150, content=("heads", "efficiency", "power"), panels=2),
    "three": Look(page_mm=A4, dpi=200, content=("heads", "power", "npshr"), panels=3, grid="same", paper_moves={"turn": 0.8}),
    "snapped": Look(content=("heads", "efficiency"), snapped=True, clean=True, grid="same"),
    "scales": Look(content=("heads",), flow_scales=True),
    "imperial": Look(content=("heads", "efficiency", "power"), imperial=True),
    "dashes": Look(content=("heads", "efficiency", "power"), dashed_share=0.9, styles=("dashed", "dashdot", "dotted", "long"), grid="same"),
    "solid-dashed": Look(content=("heads", "efficiency"), solid_then_dashed=True),
    "labels": Look(content=("heads", "efficiency", "power"), gaps=1.0, grid="same"),
    "leaders": Look(content=("heads", "efficiency"), leaders=True, gaps=0.0),
    "hatching": Look(content=("heads", "efficiency"), hatching=True, wheels=(3, 4)),
    "stamp": Look(content=("heads", "efficiency"), stamp=True, writing=True),
    "colour": Look(content=("heads", "efficiency", "power"), coloured="curves", damage=Damage(jpeg=75)),
    "blue-grid": Look(content=("heads", "efficiency"), coloured="blue", grid="light", stamp=True, damage=Damage(jpeg=75)),
    "curl": Look(content=("heads", "efficiency"), grid="same", paper_moves={"curl": 22.0, "turn": 0.6}, damage=Damage(spine_shade=0.4)),
    "photo": Look(
        content=("heads", "efficiency"), paper_moves={"camera": 0.09, "stretch": 1.5, "turn": 2.0},
        damage=Damage(noise=8.0, jpeg=70, paper=200.0, lighting=0.4, ink_depth=0.7, post_blur=0.8),
    ),
    "fold": Look(content=("heads", "efficiency"), paper_moves={"fold": 1.5}, damage=Damage(crease=True, jpeg=75)),
    "copy": Look(
        content=("heads", "efficiency"), grid="same", paper_moves={"stretch": 2.0, "drum": 0.006, "turn": 0.8},
        damage=Damage(copies=1, speckle=60.0, noise=6.0, drop_out=0.2, paper=228.0),
    ),
    "copy-of-copy": Look(
        content=("heads", "efficiency"), grid="same", line_mm=(0.26, 0.36), paper_moves={"stretch": 3.0, "drum": 0.01, "turn": 1.0},
        damage=Damage(copies=2, speckle=160.0, noise=9.0, drop_out=0.4, paper=220.0),
    ),
    "fax-fine": Look(
        page_mm=A4, dpi=204, dpi_y=196, content=("heads", "efficiency"), grid="same",
        damage=Damage(one_bit=True, copies=1, speckle=20),
    ),
    "fax-normal": Look(
        page_mm=A4, dpi=204, dpi_y=98, content=("heads",), grid="same", line_mm=(0.3, 0.4),
        damage=Damage(one_bit=True, speckle=20),
    ),
    "one-bit": Look(page_mm=A5, dpi=300, content=("heads", "efficiency"), grid="same", damage=Damage(one_bit=True, noise=8.0)),
    "halftone": Look(content=("heads", "efficiency"), dpi=300, page_mm=A5L, line_mm=(0.3, 0.4), damage=Damage(halftone=True)),
    "blueprint": Look(content=("heads", "efficiency"), grid="same", damage=Damage(blueprint=True, ink_depth=0.8, noise=7.0)),
    "microfilm": Look(
        content=("heads", "power"), grid="same", damage=Damage(negative=True, scratches=25, noise=8.0, copies=1, paper=225.0, post_blur=0.8)
    ),
    "hairline": Look(page_mm=A5, dpi=300, line_mm=(0.085, 0.127), content=("heads", "efficiency"), grid="light"),
    "plotter": Look(page_mm=A5L, dpi=300, line_mm=(0.42, 0.52), wobble_mm=0.06, content=("heads", "efficiency"), engine="agg"),
    "dpi70": Look(page_mm=A4, dpi=70, line_mm=(0.3, 0.45), content=("heads",), damage=Damage(post_blur=0.4)),
    "dpi100": Look(page_mm=A4, dpi=100, content=("heads", "efficiency"), line_mm=(0.26, 0.4), damage=Damage(post_blur=0.4)),
    "dpi150": Look(page_mm=A4, dpi=150, content=("heads", "efficiency", "power"), grid="same", damage=Damage(sharpen=0.6)),
    "dpi600": Look(
        page_mm=A4, dpi=600, content=("heads", "efficiency", "power"), grid="same",
        damage=Damage(noise=5.0, jpeg=80, post_blur=1.2),
    ),
}  # fmt: skip

HARD = (
    "poor", "a4-poor", "mm", "stamp", "curl", "photo", "fold", "copy", "copy-of-copy", "fax-fine", "fax-normal", "one-bit", "halftone",
    "blueprint", "microfilm", "hairline", "plotter", "dpi70", "dpi100", "dpi150", "dpi600",
)  # fmt: skip
"""Old paper and poor scans; the other kinds stress what is printed, not how it was kept."""


@dataclass
class Drawing:
    """A finished sheet: ``pixels`` (bool, grey or RGB), truth and recipe, the file's name and how to save it."""

    pixels: np.ndarray
    truth: dict[str, Any]
    recipe: dict[str, Any]
    file: str
    dpi: tuple[int, int]
    jpeg: int | None


BETTER = Look(dpi=300, paper_moves={"stretch": 0.8, "turn": 0.5}, damage=Damage(noise=3.0, jpeg=90, paper=242.0))
"""How the same paper is scanned again: finer, flatter, cleaner."""


def sheet_of(kind: str, seed: int, name: str | None = None, again: Look | None = None) -> Drawing:
    """Draw one sheet of a kind; the engine is chosen by the seed where the kind leaves it open.

    ``again``: another scan of that same chart, with the resolution, the moves of the paper and the damage of this look.
    """
    look = KINDS[kind]
    rng = np.random.default_rng([sum(ord(c) * 31**i for i, c in enumerate(kind)) % (2**31), seed])
    laid = None
    if again is not None:
        look = replace(look, dpi=again.dpi, dpi_y=again.dpi_y, paper_moves=look.paper_moves, damage=again.damage)
        laid = (again.paper_moves, np.random.default_rng([seed, 991]))
    look = replace(look, damage=replace(look.damage))
    engine = look.engine if look.engine != "any" else ("paint", "agg")[int(rng.integers(2))]
    chart = compose(look, rng, laid)
    light = (agg if engine == "agg" else paint).render(chart.scene)
    rows = 1.0
    if look.dpi_y is not None:
        rows = round(light.shape[0] * look.dpi_y / look.dpi) / light.shape[0]
        light = cv2.resize(light, (light.shape[1], round(light.shape[0] * rows)), interpolation=cv2.INTER_AREA)

    def final(xy: np.ndarray) -> np.ndarray:
        return np.stack([xy[:, 0], (xy[:, 1] + 0.5) * rows - 0.5], 1)

    jpeg, look.damage.jpeg = look.damage.jpeg, None
    pixels = spoil(light, look.damage, rng, look.dpi / 300)
    name = name or f"{kind}-{seed}"
    file = f"{name}.tif" if look.damage.one_bit else f"{name}.jpg" if jpeg else f"{name}.png"
    about = {
        "name": name, "image": file, "width": pixels.shape[1], "height": pixels.shape[0], "dpi": look.dpi,
        "mode": "bit" if look.damage.one_bit else "colour" if pixels.ndim == 3 else "gray", "title": f"Drawn: {kind}",
        "kind": kind, "seed": seed, "engine": engine, "hard": kind in HARD, "damage": chart.place.words,
        "wobble_px": look.wobble_mm * look.dpi / 25.4,
        "grid": look.grid, "class": _class(look),
    }  # fmt: skip
    truth = truth_of(chart, final, rng, about)
    return Drawing(pixels, truth, recipe_of(truth, file), file, (look.dpi, look.dpi_y or look.dpi), jpeg)


def _class(look: Look) -> str:
    """What the map is held to: a photocopy, a distorted sheet, or a clean (or gently warped) one."""
    if look.damage.copies or look.damage.one_bit:
        return "photocopy"
    return "distorted" if set(look.paper_moves) & {"camera", "curl", "fold"} or look.paper_moves.get("stretch", 0) > 4 else "plain"
