"""One segment of a line store: packed lines in an HDF5 file, hashed, written once."""

from __future__ import annotations

import hashlib
import os
from dataclasses import replace
from pathlib import Path
from typing import Any

import h5py
import numpy as np

from opacity.errors import LineListError, one_line, problem
from opacity.grids import FloatArray
from opacity.line_list.packed import PackedLines, WidthClasses, classes_of, used_classes
from opacity.line_store.aside import aside
from opacity.line_store.layout import FORMAT_NAME, FORMAT_VERSION, SAMPLE_EVERY, Segment
from opacity.molecule.broadening import BroadenerColumns
from opacity.provenance import file_sha256
from opacity.tables.atomic import write_atomically

HELD_CLASSES = 4096
"""Tables of classes up to this length stay in memory while their segment is open."""

_UNITS = {
    "wavenumber": "cm-1",
    "intensity": "steps of 500/2^32 of ln I, from -400; 0 for none",
    "lower_energy": "steps of 2.5e-5 cm-1, from -1 cm-1",
    "width_class": "row of classes",
    "record": "line number in the file",
}


def write_segment(folder: Path, name: str, packed: PackedLines) -> Segment:
    """Write sorted lines to a file of the folder.  Raises ResourceError where the file system refuses."""
    # Classes in the order in which lines come to them, so that those of a stretch of lines lie together.
    index, first = classes_of(np.ascontiguousarray(packed.width_class.astype(np.uint64)[:, np.newaxis]))
    rows = packed.width_class[first].astype(np.int64)
    packed = replace(packed, width_class=index, classes=packed.classes.select(rows))
    data = _image(packed)
    hashing = aside(lambda: hashlib.sha256(data).hexdigest())
    write_atomically(folder / name, data)
    nu = packed.wavenumber
    return Segment(
        file=name,
        lines=len(packed),
        first=float(nu[0]),
        last=float(nu[-1]),
        sha256=hashing(),
        bytes=len(data),
        sample=tuple(float(one) for one in (*nu[::SAMPLE_EVERY], nu[-1])),
    )


def _image(packed: PackedLines) -> bytes:
    narrow = np.uint16 if len(packed.classes) <= 1 << 16 else np.uint32
    with h5py.File("image", "w", driver="core", backing_store=False, libver=("v108", "v110")) as file:
        file.attrs["format"] = np.bytes_(FORMAT_NAME)
        file.attrs["format_version"] = FORMAT_VERSION
        for name, unit in _UNITS.items():
            values = getattr(packed, name)
            stored = file.create_dataset(name, data=values.astype(narrow) if name == "width_class" else values)
            stored.attrs["units"] = np.bytes_(unit)
        classes = file.create_group("classes")
        classes.create_dataset("isotopologue", data=packed.classes.isotopologue)
        classes.create_dataset("file", data=packed.classes.file)
        for name, one in sorted(packed.classes.broadeners.items()):
            group = classes.create_group(f"broadeners/{name}")
            for kind, unit in (("gamma", "cm-1 bar-1"), ("exponent", "1"), ("shift", "cm-1 bar-1")):
                values = getattr(one, kind)
                if not np.all(np.isnan(values)):
                    group.create_dataset(kind, data=values).attrs["units"] = np.bytes_(unit)
        file.flush()
        return bytes(file.id.get_file_image())


def verify_segment(folder: Path, segment: Segment) -> None:
    """Raise LineListError naming a segment that is missing or not as it was written."""
    path = folder / segment.file
    try:
        path.stat()
    except FileNotFoundError as error:
        raise LineListError(problem(path, "segment of the line store is missing", remedy=_REMEDY)) from error
    except OSError as error:
        raise _unreadable(path, error) from error
    if file_sha256(path) != segment.sha256:
        raise LineListError(problem(path, "segment of the line store is damaged (sha256 differs)", remedy=_REMEDY))


def _unreadable(path: Path, error: Exception) -> LineListError:
    """What to say of a segment that does not open: what the system said, or that the file is not one."""
    if not isinstance(error, OSError):
        return LineListError(problem(path, "segment of the line store cannot be read", remedy=_REMEDY))
    reason = os.strerror(error.errno) if error.errno else one_line(error)
    return LineListError(problem(path, f"segment of the line store cannot be read ({reason})"))


def _open(path: Path) -> Any:
    """The file; without a lock where the file system has none, for a segment is never changed."""
    try:
        return h5py.File(path, "r")
    except OSError:
        return h5py.File(path, "r", locking=False)


class SegmentReader:
    """An open segment, read by stretches of wavenumber.  Its sha256 is the caller's to verify."""

    def __init__(self, folder: Path, segment: Segment) -> None:
        self._path = folder / segment.file
        self._sample = np.asarray(segment.sample)
        self._lines = segment.lines
        try:
            self._file = _open(self._path)
            self._columns = {name: self._file[name] for name in _UNITS}
            self._table = self._file["classes"]
            self._n_classes = int(self._table["isotopologue"].size)
            self._class_weight = 2 + len(self._table.get("broadeners", ()))
            self._held = _read_classes(self._table, 0, self._n_classes) if self._n_classes <= HELD_CLASSES else None
        except (OSError, KeyError, RuntimeError, ValueError) as error:
            raise _unreadable(self._path, error) from error

    def close(self) -> None:
        """Close the file."""
        self._file.close()

    def read(self, lower: float, upper: float) -> PackedLines:
        """The lines with lower <= wavenumber < upper, with the classes that they use."""
        first, last = self._place(lower), self._place(upper)
        columns = {name: stored[first:last] for name, stored in self._columns.items()}
        index = columns["width_class"].astype(np.uint32)
        start, table = 0, self._held
        if table is None:
            start, stop = (int(index.min()), int(index.max()) + 1) if index.size else (0, 0)
            table = _read_classes(self._table, start, stop)
        columns["width_class"] = index - np.uint32(start)
        return used_classes(PackedLines(**columns, classes=table))

    def wavenumbers(self, lower: float, upper: float) -> FloatArray:
        """The wavenumbers with lower <= wavenumber < upper."""
        return np.asarray(self._columns["wavenumber"][self._place(lower) : self._place(upper)])

    def count(self, lower: float, upper: float) -> int:
        """How many lines have lower <= wavenumber < upper."""
        return self._place(upper) - self._place(lower)

    def weight(self, lower: float, upper: float) -> int:
        """What those lines weigh at most together with their classes: a class weighs 2, and 1 for each broadener."""
        lines = self.count(lower, upper)
        return lines + min(lines, self._n_classes) * self._class_weight

    def _place(self, value: float) -> int:
        """Index of the first line with wavenumber >= value, from the sample and one short read."""
        block = int(np.searchsorted(self._sample[:-1], value, side="left"))
        if block == 0:
            return 0
        start = (block - 1) * SAMPLE_EVERY
        stop = min(block * SAMPLE_EVERY, self._lines)
        return start + int(np.searchsorted(self._columns["wavenumber"][start:stop], value, side="left"))


_REMEDY = "remove the store's folder: it is made again from the line lists"


def _read_classes(group: Any, start: int, stop: int) -> WidthClasses:
    """Some rows of the table of classes."""
    isotopologue = group["isotopologue"][start:stop]
    nothing = np.full(isotopologue.size, np.nan)
    broadeners = {}
    for name, one in group.get("broadeners", {}).items():
        kinds = [one[kind][start:stop] if kind in one else nothing for kind in ("gamma", "exponent", "shift")]
        broadeners[name] = BroadenerColumns(*kinds)
    return WidthClasses(isotopologue, group["file"][start:stop], broadeners)
