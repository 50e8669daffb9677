"""Sums of stated uncertainties against plain loops over lines."""

from __future__ import annotations

import math
from collections.abc import Callable
from concurrent.futures import ThreadPoolExecutor
from dataclasses import replace
from itertools import pairwise

import numpy as np
import pytest

from opacity.check.uncertainty import UncertaintySums, bands_of
from opacity.cross_sections.prepare import PreparedLines
from opacity.line_list.uncertainty import StatedUncertainty
from opacity.molecule.broadening import LineBroadening

BANDS = [(2000.0, 2100.0), (2050.0, 2300.0), (9000.0, 9100.0)]
NODES = [(296.0, 1e-6), (296.0, 0.3), (1500.0, 5.0), (70.0, 0.0)]
NAMES = {
    "strength_correlated", "strength_uncorrelated", "width", "position",
    "not_stated", "width_not_stated", "position_not_stated",
}  # fmt: skip


@pytest.fixture(scope="module")
def band(make_case: Callable):
    """All lines of the band."""
    return make_case(wavenumber="{ start = 2000.0, stop = 2300.0, step = 0.5 }")


def some_statements(lines: int, seed: int = 5) -> StatedUncertainty:
    rng = np.random.default_rng(seed)

    def pick(values: list[float]) -> np.ndarray:
        return rng.choice(np.array([math.nan, *values]), lines)

    relative = [0.01, 0.02, 0.05, 0.1, 0.2]
    return StatedUncertainty(pick([1e-5, 1e-3, 0.1]), pick(relative), {"air": pick(relative), "self": pick(relative)})


def slow(lines: PreparedLines, stated: StatedUncertainty, band: tuple[float, float], t: float, p: float) -> dict:
    """The definition of each figure, line by line."""
    sums = dict.fromkeys(("S", "stated", "u", "u2", "w", "wu", "v", "vu"), 0.0)
    strengths = lines.strengths(t)
    for i in range(len(lines)):
        nu = float(lines.wavenumber[i])
        if not band[0] <= nu <= band[1]:
            continue
        s, u = float(strengths[i]), float(stated.strength[i])
        sums["S"] += s
        if not math.isnan(u):
            sums["stated"] += s
            sums["u"] += s * u
            sums["u2"] += (s * u) ** 2
        lorentz, uncertain, known = 0.0, 0.0, True
        for b, name in enumerate(lines.broadening.broadeners):
            part = float(lines.broadening.gamma[b, i]) * (296.0 / t) ** float(lines.broadening.exponent[b, i])
            given = float(stated.width[name.lower()][i]) if name.lower() in stated.width else math.nan
            lorentz += p * part
            if part > 0.0:
                known = known and not math.isnan(given)
                uncertain += p * part * given
        centre = nu + p * float(lines.broadening.shift[i])
        doppler = 3.581163e-7 * centre * math.sqrt(t / float(lines.mass[i]))
        half_width = 0.5346 * lorentz + math.sqrt(0.2166 * lorentz**2 + doppler**2)
        if known:
            sums["w"] += s
            sums["wu"] += s * uncertain / half_width
        v = float(stated.position[i])
        if not math.isnan(v):
            sums["v"] += s
            sums["vu"] += s * v / half_width
    over = {
        "strength_correlated": (sums["u"], sums["stated"]),
        "strength_uncorrelated": (math.sqrt(sums["u2"]), sums["stated"]),
        "width": (sums["wu"], sums["w"]),
        "position": (sums["vu"], sums["v"]),
        "not_stated": (sums["S"] - sums["stated"], sums["S"]),
        "width_not_stated": (sums["S"] - sums["w"], sums["S"]),
        "position_not_stated": (sums["S"] - sums["v"], sums["S"]),
    }
    return {name: part / whole if whole > 0.0 else None for name, (part, whole) in over.items()}


def agree(found: float | None, wanted: float | None) -> bool:
    """Equal to the three digits that are kept, beside 1e-6 for the constants."""
    if found is None or wanted is None:
        return found is wanted
    if abs(wanted) < 1e-12:
        return found == 0.0
    return abs(found - wanted) <= 0.5 * 10.0 ** (math.floor(math.log10(wanted)) - 2) + 1e-6 * wanted


def in_two_gases(lines: PreparedLines, second: str) -> PreparedLines:
    """The lines in air, and in a second gas by which every third line has no width."""
    one = lines.broadening
    gamma = np.where(np.arange(len(lines)) % 3 == 0, 0.0, 0.4 * one.gamma[0])
    both = np.stack([0.6 * one.gamma[0], gamma]), np.stack([one.exponent[0], one.exponent[0] - 0.3])
    return replace(lines, broadening=LineBroadening(("air", second), *both, one.shift, ()))


@pytest.mark.parametrize("second", [None, "self", "H2"])
@pytest.mark.parametrize("parts", [1, 3])
def test_figures_are_their_definition(band, second: str | None, parts: int):
    lines = band.lines if second is None else in_two_gases(band.lines, second)
    stated = some_statements(len(lines))
    sums = UncertaintySums(BANDS, NODES)
    with ThreadPoolExecutor(2) as executor:
        for some in np.array_split(np.arange(len(lines)), parts):
            which = slice(int(some[0]), int(some[-1]) + 1)
            width = {name: values[which] for name, values in stated.width.items()}
            piece = StatedUncertainty(stated.position[which], stated.strength[which], width)
            sums.add(lines.part(which), piece, executor if parts > 1 else None)
    found = sums.figures()
    assert set(found) == {"of", "bands", "nodes"} | NAMES
    assert (found["bands"], found["nodes"]) == ([list(one) for one in BANDS], [list(one) for one in NODES])
    for k, ends in enumerate(BANDS):
        for i, (t, p) in enumerate(NODES):
            wanted = slow(lines, stated, ends, t, p)
            for name in NAMES:
                assert agree(found[name][k][i], wanted[name]), (name, ends, t, p, found[name][k][i], wanted[name])
    assert found["not_stated"][0][0] > 0.0
    assert found["not_stated"][2] == [None] * len(NODES)


def test_what_is_never_stated_is_none(band):
    sums = UncertaintySums(BANDS[:2], NODES)
    sums.add(band.lines, StatedUncertainty.nothing(len(band.lines)))
    found = sums.figures()
    for name in NAMES:
        assert found[name] == [[1.0 if "not_stated" in name else None] * 4] * 2


def test_limits_of_the_shares(band):
    """Where pressure rules the width's own uncertainty is the profile's, where Doppler rules none of it is."""
    stated = StatedUncertainty.nothing(len(band.lines))
    stated.width["air"][:], stated.strength[:] = 0.05, 0.1
    sums = UncertaintySums([(2000.0, 2300.0)], [(300.0, 1e-9), (300.0, 1e4)])
    sums.add(band.lines, stated)
    found = sums.figures()
    assert found["width"][0][0] < 1e-6
    assert found["width"][0][1] == 0.05
    assert found["strength_correlated"] == [[0.1, 0.1]]
    assert 0.1 / math.sqrt(len(band.lines)) <= found["strength_uncorrelated"][0][0] < 0.1
    assert found["not_stated"] == [[0.0, 0.0]]


def test_weak_lines_keep_their_squares(band):
    stated = some_statements(len(band.lines))
    found = []
    for factor in (1.0, 1e-180):
        sums = UncertaintySums(BANDS, NODES[:1])
        sums.add(replace(band.lines, strength=factor * band.lines.strength), stated)
        found.append(sums.figures()["strength_uncorrelated"])
    assert found[0] == found[1]


def test_bands_are_those_named_or_ten_parts(make_case: Callable, small):
    parts = bands_of(small.recipe)
    assert len(parts) == 10
    assert (parts[0][0], parts[-1][1]) == (2145.0, 2149.0)
    assert all(a[1] == b[0] for a, b in pairwise(parts))
    row = '[[band_strength]]\nname = "{}"\nrange = {}\nstrength = 1e-17\nunit = "cm/molecule"\ntemperature = 296.0\n'
    rest = 'uncertainty = 0.1\nsource = "invented"\n'
    text = "\n".join(row.format(*one) + rest for one in (("a", "[2145.5, 2147.0]"), ("b", "[2146.0, 2149.0]")))
    assert bands_of(make_case(extra=text).recipe) == [(2145.5, 2147.0), (2146.0, 2149.0)]
