"""The ``curvebank`` command: the group, shared options, and the one place where errors become messages and exit codes."""

import json
import os
import sys
from collections.abc import Callable
from pathlib import Path
from typing import Any

import click
import platformdirs
from tqdm import tqdm

from ..errors import CurvebankError

Command = Callable[..., Any]


class Group(click.Group):
    """Turns a library error into one sentence on stderr and its exit code; usage errors keep click's 2."""

    def invoke(self, ctx: click.Context) -> Any:
        try:
            return super().invoke(ctx)
        except CurvebankError as e:
            place = f" ({e.path})" if e.path and e.path != "$" else ""
            click.echo(f"curvebank: {e.message}{place}", err=True)
            ctx.exit(e.exit_code)
        except BrokenPipeError:
            # The reader of a pipe went away (head, less): not an error, and nothing more can be said.
            os.dup2(os.open(os.devnull, os.O_WRONLY), sys.stdout.fileno())
            ctx.exit(0)
        except KeyboardInterrupt:
            click.echo("curvebank: stopped. What was finished is kept; nothing is left half written.", err=True)
            ctx.exit(130)
        except OSError as e:
            place = f"{e.filename}: " if e.filename else ""
            click.echo(f"curvebank: {place}{e.strerror or e}. Check the path, the right to use it and the space on the disk.", err=True)
            ctx.exit(1)


def default_bank() -> Path:
    """``CURVEBANK_BANK``, else ``bank.db`` in the platform's user data folder."""
    named = os.environ.get("CURVEBANK_BANK")
    return Path(named) if named else Path(platformdirs.user_data_dir("curvebank", appauthor=False)) / "bank.db"


def bank_option(command: Command) -> Command:
    """``--bank FILE``, else CURVEBANK_BANK, else the user data folder."""
    help_text = "The bank file (else CURVEBANK_BANK, else the user data folder)."
    return click.option("--bank", type=click.Path(path_type=Path, dir_okay=False), default=None, help=help_text)(command)


def json_option(command: Command) -> Command:
    """``--json``: the same facts for a program."""
    return click.option("--json", "as_json", is_flag=True, help="Print JSON instead of text.")(command)


class Bar:
    """Progress on stderr where a person watches, silence elsewhere."""

    def __init__(self, name: str) -> None:
        self.bar = tqdm(
            total=100, desc=name, leave=False, disable=not sys.stderr.isatty(), bar_format="{desc}: {percentage:3.0f} % {postfix}"
        )

    def __call__(self, share: float, text: str) -> None:
        self.bar.n = round(100 * share)
        self.bar.set_postfix_str(text)

    def close(self) -> None:
        self.bar.close()


def emit(data: Any) -> None:
    """JSON on stdout, strict and stable."""
    click.echo(json.dumps(data, ensure_ascii=False, indent=1, allow_nan=False))


def table(head: list[str], rows: list[list[Any]]) -> str:
    """Text columns, numbers to the right."""
    cells = [head] + [["?" if v is None else f"{v:.4g}" if isinstance(v, float) else str(v) for v in row] for row in rows]
    number = [all(isinstance(row[i], (int, float, type(None))) for row in rows) for i in range(len(head))]
    width = [max(len(row[i]) for row in cells) for i in range(len(head))]
    pad = lambda text, i: text.rjust(width[i]) if number[i] else text.ljust(width[i])  # noqa: E731
    lines = ["  ".join(pad(c, i) for i, c in enumerate(row)).rstrip() for row in cells]
    return "\n".join([lines[0], "  ".join("-" * w for w in width), *lines[1:]])


@click.group(cls=Group, context_settings={"help_option_names": ["-h", "--help"], "max_content_width": 110})
@click.version_option(package_name="curvebank")
def main() -> None:
    """Turn printed pump curves into checked numbers, and keep them in a bank."""


def _register() -> None:
    from . import bank_commands, digitise_commands, scan_commands, serve_commands

    for module in (digitise_commands, scan_commands, bank_commands, serve_commands):
        for command in module.COMMANDS:
            main.add_command(command)


_register()
