"""What the views work with: paths, page store, jobs, and the desk connection of the current request."""

import sqlite3
from contextlib import closing, suppress
from dataclasses import dataclass, field
from pathlib import Path
from typing import TYPE_CHECKING, Any

from flask import Flask, current_app, g

from curvebank.errors import CurvebankError

from . import bank_access, desk_file, desk_sheets, sources
from .jobs import Registry
from .page_store import PageStore, prune
from .problems import Problem

if TYPE_CHECKING:
    from .previews import Previews

CACHE_LIMIT_BYTES = 4_000_000_000


@dataclass(eq=False)
class Services:
    """One per app."""

    bank: Path
    desk: Path
    cache: Path
    jobs: Registry
    pages: PageStore = field(init=False)
    previews: "Previews" = field(init=False)
    prepare_ahead: bool = True
    outcomes: dict[str, dict[str, Any]] = field(default_factory=dict)
    """What finished jobs gave that is no step of a draft yet, by job."""

    def __post_init__(self) -> None:
        from .previews import Previews

        self.pages = PageStore(self.cache, self.sheet_bytes)
        self.previews = Previews(self)

    def sheet_bytes(self, sha256: str) -> bytes:
        """The file of a sheet, or a 404 problem."""
        data = sources.sheet_bytes(self.desk, self.bank, sha256)
        if data is None:
            raise Problem(
                404, "no-such-sheet", "The sheet is not here", "Neither the desk nor the bank holds this sheet. Add its file again."
            )
        return data

    def prune_cache(self) -> None:
        """Keep the cache below its limit; what was not used for longest goes first."""
        for part in ("pages", "prepared"):
            prune(self.cache / part, CACHE_LIMIT_BYTES // 2)

    def close(self) -> None:
        """End background work."""
        self.jobs.close()


def start(app: Flask) -> Services:
    """Build the services from the app's config: ``BANK``, ``DESK``, ``CACHE``, ``WORKERS``, ``PREPARE_AHEAD``."""
    bank = app.config.get("BANK")
    if not bank:
        raise CurvebankError("BANK is not set: name the bank file the app works on.", code="config")
    bank = Path(bank).absolute()
    desk = Path(app.config.get("DESK") or f"{bank}.desk").absolute()
    cache = app.config.get("CACHE")
    if cache is None:
        import platformdirs

        cache = platformdirs.user_cache_path("curvebank", appauthor=False)
    bank_access.make_if_missing(bank)
    desk_file.prepare(desk)
    _clear_desk(desk)
    cache = Path(cache).absolute()
    services = Services(
        bank=bank, desk=desk, cache=cache, jobs=Registry(app.config.get("WORKERS", 1)), prepare_ahead=app.config.get("PREPARE_AHEAD", True)
    )
    app.extensions["curvebank"] = services

    @app.teardown_appcontext
    def close_desk(_error: BaseException | None) -> None:
        db = g.pop("desk_db", None)
        if db is not None:
            db.close()

    return services


def _clear_desk(desk: Path) -> None:
    """Before anyone asks for them: remove forgotten sheets. A desk that cannot be written now is cleared at another start."""
    with closing(desk_file.connect(desk)) as db, suppress(sqlite3.OperationalError):
        desk_sheets.clear_forgotten(db)


def services() -> Services:
    """The services of the current app."""
    return current_app.extensions["curvebank"]


def desk_db() -> sqlite3.Connection:
    """The desk connection of this request."""
    if "desk_db" not in g:
        g.desk_db = desk_file.connect(services().desk)
    return g.desk_db
