"""One worker process: takes tasks from a pipe, reports progress, stops when told or when the server is gone.

A task is ``(name, arguments)``; the answers are ``("progress", share, text)`` and in the end one of ``("done", value)``,
``("failed", {code, message, path})`` or ``("cancelled",)``. Anything the server sends during a task means: stop.
"""

import os
import signal
import time
import traceback
from collections.abc import Callable
from multiprocessing.connection import Connection
from typing import Any

from curvebank.errors import Cancelled, CurvebankError

ONE_THREAD = ("OPENBLAS_NUM_THREADS", "OMP_NUM_THREADS", "MKL_NUM_THREADS")
"""Linear algebra on one thread: repeats to the bit, and small matrices gain nothing from more. Read when numpy is first imported."""
REPORT_S = 0.1
"""Progress is sent at most this often."""


def one_thread() -> None:
    """Ask numpy, in this process if it is not loaded yet and in the ones it starts, for one thread. What the user set stays."""
    for name in ONE_THREAD:
        os.environ.setdefault(name, "1")


class Reporter:
    """The ``progress(share, text)`` callback of a task; raises ``Cancelled`` when the server said stop or went away."""

    def __init__(self, pipe: Connection) -> None:
        self.pipe = pipe
        self.last = 0.0

    def __call__(self, share: float, text: str = "") -> None:
        if self.pipe.poll():
            try:
                self.pipe.recv()
            except (EOFError, OSError):
                raise SystemExit(0) from None
            raise Cancelled("Stopped. What was done before is kept.")
        now = time.monotonic()
        if now - self.last >= REPORT_S:
            self.last = now
            self.pipe.send(("progress", float(share), str(text)))


def main(pipe: Connection, tasks: str) -> None:
    """Serve tasks until the pipe closes. ``tasks`` is the module that holds the task functions."""
    signal.signal(signal.SIGINT, signal.SIG_IGN)  # the server decides when work stops
    functions = _load(tasks)
    pipe.send(("ready",))
    while True:
        try:
            message = pipe.recv()
        except (EOFError, OSError):  # the server is gone
            return
        if message[0] != "task":  # a stop that came after the task had ended
            continue
        pipe.send(_perform(functions, message[1], message[2], Reporter(pipe)))


def _load(tasks: str) -> dict[str, Callable[..., Any]]:
    import importlib

    return importlib.import_module(tasks).TASKS


def _perform(functions: dict[str, Callable[..., Any]], name: str, arguments: dict[str, Any], progress: Reporter) -> tuple[Any, ...]:
    try:
        return ("done", functions[name](**arguments, progress=progress))
    except Cancelled:
        return ("cancelled",)
    except CurvebankError as error:
        return ("failed", error.to_dict())
    except MemoryError:
        message = "There is not enough memory for this sheet. Close other programs, or scan at a lower resolution."
        return ("failed", {"code": "memory", "message": message, "path": None})
    except Exception:
        traceback.print_exc()
        message = "This is a fault of the program. What was kept before is safe. The server's output has the details."
        return ("failed", {"code": "internal", "message": message, "path": None})
