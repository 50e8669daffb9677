from __future__ import annotations

from collections.abc import Callable

import pytest

from opacity import grids

Faults = Callable[..., list[str]]

GRID_FAULTS = [
    (
        "wavenumber = { start = 2000.0, stop = 2010.0, step = 0.5 }",
        "wavenumbr = { start = 2000.0, stop = 2010.0, step = 0.5 }",
        '43: grid.wavenumbr: unknown key; expected wavenumber, temperature, pressure or nodes, found "wavenumbr"; '
        "did you mean wavenumber?",
    ),
    (
        "step = 0.5",
        "step = 0.3",
        "43: grid.wavenumber.stop: the range is not a whole number of steps; expected stop = 2009.9 or 2010.2, "
        "found 2010.0",
    ),
    (
        "step = 0.5",
        "step = 1e-9",
        "43: grid.wavenumber: too many points; expected at most 200000000, found 10000000001",
    ),
    (
        "step = 0.5",
        "step = 5e-324",
        "43: grid.wavenumber.step: impossible value; expected a number from 1e-09 to 1e+06 cm-1, found 5e-324",
    ),
    (
        "step = 0.5",
        "resolving_power = 1e12",
        "43: grid.wavenumber: too many points; expected at most 200000000, found 4987541512",
    ),
    (
        "step = 0.5",
        "step = 0.5, resolving_power = 1e5",
        "43: grid.wavenumber: both step and resolving_power; expected one of them",
    ),
    (", step = 0.5", "", "43: grid.wavenumber.step: missing; expected a number from 1e-09 to 1e+06 cm-1"),
    (
        "stop = 2010.0",
        "stop = 1990.0",
        "43: grid.wavenumber: impossible range; expected 0 <= start <= stop, found 2000.0 to 1990.0",
    ),
    (
        "stop = 2010.0",
        "stop = 1e7",
        "43: grid.wavenumber.stop: impossible value; expected a number from 0 to 1e+06 cm-1, found 10000000.0",
    ),
    (
        "[300.0, 1000]",
        "[\n300.0,\n1000,\n700]",
        "47: grid.temperature[2]: not in rising order; expected a value above 1000 K, found 700",
    ),
    (
        "[300.0, 1000]",
        "[300.0, 300]",
        "44: grid.temperature[1]: not in rising order; expected a value above 300 K, found 300",
    ),
    (
        "[300.0, 1000]",
        "[0, 300]",
        "44: grid.temperature[0]: impossible value; expected a number from 1 to 20000 K, found 0",
    ),
    (
        "[300.0, 1000]",
        "false",
        "44: grid.temperature: not an axis; expected a number, a rising list, or { start, stop, count, spacing }, "
        "found false",
    ),
    (
        "[300.0, 1000]",
        "1979-05-27",
        "44: grid.temperature: not a number; expected a number from 1 to 20000 K, found 1979-05-27",
    ),
    (
        "temperature = [300.0, 1000]",
        "",
        "42: grid.temperature: missing; expected a number, a rising list, or { start, stop, count, spacing }; "
        "or give nodes instead of temperature and pressure",
    ),
    (
        "count = 9",
        "count = 1000000000000",
        "45: grid.pressure.count: impossible value; expected a whole number from 1 to 1000000, found 1000000000000",
    ),
    (
        "count = 9",
        "count = 9.0",
        "45: grid.pressure.count: impossible value; expected a whole number from 1 to 1000000, found 9.0",
    ),
    (
        "count = 9",
        "count = 1",
        "45: grid.pressure.count: does not fit the range; expected 2 or more values, found 1",
    ),
    ("count = 9", "count = 1000000", "42: grid: too many nodes; expected at most 1000000, found 2000000"),
    (
        'spacing = "log"',
        'spacing = "logarithmic"',
        '45: grid.pressure.spacing: unknown value; expected "linear" or "log", found "logarithmic"',
    ),
    (
        'spacing = "log"',
        'spacing = "eighth-root"',
        '45: grid.pressure.spacing: not in this version; expected "linear" or "log", found "eighth-root"',
    ),
    (
        "start = 1e-6, stop = 100.0",
        "start = 100.0, stop = 1e-6",
        "45: grid.pressure: impossible range; expected 0 < start <= stop, found 100.0 to 1e-06",
    ),
]


@pytest.mark.parametrize("old, new, expected", GRID_FAULTS)
def test_one_fault_of_the_grid_gives_one_line(faults: Faults, old: str, new: str, expected: str) -> None:
    assert faults((old, new)) == [f"co.toml:{expected}"]


def _with_nodes(nodes: str) -> list[tuple[str, str]]:
    return [
        ("temperature = [300.0, 1000]", f"nodes = {nodes}"),
        ('pressure = { start = 1e-6, stop = 100.0, count = 9, spacing = "log" }', ""),
    ]


@pytest.mark.parametrize(
    "nodes, expected",
    [
        (
            "[[300, 1],\n[400, 1],\n[300.0, 1.0]]",
            "46: grid.nodes[2]: node given twice; expected each node once, found [300, 1], already nodes[0]",
        ),
        ("[[300, 1], [400]]", "44: grid.nodes[1]: not a node; expected [temperature, pressure], found a list of 1"),
        ("[]", "44: grid.nodes: not a list of nodes; expected a list of [temperature, pressure], found an empty list"),
        (
            "[[300, 1],\n[400,\n-1]]",
            "46: grid.nodes[1][1]: impossible value; expected a number from 1e-12 to 100000 bar, found -1",
        ),
    ],
)
def test_faults_of_nodes(faults: Faults, nodes: str, expected: str) -> None:
    assert faults(*_with_nodes(nodes)) == [f"co.toml:{expected}"]


def test_nodes_beside_axes(faults: Faults) -> None:
    assert faults(("[cross_section]", ""), ("temperature = [300.0", "nodes = [[300, 1]]\ntemperature = [300.0")) == [
        "co.toml:1: cross_section: missing; expected an empty section [cross_section], "
        "or a section [k_coefficient]: the tables wanted",
        "co.toml:45: grid.temperature: given beside nodes; expected nodes, or temperature and pressure",
        "co.toml:46: grid.pressure: given beside nodes; expected nodes, or temperature and pressure",
    ]


def test_a_refused_axis_is_never_made(faults: Faults, monkeypatch: pytest.MonkeyPatch) -> None:
    def no_memory(*args: object) -> None:
        raise AssertionError("an axis was made")

    monkeypatch.setattr(grids.np, "linspace", no_memory)
    found = faults(("step = 0.5", "step = 1e-9"), ("count = 9", "count = 2000000"))
    assert [line.split(": ")[1] for line in found] == ["grid.wavenumber", "grid.pressure.count"]


def test_memory_that_is_not_there_is_a_fault_of_the_axis(faults: Faults, monkeypatch: pytest.MonkeyPatch) -> None:
    def no_memory(*args: object) -> None:
        raise MemoryError

    monkeypatch.setattr(grids, "uniform_wavenumbers", no_memory)
    assert faults(("count = 9", "count = 9")) == [
        "co.toml:43: grid.wavenumber: an axis too long for this machine's memory; take a larger step"
    ]
