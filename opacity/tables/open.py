"""Opening a table of whatever kind it says it is."""

from __future__ import annotations

from pathlib import Path
from typing import Any

from opacity.tables import k_layout, layout, structure
from opacity.tables.k_read import KCoefficientTable
from opacity.tables.opened import opened
from opacity.tables.read import Table


def open_table(path: str | Path) -> Table | KCoefficientTable:
    """Open a table for reading, of cross-sections or of k-coefficients; use it in a `with` statement or close it.

    Raises TableError where the file is missing, damaged, not a table, or of a version too new.
    """
    return opened(path, _of_its_kind)


def _of_its_kind(path: Path, file: Any) -> Table | KCoefficientTable:
    name = structure.format_name(path, file)
    if name == k_layout.FORMAT_NAME:
        return KCoefficientTable(path, file)
    if name == layout.FORMAT_NAME:
        return Table(path, file)
    raise structure.other_format(path, name, *layout.FORMATS)
