"""hapi's own Voigt absorption coefficient on a local table, for comparison."""

from __future__ import annotations

import contextlib
import io
import shutil
from pathlib import Path
from typing import Any

import numpy as np

# The header of a local hapi table of 160-character records (layout of hitran-api 1.3).
_COLUMNS = (
    ("molec_id", 2, "%2d"),
    ("local_iso_id", 1, "%1d"),
    ("nu", 12, "%12.6f"),
    ("sw", 10, "%10.3E"),
    ("a", 10, "%10.3E"),
    ("gamma_air", 5, "%5.4f"),
    ("gamma_self", 5, "%5.3f"),
    ("elower", 10, "%10.4f"),
    ("n_air", 4, "%4.2f"),
    ("delta_air", 8, "%8.6f"),
    ("global_upper_quanta", 15, "%15s"),
    ("global_lower_quanta", 15, "%15s"),
    ("local_upper_quanta", 15, "%15s"),
    ("local_lower_quanta", 15, "%15s"),
    ("ierr", 6, "%6s"),
    ("iref", 12, "%12s"),
    ("line_mixing_flag", 1, "%1s"),
    ("gp", 7, "%7.1f"),
    ("gpp", 7, "%7.1f"),
)


def write_header(path: Path, table: str) -> None:
    """A header for a file of plain 160-character records."""
    import json

    position, at = {}, 0
    for name, width, _ in _COLUMNS:
        position[name] = at
        at += width
    header = {
        "table_name": table,
        "number_of_rows": -1,
        "size_in_bytes": -1,
        "table_type": "column-fixed",
        "order": [name for name, _, _ in _COLUMNS],
        "format": {name: form for name, _, form in _COLUMNS},
        "default": {name: 0 if form[-1] in "dfE" else "" for name, _, form in _COLUMNS},
        "description": {name: "" for name, _, _ in _COLUMNS},
        "position": position,
    }
    path.write_text(json.dumps(header), encoding="ascii")


def hapi_module() -> Any:
    """hapi, with what it prints at import kept off the terminal."""
    with contextlib.redirect_stdout(io.StringIO()):
        import hapi

        return hapi


def open_in_hapi(lines: Path, folder: Path) -> str:
    """Make a line list a local table of hapi in an empty folder; the table's name."""
    table = lines.stem
    shutil.copy(lines, folder / f"{table}.data")
    header = lines.with_suffix(".header")
    if header.is_file():
        shutil.copy(header, folder / f"{table}.header")
    else:
        write_header(folder / f"{table}.header", table)
    with contextlib.redirect_stdout(io.StringIO()):
        hapi_module().db_begin(str(folder))
    return table


def hapi_voigt(
    table: str, wavenumber: np.ndarray, temperature: float, bar: float, diluent: dict[str, float], wing: float
) -> np.ndarray:
    """Cross-section (cm2/molecule) at each wavenumber by hapi, TIPS-2021, cut `wing` cm-1 from each line."""
    hapi = hapi_module()
    with contextlib.redirect_stdout(io.StringIO()):
        _, sigma = hapi.absorptionCoefficient_Voigt(
            SourceTables=[table],
            Environment={"T": temperature, "p": bar / 1.01325},
            Diluent=diluent,
            OmegaGrid=wavenumber,
            WavenumberWing=wing,
            WavenumberWingHW=0.0,
            IntensityThreshold=0.0,
            HITRAN_units=True,
            partitionFunction=hapi.PYTIPS2021,
        )
    return np.asarray(sigma)
