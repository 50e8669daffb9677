"""Whatever happens to a file: one line that names it, or exactly the right numbers."""

from __future__ import annotations

import os
import re

import h5py
import numpy as np
import pytest

from opacity.errors import OpacityError, TableError
from opacity.tables.read import open_table
from opacity.tables.write import write_cross_section_table


@pytest.fixture
def small(make_table, tmp_path):
    table = make_table(temperatures=(300.0, 500.0), pressures=(0.1, 1.0), points=300)
    return write_cross_section_table(tmp_path / "small.h5", table)


def content(path):
    """All that a table holds, with every block proved."""
    with open_table(path) as table:
        table.verify()
        labels = table.title, table.formula, table.recipe, table.provenance, table.checks, table.profile, table.dtype
        axes = table.temperature.tobytes(), table.pressure.tobytes(), table.wavenumber.tobytes()
        return labels, axes, [table.spectrum(i, j).tobytes() for i, j in np.ndindex(table.shape[:2])]


def outcome(path, expected):
    """True if the file was refused as it should be, False if it gave the right content."""
    try:
        found = content(path)
    except OpacityError as error:
        message = str(error)
    else:
        assert found == expected
        return False
    assert "\n" not in message
    assert str(path) in message
    return True


def test_flipped_bits(small):
    """At 2000 places all over the file; most refuse, the rest are in parts that hold nothing of the table."""
    good, expected = small.read_bytes(), content(small)
    rng = np.random.default_rng(11)
    refused = 0
    for place in np.linspace(0, len(good) - 1, 2000).astype(int):
        bad = bytearray(good)
        bad[place] ^= 1 << int(rng.integers(8))
        small.write_bytes(bad)
        refused += outcome(small, expected)
    assert 800 < refused < 2000


def test_stretches_of_zeros(small):
    """What a disk does that loses a sector."""
    good, expected = small.read_bytes(), content(small)
    refused = 0
    for place in range(0, len(good) - 512, 128):
        small.write_bytes(good[:place] + bytes(512) + good[place + 512 :])
        refused += outcome(small, expected)
    assert refused > 50


def test_truncated_anywhere(small):
    good, expected = small.read_bytes(), content(small)
    lengths = [*range(0, 600, 7), *np.linspace(600, len(good) - 1, 400).astype(int), *range(len(good) - 20, len(good))]
    for length in lengths:
        small.write_bytes(good[:length])
        assert outcome(small, expected), f"a file of {length} of {len(good)} bytes was taken for whole"


def test_a_damaged_block_is_named(make_table, tmp_path):
    path = write_cross_section_table(tmp_path / "a.h5", make_table(points=40000))
    with h5py.File(path, "r") as file:
        chunk = file["cross_section"].id.get_chunk_info_by_coord((1, 2, 16384))
    data = bytearray(path.read_bytes())
    data[chunk.byte_offset + chunk.size // 2] ^= 16
    path.write_bytes(data)
    with open_table(path) as table:
        sound = table.spectrum(1, 1)
        assert sound[0] == 0.0
        message = (
            r"a\.h5: damaged: block cross_section\[1, 2, 16384:32768\] "
            r"\(700 K, 1 bar, 2122\.88\d* to 2245\.75\d* cm-1\) (does not match its sha256|cannot be read)"
        )
        for call in (table.verify, lambda: table.spectrum(1, 2), lambda: table.at(600.0, 0.5)):
            with pytest.raises(TableError, match=message):
                call()


def test_damage_after_the_first_reading_is_found_by_verify(make_table, tmp_path):
    path = write_cross_section_table(tmp_path / "a.h5", make_table(points=40000))
    with open_table(path) as table:
        table.verify()
        with h5py.File(path, "r") as file:
            chunk = file["cross_section"].id.get_chunk_info_by_coord((2, 3, 0))
        with open(path, "r+b") as stream:
            stream.seek(chunk.byte_offset + 1000)
            stream.write(bytes(64))
        with pytest.raises(TableError, match=r"block cross_section\[2, 3, 0:16384\]"):
            table.verify()


def test_blocks_in_each_others_place(make_table, tmp_path):
    path = write_cross_section_table(tmp_path / "a.h5", make_table())
    with h5py.File(path, "r+") as file:
        data = file["cross_section"]
        data[0, 0], data[0, 1] = data[0, 1], data[0, 0]
    with open_table(path) as table, pytest.raises(TableError, match=r"cross_section\[0, 0, 0:400\] .*match its sha256"):
        table.verify()


def test_a_missing_block(make_table, tmp_path):
    """Never written, it reads as NaN, not as transparent."""
    path = write_cross_section_table(tmp_path / "a.h5", make_table())
    with h5py.File(path, "r+") as file:
        old = file["cross_section"]
        values, fill = old[()], old.fillvalue
        attributes = {name: old.attrs[name] for name in ("units", "_FillValue")}
        del file["cross_section"]
        new = file.create_dataset("cross_section", values.shape, "f4", chunks=(1, 1, 400), fillvalue=fill)
        new.attrs.update(attributes)
        new[0] = values[0]
    with open_table(path) as table:
        np.testing.assert_array_equal(table.spectrum(0, 3), values[0, 3])
        with pytest.raises(TableError, match=r"cross_section\[1, 0, 0:400\] .*does not match"):
            table.verify()


def _rename_format(file):
    file.attrs["format"] = np.bytes_("another table")


def _newer(file):
    file.attrs["format_version"] = np.int32(99)


def _older(file):
    file.attrs["format_version"] = np.int32(0)


def _no_number(file):
    file.attrs["format_version"] = np.bytes_("one")


def _other_units(file):
    file["pressure"].attrs["units"] = np.bytes_("Pa")


def _no_units(file):
    del file["cross_section"].attrs["units"]


def _no_title(file):
    del file.attrs["title"]


def _other_nodes(file):
    file.attrs["nodes"] = np.bytes_("mesh")


def _made_profile(file):
    file.attrs["nodes"] = np.bytes_("profile")


def _replace(name, values):
    def change(file):
        attributes = {key: file[name].attrs[key] for key in ("units", "sha256") if key in file[name].attrs}
        del file[name]
        file[name] = values
        file[name].attrs.update(attributes)

    return change


def _remove(name):
    return lambda file: file.__delitem__(name)


def _group(file):
    del file["wavenumber"]
    file.create_group("wavenumber")


def _falling(file):
    values = file["temperature"][()][::-1]
    file["temperature"][...] = values
    from opacity.tables.layout import sha256_of

    file["temperature"].attrs["sha256"] = np.bytes_(sha256_of(values))


def _hash_of_an_axis(file):
    file["wavenumber"].attrs["sha256"] = np.bytes_("0" * 64)


def _list_for_checks(file):
    from opacity.tables.layout import sha256_of

    del file["checks"]
    file["checks"] = np.frombuffer(b"[1]", "S1")
    file["checks"].attrs["sha256"] = np.bytes_(sha256_of(file["checks"][()]))


@pytest.mark.parametrize(
    ("change", "message"),
    [
        (_rename_format, 'not a table of this program; expected format "opacity cross-section table"'),
        (_newer, "format version not supported; expected 1 to 1, found 99; install a newer version"),
        (_older, "format version not supported; .*build the table again"),
        (_no_number, "format_version; expected a whole number"),
        (_other_units, 'units of pressure; expected "bar", found "Pa"'),
        (_no_units, 'units of cross_section; expected "cm2 molecule-1", found ""'),
        (_no_title, "attribute title of / is missing"),
        (_other_nodes, 'attribute nodes; expected "grid" or "profile", found "mesh"'),
        (_made_profile, "profile; expected one pressure a temperature"),
        (_replace("cross_section", np.ones((3, 4, 399), "f4")), "shape of cross_section; expected"),
        (_replace("cross_section", np.ones((3, 4, 400), "i4")), "type of cross_section; expected <f4 or <f8"),
        (_replace("cross_section_sha256", np.zeros((3, 4, 2, 64), "S1")), "shape of cross_section_sha256"),
        (_replace("temperature", np.ones((3, 1))), "shape of temperature; expected one dimension"),
        (_replace("temperature", np.ones(3, "f4")), "type of temperature"),
        (_replace("temperature", 300.0), "shape of temperature"),
        (_replace("recipe", np.frombuffer(b"else", "S1")), "dataset recipe does not match its sha256"),
        (_hash_of_an_axis, "dataset wavenumber does not match its sha256"),
        (_falling, "dataset temperature; expected finite values in rising order"),
        (_list_for_checks, "dataset checks; expected a JSON object, found list"),
        (_group, "wavenumber is not a dataset"),
        *[
            (_remove(name), f"dataset {name} is missing")
            for name in ("temperature", "pressure", "wavenumber", "cross_section", "cross_section_sha256", "checks")
        ],
    ],
)
def test_files_of_another_structure(make_table, tmp_path, change, message):
    path = write_cross_section_table(tmp_path / "a.h5", make_table())
    with h5py.File(path, "r+") as file:
        change(file)
    with pytest.raises(TableError, match=message) as caught:
        open_table(path)
    assert re.fullmatch(r".*a\.h5: [^\n]+", str(caught.value))


def _fifo(path):
    os.mkfifo(path)


def _text(path):
    path.write_text("nu, sigma\n1, 2\n")


def _signature_only(path):
    path.write_bytes(b"\x89HDF\r\n\x1a\n")


def _empty_hdf5(path):
    h5py.File(path, "w").close()


@pytest.mark.parametrize(
    ("make", "message"),
    [
        (lambda path: None, r"cannot be opened \(No such file or directory\)"),
        (lambda path: path.mkdir(), "not a file; expected a table"),
        (_fifo, "not a file; expected a table"),
        (lambda path: path.write_bytes(b""), "not a readable HDF5 file"),
        (_text, "not a readable HDF5 file"),
        (_signature_only, "not a readable HDF5 file"),
        (_empty_hdf5, "not a table of this program"),
    ],
)
def test_what_is_no_table(tmp_path, make, message):
    path = tmp_path / "a.h5"
    make(path)
    with pytest.raises(TableError, match=message) as caught:
        open_table(path)
    assert "\n" not in str(caught.value)


def test_a_name_with_nul():
    with pytest.raises(TableError, match="cannot be opened"):
        open_table("a\0b")


def test_a_value_of_nan_with_a_true_hash(make_table, tmp_path):
    """NaN means missing, and a file that holds it is not valid whoever wrote it."""
    from opacity.tables.layout import sha256_of

    path = write_cross_section_table(tmp_path / "a.h5", make_table())
    with h5py.File(path, "r+") as file:
        spectrum = file["cross_section"][0, 0]
        spectrum[5] = np.nan
        file["cross_section"][0, 0] = spectrum
        file["cross_section_sha256"][0, 0, 0] = np.frombuffer(sha256_of(spectrum).encode(), "S1")
    with open_table(path) as table, pytest.raises(TableError, match="holds NaN or a negative value"):
        table.spectrum(0, 0)
