"""The one decorator of all kernels.

`error_model="numpy"` lets loops with divisions vectorise; of the fast-math flags those that make NaN and
infinity undefined are left out, so that a NaN that gets in comes out.  Kernels are single-threaded and release the
interpreter lock: the caller runs tiles side by side in threads, and results do not depend on their number.

Machine code is kept on disk.  numba judges its age by the file of the function alone, not by the files of the
functions that it calls: so it is kept in a folder named by a hash of all kernels' source.
"""

from __future__ import annotations

import hashlib
from collections.abc import Callable, Iterator
from contextlib import contextmanager
from pathlib import Path
from typing import Any, TypeVar, cast

import numba

Function = TypeVar("Function", bound=Callable[..., Any])

_FAST_MATH = {"contract", "reassoc", "arcp", "nsz"}


def _source_hash() -> str:
    digest = hashlib.sha256()
    for path in sorted(Path(__file__).parent.glob("*.py")):
        digest.update(path.read_bytes())
    return digest.hexdigest()[:16]


_HASH = _source_hash()
_CONFIG: Any = numba.config


@contextmanager
def _cache_of_this_source() -> Iterator[None]:
    """While a function is decorated, point numba to the cache folder of exactly this source."""
    before = _CONFIG.CACHE_DIR
    base = Path(before) if before else Path(__file__).parent / "__pycache__"
    _CONFIG.CACHE_DIR = str(base / f"kernels-{_HASH}")
    try:
        yield
    finally:
        _CONFIG.CACHE_DIR = before


def jit(function: Function) -> Function:
    """Compile a pure function of scalars and arrays at its first call; the machine code is kept on disk."""
    return _compile(function, fastmath=_FAST_MATH)


def jit_exact(function: Function) -> Function:
    """As `jit`, with plain IEEE arithmetic: for index searches, whose comparisons must be those of numpy."""
    return _compile(function, fastmath=False)


def _compile(function: Function, **options: Any) -> Function:
    with _cache_of_this_source():
        compiled: Any = numba.njit(nogil=True, cache=True, error_model="numpy", **options)(function)
    return cast(Function, compiled)
