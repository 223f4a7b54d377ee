"""Serving the app on this machine only: ``serve(bank)``, or ``python -m curvebank_web.server --bank FILE``."""

import argparse
import signal
import socket
import sys
import threading
from pathlib import Path
from typing import TYPE_CHECKING

from curvebank.errors import CurvebankError

from . import worker

if TYPE_CHECKING:
    from .services import Services

HOST = "127.0.0.1"
DEFAULT_PORT = 8470
TRIED = 50
"""Ports tried after the default one."""
THREADS = 8
BODY_LIMIT = 4 * 1024**3
"""waitress's own limit, far above the app's, so that the app gives the answer in its own words."""


class PortBusy(CurvebankError):
    """The port that was asked for is taken."""

    code = "port-busy"


def bind(port: int | None) -> socket.socket:
    """A socket on 127.0.0.1. None: the default port or the next free one; 0: any free one.

    Raises
    ------
    PortBusy
        The port asked for is taken or not allowed.
    """
    wanted = range(DEFAULT_PORT, DEFAULT_PORT + TRIED) if port is None else (port,)
    for number in wanted:
        door = socket.socket(socket.AF_INET, socket.SOCK_STREAM)
        if sys.platform == "win32":
            door.setsockopt(socket.SOL_SOCKET, socket.SO_EXCLUSIVEADDRUSE, 1)
        else:
            door.setsockopt(socket.SOL_SOCKET, socket.SO_REUSEADDR, 1)
        try:
            door.bind((HOST, number))
            door.listen(128)
            return door
        except (OSError, OverflowError) as error:
            door.close()
            if port is not None:
                raise PortBusy(
                    f"Port {port} on this machine is taken or not allowed ({error}). Choose another with --port, or --port 0."
                ) from None
    raise PortBusy(f"Ports {DEFAULT_PORT} to {DEFAULT_PORT + TRIED - 1} are all taken. Choose another with --port.")


def serve(bank: str | Path, port: int | None = None, open_browser: bool = True) -> None:
    """Serve a bank until interrupted.

    Prints the address alone on one line when the server answers. A missing bank is created.

    Raises
    ------
    curvebank.errors.CurvebankError
        The port is taken, or the bank or desk file cannot be used.
    """
    worker.one_thread()
    from waitress.server import create_server

    from . import create_app

    door = bind(port)
    try:
        app = create_app({"BANK": str(bank)})
    except BaseException:
        door.close()
        raise
    services = app.extensions["curvebank"]
    server = create_server(
        app, sockets=[door], threads=THREADS, max_request_body_size=BODY_LIMIT, ident="curvebank", clear_untrusted_proxy_headers=True
    )
    address = f"http://{HOST}:{door.getsockname()[1]}/"
    if threading.current_thread() is threading.main_thread():
        signal.signal(signal.SIGTERM, _leave)
    services.jobs.start()
    threading.Thread(target=_settle, args=(services,), daemon=True).start()
    print(address, flush=True)
    if open_browser:
        import webbrowser

        threading.Thread(target=webbrowser.open, args=(address,), daemon=True).start()
    try:
        server.run()
    finally:
        services.close()
        server.close()


def _settle(services: "Services") -> None:
    """While the first page is looked at: import what previews need, and tidy the cache."""
    import curvebank.digitise  # noqa: F401

    services.prune_cache()


def _leave(_number: int, _frame: object) -> None:
    raise SystemExit(0)


def main(arguments: list[str] | None = None) -> int:
    """Command-line form of ``serve``."""
    parser = argparse.ArgumentParser(prog="python -m curvebank_web.server", description="Serve a bank on this machine.")
    parser.add_argument("--bank", required=True)
    parser.add_argument("--port", type=int)
    parser.add_argument("--browser", action="store_true", help="open the browser")
    options = parser.parse_args(arguments)
    try:
        serve(options.bank, options.port, options.browser)
    except CurvebankError as error:
        print(error.message, file=sys.stderr)
        return error.exit_code
    return 0


if __name__ == "__main__":
    sys.exit(main())
