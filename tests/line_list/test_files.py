"""Files as they come: compressed, with other line ends, blank lines, cut short, of another kind, not to be read."""

from __future__ import annotations

import bz2
import gzip
import os
import re

import numpy as np
import pytest

from opacity.errors import InputError, LineListError
from opacity.line_list.read import read_lines


def records(record, count=5):
    return [record(wavenumber=2000.0 + n, strength=(1.0 + n) * 1e-20) for n in range(count)]


def refused(path, *words, **arguments):
    """One line that starts with the file's name and holds the words."""
    with pytest.raises(LineListError, match="^" + re.escape(str(path))) as caught:
        read_lines(path, **arguments)
    message = str(caught.value)
    assert len(message.splitlines()) == 1
    for word in words:
        assert word in message
    return message


@pytest.mark.parametrize(
    ("name", "pack"),
    [
        ("a.par", bytes),
        ("a", bytes),
        ("a.txt", bytes),
        ("a.par.gz", gzip.compress),
        ("a.par.GZ", gzip.compress),
        ("a.par.bz2", bz2.compress),
        ("a.par.BZ2", bz2.compress),
        ("two.gz", lambda data: gzip.compress(data[:300]) + gzip.compress(data[300:])),
        ("two.bz2", lambda data: bz2.compress(data[:300]) + bz2.compress(data[300:])),
    ],
)
def test_plain_and_compressed_files_hold_the_same(record, tmp_path, name, pack):
    path = tmp_path / name
    path.write_bytes(pack("".join(one + "\n" for one in records(record)).encode()))
    lines = read_lines(path)
    assert lines.wavenumber.tolist() == [2000.0, 2001.0, 2002.0, 2003.0, 2004.0]
    assert lines.files == (str(path),)


@pytest.mark.parametrize(
    "ends",
    [
        ["\n"] * 5,
        ["\r\n"] * 5,
        ["\n", "\r\n", "\n", "\r\n", "\n"],
        ["\n", "\n", "\n", "\n", ""],
        ["\r\n", "\r\n", "\r\n", "\r\n", ""],
        ["  \n", "\t\n", "   \r\n", " \t \n", "  "],
    ],
)
def test_line_ends_and_trailing_blanks_do_no_harm(record, tmp_path, ends):
    path = tmp_path / "a.par"
    path.write_bytes("".join(one + end for one, end in zip(records(record), ends, strict=True)).encode())
    lines = read_lines(path)
    assert lines.ledger.kept == 5
    assert lines.record.tolist() == [1, 2, 3, 4, 5]
    np.testing.assert_array_equal(lines.lower_weight, 11.0)


def test_blank_lines_are_passed_over_and_numbers_stay_those_of_the_file(record, tmp_path):
    first, second, *_ = records(record)
    path = tmp_path / "a.par"
    path.write_bytes(f"\n\n{first}\n   \n\r\n{second}\n\n".encode())
    lines = read_lines(path)
    assert lines.record.tolist() == [3, 6]
    assert lines.ledger.read == 2
    path.write_bytes(f"\n\n{first}\n   \n\r\n{second[:-1]}\n\n".encode())
    refused(path, f"{path}:6: record of the wrong length")


@pytest.mark.parametrize(
    ("name", "content"),
    [
        ("a.par", b""),
        ("a.par", b"\n\n \n"),
        ("a.par.gz", gzip.compress(b"")),
        ("a.par.gz", b""),
        ("a.par.bz2", bz2.compress(b"")),
        ("a.par.bz2", b""),
    ],
)
@pytest.mark.parametrize("bad_records", ["stop", "leave-out"])
def test_a_file_without_a_record_is_refused(tmp_path, name, content, bad_records):
    path = tmp_path / name
    path.write_bytes(content)
    refused(path, "holds no record", bad_records=bad_records)


@pytest.mark.parametrize("pack", [gzip.compress, bz2.compress])
def test_a_compressed_file_cut_anywhere_is_refused(record, tmp_path, pack):
    data = pack("".join(records(record, 40)).encode())
    path = tmp_path / ("a.gz" if pack is gzip.compress else "a.bz2")
    for size in [1, 2, 3, 4, 9, 10, 11, 15, *range(20, len(data) - 1, 37), len(data) - 9, len(data) - 4, len(data) - 1]:
        path.write_bytes(data[:size])
        refused(path, "damaged or cut")


@pytest.mark.parametrize("pack", [gzip.compress, bz2.compress])
def test_damage_behind_the_first_stream_of_a_file_is_not_passed_over(record, tmp_path, pack):
    parts = [pack((one + "\n").encode()) for one in records(record)]
    path = tmp_path / ("a.gz" if pack is gzip.compress else "a.bz2")
    path.write_bytes(b"".join(parts))
    assert len(read_lines(path)) == 5
    hurt = bytearray(parts[3])
    hurt[len(hurt) // 2] ^= 0xFF
    path.write_bytes(b"".join([*parts[:3], bytes(hurt), parts[4]]))
    refused(path, "damaged")
    path.write_bytes(b"".join([*parts[:3], b"rubbish"]))
    refused(path, "damaged")


@pytest.mark.parametrize(
    ("name", "pack", "words"),
    [
        ("a.par.gz", bytes, "damaged or cut .gz file"),
        ("a.par.bz2", bytes, "damaged .bz2 file"),
        ("a.par.gz", bz2.compress, "damaged or cut .gz file"),
        ("a.par.bz2", gzip.compress, "damaged .bz2 file"),
        ("a.par", gzip.compress, ":1: record"),
        ("a.par", bz2.compress, ":1: record"),
    ],
)
def test_a_wrong_ending_is_refused(record, tmp_path, name, pack, words):
    path = tmp_path / name
    path.write_bytes(pack("".join(one + "\n" for one in records(record)).encode()))
    refused(path, words)


def test_a_folder_and_a_missing_file_are_refused(tmp_path):
    refused(tmp_path, "cannot be read (Is a directory)")
    refused(tmp_path / "none.par", "cannot be read (No such file or directory)")
    refused(tmp_path / "none.par.gz", "cannot be read (No such file or directory)")


@pytest.mark.skipif(os.geteuid() == 0, reason="root reads everything")
def test_a_file_without_permission_is_refused(record, write_par):
    path = write_par(records(record))
    path.chmod(0)
    refused(path, "cannot be read (Permission denied)")


def test_a_read_that_fails_is_refused(record, write_par, monkeypatch):
    path = write_par(records(record))

    def fails(*arguments):
        raise PermissionError(13, "Permission denied")

    monkeypatch.setattr("opacity.line_list.text.open", fails, raising=False)
    refused(path, "cannot be read (Permission denied)")


@pytest.mark.parametrize("name", [".", "/", "a\0b"])
@pytest.mark.parametrize("format", ["hitran", "hapi"])
def test_names_that_are_no_file_are_refused(name, format):
    with pytest.raises(LineListError, match=r"^[^\n]+$"):
        read_lines(name, format)


def test_wrong_arguments_are_refused(record, write_par):
    path = write_par(records(record))
    with pytest.raises(InputError, match=r'^format: unknown .* expected "hitran" or "hapi", found "csv"$'):
        read_lines(path, "csv")
    with pytest.raises(InputError, match=r'^bad_records: unknown; expected "stop" or "leave-out", found "ignore"$'):
        read_lines(path, bad_records="ignore")
    with pytest.raises(InputError, match=r"^files: no line list given"):
        read_lines([])
    for wrong in ((2.0, 1.0), (float("nan"), 1.0), (0.0, float("nan"))):
        with pytest.raises(InputError, match=r"^range: not a range; expected two wavenumbers"):
            read_lines(path, range=wrong)
