"""Where a number came from: this program's version, the packages' versions, the inputs' hashes."""

from __future__ import annotations

import hashlib
import stat
import zlib
from importlib import metadata
from pathlib import Path

from opacity.errors import OpacityError, problem

VERSION = "0.1.0"
"""The version of this program; the only place where it is written."""

_PACKAGES = ("numpy", "numba", "llvmlite", "scipy", "h5py", "hitran-api")


def package_versions() -> dict[str, str]:
    """Installed versions of the packages that results depend on."""
    return {**{name: metadata.version(name) for name in _PACKAGES}, "zlib": zlib.ZLIB_RUNTIME_VERSION}


def file_sha256(path: Path) -> str:
    """Hexadecimal sha256 of a file's bytes as they lie on disk.  Raises OpacityError if it can't be read."""
    digest = hashlib.sha256()
    try:
        if not stat.S_ISREG(path.stat().st_mode) and not path.is_dir():  # a pipe would be waited for without end
            raise OpacityError(problem(path, "not a file", expected="a regular file"))
        with open(path, "rb") as stream:
            while block := stream.read(1 << 20):
                digest.update(block)
    except OSError as error:
        raise OpacityError(problem(path, f"cannot be read ({error.strerror})")) from error
    return digest.hexdigest()
