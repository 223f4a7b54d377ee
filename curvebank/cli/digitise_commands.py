"""``digitise`` and ``check``: recipes to results, and what the checks say of a recipe, a result or a stored pump."""

import sys
from pathlib import Path
from typing import Any

import click

from ..errors import CurvebankError, OutputError
from .app import Bar, bank_option, default_bank, emit, json_option

SIGNS = {"error": "Error.", "warning": "Warning.", "note": "Note."}


@click.command()
@click.argument("recipes", nargs=-1, required=True, type=click.Path(path_type=Path))
@click.option("--out", required=True, type=click.Path(path_type=Path, file_okay=False), help="Folder for NAME.result.json.")
@bank_option
@click.option("--save", is_flag=True, help="Store each result in the bank as a new revision.")
@click.option("--who", help="Your name, for --save.")
@click.option("--why", help="The reason, for --save.")
@click.option("--release", is_flag=True, help="With --save: also release the new revision.")
@click.option("--strict", is_flag=True, help="Exit 1 if any finding is an error.")
@json_option
def digitise(
    recipes: tuple[Path, ...],
    out: Path,
    bank: Path | None,
    save: bool,
    who: str | None,
    why: str | None,
    release: bool,
    strict: bool,
    as_json: bool,
) -> None:
    """Digitise each RECIPE (NAME.recipe.json) to NAME.result.json in the --out folder.

    A recipe that fails does not stop the others and still writes a result. Exit code: 0 all ran, 1 some result has an error, 2 usage.
    """
    from ..desk import files

    if save and not (who and why):
        raise click.UsageError("--save needs --who NAME and --why TEXT.")
    if (release or who or why) and not save:
        raise click.UsageError("--release, --who and --why go with --save.")
    if not ((who or "x").strip() and (why or "x").strip()):
        raise click.UsageError("--who and --why must not be blank: every change of a bank has a person and a reason.")
    _refuse_same_names(recipes)
    try:
        files.make_folder(out)
    except OutputError as e:
        raise click.UsageError(e.message) from None
    rows, bad, doubtful = [], False, False
    for path in recipes:
        bar = Bar(path.name)
        done = files.digitise_file(path, progress=bar)
        bar.close()
        made = done.made
        unwritten = unsaved = None
        try:
            target = str(files.write_result(done, out))
        except OutputError as e:
            target, unwritten = None, e.to_dict()
        row: dict[str, Any] = {
            "recipe": str(path),
            "result": target,
            "curves": len(made.curves),
            "failed": sum(c.error is not None for c in made.curves),
            "flagged": sum(bool(c.trace and c.trace.flagged) for c in made.curves),
            "findings": {s: sum(f.severity == s for f in made.findings) for s in SIGNS},
            "error": made.error,
            "unwritten": unwritten,
        }
        doubtful |= row["findings"]["error"] > 0
        if save and made.error is None:
            from ..desk import storing

            try:
                row["saved"] = storing.save_file(bank or default_bank(), done, who=who or "", why=why or "", release=release)
            except CurvebankError as e:
                row["unsaved"] = unsaved = e.to_dict()
        bad |= any(fault is not None for fault in (made.error, unwritten, unsaved))
        rows.append(row)
        if not as_json:
            click.echo(line_of(row))
        for fault in (unwritten, unsaved):
            if fault:
                click.echo(f"curvebank: {path.name}: {fault['message']}", err=True)
    if as_json:
        emit(rows)
    sys.exit(1 if bad or (strict and doubtful) else 0)


def _refuse_same_names(recipes: tuple[Path, ...]) -> None:
    """Two recipes of one name would write one result: the first would be lost."""
    from ..desk import files

    seen: dict[str, Path] = {}
    for path in recipes:
        first = seen.setdefault(files.result_name(path), path)
        if first != path:
            raise click.UsageError(f"{first} and {path} would both write {files.result_name(path)}. Give each its own --out folder.")


def line_of(row: dict[str, Any]) -> str:
    """One recipe's outcome in one line."""
    name = " ".join(Path(row["recipe"]).name.split())
    if row["error"]:
        return f"{name}: not digitised. {row['error']['message']}"
    good = row["curves"] - row["failed"]
    said = ", ".join(f"{n} {s}{'s' if n != 1 else ''}" for s, n in row["findings"].items() if n) or "no findings"
    stored = f"; saved as {row['saved']['key']} revision {row['saved']['revision']}, {row['saved']['state']}" if "saved" in row else ""
    return f"{name}: {good} of {row['curves']} curves, {row['flagged']} to look at; {said}{stored}"


@click.command()
@click.argument("subject")
@bank_option
@click.option("--strict", is_flag=True, help="Exit 1 if any finding is an error.")
@json_option
def check(subject: str, bank: Path | None, strict: bool, as_json: bool) -> None:
    """Say what the checks find in SUBJECT: a recipe file, a result file, or the key of a pump in the bank."""
    from ..desk import checking

    findings = checking.findings_of(subject, bank or default_bank())
    if as_json:
        emit(findings)
    elif not findings:
        click.echo("Nothing found.")
    for f in findings if not as_json else []:
        click.echo(f"{SIGNS[f['severity']]} {f['message']}")
        click.echo(f"    {f['rule']}, {f['subject']}" + (f"; {f['source']}" if f.get("source") else ""))
    sys.exit(1 if strict and any(f["severity"] == "error" for f in findings) else 0)


COMMANDS = [digitise, check]
