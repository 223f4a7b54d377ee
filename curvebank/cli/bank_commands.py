"""``show``, ``export`` and ``verify``: what a bank holds, as text, as files, and whether it is whole."""

import sys
from pathlib import Path
from typing import Any

import click

import curvebank

from ..errors import CurvebankError
from .app import Bar, bank_option, default_bank, emit, json_option, table

UNIT = {"head": "m", "npshr": "m", "suction_lift": "m", "power": "kW", "input_power": "kW", "efficiency": "", "overall_efficiency": ""}


@click.command()
@click.argument("key", required=False)
@bank_option
@click.option("--revision", type=click.IntRange(1), default=None, help="A revision by number (else the released one).")
@click.option("--flow", "flow_m3h", type=float, default=None, help="Read every quantity at this flow, m3/h.")
@click.option("--diameter", "diameter_mm", type=float, default=None, help="Impeller diameter, mm.")
@click.option("--speed", "speed_rpm", type=float, default=None, help="Speed, 1/min (else the printed one).")
@json_option
def show(
    key: str | None,
    bank: Path | None,
    revision: int | None,
    flow_m3h: float | None,
    diameter_mm: float | None,
    speed_rpm: float | None,
    as_json: bool,
) -> None:
    """List the pumps of a bank, show one by KEY, or read its values at a flow."""
    path = bank or default_bank()
    if key is None:
        _show_list(path, as_json)
    elif flow_m3h is None:
        _show_pump(path, key, revision, as_json)
    else:
        _show_values(path, key, revision, {"flow_m3h": flow_m3h, "diameter_mm": diameter_mm, "speed_rpm": speed_rpm}, as_json)


def _show_list(path: Path, as_json: bool) -> None:
    from ..bank import catalogue

    items: list[dict[str, Any]] = []
    with curvebank.open(path) as reader:
        cursor = None
        while True:
            page = catalogue.list_pumps(reader, cursor=cursor, limit=500)
            items += page["items"]
            cursor = page["next"]
            if cursor is None:
                break
    if as_json:
        emit(items)
    elif not items:
        click.echo("No pumps yet. Digitise a sheet and save it, or run curvebank demo.")
    else:
        head = ["key", "revision", "state", "stages", "1/min", "diameters, mm", "quantities"]
        click.echo(table(head, [_item_row(i) for i in items]))


def _show_pump(path: Path, key: str, revision: int | None, as_json: bool) -> None:
    from ..desk import export

    doc = export.document(path, key, revision)
    if as_json:
        emit(doc)
        return
    name = f"{doc['maker']} {doc['model']} ({doc['key']})"
    click.echo(f"{name}, revision {doc['number']}, {doc['state']}, saved {doc['saved_at'][:10]} by {doc['who']}")
    click.echo(f"because: {doc['why']}")
    head = ["curve", "quantity", "mm", "1/min", "from m3/h", "to m3/h", "order", "sigma", "largest miss %"]
    click.echo(table(head, [_curve_row(c) for c in doc["curves"]]))
    for failed in doc["failed"]:
        click.echo(f"not stored: {failed['id']}. {failed['error']['message']}")
    for f in doc["findings"]:
        click.echo(f"{f['severity'].capitalize()}. {f['message']}")
    _say_cautions(doc["cautions"])


def _show_values(path: Path, key: str, revision: int | None, at: dict[str, float | None], as_json: bool) -> None:
    with curvebank.open(path) as reader:
        pump = reader.pump(key) if revision is None else reader.pump(key, revision=revision)
        values, cautions, state = read_at(pump, at), list(pump.cautions), pump.state
    if as_json:
        emit({"key": pump.key, "revision": pump.revision, "state": state, "at": at, "values": values, "cautions": cautions})
        return
    click.echo(f"{pump.key} revision {pump.revision}, {state}, at {at['flow_m3h']:g} m3/h; ± is one standard uncertainty")
    head = ["quantity", "value", "unit", "± machine", "± print", ""]
    rows = [[n, v.get("value"), UNIT[n], v.get("u_machine"), v.get("u_print"), v.get("why", "")] for n, v in values.items()]
    click.echo(table(head, rows))
    _say_cautions(cautions)


def _curve_row(c: dict[str, Any]) -> list[Any]:
    f = c["fit"]
    quantity = c["quantity"] if c["level"] is None else f"{c['quantity']} {c['level']:g}"
    fitted = [*f["domain"], f["order"], f["sigma"], f["max_miss_pct"]] if f else [None] * 5
    return [c["id"], quantity, c["diameter_mm"], c["speed_rpm"], *fitted]


def _item_row(i: dict[str, Any]) -> list[Any]:
    sizes = ", ".join(f"{d:g}" for d in i["diameters_mm"])
    return [i["key"], i["revision"], i["state"], i["stages"], i["rated_rpm"], sizes, ", ".join(i["quantities"])]


def _say_cautions(cautions: list[str]) -> None:
    for text in cautions:
        click.echo(f"Caution. {text}")


def read_at(pump: Any, at: dict[str, float | None]) -> dict[str, dict[str, Any]]:
    """Value and both uncertainties of every quantity the pump has; where one cannot be read, ``why``."""
    out: dict[str, dict[str, Any]] = {}
    for name in pump.quantities:
        reading = pump.quantity(name)
        try:
            out[name] = {
                "value": reading(**at),
                "u_machine": reading.uncertainty(**at, of="machine"),
                "u_print": reading.uncertainty(**at, of="print"),
            }
        except CurvebankError as e:
            out[name] = {"why": e.message}
    return out


@click.command()
@click.argument("key")
@bank_option
@click.option("--revision", type=click.IntRange(1), default=None, help="A revision by number (else the released one).")
@click.option("--format", "form", type=click.Choice(["csv", "json"]), default="json", show_default=True)
@click.option(
    "--out", type=click.Path(path_type=Path, file_okay=False), default=None, help="Folder for the files (else stdout; needed for csv)."
)
def export(key: str, bank: Path | None, revision: int | None, form: str, out: Path | None) -> None:
    """Write the curves of pump KEY as CSV tables (points and fits) or one JSON document."""
    from ..desk import export as use_case
    from ..desk.files import write_text

    if form == "csv" and out is None:
        raise click.UsageError("csv makes two files: give their folder with --out DIR.")
    forms = ("json",) if form == "json" else ("csv-points", "csv-fits")
    texts = use_case.files(use_case.document(bank or default_bank(), key, revision), *forms)
    if out is None:
        click.echo(next(iter(texts.values())), nl=False)
        return
    for name, text in texts.items():
        write_text(out / name, text)
        click.echo(str(out / name))


@click.command()
@bank_option
@click.option("--rederive", is_flag=True, help="Also digitise the kept recipes again and compare (slow).")
@json_option
def verify(bank: Path | None, rederive: bool, as_json: bool) -> None:
    """Say whether the bank is whole: hashes, event chain, guards, columns. Exit code 1 if anything is wrong."""
    from ..bank.verify import verify as verify_bank

    again = None
    if rederive:
        from .. import digitise

        again = digitise.run
    bar = Bar("verify")
    report = verify_bank(bank or default_bank(), rederive=again, progress=bar)
    bar.close()
    if as_json:
        listed = {name: [f._asdict() for f in getattr(report, name)] for name in ("faults", "notes")}
        emit({"ok": report.ok, **listed, "counts": report.counts, "head_sha256": report.head_sha256})
    else:
        for word, fault in [("Fault", f) for f in report.faults] + [("Note", f) for f in report.notes]:
            click.echo(f"{word}. {fault.subject}: {fault.message} ({fault.code})")
        click.echo("The bank is whole." if report.ok else "The bank is not whole. Do not write to it; keep the file and its newest backup.")
        click.echo(f"head of the event chain {report.head_sha256}")
    sys.exit(0 if report.ok else 1)


COMMANDS = [show, export, verify]
