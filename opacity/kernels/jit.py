"""The one decorator of all kernels.

`error_model="numpy"` lets loops with divisions vectorise; of the fast-math flags those that make NaN and
infinity undefined are left out, so that a NaN that gets in comes out.  Kernels are single-threaded and release the
interpreter lock: the caller runs tiles side by side in threads, and results do not depend on their number.

What a kernel calls is made part of it, if its arithmetic may be rearranged.  Otherwise a process that loads machine
code from disk may link it with another copy of the function called than the process that compiled it, optimised for
another caller and rounding otherwise: bits would depend on the order in which kernels were once compiled.

Machine code is kept on disk.  numba judges its age by the file of the function alone, not by the files of the
functions that it calls: so it is kept in a folder named by a hash of all kernels' source, in the first place that
can be written to; where there is none it is not kept, since numba's own choice of place would not know the hash.
"""

from __future__ import annotations

import contextlib
import functools
import hashlib
import os
import shutil
import tempfile
from collections.abc import Callable, Iterator
from contextlib import contextmanager
from pathlib import Path
from typing import Any, TypeVar, cast

import numba

Function = TypeVar("Function", bound=Callable[..., Any])

_FAST_MATH = {"contract", "reassoc", "arcp", "nsz"}


@functools.cache
def source_hash() -> str:
    """A hash of the source of all kernels: what was computed by others has other bits."""
    digest = hashlib.sha256()
    for path in sorted(Path(__file__).parent.glob("*.py")):
        digest.update(path.read_bytes())
    return digest.hexdigest()[:16]


_CONFIG: Any = numba.config
KEPT_VERSIONS = 8


def _cache_folder() -> Path | None:
    """Where machine code of exactly this source is kept: NUMBA_CACHE_DIR, the package itself, the user's cache."""
    bases = [Path(__file__).parent / "__pycache__"]
    if _CONFIG.CACHE_DIR:
        bases.insert(0, Path(_CONFIG.CACHE_DIR))
    user = os.environ.get("XDG_CACHE_HOME") or os.path.expanduser("~/.cache")
    bases.append(Path(user) / "opacity")
    name = f"kernels-{source_hash()}"
    for base in bases:
        folder = base / name
        try:
            folder.mkdir(parents=True, exist_ok=True)
            with tempfile.TemporaryFile(dir=folder):
                pass
        except OSError:
            continue
        _remove_old(base, name)
        return folder
    return None


def _remove_old(base: Path, name: str) -> None:
    """Leave the machine code of the last few versions only."""
    with contextlib.suppress(OSError):
        others = sorted(
            (one for one in base.glob("kernels-*") if one.name != name), key=lambda one: one.stat().st_mtime
        )
        for one in others[:-KEPT_VERSIONS]:
            shutil.rmtree(one, ignore_errors=True)


_FOLDER = _cache_folder()


@contextmanager
def _cache_of_this_source() -> Iterator[None]:
    """While a function is decorated, point numba to the cache folder of exactly this source."""
    before = _CONFIG.CACHE_DIR
    if _FOLDER is not None:
        _CONFIG.CACHE_DIR = str(_FOLDER)
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


def jit_in_order(function: Function) -> Function:
    """As `jit_exact`, but a product and the sum that it goes into are rounded once where the processor can.

    Sums stay in the order written, so that what is gained by rounding tricks is not optimised away.
    """
    return _compile(function, fastmath={"contract"})


def _compile(function: Function, fastmath: bool | set[str]) -> Function:
    # Plain IEEE arithmetic rounds the same wherever it stands, and compiles sooner on its own.
    options: dict[str, Any] = {
        "nogil": True,
        "error_model": "numpy",
        "forceinline": bool(fastmath),
        "fastmath": fastmath,
    }
    with _cache_of_this_source():
        compiled: Any = numba.njit(cache=_FOLDER is not None, **options)(function)
    return cast(Function, compiled)
