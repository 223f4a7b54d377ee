"""One thread for the numbers: the count of threads changes the last bits of a sum, and small matrices run faster on one."""

import functools
from collections.abc import Callable
from typing import ParamSpec, TypeVar

from threadpoolctl import ThreadpoolController

P = ParamSpec("P")
R = TypeVar("R")


@functools.cache
def _controller() -> ThreadpoolController:
    return ThreadpoolController()


def one_thread(function: Callable[P, R]) -> Callable[P, R]:
    """Run a function with the linear-algebra libraries held to one thread; the caller's own setting is back afterwards."""

    @functools.wraps(function)
    def held(*args: P.args, **kwargs: P.kwargs) -> R:
        with _controller().limit(limits=1):
            return function(*args, **kwargs)

    return held
