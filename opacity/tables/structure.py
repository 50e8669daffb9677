"""Opening a table's file and proving that it has the structure of `layout` before a number is read from it."""

from __future__ import annotations

import contextlib
import errno
import json
import stat
from collections.abc import Callable, Iterator, Mapping
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
def reading(path: Path, what: str | Callable[[], str]) -> Iterator[None]:
    """Name the file and the part read in whatever goes wrong inside; `what` may be made only then.

    A damaged file can make the HDF5 library raise nearly any type of error, hence the wide net.
    """
    try:
        yield
    except OpacityError:
        raise
    except Exception as error:
        what = what if isinstance(what, str) else what()
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


def format_name(path: Path, file: Any) -> str:
    """What the file says its format is; empty where it says nothing."""
    return str(attribute(path, file, "format", default=""))


def other_format(path: Path, found: str, *expected: str) -> TableError:
    """The error for a file of another format than those expected."""
    formats = " or ".join(f'"{name}"' for name in expected)
    return TableError(
        problem(path, "not a table of this program", expected=f"format {formats}", found=f'"{found}"')
        if found not in layout.FORMATS
        else problem(path, "another kind of table than is needed here", expected=formats, found=f'"{found}"')
    )


def check_format(
    path: Path,
    file: Any,
    name: str = layout.FORMAT_NAME,
    versions: tuple[int, int] = (layout.OLDEST_VERSION, layout.FORMAT_VERSION),
) -> int:
    """The format version; TableError for another format, or a version that this program can't read."""
    found = format_name(path, file)
    if found != name:
        raise other_format(path, found, name)
    oldest, newest = versions
    version = attribute(path, file, "format_version", default=None)
    if not isinstance(version, int):
        raise damaged(path, "format_version", expected="a whole number", found=repr(version))
    if not oldest <= version <= newest:
        newer = version > newest
        raise TableError(
            problem(
                path,
                "format version not supported",
                expected=f"{oldest} to {newest}",
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


def dataset(path: Path, file: Any, name: str, known: Mapping[str, str] = layout.UNITS) -> Any:
    """The dataset `name` with the units it must have; `known` gives the units of each that has some."""
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
    if name in known:
        units = attribute(path, found, "units", default="")
        if units != known[name]:
            raise damaged(path, f"units of {name}", expected=f'"{known[name]}"', found=f'"{units}"')
    return found


def check_stored_as(path: Path, stored: Any, name: str, shape: tuple[int, ...], types: tuple[str, ...]) -> None:
    """TableError unless a dataset has the shape and one of the types that it must have."""
    with reading(path, f"dataset {name}"):
        if stored.shape != shape:
            raise damaged(path, f"shape of {name}", expected=shape, found=stored.shape)
        if stored.dtype not in [np.dtype(kind) for kind in types]:
            raise damaged(path, f"type of {name}", expected=" or ".join(types), found=stored.dtype)


def is_packed_as(stored: Any, block: int) -> bool:
    """Whether a dataset's chunks are blocks of one spectrum, shuffled and deflated, as this program writes them."""
    plan = stored.id.get_create_plist()
    filters = [plan.get_filter(i)[0] for i in range(plan.get_nfilters())]
    chunk = (*(1 for _ in stored.shape[:-1]), min(block, stored.shape[-1]))
    return filters == [h5py.h5z.FILTER_SHUFFLE, h5py.h5z.FILTER_DEFLATE] and stored.chunks == chunk


def _hashed(
    stored: Any, path: Path, name: str, kind: str, dimensions: int = 1, hash_name: str = "sha256"
) -> NDArray[Any]:
    """The values of a dataset of so many dimensions, proved by the sha256 in its attribute `hash_name`."""
    with reading(path, f"dataset {name}"):
        if len(stored.shape) != dimensions or stored.size == 0:
            expected = "one dimension" if dimensions == 1 else f"{dimensions} dimensions"
            raise damaged(path, f"shape of {name}", expected=expected, found=stored.shape)
        check_stored_as(path, stored, name, stored.shape, (kind,))
        values: NDArray[Any] = stored[()]
        if layout.sha256_of(values) != attribute(path, stored, hash_name):
            raise damaged(path, f"dataset {name} does not match its sha256")
    return values


def read_array(
    path: Path,
    file: Any,
    name: str,
    dimensions: int,
    known: Mapping[str, str] = layout.UNITS,
    hash_name: str = "sha256",
) -> FloatArray:
    """A stored array of f8, read-only; TableError where it is not what was written, or a value is not 0 or above."""
    values = _hashed(dataset(path, file, name, known), path, name, "<f8", dimensions, hash_name).astype(np.float64)
    if not np.all(np.isfinite(values)) or values.min() < 0.0:
        raise damaged(path, f"dataset {name}", expected="finite values, 0 or above", found="others")
    values.flags.writeable = False
    return values


def read_axis(path: Path, file: Any, name: str, *, rising: bool, known: Mapping[str, str] = layout.UNITS) -> FloatArray:
    """The values of an axis, (n,), read-only; TableError where they cannot be those of one."""
    values = read_array(path, file, name, 1, known)
    if rising and np.any(np.diff(values) <= 0.0):
        raise damaged(path, f"dataset {name}", expected="finite values in rising order", found="others")
    return values


def read_text(path: Path, file: Any, name: str) -> str:
    """A stored text."""
    with reading(path, f"dataset {name}"):
        text = _hashed(dataset(path, file, name), path, name, "S1").tobytes().decode("utf-8")
    return "" if text == "\0" else text


def read_json(path: Path, file: Any, name: str) -> dict[str, Any]:
    """A stored JSON object."""
    with reading(path, f"dataset {name}"):
        content = json.loads(read_text(path, file, name))
    if not isinstance(content, dict):
        raise damaged(path, f"dataset {name}", expected="a JSON object", found=type(content).__name__)
    return content
