"""One function a format, from any bytes to nothing: it raises AssertionError where the readers did what they must not.

They must end in a correct list, held against `reference`, whose ledger adds up, or in an error of this package of one
line that names the file and, where a record is at fault, its line.  A format of several files is one text, its
files parted by lines of %%.
"""

from __future__ import annotations

import re
import shutil
import tempfile
from collections.abc import Callable
from pathlib import Path
from typing import Any

import numpy as np
import reference
from reference import Record

from opacity import grids
from opacity.errors import OpacityError, RecipeError
from opacity.line_list.catalogue import MHZ, NM2_MHZ, read_catalogue
from opacity.line_list.exomol.broadening import BroadeningTable, read_broadening, widths
from opacity.line_list.exomol.definition import read_definition
from opacity.line_list.exomol.states import partition_sum, read_states
from opacity.line_list.exomol.transitions import state_join, transition_batches
from opacity.line_list.ledger import Ledger
from opacity.line_list.packed import decode_energy, decode_intensity
from opacity.line_list.read import read_lines
from opacity.line_list.records import ReadOptions
from opacity.molecule.isotopologue import Isotopologue
from opacity.molecule.partition_function import from_file
from opacity.recipe.load import load_recipe

FOLDER = Path(tempfile.mkdtemp(prefix="fuzz-"))
SPLIT = b"\n%%\n"
LONGEST_LIST = 100_000
INVENTED = Isotopologue(999, 1, "(1H)2(222Rn)", "H2Rn", 224.0, 1.0, known=False)
BROAD = b"a0 0.0860 0.096 0\na0 0.0850 0.095 1\na0 0.0800 0.090 4\na1 0.0811 0.111 1 2\nm0 0.0900 0.200 1\n"


def attempt(read: Callable[[], Any], *paths: Path) -> tuple[Any, int | None]:
    """What was read and None; or None and the line that the error names, 0 where it names the file alone."""
    try:
        return read(), None
    except OpacityError as error:
        message = str(error)
        assert message.isprintable(), f"not one printable line: {message!r}"
        for path in paths:
            match = re.match(re.escape(str(path)) + r"(?::(\d+))?: \S", message)
            if match is not None:
                return None, int(match[1] or 0)
        raise AssertionError(f"names no file: {message}") from error


def written(name: str, data: bytes) -> Path:
    path = FOLDER / name
    path.write_bytes(data)
    return path


def close(found: Any, expected: list[float]) -> None:
    """Within two units in the last place; numbers below the normal range may lose digits."""
    np.testing.assert_allclose(np.asarray(found), np.asarray(expected), rtol=4.5e-16, atol=1e-300)


def hitran(data: bytes) -> None:
    path = written("a.par", data)
    _judge_records(lambda how: read_lines(path, bad_records=how), reference.records(data), path, path)
    table = _broadening()
    attempt(lambda: read_lines(path, bad_records="leave-out", options=ReadOptions(widths={"H2": table})), path)


def hapi(data: bytes) -> None:
    header, _, body = data.partition(SPLIT)
    head, path = written("a.header", header), written("a.data", body)
    _, line = attempt(lambda: read_lines(path, bad_records="leave-out"), path, head)
    good = line is None or not str(_message(lambda: read_lines(path, bad_records="leave-out"))).startswith(str(head))
    if good:
        records = reference.hapi_records(header, body)
        _judge_records(lambda how: read_lines(path, bad_records=how), records, path, head)


def _message(read: Callable[[], Any]) -> str:
    try:
        read()
    except OpacityError as error:
        return str(error)
    return ""


def _judge_records(read: Callable[[str], Any], expected: list[Record], path: Path, other: Path) -> None:
    bad = [one.line for one in expected if one.fault is not None]
    kept = [one for one in expected if one.fault is None]
    lines, line = attempt(lambda: read("stop"), path, other)
    several = len({one.numbers["molecule"] for one in kept}) > 1
    if lines is None:
        assert line == (bad[0] if bad else 0), f"line {line} named, {bad[:1]} expected"
        assert bad or not kept or several, "good records refused"
    else:
        assert not bad, f"line {bad[0]} taken"
        assert not several
    lines, _ = attempt(lambda: read("leave-out"), path, other)
    if lines is None:
        assert not kept or several, "good records refused"
        return
    assert kept
    assert lines.ledger.adds_up()
    assert (lines.ledger.read, lines.ledger.kept) == (len(expected), len(kept))
    assert len(lines) == len(kept)
    by_line = {one.line: one.numbers for one in kept}
    found = [by_line.pop(int(one)) for one in lines.record]
    assert np.all(np.diff(lines.wavenumber) >= 0.0)
    for name in ("wavenumber", "strength", "lower_energy", "einstein_a", "upper_weight", "lower_weight"):
        close(getattr(lines, name), [one.get(name, np.nan) for one in found])
    for name, one in lines.broadeners.items():
        gamma = [numbers[f"gamma_{name}"] / 1.01325 or np.nan for numbers in found]
        close(one.gamma, gamma)
        close(one.exponent, [numbers.get(f"exponent_{name}", np.nan) for numbers in found])
        close(one.shift, [numbers.get(f"shift_{name}", np.nan) / 1.01325 or np.nan for numbers in found])


def catalogue(data: bytes) -> None:
    path = written("a.cat", data)
    expected = reference.catalogue_records(data)
    bad = [one.line for one in expected if one.fault is not None]
    kept = sorted((one for one in expected if one.fault is None), key=_wavenumber)
    lines, line = attempt(lambda: read_catalogue(path), path)
    assert (lines is None) == bool(bad or not kept)
    assert lines is not None or line == (bad[0] if bad else 0), f"line {line} named, {bad[:1]} expected"
    lines, _ = attempt(lambda: read_catalogue(path, bad_records="leave-out"), path)
    assert (lines is None) == (not expected)
    if lines is None:
        return
    assert lines.ledger.adds_up()
    assert (lines.ledger.read, lines.ledger.kept) == (len(expected), len(kept))
    close(lines.wavenumber, [_wavenumber(one) for one in kept])
    assert lines.record.tolist() == [one.line for one in kept]
    np.testing.assert_allclose(lines.strength, [10.0 ** one.numbers["intensity"] / NM2_MHZ for one in kept], rtol=1e-13)
    close(lines.lower_energy, [one.numbers["energy"] for one in kept])
    close(lines.upper_weight, [one.numbers["weight"] for one in kept])


def _wavenumber(one: Record) -> float:
    return one.numbers["frequency"] / (1.0 if np.signbit(one.numbers["error"]) else MHZ)


def states(data: bytes) -> None:
    path = written("a.states", data)
    expected = reference.states(data)
    for chunk in (1 << 22, 64):
        found, line = attempt(lambda chunk=chunk: read_states(path, chunk=chunk), path)
        if found is None:
            assert expected == line or (expected == {} and line == 0) or (chunk == 64 and line == 0)
            continue
        assert isinstance(expected, dict), f"line {expected} taken"
        assert found.rows_of(list(expected)).tolist() == list(range(len(expected)))
        table = np.array(list(expected.values()))
        close(found.energy, table[:, 0])
        close(found.total_weight, table[:, 1])
        assert found.j.tolist() == table[:, 2].tolist()
        assert np.isfinite(partition_sum(found, [1.0, 300.0])).all()


def exomol(data: bytes) -> None:
    first, _, rest = data.partition(SPLIT)
    second, _, third = rest.partition(SPLIT)
    files = written("b.states", first), written("b.trans", second), written("b__H2.broad", third)
    found, _ = attempt(lambda: read_states(files[0]), files[0])
    table, _ = attempt(lambda: read_broadening(files[2]), files[2])
    known = reference.states(first)
    if found is None or table is None or not isinstance(known, dict):
        return
    join = state_join(found, {"H2": table}, INVENTED)
    expected = reference.transitions(second, known)
    bad = [one.line for one in expected if one.fault is not None]
    kept = [one for one in expected if one.fault is None]
    batches, line = attempt(lambda: list(transition_batches(files[1], join, False, None, None)), files[1])
    assert (batches is None) == bool(bad or not kept)
    assert batches is not None or line == (bad[0] if bad else 0), f"line {line} named, {bad[:1]} expected"
    batches, _ = attempt(lambda: list(transition_batches(files[1], join, True, None, None)), files[1])
    assert (batches is None) == (not expected)
    if batches is not None:
        _check_batches(batches, expected, kept, table)


def _check_batches(batches: list[Any], expected: list[Record], kept: list[Record], table: BroadeningTable) -> None:
    ledger = Ledger()
    for batch in batches:
        ledger.add(batch.ledger)
    assert ledger.adds_up()
    assert (ledger.read, ledger.kept) == (len(expected), len(kept))

    def column(name: str) -> Any:
        return np.concatenate([getattr(batch.packed, name) for batch in batches])

    assert column("record").tolist() == [one.line for one in kept]
    close(column("wavenumber"), [one.numbers["wavenumber"] for one in kept])
    log_intensity, energy = decode_intensity(column("intensity")), decode_energy(column("lower_energy"))
    np.testing.assert_allclose(log_intensity, [one.numbers["log"] for one in kept], atol=1.2e-7)
    np.testing.assert_allclose(energy, [one.numbers["energy"] for one in kept], atol=1.3e-5)
    if kept:
        lower, upper = (np.array([one.numbers[name] for one in kept]) for name in ("j", "j_upper"))
        gamma, exponent = widths(table, lower, np.maximum(lower + np.clip(upper - lower, -2.0, 2.0), 0.0))
        found, row = batches[0].packed.classes.broadeners["h2"], column("width_class")
        np.testing.assert_array_equal(found.gamma[row], gamma)
        np.testing.assert_array_equal(found.exponent[row], exponent)


def broadening(data: bytes) -> None:
    path = written("a.broad", data)
    found, line = attempt(lambda: read_broadening(path), path)
    if found is None:
        assert line is not None
        return
    text = reference.rows(data)
    ignored = sum(found.skipped.values()) + found.notes["half-width 0: taken as not given"]
    assert len(text) == len(found) + ignored
    words = {place: one for place, one, _ in text}
    for i in range(len(found)):
        code, gamma, exponent, *quanta = words[int(found.line[i])]
        assert (found.gamma[i], found.exponent[i]) == (float(gamma), float(exponent))
        if code.lower() == b"a1":
            assert widths(found, [float(quanta[0])], [float(quanta[1])]) == ([float(gamma)], [float(exponent)])
    gamma, exponent = widths(found, np.arange(40) / 2.0, np.arange(40) / 2.0)
    assert np.array_equal(np.isnan(gamma), np.isnan(exponent))
    assert not np.any(gamma <= 0.0)


def partition(data: bytes) -> None:
    path = written("a.pf", data)
    found, _ = attempt(lambda: from_file(path), path)
    if found is None:
        return
    rows = reference.partition(data)
    assert rows is not None, "a bad row was taken"
    for temperature, value in rows:
        np.testing.assert_allclose(found(temperature), value, rtol=1e-9)


def _definition(name: str, data: bytes) -> None:
    path = written(name, data)
    found, _ = attempt(lambda: read_definition(path), path)
    if found is None:
        return
    assert 0.9 <= found.mass <= 1e5
    assert found.gamma is None or 0.0 < found.gamma <= 100.0
    for text in (found.formula, found.slug, found.dataset, found.version, *found.state_columns):
        assert text
        assert text.strip() == text
        assert text.isprintable()
    for count in (found.states, found.transitions, found.transition_files):
        assert count is None or count >= 0
    assert all(note.isprintable() for note in found.notes)
    assert len({one.name for one in found.broadeners}) == len(found.broadeners)


def recipe(data: bytes) -> None:
    folder = FOLDER / "recipe"
    if not folder.exists():
        (folder / "lines").mkdir(parents=True)
        for name in ("CO-a.par", "CO-b.par", "hot.data", "hot.header", "x.states", "x.trans", "x.pf", "x.broad"):
            (folder / "lines" / name).touch()
        (folder / "CO.pf").touch()
    if b"/**" in data or b'"/' in data or b"'/" in data or b"\\" in data:
        return  # patterns that would search the whole disk
    path = folder / "a.toml"
    path.write_bytes(data)
    before, grids.MAX_POINTS = grids.MAX_POINTS, LONGEST_LIST
    try:
        found = load_recipe(path)
    except RecipeError as error:
        bad = [line for line in error.problems or ("",) if not (line.startswith(f"{path}:") and line.isprintable())]
        if bad:
            raise AssertionError(f"not a line that names the file: {bad[0]!r}") from error
        return
    finally:
        grids.MAX_POINTS = before
    assert found.grid.wavenumber.size > 0
    assert np.all(np.diff(found.grid.wavenumber) > 0.0)
    for temperature, pressure in found.grid.node_list():
        assert 0.0 < temperature < np.inf
        assert 0.0 < pressure < np.inf
    assert all(source.paths for source in found.line_lists)
    assert all(one.is_file() for one in found.broadening.files.values())


def _broadening() -> BroadeningTable:
    path = FOLDER / "x__H2.broad"
    if not path.exists():
        path.write_bytes(BROAD)
    return read_broadening(path)


def clean_up() -> None:
    """Remove what the targets wrote."""
    shutil.rmtree(FOLDER, ignore_errors=True)


TARGETS: dict[str, Callable[[bytes], None]] = {
    "hitran": hitran,
    "hapi": hapi,
    "catalogue": catalogue,
    "states": states,
    "exomol": exomol,
    "broad": broadening,
    "pf": partition,
    "def": lambda data: _definition("a.def", data),
    "def-json": lambda data: _definition("a.def.json", data),
    "recipe": recipe,
}
