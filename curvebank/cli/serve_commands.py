"""``demo`` and ``serve``: a bank of samples, and the app."""

import sys
from pathlib import Path

import click
import platformdirs
from tqdm import tqdm

from .app import bank_option, default_bank, emit, json_option, table


@click.command()
@bank_option
@click.option("--port", type=click.IntRange(0, 65535), default=None, help="Port on 127.0.0.1 (else a free one; 0 for any).")
@click.option("--no-browser", is_flag=True, help="Do not open a browser.")
def serve(bank: Path | None, port: int | None, no_browser: bool) -> None:
    """Serve the app on this machine; a missing bank is created. The address is printed alone on one line."""
    from curvebank_web.server import serve as serve_app

    from ..desk.files import make_folder

    path = bank or default_bank()
    make_folder(path.parent)
    serve_app(path, port, open_browser=not no_browser)


@click.command()
@click.option("--bank", type=click.Path(path_type=Path, dir_okay=False), default=None, help="The bank to make; it must not exist yet.")
@click.option("--samples", type=click.Path(path_type=Path, file_okay=False, exists=True), default=None, help="Folder of sample recipes.")
@click.option("--no-serve", is_flag=True, help="Only build the bank; the last line is its path.")
@click.option("--port", type=click.IntRange(0, 65535), default=None, help="Port on 127.0.0.1 (else a free one; 0 for any).")
@click.option("--no-browser", is_flag=True, help="Do not open a browser.")
@json_option
def demo(bank: Path | None, samples: Path | None, no_serve: bool, port: int | None, no_browser: bool, as_json: bool) -> None:
    """Digitise the sample sheets into a fresh bank, release what the checks allow, and open the app."""
    from ..desk import demo as use_case
    from ..desk.files import make_folder

    folder = use_case.find_samples(samples)
    path = use_case.fresh_bank(bank, Path(platformdirs.user_data_dir("curvebank", appauthor=False)))
    make_folder(path.parent)
    bar = tqdm(desc="digitising the samples", unit="sheet", leave=False, disable=not sys.stderr.isatty())

    def show(done: int, total: int, name: str) -> None:
        bar.total, bar.n = total, done
        bar.set_postfix_str(name)

    rows = list(use_case.build(folder, path, progress=show))
    bar.close()
    if as_json:
        emit({"bank": str(path.resolve()), "sheets": rows})
    else:
        head = ["sheet", "pump", "curves", "failed", "errors", "warnings", "notes", "revision", "state"]
        cells = [[r["sheet"], r["key"], r["curves"], r["failed"], *r["findings"].values(), r["revision"], r["state"]] for r in rows]
        click.echo(table(head, cells))
        for r in rows:
            if r["why"]:
                click.echo(f"{r['sheet']}: {r['why']}")
        click.echo("Confirm every selection with the pump's maker; local codes and a licensed engineer decide.")
        click.echo(str(path.resolve()))
    if not no_serve:
        from curvebank_web.server import serve as serve_app

        serve_app(path, port, open_browser=not no_browser)


COMMANDS = [serve, demo]
