"""Work that goes on in a thread of its own while the caller does something else."""

from __future__ import annotations

import threading
from collections.abc import Callable
from concurrent.futures import Future
from typing import TypeVar

Result = TypeVar("Result")


def aside(work: Callable[[], Result]) -> Callable[[], Result]:
    """Begin `work`; the call returned waits for it and gives what it returned, or raises what it raised.

    A result that nobody asks for is dropped, and the work keeps no program from ending: it must leave nothing behind.
    """
    future: Future[Result] = Future()

    def run() -> None:
        try:
            future.set_result(work())
        except BaseException as error:
            future.set_exception(error)

    threading.Thread(target=run, daemon=True).start()
    return future.result
