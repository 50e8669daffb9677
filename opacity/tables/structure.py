"""Opening a table's file and proving that it has the structure of `layout` before a number is read from it."""

from __future__ import annotations

import contextlib
import errno
import json
import stat
from collections.abc import Iterator
from pathlib import Path
from typing import Any

import h5py
import numpy as np
from numpy.typing import NDArray

from opacity.errors import OpacityError, TableError, one_line, problem
from opacity.grids import FloatArray
from opacity.tables import layout

_REMEDY = "build the table again, or take a sound copy"


def damaged(path: Path, what: str, *, expected: object = None, found: object = None) -> TableError:
    """The error for a file whose content is not what was once written."""
    return TableError(problem(path, f"damaged: {what}", expected=expected, found=found, remedy=_REMEDY))


@contextlib.contextmanager
def reading(path: Path, what: str) -> Iterator[None]:
    """Name the file and the part read in whatever goes wrong inside.

    A damaged file can make the HDF5 library raise nearly any type of error, hence the wide net.
    """
    try:
        yield
    except OpacityError:
        raise
    except Exception as error:
        raise damaged(path, f"{what} cannot be read ({one_line(error) or type(error).__name__})") from error


def open_file(path: Path) -> Any:
    """The HDF5 file, open for reading; TableError where there is none."""
    _check_is_file(path)
    try:
        return _open_hdf5(path)
    except Exception as error:
        raise TableError(
            problem(
                path,
                f"not a table: not a readable HDF5 file ({one_line(error) or type(error).__name__})",
                expected="a table that this program built, such as NAME.cross-section.h5",
                remedy=f"if it was one, {_REMEDY}",
            )
        ) from error


def _check_is_file(path: Path) -> None:
    try:
        is_file = stat.S_ISREG(path.stat().st_mode)
        with open(path, "rb") if is_file else contextlib.nullcontext():
            pass
    except OSError as error:
        raise TableError(problem(path, f"cannot be opened ({error.strerror})")) from error
    except ValueError as error:
        raise TableError(problem(repr(str(path)), f"cannot be opened ({error})")) from error
    if not is_file:
        raise TableError(problem(path, "not a file", expected="a table"))


def _open_hdf5(path: Path) -> Any:
    """Network file systems that have no locks say ENOLCK; a table is never changed, so none is needed.

    Blocks are read whole, so a cache of them would only hide from `Table.verify` what is on the disk now.
    """
    try:
        return h5py.File(path, "r", rdcc_nbytes=0)
    except OSError as error:
        if error.errno != errno.ENOLCK and f"errno = {errno.ENOLCK}," not in str(error):
            raise
        return h5py.File(path, "r", rdcc_nbytes=0, locking=False)


def check_format(path: Path, file: Any) -> int:
    """The format version; TableError for another format, or a version that this program can't read."""
    name = attribute(path, file, "format", default="")
    if name != layout.FORMAT_NAME:
        raise TableError(
            problem(path, "not a table of this program", expected=f'format "{layout.FORMAT_NAME}"', found=f'"{name}"')
        )
    version = attribute(path, file, "format_version", default=None)
    if not isinstance(version, int):
        raise damaged(path, "format_version", expected="a whole number", found=repr(version))
    if not layout.OLDEST_VERSION <= version <= layout.FORMAT_VERSION:
        newer = version > layout.FORMAT_VERSION
        raise TableError(
            problem(
                path,
                "format version not supported",
                expected=f"{layout.OLDEST_VERSION} to {layout.FORMAT_VERSION}",
                found=version,
                remedy="install a newer version of opacity" if newer else "build the table again",
            )
        )
    return version


def attribute(path: Path, target: Any, name: str, **default: Any) -> Any:
    """An attribute as str or int; TableError where it is missing, unless a `default` is given."""
    with reading(path, f"attribute {name} of {target.name}"):
        if name not in target.attrs:
            if "default" in default:
                return default["default"]
            raise damaged(path, f"attribute {name} of {target.name} is missing")
        value = target.attrs[name]
        if isinstance(value, np.ndarray) and value.size == 1:
            value = value.reshape(()).item()
        if isinstance(value, bytes):
            return value.decode("utf-8")
        if isinstance(value, str):
            return str(value)
        return int(value) if isinstance(value, int | np.integer) else value


def is_profile(path: Path, file: Any) -> bool:
    """Whether the nodes of the table are those of a profile instead of a grid."""
    nodes = attribute(path, file, "nodes")
    if nodes not in ("grid", "profile"):
        raise damaged(path, "attribute nodes", expected='"grid" or "profile"', found=f'"{nodes}"')
    return bool(nodes == "profile")


def dataset(path: Path, file: Any, name: str) -> Any:
    """The dataset `name` with the units it must have."""
    with reading(path, f"dataset {name}"):
        if name not in file.keys():  # noqa: SIM118 - `in file` is False also for what is there and damaged
            raise damaged(path, f"dataset {name} is missing")
        found = file[name]
        if not isinstance(found, h5py.Dataset):
            raise damaged(path, f"{name} is not a dataset")
        # Readers of netCDF would apply these to every value.
        foreign = sorted({"scale_factor", "add_offset", "valid_range", "missing_value"} & set(found.attrs))
        if foreign:
            raise damaged(path, f"attribute {foreign[0]} of {name}", expected="none", found="one")
    if name in layout.UNITS:
        units = attribute(path, found, "units", default="")
        if units != layout.UNITS[name]:
            raise damaged(path, f"units of {name}", expected=f'"{layout.UNITS[name]}"', found=f'"{units}"')
    return found


def check_stored_as(path: Path, stored: Any, name: str, shape: tuple[int, ...], types: tuple[str, ...]) -> None:
    """TableError unless a dataset has the shape and one of the types that it must have."""
    with reading(path, f"dataset {name}"):
        if stored.shape != shape:
            raise damaged(path, f"shape of {name}", expected=shape, found=stored.shape)
        if stored.dtype not in [np.dtype(kind) for kind in types]:
            raise damaged(path, f"type of {name}", expected=" or ".join(types), found=stored.dtype)


def _hashed(path: Path, file: Any, name: str, kind: str) -> NDArray[Any]:
    """The values of a one-dimensional dataset, proved by its sha256."""
    stored = dataset(path, file, name)
    with reading(path, f"dataset {name}"):
        if len(stored.shape) != 1 or stored.size == 0:
            raise damaged(path, f"shape of {name}", expected="one dimension", found=stored.shape)
        check_stored_as(path, stored, name, stored.shape, (kind,))
        values: NDArray[Any] = stored[()]
        if layout.sha256_of(values) != attribute(path, stored, "sha256"):
            raise damaged(path, f"dataset {name} does not match its sha256")
    return values


def read_axis(path: Path, file: Any, name: str, *, rising: bool) -> FloatArray:
    """The values of an axis, (n,), read-only; TableError where they cannot be those of one."""
    values = _hashed(path, file, name, "<f8").astype(np.float64)
    if not np.all(np.isfinite(values)) or values.min() < 0.0 or (rising and np.any(np.diff(values) <= 0.0)):
        raise damaged(path, f"dataset {name}", expected="finite values in rising order", found="others")
    values.flags.writeable = False
    return values


def read_text(path: Path, file: Any, name: str) -> str:
    """A stored text."""
    with reading(path, f"dataset {name}"):
        text = _hashed(path, file, name, "S1").tobytes().decode("utf-8")
    return "" if text == "\0" else text


def read_json(path: Path, file: Any, name: str) -> dict[str, Any]:
    """A stored JSON object."""
    with reading(path, f"dataset {name}"):
        content = json.loads(read_text(path, file, name))
    if not isinstance(content, dict):
        raise damaged(path, f"dataset {name}", expected="a JSON object", found=type(content).__name__)
    return content
