"""The local web app of curvebank: ``create_app(config)`` builds it, ``server.serve`` runs it on this machine only.

Flask is imported when an app is built, so that worker processes can import this package without it.
"""

from typing import TYPE_CHECKING, Any

if TYPE_CHECKING:
    from flask_openapi import OpenAPI


def create_app(config: dict[str, Any] | None = None) -> "OpenAPI":
    """Build the web app.

    Parameters
    ----------
    config : dict, optional
        ``BANK`` path of the bank file (required), ``DESK`` path of the desk file (default: BANK + ``.desk``),
        ``CACHE`` folder for tiles and prepared sheets (default: the platform's cache folder), ``WORKERS`` number of
        worker processes (default 1), and any Flask setting.

    Raises
    ------
    curvebank.errors.CurvebankError
        ``BANK`` is missing, or the desk file cannot be used.
    """
    from .app import build

    return build(config or {})
