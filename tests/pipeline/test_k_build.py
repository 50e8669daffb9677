"""Tables of k-coefficients as recipes ask for them: kinds of points, profiles, both tables, mixtures, tiny values."""

from __future__ import annotations

import json
from collections.abc import Callable
from pathlib import Path

import numpy as np
import pytest

from opacity.errors import RecipeError
from opacity.k_coefficient import choose as choose_module
from opacity.k_coefficient import optimise as optimise_module
from opacity.k_coefficient.certificate import errors_at_node
from opacity.k_coefficient.choose import Wanted
from opacity.k_coefficient.collapse import CELL_WIDTHS
from opacity.pipeline import k_choose
from opacity.pipeline.build import BuildResult, Crew, build_tables
from opacity.recipe.load import load_recipe
from opacity.tables.k_read import open_k_table
from opacity.tables.open import open_table

SECTION = "[k_coefficient]\nbands = {{ width = {width} }}\n{more}\n"
AXIS = "{ start = 2140.0, stop = 2150.0 }"


@pytest.fixture
def build(write_recipe: Callable[..., Path], tmp_path: Path) -> Callable[..., BuildResult]:
    """Build the k-coefficient table of the small recipe with a section of its own."""

    def run(
        more: str = "g_points = 4", width: float = 5.0, extra: str = "", name: str = "co", **changes: str
    ) -> BuildResult:
        section = extra + SECTION.format(width=width, more=more)
        path = write_recipe(name, ("[cross_section]\n", section), **{"wavenumber": AXIS, **changes})
        return build_tables(load_recipe(path), tmp_path / "tables", crew=Crew(1), quiet=True)[-1]

    return run


def verdicts(made: BuildResult) -> dict[str, str]:
    return {row["check"]: row["verdict"] for row in made.figures["results"]}


@pytest.mark.parametrize(
    "more, quadrature, shape",
    [
        ("g_points = 4", "matched", (4,)),
        ('g_points = 4\nweights = "fixed"', "matched", (4,)),
        ('g_points = 4\nweights = "optimised-per-band"', "matched", (2, 4)),
        ('g_points = 4\nquadrature = "gauss-legendre"', "gauss-legendre", (4,)),
        ('g_points = 4\nquadrature = "split"', "split", (4,)),
        ('g_points = 4\nquadrature = "interval-mean"', "interval-mean", (4,)),
        ("g_points = 1", "matched", (1,)),
        ('g_points = 2\nquadrature = "split"', "split", (2,)),
        ('g_points = 200\nweights = "fixed"', "matched", (200,)),
    ],
)
def test_every_kind_of_points(
    build: Callable[..., BuildResult], more: str, quadrature: str, shape: tuple[int, ...]
) -> None:
    made = build(more)
    assert set(verdicts(made).values()) == {"agrees"}
    with open_k_table(made.table) as table:
        assert (table.quadrature, table.g_weight.shape) == (quadrature, shape)
        assert table.shape == (2, 2, 2, shape[-1])
        np.testing.assert_allclose(table.g_weight.sum(axis=-1), 1.0, rtol=1e-12)
        for node in np.ndindex(2, 2):
            k, cells = table.k(*node), table.cells(*node)
            assert np.all(np.diff(k, axis=-1) >= 0.0)
            if quadrature in ("matched", "interval-mean"):
                np.testing.assert_allclose((k * table.g_weight).sum(axis=-1), cells @ CELL_WIDTHS, rtol=4e-7)


@pytest.mark.parametrize("weights", ["optimised", "optimised-per-band", "fixed"])
@pytest.mark.parametrize("target", [0.02, 0.003])
def test_a_target_is_met_at_every_node(build: Callable[..., BuildResult], weights: str, target: float) -> None:
    made = build(f'g_points = "auto"\ntransmission_error = {target}\nweights = "{weights}"')
    assert set(verdicts(made).values()) == {"agrees"}
    with open_k_table(made.table) as table:
        for i, j in np.ndindex(2, 2):
            errors = errors_at_node(table.k(i, j), table.g_weight, table.cells(i, j), float(table.pressure[j]))
            assert np.max(np.abs(errors.transmission)) <= target
        assert table.checks["certificate"]["target"] == target
        assert 1 <= table.g_weight.shape[-1] < 60


@pytest.mark.parametrize("weights", ["fixed", "optimised"])
def test_a_target_out_of_reach_is_one_line(
    build: Callable[..., BuildResult], tmp_path: Path, monkeypatch: pytest.MonkeyPatch, weights: str
) -> None:
    """Of the recipe's line, where no more than six points could be had."""
    for module in (choose_module, optimise_module):
        monkeypatch.setattr(module, "MOST_POINTS", 6)
    with pytest.raises(RecipeError) as caught:
        build(f'g_points = "auto"\ntransmission_error = 1e-4\nweights = "{weights}"')
    (message,) = caught.value.problems
    assert message.startswith(f"{tmp_path / 'co.toml'}:31: k_coefficient.transmission_error: too small; expected ")
    assert not list((tmp_path / "tables").glob("*.h5*"))


def test_a_target_that_is_met_at_too_few_nodes_is_one_line(
    build: Callable[..., BuildResult], tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    """Where what is chosen never fits all."""
    two = k_choose.choose(Wanted(2, 5e-3, "matched", "fixed"), [], 0)[0]
    monkeypatch.setattr(k_choose, "choose", lambda *given: (two, {"weights": "fixed", "trained_error": 0.0}))
    with pytest.raises(RecipeError) as caught:
        build('g_points = "auto"')
    (message,) = caught.value.problems
    start = (
        f"{tmp_path / 'co.toml'}:28: k_coefficient.transmission_error: is not met; expected 0.005 at every node, found"
    )
    assert message.startswith(start)
    assert message.endswith("with 2 points; choose a larger one")
    assert not list((tmp_path / "tables").glob("*.h5*"))


def test_many_bands_meet_the_target_too(build: Callable[..., BuildResult]) -> None:
    """More than are fitted to at once: those left out are certified like the others."""
    made = build('g_points = "auto"\ntransmission_error = 0.02', width=0.01, nodes=NODES)
    assert set(verdicts(made).values()) == {"agrees"}
    errors = [abs(one["largest"]) for one in made.figures["certificate"]["bands"]]
    assert len(errors) == 1000
    assert max(errors) <= 0.02


NODES = "nodes = [[200.0, 0.001], [296.0, 0.1], [480.0, 1.0]]"


def test_a_profile(build: Callable[..., BuildResult]) -> None:
    """Pairs of temperature and pressure give what the grid gives there."""
    with open_k_table(build(nodes="nodes = [[296.0, 0.01], [480.0, 1.0], [296.0, 1.0]]", more=FIXED).table) as profile:
        assert profile.profile
        assert profile.shape == (3, 2, 4)
        found = [(profile.k(i), profile.cells(i)) for i in range(3)]
        means = profile.planck_mean, profile.rosseland_mean
    with open_k_table(build(name="grid", more=FIXED).table) as grid:
        for (k, cells), node, place in zip(found, [(0, 0), (1, 1), (0, 1)], range(3), strict=True):
            np.testing.assert_allclose(k, grid.k(*node), rtol=1e-6)
            np.testing.assert_allclose(cells, grid.cells(*node), rtol=1e-6)
            np.testing.assert_allclose(means[0][place], grid.planck_mean[node], rtol=1e-9)
            np.testing.assert_allclose(means[1][place], grid.rosseland_mean[node], rtol=1e-9)


FIXED = 'g_points = 4\nweights = "fixed"'


def test_both_tables_of_one_recipe(
    build: Callable[..., BuildResult], tmp_path: Path, opacity: Callable[..., tuple[int, str, str]]
) -> None:
    """Built, kept, checked and planned together; the means of bands are those of the spectra."""
    axis = "{ start = 2140.0, stop = 2150.0, step = 0.001 }"
    made = build(extra="[cross_section]\n", wavenumber=axis, nodes="temperature = 296.0\npressure = 1.0")
    assert set(verdicts(made).values()) == {"agrees"}
    with open_table(tmp_path / "tables" / "co.cross-section.h5") as spectra, open_k_table(made.table) as table:
        sigma, nu = spectra.spectrum(0, 0), spectra.wavenumber
        for band in range(2):
            inside = (nu >= 2140.0 + 5.0 * band) & (nu <= 2145.0 + 5.0 * band)
            mean = np.trapezoid(sigma[inside], nu[inside]) / 5.0
            np.testing.assert_allclose((table.cells(0, 0) @ CELL_WIDTHS)[band], mean, rtol=1e-3)
    recipe, folder = tmp_path / "co.toml", tmp_path / "tables"
    before = {path.name: path.stat().st_mtime_ns for path in folder.glob("*.h5")}
    code, out, _ = opacity("build", recipe, "-o", folder, "--quiet")
    assert code == 0
    assert out.count("up to date") == 2
    assert {path.name: path.stat().st_mtime_ns for path in folder.glob("*.h5")} == before
    code, out, _ = opacity("check", recipe, "-o", folder, "--quiet", "--json")
    assert code == 0
    tables = json.loads(out)["tables"]
    assert [Path(one["table"]).name for one in tables] == ["co.cross-section.h5", "co.k-coefficient.h5"]
    assert all(one["passed"] for one in tables)
    code, out, _ = opacity("plan", recipe, "-o", folder, "--quiet")
    assert code == 0
    assert "co.cross-section.h5" in out
    assert "co.k-coefficient.h5" in out
    code, out, _ = opacity("show", made.table)
    assert code == 0
    assert sorted(path.name for path in folder.iterdir()) == [
        "co.cross-section.h5", "co.k-coefficient.h5", "co.log.json",
    ]  # fmt: skip


def test_tiny_cross_sections_are_stored_as_f8(build: Callable[..., BuildResult], tmp_path: Path, samples: Path) -> None:
    """Intensities of 1e-59 cm/molecule and less: below what f4 holds."""
    lines = (samples / "carbon-monoxide.par").read_text(encoding="ascii").splitlines()
    rare = tmp_path / "rare"
    rare.mkdir()
    faint = [f"{line[:15]}{float(line[15:25]) * 1e-30:10.3E}{line[25:]}" for line in lines]
    (rare / "carbon-monoxide.par").write_text("\n".join(faint) + "\n", encoding="ascii")
    made = build(samples=str(rare), more=FIXED)
    with open_k_table(made.table) as table:
        assert 0.0 < table.k(0, 0).max() < 1e-45
        k, cells = table.k(0, 0), table.cells(0, 0)
        np.testing.assert_allclose((k * table.g_weight).sum(axis=-1), cells @ CELL_WIDTHS, rtol=1e-9)
    assert verdicts(made)["k"] == "agrees"
    assert verdicts(made)["closure"] == "agrees"
    with open_k_table(build(more=FIXED, name="plain").table) as plain:
        np.testing.assert_allclose(cells / plain.cells(0, 0), 1e-30, rtol=1e-3)


def test_a_window_without_lines(build: Callable[..., BuildResult]) -> None:
    made = build(wavenumber="{ start = 300.0, stop = 310.0 }")
    with open_k_table(made.table) as table:
        assert not table.k(1, 1).any()
        assert not np.any(table.planck_mean)
    assert "differs" not in verdicts(made).values()


def test_bands_by_falling_wavelengths(build: Callable[..., BuildResult], write_recipe: Callable[..., Path]) -> None:
    """The same bands whichever way they are written."""
    import opacity

    found = []
    for name, wavelengths in (("rising", [4.66, 4.665, 4.67]), ("falling", [4.67, 4.665, 4.66])):
        section = f"[k_coefficient]\nbands = {{ wavelength = {wavelengths} }}\n{FIXED}\n"
        path = write_recipe(name, ("[cross_section]\n", section), wavenumber=AXIS)
        made = build_tables(opacity.load_recipe(path), path.parent / name, crew=Crew(1), quiet=True)[0]
        with open_k_table(made.table) as table:
            found.append((table.band_bounds, table.k(1, 1)))
    np.testing.assert_array_equal(found[0][0], found[1][0])
    np.testing.assert_array_equal(found[0][1], found[1][1])
