"""``carry`` and ``join``: a recipe to a better scan of its paper, and two halves of a sheet to one file."""

import math
import sys
from pathlib import Path
from typing import Any

import click

from .app import Bar, emit, json_option, table

page_options = [
    click.option("--page", type=click.IntRange(1), default=1, show_default=True, help="Page of the new scan."),
    click.option("--dpi", type=click.FloatRange(36, 1200), default=300, show_default=True, help="Resolution at which a PDF page is drawn."),
    click.option("--turn", type=click.Choice(["0", "90", "180", "270"]), default="0", show_default=True, help="Degrees clockwise."),
]


def with_page(command: Any) -> Any:
    """``--page``, ``--dpi`` and ``--turn`` of a scan."""
    for option in reversed(page_options):
        command = option(command)
    return command


@click.command()
@click.argument("recipe", type=click.Path(path_type=Path))
@click.argument("newscan", type=click.Path(path_type=Path))
@click.option("--out", required=True, type=click.Path(path_type=Path, file_okay=False), help="Folder for the new recipe, scan and result.")
@with_page
@json_option
def carry(recipe: Path, newscan: Path, out: Path, page: int, dpi: float, turn: str, as_json: bool) -> None:
    """Carry RECIPE to NEWSCAN, another scan of the same paper, and show what changes.

    Marks, clicks, guides, masks and locked stretches move over by matching the two scans; both are digitised and compared curve by
    curve. Writes NAME.recipe.json and NAME.result.json, NAME that of the new scan, and a copy of the scan beside them.
    Exit code: 0 carried, 1 not the same paper or not digitised, 2 usage.
    """
    from ..desk import rescan

    bar = Bar(newscan.name)
    try:
        done = rescan.carry_file(recipe, newscan, out, page=page, dpi=dpi, turn=int(turn), progress=bar)
    finally:
        bar.close()
    report = done.carried.report()
    if as_json:
        emit({**report, "recipe": str(done.recipe), "result": str(done.result), "scan": str(done.scan)})
    else:
        click.echo(report["registration"]["message"])
        head = ["curve", "largest", "mean", "unit", "largest % of axis", "mean % of axis", "largest u", "before", "now"]
        click.echo(table(head, [_row(c) for c in report["curves"]]))
        for line in report["dropped"]:
            click.echo(line)
        click.echo(report["message"])
        click.echo(f"Written: {done.recipe}")
    sys.exit(1 if report["error"] else 0)


def _row(c: dict[str, Any]) -> list[Any]:
    now = "failed" if c["error_now"] else "elsewhere" if c["elsewhere"] else "look at" if c["flagged_now"] else "good"
    before = "failed" if c["error_before"] else "look at" if c["flagged_before"] else "good"
    return [c["id"], c["largest"], c["mean"], c["unit"], c["largest_pct"], c["mean_pct"], c["largest_u"], before, now]


class Tie(click.ParamType):
    """``x1,y1:x2,y2``: one point as both scans show it."""

    name = "x1,y1:x2,y2"

    def convert(self, value: Any, param: Any, ctx: Any) -> Any:
        """Two pairs of numbers."""
        try:
            pairs = [[float(v) for v in part.split(",")] for part in str(value).split(":")]
            if [len(p) for p in pairs] == [2, 2] and all(math.isfinite(v) for p in pairs for v in p):
                return pairs
        except ValueError:
            pass
        self.fail(f"{value!r} is not x1,y1:x2,y2, a point on the first scan and the same point on the second.", param, ctx)


@click.command()
@click.argument("first", type=click.Path(path_type=Path))
@click.argument("second", type=click.Path(path_type=Path))
@click.option("--out", required=True, type=click.Path(path_type=Path, dir_okay=False), help="The new scan, FILE.png.")
@click.option("--tie", "ties", type=Tie(), multiple=True, help="The same point on both scans; give two or more where they share no print.")
@json_option
def join(first: Path, second: Path, out: Path, ties: tuple[Any, ...], as_json: bool) -> None:
    """Join FIRST and SECOND, two scans of one large sheet, into one lossless file.

    How they overlap is found from what both show. The first scan's pixels stay as they are up to a seam where there is least ink;
    the second is turned, scaled and levelled to fit. Where the second lies to the left of or above the first, it comes first instead.
    """
    from ..desk import joining

    bar = Bar(out.name)
    try:
        report = joining.join_files(first, second, out, ties=list(ties) or None, progress=bar)
    finally:
        bar.close()
    if as_json:
        emit({**report, "file": str(out)})
    else:
        click.echo(report["message"])
        click.echo(f"Written: {out}")


COMMANDS = [carry, join]
