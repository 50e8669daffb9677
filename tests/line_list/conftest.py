"""Records and hapi tables made by hand from values; nothing in them is a line of a real list."""

from __future__ import annotations

import json

import pytest

# Name, width and format of each field (Rothman et al. 2005, JQSRT 96, 139, table 1), with an invented value.
FIELDS = {
    "molecule": (2, "2d", 5),
    "code": (1, "s", "1"),
    "wavenumber": (12, "12.6f", 2100.123456),
    "strength": (10, "10.3E", 1.234e-21),
    "einstein_a": (10, "10.3E", 12.5),
    "gamma_air": (5, "5.4f", 0.0651),
    "gamma_self": (5, "5.3f", 0.071),
    "lower_energy": (10, "10.4f", 1234.5678),
    "n_air": (4, "4.2f", 0.74),
    "delta_air": (8, "8.6f", -0.002861),
    "quanta": (60, "60s", "1 0 P 5"),
    "ierr": (6, "s", "375623"),
    "iref": (12, "12s", " 510 5 5 1 8"),
    "flag": (1, "s", " "),
    "upper_weight": (7, "7.1f", 9.0),
    "lower_weight": (7, "7.1f", 11.0),
}
COLUMN_NAMES = {
    "molecule": "molec_id",
    "code": "local_iso_id",
    "wavenumber": "nu",
    "strength": "sw",
    "einstein_a": "a",
    "lower_energy": "elower",
    "upper_weight": "gp",
    "lower_weight": "gpp",
}


def format_record(**values):
    """160 characters; a value given as text goes into its field as it stands."""
    assert set(values) <= set(FIELDS)
    text = ""
    for name, (width, how, usual) in FIELDS.items():
        value = values.get(name, usual)
        field = value if isinstance(value, str) and name != "quanta" else format(value, how)
        if len(field) > width:
            field = field.replace("0.", ".", 1)
        assert len(field) <= width, (name, field)
        text += field.rjust(width)
    assert len(text) == 160
    return text


def hapi_header(extra=(), **changes):
    """The header of a table of 160-character records with columns `extra` behind them."""
    positions, formats, start = {}, {}, 0
    for name, (width, _, _) in FIELDS.items():
        column = COLUMN_NAMES.get(name, name)
        positions[column], formats[column] = start, f"%{width}s"
        start += width
    formats |= dict.fromkeys(extra, "%7.4f")
    header = {
        "table_name": "made",
        "number_of_rows": -1,
        "order": list(positions),
        "position": positions,
        "format": formats,
        "extra": list(extra),
        "extra_format": dict.fromkeys(extra, "%7.4f"),
        "extra_separator": ",",
    }
    return {**header, **changes}


@pytest.fixture
def record():
    return format_record


@pytest.fixture
def header():
    return hapi_header


@pytest.fixture
def write_par(tmp_path):
    """Write records as a .par file; gives its path."""

    def write(records, name="made.par", end="\n"):
        path = tmp_path / name
        path.write_bytes("".join(one + end for one in records).encode("latin-1"))
        return path

    return write


@pytest.fixture
def write_table(tmp_path):
    """Write records and a header (a dict, or raw text) as a hapi table; gives the path of the .data file."""

    def write(records, header, name="made"):
        path = tmp_path / f"{name}.data"
        path.write_bytes("".join(one + "\n" for one in records).encode("latin-1"))
        text = header if isinstance(header, str) else json.dumps(header)
        (tmp_path / f"{name}.header").write_text(text)
        return path

    return write
