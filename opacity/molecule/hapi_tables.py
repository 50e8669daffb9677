"""The one door to hapi: imported late, with its banner kept off stdout and its filters off the caller's warnings."""

from __future__ import annotations

import contextlib
import functools
import importlib
import io
import threading
import warnings
from typing import Any

_LOCK = threading.Lock()


def hapi() -> Any:
    """The module hapi (hitran-api)."""
    # Two threads that kept its banner off stdout at the same time could lose stdout for good.
    with _LOCK:
        return _load()


@functools.cache
def _load() -> Any:
    with (
        contextlib.redirect_stdout(io.StringIO()),
        contextlib.redirect_stderr(io.StringIO()),
        warnings.catch_warnings(),
    ):
        return importlib.import_module("hapi")
