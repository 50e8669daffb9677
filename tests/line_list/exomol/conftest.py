"""Files of a line list in ExoMol format, of a molecule that is invented: (1H)2(222Rn)."""

from __future__ import annotations

import json

import pytest

RECORDS = [
    ("EXOMOL.def", "ID"),
    ("(1H)2(222Rn)", "IsoFormula"),
    ("1H2-222Rn", "Iso-slug"),
    ("INVENTED", "Isotopologue dataset name"),
    ("20240131", "Version number with format YYYYMMDD"),
    ("XLYOFNOQVPJJNP-UHFFFAOYSA-N", "Inchi key of molecule"),
    ("3", "Number of atoms"),
    ("1 1", "Isotope number 1 and element symbol 1"),
    ("224.033228 3.720e-25", "Isotopologue mass (Da) and (kg)"),
    ("C2v(M)", "Symmetry group"),
    ("1", "Number of irreducible representations"),
    ("A1", "Irreducible representation label"),
    ("2000.0", "Maximum temperature of linelist"),
    ("2", "No. of pressure broadeners available"),
    ("0", "Dipole availability (1=yes, 0=no)"),
    ("1", "Life time availability (1=yes, 0=no)"),
    ("0", "Lande g-factor availability (1=yes, 0=no)"),
    ("1", "Uncertainty availability (1=yes, 0=no)"),
    ("5", "No. of states in .states file"),
    ("1", "No. of quanta cases"),
    ("2", "No. of quanta defined"),
    ("v1", "Quantum label 1"),
    ("I2 %2d", "Format quantum label 1"),
    ("Stretching", "Description quantum label 1"),
    ("+/-", "Quantum label 2"),
    ("A1 %1s", "Format quantum label 2"),
    ("Total parity", "Description quantum label 2"),
    ("7", "Total number of transitions"),
    ("2", "No. of transition files"),
    ("4000.0", "Maximum wavenumber (in cm-1)"),
    ("0.0734", "Default value of Lorentzian half-width for all lines (in cm-1/bar)"),
    ("0.52", "Default value of temperature exponent for all lines"),
    ("H2", "Label for a particular broadener"),
    ("1H2-222Rn__H2.broad", "Filename of particular broadener"),
    ("20.0", "Maximum J for which pressure broadening parameters provided"),
    ("0.05", 'Value of Lorentzian half-width for lines with J" > Jmax'),
    ("0.30", 'Value of temperature exponent for lines with J" > Jmax'),
    ("He", "Label for a particular broadener"),
    ("1H2-222Rn__He.broad", "Filename of particular broadener"),
]

DOCUMENT = {
    "isotopologue": {"iso_formula": "(1H)2(222Rn)", "iso_slug": "1H2-222Rn", "mass_in_Da": 224.033228},
    "atoms": {"number_of_atoms": 3, "element": {"H": 1, "Rn": 222}},
    "dataset": {
        "name": "INVENTED",
        "version": 20240131,
        "max_temperature": 2000.0,
        "num_pressure_broadeners": 2,
        "states": {
            "number_of_states": 5,
            "uncertainties_available": True,
            "lifetime_available": True,
            "lande_g_available": False,
            "states_file_fields": [{"name": name} for name in ("ID", "E", "gtot", "J", "unc", "tau", "v1", "+/-")],
        },
        "transitions": {"number_of_transitions": 7, "number_of_transition_files": 2, "max_wavenumber": 4000.0},
    },
    "broad": {
        "default_gamma_L": 0.0734,
        "default_n_L": 0.52,
        "H2": {"filename": "1H2-222Rn__H2.broad", "max_J": 20.0},
        "He": {"filename": "1H2-222Rn__He.broad", "max_J": 20.0},
    },
}

# id, E, g, J, uncertainty, lifetime, v1, parity.
STATES = [
    "           1     0.000000      1       0     0.000001       Inf  0 +",
    "           2    21.500000      9       1     0.000010  1.20E+01  0 -",
    "           3    64.400000      5       2     0.000100  5.50E+00  0 +",
    "           4  1995.250000      1       0     0.500000       NaN  1 +",
    "           5  2016.100000      9       1     0.500000  1.10E-02  1 -",
]

BROAD = [
    "a0 0.0860 0.096       0",
    "a0 0.0850 0.095       1",
    "a0 0.0800 0.090       2",
    "a0 0.0700 0.080       4",
    "a1 0.0811 0.111       1       2",
    "a1 0.0822 0.122       2       1",
    "m0 0.0900 0.200       1",
    "v1 0.0500 0.100       1       0",
]


@pytest.fixture
def write(tmp_path):
    """Write lines, bytes or a document as a file; gives its path."""

    def write(name, content):
        path = tmp_path / name
        if isinstance(content, dict):
            content = json.dumps(content, indent=1).encode()
        elif not isinstance(content, bytes):
            content = "".join(line + "\n" for line in content).encode("latin-1")
        path.write_bytes(content)
        return path

    return write


def definition_lines(**changes):
    """The records as lines, some values changed by a word of their comment; None leaves a record out."""
    lines = []
    for value, comment in RECORDS:
        for word, change in changes.items():
            if word.replace("_", " ") in comment:
                value = change
        if value is not None:
            lines.append(f"{value:<60} # {comment}")
    return lines


@pytest.fixture
def definition():
    return definition_lines


@pytest.fixture
def document():
    """A fresh copy of the definition in JSON."""
    return json.loads(json.dumps(DOCUMENT))


@pytest.fixture
def states():
    return list(STATES)


@pytest.fixture
def broad():
    return list(BROAD)
