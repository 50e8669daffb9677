"""Catalogue records: real lists of SiO, OH and NH3, printed conversions, and every record that can't be right."""

from __future__ import annotations

import bz2
import importlib.util
import math
import re
from pathlib import Path

import numpy as np
import pytest

from opacity.errors import InputError, LineListError
from opacity.line_list.catalogue import (
    DIPOLE_FACTOR,
    MHZ,
    einstein_a,
    looks_like_einstein_a,
    read_catalogue,
)

# The general package linecat (0.14.1, MIT) carries lists of the CDMS catalogue with their documentation sheets; from
# these sheets, by list: number of records in the file, Q(300 K).
REAL = {
    "SiO/c044505.cat": (1190, 289.2668),
    "OH/c017507.cat": (1028, 81.4940),
    "NH3/c017506.cat": (346, 1766.3450),
    "CH3OH/c032504-5Q.cat": (38743, 37027.3292),
}
Q_SIO = 289.2668


def real(name):
    spec = importlib.util.find_spec("linecat")
    if spec is None:
        pytest.skip("the package linecat, which carries the lists, is not installed")
    return Path(spec.submodule_search_locations[0]) / "data" / "molecules" / name


def record(
    frequency="115271.2018",
    error="0.0005",
    intensity="-5.0105",
    freedom="2",
    energy="0.0000",
    weight="3",
    tag="-28001",
    quanta=" 101 1           0          ",
):
    """F13.4, F8.4, F8.4, I2, F10.4, I3, I7, I4, 12I2."""
    text = f"{frequency:>13}{error:>8}{intensity:>8}{freedom:>2}{energy:>10}{weight:>3}{tag:>7}{quanta}"
    assert len(text) == 51 + len(quanta)
    return text


def cat(tmp_path, *records, name="made.cat", end="\n"):
    path = tmp_path / name
    path.write_bytes("".join(one + end for one in records).encode("latin-1"))
    return path


@pytest.mark.parametrize("name", REAL)
def test_every_record_of_a_real_list_is_read(name):
    lines = read_catalogue(real(name))
    count, _ = REAL[name]
    assert (len(lines), lines.ledger.read, lines.ledger.kept) == (count, count, count)
    assert not lines.ledger.left_out
    assert np.array_equal(np.unique(lines.tag), [int(re.search(r"\d{6}", name)[0])])
    assert np.all(np.diff(lines.wavenumber) >= 0.0)
    raw = real(name).read_bytes().splitlines()
    for i in range(0, count, 37):
        text = raw[lines.record[i] - 1].decode()
        assert lines.wavenumber[i] == float(text[:13]) / 29979.2458
        assert lines.uncertainty[i] == float(text[13:21]) / 29979.2458
        assert lines.strength[i] == pytest.approx(10.0 ** float(text[21:29]) / 2.99792458e18, rel=1e-12)
        assert lines.lower_energy[i] == float(text[31:41])
        assert lines.upper_weight[i] == float(text[41:44])
        assert lines.measured[i] == (int(text[44:51]) < 0)


# v, J' of lines J'-J'-1: position (cm-1), lower-state energy (cm-1), S(300 K) (cm/molecule), A (s-1) by eq. 5 of the
# CDMS sheet: worked out from CDMS 044505 version 2 (Mueller et al. 2013, J. Phys. Chem. A 117, 13843), Q = 289.2668.
SIO = {
    (5, 1): (1.398227, 6029.4895, 3.79734e-35, 2.91983e-06),
    (1, 1): (1.438398, 1229.6148, 3.79996e-25, 3.02424e-06),
    (0, 1): (1.448464, 0.0, 1.38478e-22, 3.04903e-06),
    (5, 2): (2.796430, 6030.8877, 3.00732e-34, 2.80286e-05),
    (0, 2): (2.896904, 1.4485, 1.09643e-21, 2.92726e-05),
    (0, 5): (7.241841, 14.4843, 1.59250e-20, 5.19651e-04),
    (1, 11): (15.817109, 1308.7148, 3.34410e-22, 5.77274e-03),
    (0, 11): (15.927840, 79.6537, 1.21529e-19, 5.82082e-03),
    (5, 41): (57.052037, 7173.3519, 9.49466e-33, 2.95928e-01),
    (0, 41): (59.112509, 1185.0638, 2.83061e-20, 3.09298e-01),
    (5, 81): (111.132500, 10517.8019, 6.95311e-39, 2.24314e00),
    (0, 81): (115.208308, 4651.2039, 1.15340e-26, 2.34942e00),
}


@pytest.mark.parametrize("key", SIO)
def test_lines_of_sio(key):
    lines = read_catalogue(real("SiO/c044505.cat"))
    nu, energy, strength, a = SIO[key]
    i = int(np.argmin(np.abs(lines.wavenumber - nu)))
    assert lines.wavenumber[i] == pytest.approx(nu, abs=6e-7)
    assert lines.lower_energy[i] == energy
    assert lines.upper_weight[i] == 2 * key[1] + 1
    assert lines.strength[i] == pytest.approx(strength, rel=4e-6)
    assert einstein_a(lines, Q_SIO)[i] == pytest.approx(a, rel=1e-5)


def test_einstein_a_of_sio_from_its_dipole_moment():
    # mu = 3.0982 D (Raymonda et al. 1970, from memory); S = J' for a linear molecule, eq. 6 of the CDMS sheet.
    lines = read_catalogue(real("SiO/c044505.cat"))
    i = int(np.argmin(np.abs(lines.wavenumber - 1.448464)))
    expected = DIPOLE_FACTOR * (lines.wavenumber[i] * MHZ) ** 3 * 3.0982**2 / 3.0
    assert einstein_a(lines, Q_SIO)[i] == pytest.approx(expected, rel=1e-3)


# Lines of the OH ground state at 18 cm, MHz: A (s-1) of Destombes et al. 1977, A&A 60, 55 (from memory).
OH = {1612.2310: 1.29e-11, 1665.4018: 7.11e-11, 1667.3590: 7.71e-11, 1720.5300: 9.42e-12}


@pytest.mark.parametrize("frequency", OH)
def test_the_lines_of_oh_at_18_cm(frequency):
    lines = read_catalogue(real("OH/c017507.cat"))
    i = int(np.argmin(np.abs(lines.wavenumber * MHZ - frequency)))
    assert lines.wavenumber[i] * MHZ == pytest.approx(frequency, abs=2e-3)
    assert lines.lower_energy[i] < 0.1
    assert einstein_a(lines, 81.4940)[i] == pytest.approx(OH[frequency], rel=0.02)


@pytest.mark.parametrize("j", [1, 2, 3, 6])
def test_inversion_of_nh3_from_its_dipole_moment(j):
    # A of (J, K = J) is 1.16395e-20 nu^3 mu^2 K^2 / (J (J + 1)), mu = 1.4719 D (the CDMS sheet of 017506).  Hyperfine
    # components share it: the mean over upper states of the sum over lower ones.
    centre = {1: 23694.5, 2: 23722.6, 3: 23870.1, 6: 25056.0}[j]
    lines = read_catalogue(real("NH3/c017506.cat"))
    near = np.abs(lines.wavenumber * MHZ - centre) < 5.0
    a = einstein_a(lines, 1766.3450)
    # The highest F is J + 1; all F together hold 3 (2J + 1) states, the spin of 14N being 1.
    spin_weight = np.max(lines.upper_weight[near]) / (2 * (j + 1) + 1)
    mean = np.sum(lines.upper_weight[near] * a[near]) / (spin_weight * 3.0 * (2 * j + 1))
    expected = DIPOLE_FACTOR * centre**3 * 1.4719**2 * j / (j + 1.0)
    assert mean == pytest.approx(expected, rel=0.02)


# JPL 28001 version 4 and 18003 version 6 as packaged in astroquery 0.4.11: frequency (MHz), LGINT, lower-state energy
# (cm-1), upper weight; then S(300 K) (cm/molecule) and A (s-1) worked out from them; Q(300 K) of the JPL catalogue
# 10^2.0369 for CO and 10^2.2507 for H2O.
CONVERTED = [
    ("115271.2018", "-5.0105", "0.0000", "3", 3.2560e-24, 7.2035e-08, 10**2.0369),
    ("230538.0000", "-4.1197", "3.8450", "5", 2.5321e-23, 6.9106e-07, 10**2.0369),
    ("921799.7000", "-2.5590", "107.6424", "17", 9.2083e-22, 5.1341e-05, 10**2.0369),
    ("556935.9877", "-0.8189", "23.7944", "9", 5.0615e-20, 3.4251e-03, 10**2.2507),
    ("620700.9549", "-2.7692", "488.1077", "33", 5.6752e-22, 1.0876e-04, 10**2.2507),
    ("558017.0036", "-18.1025", "7729.4622", "49", 2.6344e-37, 3.6787e-05, 10**2.2507),
    ("968030.6201", "-17.5568", "7999.0128", "153", 9.2551e-37, 2.7010e-04, 10**2.2507),
    ("723142.3610", "-19.4330", "8554.6415", "53", 1.2308e-38, 1.0916e-04, 10**2.2507),
]


@pytest.mark.parametrize(("frequency", "intensity", "energy", "weight", "strength", "a", "q"), CONVERTED)
def test_conversions_of_co_and_h2o(tmp_path, frequency, intensity, energy, weight, strength, a, q):
    path = cat(tmp_path, record(frequency=frequency, intensity=intensity, energy=energy, weight=weight))
    lines = read_catalogue(path)
    assert lines.strength[0] == pytest.approx(strength, rel=3e-5)
    assert einstein_a(lines, q)[0] == pytest.approx(a, rel=3e-4)


def test_one_record(tmp_path):
    lines = read_catalogue(cat(tmp_path, record()))
    assert lines.wavenumber.tolist() == [115271.2018 / 29979.2458]
    assert lines.uncertainty.tolist() == [0.0005 / 29979.2458]
    assert (lines.tag.tolist(), lines.measured.tolist()) == ([28001], [True])
    assert (lines.lower_energy.tolist(), lines.upper_weight.tolist(), lines.record.tolist()) == ([0.0], [3.0], [1])


@pytest.mark.parametrize("error", ["-0.0001", "-0.0000"])
def test_a_negative_error_means_wavenumbers(tmp_path, error):
    lines = read_catalogue(cat(tmp_path, record(frequency="2143.2711", error=error)))
    assert lines.wavenumber.tolist() == [2143.2711]
    assert lines.uncertainty.tolist() == [-float(error)]
    assert not lines.ledger.notes


def test_an_error_of_zero_means_mhz_and_is_counted(tmp_path):
    # A record of the methanol list: 0.0010 MHz with error 0.0000 can't be a wavenumber.
    lines = read_catalogue(cat(tmp_path, record(frequency="0.0010", error="0.0000")))
    assert lines.wavenumber[0] == 0.0010 / 29979.2458
    assert dict(lines.ledger.notes) == {"frequency error 0: frequency taken as MHz": 1}


@pytest.mark.parametrize(
    ("weight", "value"), [("999", 999.0), ("A00", 1000.0), ("A05", 1005.0), ("B37", 1137.0), ("Z99", 3599.0)]
)
def test_weights_of_a_thousand_and_more(tmp_path, weight, value):
    lines = read_catalogue(cat(tmp_path, record(), record(weight=weight), record()))
    assert lines.upper_weight.tolist() == [3.0, value, 3.0]


@pytest.mark.parametrize("quanta", ["", " 101", "1425 5-1 0 5 4   5 1 0 5 5   ", "1202E4 0        E3 0         "])
def test_quantum_numbers_are_not_read(tmp_path, quanta):
    assert len(read_catalogue(cat(tmp_path, record(quanta=quanta)))) == 1


@pytest.mark.parametrize("end", ["\n", "\r\n"])
@pytest.mark.parametrize("name", ["a.cat", "a.cat.bz2"])
def test_line_ends_order_and_compression(tmp_path, end, name):
    data = "".join(one + end for one in (record(), "", record(frequency="100.0000"))).encode()
    path = tmp_path / name
    path.write_bytes(bz2.compress(data) if name.endswith("bz2") else data)
    lines = read_catalogue(path)
    assert lines.record.tolist() == [3, 1]
    assert dict(lines.ledger.notes) == {"out of order in wavenumber: sorted": 1}


WRONG = [
    ({"frequency": "x"}, "frequency is not a number"),
    ({"frequency": ""}, "frequency is missing"),
    ({"frequency": "nan"}, "frequency is not a number"),
    ({"frequency": "0.0000"}, "frequency is impossible"),
    ({"frequency": "-1.0000"}, "frequency is impossible"),
    ({"frequency": "9E999"}, "frequency is impossible"),
    ({"frequency": "115271.2018  "}, "frequency is not in its column"),
    ({"error": ""}, "frequency error is missing"),
    ({"error": "1_0"}, "frequency error is not a number"),
    ({"error": "9E999"}, "frequency error is impossible"),
    ({"intensity": ""}, "intensity is missing"),
    ({"intensity": "********"}, "intensity is not a number"),
    ({"intensity": "11.0000"}, "intensity is impossible"),
    ({"intensity": "-301.000"}, "intensity is impossible"),
    ({"intensity": "inf"}, "intensity is not a number"),
    ({"energy": ""}, "lower-state energy is missing"),
    ({"energy": "1 2"}, "lower-state energy is not a number"),
    ({"energy": "-1.0001"}, "lower-state energy is impossible"),
    ({"energy": "1E7"}, "lower-state energy is impossible"),
    ({"weight": ""}, "upper weight is missing"),
    ({"weight": "***"}, "upper weight is not a number"),
    ({"weight": "a00"}, "upper weight is not a number"),
    ({"weight": "A 5"}, "upper weight is not a number"),
    ({"weight": "A-5"}, "upper weight is not a number"),
    ({"weight": "0"}, "upper weight is impossible"),
    ({"weight": "-3"}, "upper weight is impossible"),
    ({"weight": "9E9"}, "upper weight is impossible"),
    ({"weight": "2.5"}, "upper weight is impossible"),
    ({"tag": ""}, "tag is missing"),
    ({"tag": "CO"}, "tag is not a number"),
    ({"tag": "0"}, "tag is impossible"),
    ({"tag": "1E30"}, "tag is impossible"),
    ({"tag": "28.5"}, "tag is impossible"),
    ({"quanta": "caf\xe9"}, "record with bytes that are no text"),
    ({"frequency": "1.0\0"}, "record with bytes that are no text"),
]


@pytest.mark.parametrize(("values", "reason"), WRONG)
def test_a_record_that_cannot_be_right(tmp_path, values, reason):
    judged(cat(tmp_path, record(), record(**values), record()), reason)


@pytest.mark.parametrize("change", [lambda r: r[:50], lambda r: "x"])
def test_a_record_that_is_too_short(tmp_path, change):
    judged(cat(tmp_path, record(), change(record()), record()), "record of the wrong length")


SHIFTED = record(frequency="43423.8530", error="0.0020", intensity="-3.3818", energy="12.3456", weight="21")


@pytest.mark.parametrize("lost", [i for i, letter in enumerate(SHIFTED[:41]) if letter == " "])
def test_a_record_that_lost_a_blank_is_never_read_as_another_line(tmp_path, lost):
    path = cat(tmp_path, SHIFTED[:lost] + SHIFTED[lost + 1 :])
    with pytest.raises(LineListError, match=r":1: .* is (not in its column|not a number|missing|impossible)"):
        read_catalogue(path)


def judged(path, reason):
    with pytest.raises(LineListError, match="^" + re.escape(f"{path}:2: {reason}; expected ")) as caught:
        read_catalogue(path)
    assert str(caught.value).isprintable()
    assert "1 of 3 records are unusable" in str(caught.value)
    lines = read_catalogue(path, bad_records="leave-out")
    assert lines.record.tolist() == [1, 3]
    assert dict(lines.ledger.left_out) == {reason: 1}
    assert (lines.ledger.read, lines.ledger.kept) == (3, 2)


def test_a_file_of_nothing_is_refused(tmp_path):
    with pytest.raises(LineListError, match=r"made.cat: holds no record"):
        read_catalogue(cat(tmp_path))
    with pytest.raises(LineListError, match=r"none.cat: cannot be read"):
        read_catalogue(tmp_path / "none.cat")
    with pytest.raises(InputError, match=r'bad_records: unknown; expected "stop" or "leave-out", found "guess"'):
        read_catalogue(cat(tmp_path, record()), bad_records="guess")


# The answer of the CDMS query page for CO as packaged in astroquery 0.4.11: log10 A where a catalogue has LGINT.
ANSWER = [
    "  115271.2018     0.0005    -7.1425 2    0.0000  3 -28503 101 1           0              CO, v=0",
    "  230538.0000     0.0005    -6.1605 2    3.8450  5 -28503 101 2           1              CO, v=0",
]


def test_a_saved_query_answer_is_refused(tmp_path):
    with pytest.raises(LineListError, match=r"made.cat:1: intensity is not a number"):
        read_catalogue(cat(tmp_path, *ANSWER))


@pytest.mark.parametrize("name", REAL)
def test_a_real_list_does_not_look_like_einstein_a(name):
    assert looks_like_einstein_a(read_catalogue(real(name)), REAL[name][1]) is False


@pytest.mark.parametrize("name", ["SiO/c044505.cat", "OH/c017507.cat"])
def test_a_list_with_einstein_a_for_intensities_is_found(tmp_path, name):
    lines = read_catalogue(real(name))
    logs = np.log10(einstein_a(lines, REAL[name][1]))
    raw = real(name).read_bytes().decode().splitlines()
    changed = [raw[n - 1][:21] + f"{log:8.4f}" + raw[n - 1][29:] for n, log in zip(lines.record, logs, strict=True)]
    assert looks_like_einstein_a(read_catalogue(cat(tmp_path, *changed)), REAL[name][1]) is True


def test_a_few_lines_of_einstein_a_cannot_be_told(tmp_path):
    lines = read_catalogue(cat(tmp_path, record(intensity="-7.1425")))
    assert looks_like_einstein_a(lines, 108.9) is False


@pytest.mark.parametrize("partition", [0.0, -1.0, math.nan, math.inf])
def test_a_partition_function_that_cannot_be(tmp_path, partition):
    lines = read_catalogue(cat(tmp_path, record()))
    with pytest.raises(InputError, match=r"partition300: impossible; expected Q\(300 K\), above 0"):
        einstein_a(lines, partition)
