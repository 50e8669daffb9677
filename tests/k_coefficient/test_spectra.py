"""Spectra by stretches of bands: split or whole, held or read in pieces, with the sums that means are made of."""

from __future__ import annotations

from collections.abc import Callable
from concurrent.futures import ThreadPoolExecutor
from itertools import pairwise
from pathlib import Path

import numpy as np
import pytest

from opacity.cross_sections.source import LineSource
from opacity.k_coefficient import spectra
from opacity.k_coefficient.bands import band_edges
from opacity.k_coefficient.collapse import CELL_WIDTHS, fine_cells
from opacity.k_coefficient.means import mean_sums, means_of_sums, planck_mean, rosseland_mean
from opacity.k_coefficient.spectra import FEWEST_POINTS, collapsed, lines_of_bands, points_of_bands
from opacity.k_coefficient.transmission import columns_of, transmission
from opacity.pipeline import k_units
from opacity.pipeline.inputs import load_inputs
from opacity.recipe.load import load_recipe
from opacity.recipe.model import Recipe

Case = tuple[Recipe, LineSource]
NODES = [(296.0, 1.0), (1200.0, 0.01)]


@pytest.fixture
def case(write_recipe: Callable[..., Path]) -> Callable[..., Case]:
    """A recipe of k-coefficients alone with these edges (cm-1), and its lines."""

    def make(edges: list[float], start: float = 2100.0, stop: float = 2200.0) -> Case:
        section = f"[k_coefficient]\nbands = {{ edges = {edges} }}"
        axis = f"{{ start = {start}, stop = {stop} }}"
        recipe = load_recipe(write_recipe("co", ("[cross_section]", section), wavenumber=axis))
        return recipe, load_inputs(recipe).lines

    return make


def all_cells(case: Case, node: tuple[float, float], **more: object) -> spectra.BandCells:
    recipe, source = case
    edges = band_edges(recipe)
    (lines,) = lines_of_bands(source, recipe.profile, edges, [node[0]])
    return collapsed(lines, edges, node[1], **more)  # type: ignore[arg-type]


@pytest.mark.parametrize("node", NODES)
def test_a_band_of_too_many_points_is_merged_of_its_parts(
    monkeypatch: pytest.MonkeyPatch, case: Callable[..., Case], node: tuple[float, float]
) -> None:
    """The parts have steps of their own, so that means agree within what sampling costs."""
    one = case([2140.0, 2150.0])
    whole = all_cells(one, node)
    count = int(whole.points[0, 0])
    monkeypatch.setattr(spectra, "POINTS_AT_ONCE", count // 7)
    parts = all_cells(one, node)
    np.testing.assert_array_equal(whole.points, parts.points)
    means = whole.cells @ CELL_WIDTHS, parts.cells @ CELL_WIDTHS
    np.testing.assert_allclose(*means, rtol=1e-4)
    columns = columns_of(whole.cells, np.array([node[1]]))
    errors = transmission(whole.cells, CELL_WIDTHS, columns) - transmission(parts.cells, CELL_WIDTHS, columns)
    assert np.max(np.abs(errors)) <= 1e-4


def test_means_of_a_merged_band_on_the_same_grid(monkeypatch: pytest.MonkeyPatch, case: Callable[..., Case]) -> None:
    """With as many points as divide by the number of parts the points are the same, and so are the means."""
    one = case([2140.0, 2150.0])
    monkeypatch.setattr(spectra, "points_of_bands", lambda *given: np.array([4096.0]))
    whole = all_cells(one, NODES[0]).cells
    monkeypatch.setattr(spectra, "POINTS_AT_ONCE", 1024)
    parts = all_cells(one, NODES[0]).cells
    assert np.any(whole != parts)
    np.testing.assert_allclose(parts @ CELL_WIDTHS, whole @ CELL_WIDTHS, rtol=1e-12)


@pytest.mark.parametrize("node", NODES)
def test_bands_do_not_depend_on_how_many_are_held_at_once(
    monkeypatch: pytest.MonkeyPatch, case: Callable[..., Case], node: tuple[float, float]
) -> None:
    edges = np.linspace(2140.0, 2150.0, 21).tolist()
    one = case(edges)
    whole = all_cells(one, node)
    monkeypatch.setattr(spectra, "POINTS_AT_ONCE", 3 * int(whole.points.max()))
    parts = all_cells(one, node)
    np.testing.assert_allclose(parts.cells, whole.cells, rtol=1e-9)
    with ThreadPoolExecutor(2) as executor:
        np.testing.assert_array_equal(all_cells(one, node, executor=executor).cells, parts.cells)


def test_a_narrow_band_beside_a_wide_one_does_not_make_all_of_it_fine(case: Callable[..., Case]) -> None:
    """512 points in 1e-3 cm-1 would be 51 million in 100."""
    sizes: list[int] = []
    one = case([2100.0, 2100.001, 2199.999, 2200.0])
    found = all_cells(one, (296.0, 1.0), seen=lambda nu, sigma: sizes.append(nu.size))
    assert sum(sizes) <= 2.0 * found.points[:, 0].sum() + 3
    assert max(sizes) <= spectra.POINTS_AT_ONCE + 1


def test_stretches_share_their_ends_and_cover_all(monkeypatch: pytest.MonkeyPatch, case: Callable[..., Case]) -> None:
    monkeypatch.setattr(spectra, "POINTS_AT_ONCE", 2000)
    ends: list[tuple[float, float]] = []
    edges = [2130.0, 2131.0, 2150.0, 2150.25, 2151.0]
    all_cells(case(edges), (296.0, 0.01), seen=lambda nu, sigma: ends.append((nu[0], nu[-1])))
    assert (ends[0][0], ends[-1][1]) == (2130.0, 2151.0)
    assert len(ends) > 4
    assert all(before[1] == after[0] for before, after in pairwise(ends))


@pytest.mark.parametrize("node", NODES)
def test_lines_held_and_lines_read_in_pieces(
    monkeypatch: pytest.MonkeyPatch, case: Callable[..., Case], node: tuple[float, float]
) -> None:
    one = case([2140.0, 2145.0, 2150.0])
    held = all_cells(one, node)
    from opacity.cross_sections import source as source_module

    for module in (spectra, source_module):
        monkeypatch.setattr(module, "LINES_AT_ONCE", 5)
    read = all_cells(one, node)
    np.testing.assert_array_equal(read.points, held.points)
    # Each piece is within the tolerance by itself; what differs is which lines share a tree of cells.
    np.testing.assert_allclose(read.cells, held.cells, rtol=2e-3)
    np.testing.assert_allclose(read.cells @ CELL_WIDTHS, held.cells @ CELL_WIDTHS, rtol=1e-4)


@pytest.mark.parametrize("temperature", [70.0, 296.0, 3000.0])
def test_mean_sums_against_the_means_of_the_whole(
    monkeypatch: pytest.MonkeyPatch, case: Callable[..., Case], temperature: float
) -> None:
    monkeypatch.setattr(spectra, "POINTS_AT_ONCE", 2000)
    edges = [2100.0, 2130.0, 2150.0, 2200.0]
    sums, parts = np.zeros(4), []

    def seen(nu: np.ndarray, sigma: np.ndarray) -> None:
        nonlocal sums
        sums = sums + mean_sums(sigma, nu, temperature, edges[0])
        parts.append((nu, sigma))

    all_cells(case(edges), (temperature, 1.0), seen=seen)
    assert len(parts) > 1
    # What adjoining stretches share is a point with half a cell on each side, at one place.
    nu = np.concatenate([parts[0][0], *(one[1:] for one, _ in parts[1:])])
    sigma = np.concatenate([parts[0][1], *(one[1:] for _, one in parts[1:])])
    planck, rosseland = means_of_sums(sums)
    np.testing.assert_allclose(planck, planck_mean(sigma, nu, temperature), rtol=1e-6)
    np.testing.assert_allclose(rosseland, rosseland_mean(sigma, nu, temperature), rtol=1e-6)


@pytest.mark.parametrize("points", [301, 3001, 300_001])
@pytest.mark.parametrize("temperature", [1.0, 30.0, 296.0, 1e4])
def test_mean_sums_on_any_step_from_zero_wavenumbers_and_at_any_temperature(temperature: float, points: int) -> None:
    """A band has 512 points at least and may be wider than 1000 cm-1; lines at 100 bar are wider than 1 cm-1."""
    nu = np.linspace(0.0, 3000.0, points)
    sigma = 1e-22 * (1.0 + np.sin(nu / 70.0) ** 2)
    for start in (0, points // 300, points // 3):
        planck, rosseland = means_of_sums(mean_sums(sigma[start:], nu[start:], temperature, nu[start]))
        np.testing.assert_allclose(planck, planck_mean(sigma[start:], nu[start:], temperature), rtol=1e-6)
        np.testing.assert_allclose(rosseland, rosseland_mean(sigma[start:], nu[start:], temperature), rtol=1e-6)


def test_means_of_a_window_with_zeros() -> None:
    """Radiation gets through unhindered where the cross-section is 0: Rosseland's mean is 0, Planck's is not."""
    nu = np.linspace(2000.0, 2100.0, 1001)
    sigma = np.where(nu < 2050.0, 0.0, 1e-20)
    planck, rosseland = means_of_sums(mean_sums(sigma, nu, 300.0, 2000.0))
    np.testing.assert_allclose(planck, planck_mean(sigma, nu, 300.0), rtol=1e-6)
    assert rosseland == 0.0
    planck, rosseland = means_of_sums(mean_sums(np.zeros(1001), nu, 300.0, 2000.0))
    assert (planck, rosseland) == (0.0, 0.0)


def test_bands_without_a_line_are_zero(case: Callable[..., Case]) -> None:
    """From 300 to 320 cm-1 the list of CO has no line within its cut-off; such bands have as few points as may be."""
    recipe, source = case([300.0, 310.0, 320.0], 300.0, 320.0)
    found = all_cells((recipe, source), (296.0, 1.0))
    assert len(source) == 0
    assert not found.cells.any()
    np.testing.assert_array_equal(found.points, FEWEST_POINTS)


def test_a_band_from_zero(case: Callable[..., Case]) -> None:
    recipe, source = case([0.0, 2000.0, 2200.0], 0.0, 2200.0)
    edges = band_edges(recipe)
    (lines,) = lines_of_bands(source, recipe.profile, edges, [296.0])
    found = collapsed(lines, edges, 1.0)
    nu = np.linspace(0.0, 2200.0, 1_100_001)
    expected = fine_cells(lines.spectrum(nu, 1.0), nu, edges)
    np.testing.assert_allclose(found.cells @ CELL_WIDTHS, expected @ CELL_WIDTHS, rtol=1e-3)
    assert np.count_nonzero(found.cells[0]) < found.cells[0].size


def test_points_resolve_the_narrowest_line(case: Callable[..., Case]) -> None:
    """Two to a half-width: Doppler's at a low pressure is nu sqrt(2 ln 2 k T / m c2) (CODATA)."""
    recipe, source = case([2140.0, 2150.0])
    edges = band_edges(recipe)
    (lines,) = lines_of_bands(source, recipe.profile, edges, [296.0])
    mass = float(source.window(0.0, 1e5).mass.max())
    doppler = 2140.0 * np.sqrt(2.0 * np.log(2.0) * 1.380649e-23 * 296.0 * 6.02214076e26 / mass) / 299792458.0
    needed = points_of_bands(lines, edges, 1e-9)[0]
    assert 2.0 * 10.0 / doppler * 0.995 <= needed <= 2.0 * 10.0 / doppler * 1.005
    assert points_of_bands(lines, edges, 1.0)[0] < 0.2 * needed


def test_a_band_that_would_need_too_many_points_is_told(
    monkeypatch: pytest.MonkeyPatch, case: Callable[..., Case]
) -> None:
    one = case([2140.0, 2150.0])
    monkeypatch.setattr(spectra, "MOST_POINTS", 2000)
    points = all_cells(one, (296.0, 1e-6)).points
    assert points[0, 0] == 2000.0 < points[0, 1]
    (warning,) = k_units.missed_points(points[None], [(296.0, 1e-6)])
    assert warning.startswith("spectra of 1 bands and nodes are too coarse for their lines: at 296 K, 1e-06 bar band 0")
    assert k_units.missed_points(np.minimum(points, 2000.0)[None], [(296.0, 1e-6)]) == []
