"""The committed sample files are what their scripts write, byte for byte."""

from __future__ import annotations

import importlib
from pathlib import Path
from types import ModuleType

import pytest

SAMPLES = Path(__file__).resolve().parents[2] / "data-samples"
SCRIPTS = {
    "make_carbon_monoxide": ["carbon-monoxide.par", "carbon-monoxide.data", "carbon-monoxide.header"],
    "make_invented": ["invented-molecule.par", "invented-molecule.pf"],
}


def load(script: str, monkeypatch: pytest.MonkeyPatch) -> ModuleType:
    monkeypatch.syspath_prepend(str(SAMPLES))
    return importlib.import_module(script)


# hapi has invalid escapes in its texts, which Python reports when it first compiles the module.
@pytest.mark.filterwarnings("ignore::DeprecationWarning", "ignore::SyntaxWarning")
@pytest.mark.parametrize("script", SCRIPTS)
def test_script_writes_the_committed_files(script: str, tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    written = load(script, monkeypatch).main(tmp_path)
    assert sorted(path.name for path in written) == sorted(SCRIPTS[script])
    for path in written:
        assert path.parent == tmp_path
        assert path.read_bytes() == (SAMPLES / path.name).read_bytes(), f"{path.name}: run data-samples/{script}.py"


def test_no_file_without_a_script() -> None:
    kept = {path.name for path in SAMPLES.iterdir() if path.suffix not in {".py", ".md"} and path.is_file()}
    assert kept == {name for names in SCRIPTS.values() for name in names}


@pytest.mark.parametrize("name", ["carbon-monoxide.par", "invented-molecule.par"])
def test_records_have_160_characters_and_wavenumbers_rise(name: str) -> None:
    records = (SAMPLES / name).read_text(encoding="ascii").splitlines()
    assert {len(record) for record in records} == {160}
    wavenumbers = [float(record[3:15]) for record in records]
    assert wavenumbers == sorted(wavenumbers)


def test_hapi_table_is_the_list_with_four_more_columns() -> None:
    plain = (SAMPLES / "carbon-monoxide.par").read_text(encoding="ascii").splitlines()
    table = (SAMPLES / "carbon-monoxide.data").read_text(encoding="ascii").splitlines()
    assert [row[:160] for row in table] == plain
    for row in table:
        gamma_h2, gamma_he, n_h2, n_he = (float(field) for field in row[160:].lstrip(",").split(","))
        # Ends of the printed values: HITRAN, P(1) to R(40) of the 1-0 band.
        assert 0.0669 <= gamma_h2 <= 0.0755
        assert 0.0451 <= gamma_he <= 0.0490
        assert 0.48 <= n_h2 <= 0.66
        assert 0.51 <= n_he <= 0.58


def test_invented_lines_run_between_levels_of_its_partition_function(monkeypatch: pytest.MonkeyPatch) -> None:
    module = load("make_invented", monkeypatch)
    levels = module.make_levels()
    for record in (SAMPLES / "invented-molecule.par").read_text(encoding="ascii").splitlines():
        upper, lower = record[67:82].strip(), record[82:97].strip()
        branch, lower_j = record[112:127].split()
        upper_j = int(lower_j) + {"P": -1, "Q": 0, "R": 1}[branch]
        assert float(record[45:55]) == pytest.approx(levels[lower][int(lower_j)], abs=5.1e-5)
        wavenumber = levels[upper][upper_j] - levels[lower][int(lower_j)]
        assert float(record[3:15]) == pytest.approx(wavenumber, abs=5.1e-7)
        assert (float(record[146:153]), float(record[153:160])) == (2 * upper_j + 1, 2 * int(lower_j) + 1)
    for row in (SAMPLES / "invented-molecule.pf").read_text(encoding="ascii").splitlines()[::59]:
        temperature, value = (float(field) for field in row.split())
        assert value == pytest.approx(module.partition_sum(levels, temperature), abs=5.1e-7)
