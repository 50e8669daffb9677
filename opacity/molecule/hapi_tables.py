"""The one door to hapi: imported late, with the banner that it prints at import kept off stdout."""

from __future__ import annotations

import contextlib
import functools
import importlib
import io
from typing import Any


@functools.cache
def hapi() -> Any:
    """The module hapi (hitran-api)."""
    with contextlib.redirect_stdout(io.StringIO()), contextlib.redirect_stderr(io.StringIO()):
        return importlib.import_module("hapi")
