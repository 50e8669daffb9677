"""Names and versions of the files of a line store.

A store is a folder: `index.json` (written last: without it there is no store) and segments, each an HDF5 file of
up to 2^20 lines sorted by wavenumber.  Segments follow each other in wavenumber.  While it is made, `parts/` holds
sorted parts by input file, so that an interrupted ingest goes on where it was, and `at-work.lock` says
who makes it.
"""

from __future__ import annotations

import hashlib
import json
from dataclasses import dataclass
from typing import Any

FORMAT_NAME = "opacity line store"
FORMAT_VERSION = 2
"""Version 2 says between which wavenumbers each isotopologue has lines; in an index of version 1 that is missing."""

SEGMENT_LINES = 1 << 20
SAMPLE_EVERY = 4096

INDEX = "index.json"
PARTS = "parts"
LOCK = "at-work.lock"


def sealed(values: dict[str, Any]) -> bytes:
    """Plain values as JSON with their own sha256 inside."""
    return json.dumps({**values, "sha256": _digest(values)}).encode("utf-8")


def unsealed(data: bytes) -> dict[str, Any]:
    """What `sealed` wrote.  Raises ValueError where it is not as it was written."""
    values = json.loads(data.decode("utf-8"))
    if not isinstance(values, dict):
        raise ValueError("not an object")
    stated = values.pop("sha256", None)
    if stated != _digest(values):
        raise ValueError("sha256 differs")
    return values


def _digest(values: dict[str, Any]) -> str:
    return hashlib.sha256(json.dumps(values, sort_keys=True).encode("utf-8")).hexdigest()


@dataclass(frozen=True)
class Segment:
    """One file of sorted lines: its name, number of lines, first and last wavenumber, and sha256.

    `sample` is every 4096th wavenumber and the last, so that a merge can choose its boundaries without reading.
    """

    file: str
    lines: int
    first: float
    last: float
    sha256: str
    bytes: int
    sample: tuple[float, ...]

    def as_dict(self) -> dict[str, Any]:
        """Plain values for JSON."""
        return {**self.__dict__, "sample": list(self.sample)}

    @staticmethod
    def from_dict(values: dict[str, Any]) -> Segment:
        """The segment that `as_dict` described.  Raises KeyError, TypeError or ValueError for anything else."""
        return Segment(
            file=str(values["file"]),
            lines=int(values["lines"]),
            first=float(values["first"]),
            last=float(values["last"]),
            sha256=str(values["sha256"]),
            bytes=int(values["bytes"]),
            sample=tuple(float(one) for one in values["sample"]),
        )
