"""Write a pool of drawn sheets to a folder, in the form of NAME.recipe.json, NAME.truth.json and a scan.

    python tests/bench/pool.py OUT [--seed N] [--sheets K] [--kinds plain copy ...] [--list]

Sheets are named KIND-SEED; kinds take turns until K sheets are there (default: one of each kind), each turn with the next seed.
Sheets with several printed flow scales also stand in OUT/scales with a recipe that uses them all; OUT/rescans holds better scans of the
same papers under the same names (``--rescans``).
"""

import argparse
import json
import sys
from pathlib import Path

from PIL import Image

HERE = Path(__file__).resolve().parent
sys.path.insert(0, str(HERE))

from papers.kinds import BETTER, KINDS, sheet_of  # noqa: E402
from papers.record import recipe_of  # noqa: E402


def write(out: Path, kind: str, seed: int, again: bool = False) -> Path:
    """Draw one sheet (``again``: a better scan of it) and save it; returns the recipe's path."""
    made = sheet_of(kind, seed, again=BETTER if again else None)
    picture = Image.fromarray(made.pixels)
    if made.file.endswith(".tif"):
        picture.convert("1").save(out / made.file, compression="group4", dpi=made.dpi)
    elif made.jpeg:
        picture.save(out / made.file, quality=made.jpeg, dpi=made.dpi)
    else:
        picture.save(out / made.file, dpi=made.dpi)
    name = made.truth["name"]
    (out / f"{name}.truth.json").write_text(json.dumps(made.truth))
    recipe = out / f"{name}.recipe.json"
    recipe.write_text(json.dumps(made.recipe, indent=1))
    if any(p["secondary_x"] for p in made.truth["panels"]):
        more = out / "scales"
        more.mkdir(exist_ok=True)
        (more / f"{name}.truth.json").write_text(json.dumps(made.truth))
        (more / f"{name}.recipe.json").write_text(json.dumps(recipe_of(made.truth, made.file, all_scales=True), indent=1))
        (more / made.file).write_bytes((out / made.file).read_bytes())
    return recipe


def main() -> int:
    ask = argparse.ArgumentParser(description=__doc__, formatter_class=argparse.RawDescriptionHelpFormatter)
    ask.add_argument("out", type=Path, nargs="?")
    ask.add_argument("--seed", type=int, default=0, help="first seed")
    ask.add_argument("--sheets", type=int, help="how many sheets (default: one of each kind)")
    ask.add_argument("--kinds", nargs="*", choices=list(KINDS), default=list(KINDS), metavar="KIND")
    ask.add_argument("--rescans", action="store_true", help="also a better scan of each sheet's paper, in OUT/rescans")
    ask.add_argument("--list", action="store_true", help="print the kinds")
    asked = ask.parse_args()
    if asked.list or asked.out is None:
        print("\n".join(KINDS))
        return 0 if asked.list else 2
    asked.out.mkdir(parents=True, exist_ok=True)
    count = asked.sheets or len(asked.kinds)
    for k in range(count):
        kind, seed = asked.kinds[k % len(asked.kinds)], asked.seed + k // len(asked.kinds)
        if asked.rescans:
            (asked.out / "rescans").mkdir(exist_ok=True)
            write(asked.out / "rescans", kind, seed, again=True)
        print(write(asked.out, kind, seed).name.removesuffix(".recipe.json"), flush=True)
    return 0


if __name__ == "__main__":
    sys.exit(main())
