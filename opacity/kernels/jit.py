"""The one decorator of all kernels.

`error_model="numpy"` lets loops with divisions vectorise; of the fast-math flags those that make NaN and
infinity undefined are left out, so that a NaN that gets in comes out.  Kernels are single-threaded and release the
interpreter lock: the caller runs tiles side by side in threads, and results do not depend on their number.
"""

from __future__ import annotations

from collections.abc import Callable
from typing import Any, TypeVar, cast

import numba

Function = TypeVar("Function", bound=Callable[..., Any])

_FAST_MATH = {"contract", "reassoc", "arcp", "nsz"}


def jit(function: Function) -> Function:
    """Compile a pure function of scalars and arrays at its first call; the machine code is kept on disk."""
    compiled: Any = numba.njit(nogil=True, cache=True, error_model="numpy", fastmath=_FAST_MATH)(function)
    return cast(Function, compiled)


def jit_exact(function: Function) -> Function:
    """As `jit`, with plain IEEE arithmetic: for index searches, whose comparisons must be those of numpy."""
    compiled: Any = numba.njit(nogil=True, cache=True, error_model="numpy")(function)
    return cast(Function, compiled)
