"""Tables with other points in g, and tables of mixtures: made of tables, without a line being read."""

from __future__ import annotations

import shutil
from collections.abc import Callable
from pathlib import Path

import numpy as np
import pytest

from opacity.errors import InputError, OpacityError
from opacity.k_coefficient.certificate import errors_at_node
from opacity.k_coefficient.choose import Wanted
from opacity.k_coefficient.collapse import CELL_WIDTHS
from opacity.k_coefficient.quadrature import g_points, k_from_cells
from opacity.pipeline.build import Crew, build_tables
from opacity.pipeline.k_files import choose_again, mix_tables
from opacity.recipe.load import load_recipe
from opacity.tables.k_read import open_k_table

Opacity = Callable[..., tuple[int, str, str]]
FOUR = 'g_points = 4\nweights = "fixed"'
OTHERS = {
    "co": ("", "", FOUR),
    "rest": ('"(12C)(16O)"', '"(13C)(16O)"', FOUR),
    "band": ("", "", 'g_points = 4\nweights = "optimised-per-band"'),
    "five": ("", "", 'g_points = 5\nweights = "fixed"'),
    "bands": ("width = 5.0", "width = 2.5", FOUR),
    "nodes": ("480.0", "490.0", FOUR),
    "profile": ("temperature = [296.0, 480.0]\npressure = [0.01, 1.0]", "nodes = [[296.0, 1.0]]", FOUR),
    "split": ("", "", 'g_points = 4\nquadrature = "split"'),
}


@pytest.fixture(scope="session")
def made_once(tmp_path_factory: pytest.TempPathFactory, recipe_text: Callable[..., str], samples: Path) -> Path:
    """Tables by name: of CO as the sample list has it, and of the same lines 0.7 cm-1 lower, with other strengths."""
    folder = tmp_path_factory.mktemp("k_files")
    other = folder / "shifted"
    other.mkdir()
    lines = (samples / "carbon-monoxide.par").read_text(encoding="ascii").splitlines()
    factor = [0.05 + 3.0 * (7 * number % 11) / 11.0 for number in range(len(lines))]
    moved = [
        f"{line[:3]}{float(line[3:15]) - 0.7:12.6f}{float(line[15:25]) * x:10.3E}{line[25:]}"
        for line, x in zip(lines, factor, strict=True)
    ]
    (other / "carbon-monoxide.par").write_text("\n".join(moved) + "\n", encoding="ascii")
    for name, (old, new, more) in OTHERS.items():
        text = recipe_text(
            wavenumber="{ start = 2140.0, stop = 2150.0 }", samples=str(other if name == "rest" else samples)
        ).replace("[cross_section]\n", f"[k_coefficient]\nbands = {{ width = 5.0 }}\n{more}\n")
        if name != "rest":
            text = text.replace(old, new) if old else text
        path = folder / f"{name}.toml"
        path.write_text(text, encoding="utf-8")
        build_tables(load_recipe(path), folder, crew=Crew(1), quiet=True)
    return folder


@pytest.fixture
def table(made_once: Path) -> Callable[[str], Path]:
    return lambda name: made_once / f"{name}.k-coefficient.h5"


def wanted(count: int | None = 3, error: float = 5e-3, quadrature: str = "matched", weights: str = "fixed") -> Wanted:
    return Wanted(count, error, quadrature, weights)


def values_of(path: Path) -> tuple[np.ndarray, np.ndarray]:
    with open_k_table(path) as opened:
        return np.array([opened.k(*node) for node in np.ndindex(*opened.shape[:-2])]), opened.g_weight


def test_other_points_are_those_of_a_build(table: Callable[[str], Path], tmp_path: Path) -> None:
    """Five fixed points out of the table with four have the bits of the table that was built with five."""
    ((path, checks),) = choose_again([table("co")], wanted(5), tmp_path)
    for found, expected in zip(values_of(path), values_of(table("five")), strict=True):
        np.testing.assert_array_equal(found, expected)
    assert {row["verdict"] for row in checks["results"]} == {"agrees"}
    with open_k_table(path) as opened, open_k_table(table("co")) as before:
        assert opened.provenance == before.provenance
        np.testing.assert_array_equal(opened.cells(1, 1), before.cells(1, 1))
        np.testing.assert_array_equal(opened.planck_mean, before.planck_mean)


@pytest.mark.parametrize("quadrature", ["gauss-legendre", "split", "interval-mean"])
def test_other_quadratures(table: Callable[[str], Path], tmp_path: Path, quadrature: str) -> None:
    ((path, _),) = choose_again([table("co")], wanted(6, quadrature=quadrature), tmp_path)
    with open_k_table(path) as opened:
        assert opened.quadrature == quadrature
        points = g_points(6, quadrature)
        np.testing.assert_allclose(opened.k(0, 1), k_from_cells(opened.cells(0, 1), points), rtol=4e-7)


@pytest.mark.parametrize("weights", ["optimised", "optimised-per-band", "fixed"])
def test_points_shared_by_several_tables_meet_the_target_in_all(
    table: Callable[[str], Path], tmp_path: Path, weights: str
) -> None:
    made = choose_again([table("co"), table("rest")], wanted(None, 0.01, weights=weights), tmp_path)
    (first, weight), (second, other) = (values_of(path) for path, _ in made)
    np.testing.assert_array_equal(weight, other)
    assert first.shape == second.shape
    for path, checks in made:
        with open_k_table(path) as opened:
            for i, j in np.ndindex(2, 2):
                pressure = float(opened.pressure[j])
                errors = errors_at_node(opened.k(i, j), opened.g_weight, opened.cells(i, j), pressure)
                assert np.max(np.abs(errors.transmission)) <= 0.01
        assert checks["certificate"]["target"] == 0.01
        assert {row["verdict"] for row in checks["results"]} == {"agrees"}


def test_what_an_earlier_choice_promised_is_not_kept(table: Callable[[str], Path], tmp_path: Path) -> None:
    ((path, checks),) = choose_again([table("co")], wanted(None, 0.01, weights="optimised"), tmp_path / "auto")
    assert checks["certificate"]["target"] == 0.01
    ((_, checks),) = choose_again([path], wanted(2), tmp_path / "two")
    assert checks["certificate"]["weights"] == "fixed"
    assert not {"target", "trained_error", "trained_nodes"} & set(checks["certificate"])


def test_a_mixture_of_one_is_itself(table: Callable[[str], Path], tmp_path: Path) -> None:
    for name in ("co", "band"):
        path, checks = mix_tables([(table(name), 1.0)], tmp_path / f"{name}.h5")
        found, expected = values_of(path), values_of(table(name))
        np.testing.assert_allclose(found[0], expected[0], rtol=1e-6)
        np.testing.assert_array_equal(found[1], expected[1])
        assert "differs" not in {row["verdict"] for row in checks["results"]}


def test_fractions_scale_and_what_is_left_does_not_absorb(table: Callable[[str], Path], tmp_path: Path) -> None:
    path, _ = mix_tables([(table("co"), 0.25)], tmp_path / "quarter.h5")
    np.testing.assert_allclose(values_of(path)[0], 0.25 * values_of(table("co"))[0], rtol=1e-6)
    with open_k_table(path) as opened, open_k_table(table("co")) as whole:
        np.testing.assert_allclose(opened.planck_mean, 0.25 * whole.planck_mean, rtol=1e-12)
        assert opened.rosseland_mean is None


def test_mixing_is_symmetric_and_keeps_the_mean(table: Callable[[str], Path], tmp_path: Path) -> None:
    parts = [(table("co"), 0.3), (table("rest"), 0.6)]
    one, _ = mix_tables(parts, tmp_path / "one.h5")
    two, _ = mix_tables(parts[::-1], tmp_path / "two.h5")
    (k, weights), (other, _) = values_of(one), values_of(two)
    np.testing.assert_allclose(other, k, rtol=1e-6)
    means = sum(x * (values_of(path)[0] * weights).sum(axis=-1) for path, x in parts)
    np.testing.assert_allclose((k * weights).sum(axis=-1), means, rtol=1e-6)


def test_the_certificate_of_a_mixture_in_a_slow_way(table: Callable[[str], Path], tmp_path: Path) -> None:
    """Transmissions of the mixture against the products of the species', column by column and cell by cell."""
    parts = [(table("co"), 0.3), (table("rest"), 0.6)]
    path, checks = mix_tables(parts, tmp_path / "mixed.h5")
    opened = [open_k_table(one) for one, _ in parts]
    worst: dict[int, float] = {}
    with open_k_table(path) as mixture:
        for node in np.ndindex(2, 2):
            for band in range(2):
                reported = checks["certificate"]["bands"][band]
                if reported["node"] != 2 * node[0] + node[1]:
                    continue
                column = reported["column"]
                product = 1.0
                for table_, (_, x) in zip(opened, parts, strict=True):
                    cells = table_.cells(*node)[band]
                    product *= sum(w * np.exp(-x * k * column) for w, k in zip(CELL_WIDTHS, cells, strict=True))
                k = mixture.k(*node)[band]
                found = sum(w * np.exp(-one * column) for w, one in zip(mixture.g_weight, k, strict=True))
                worst[band] = found - product
    for one in opened:
        one.close()
    assert len(worst) == 2
    for band, error in worst.items():
        np.testing.assert_allclose(error, checks["certificate"]["bands"][band]["largest"], rtol=1e-9)
    (row,) = checks["results"]
    assert row["value"] == pytest.approx(max(worst.values(), key=abs))


REFUSED = [
    (["co", "bands"], "has other bands; expected those of .*: 2 bands, 2140 to 2150 cm-1, found 4 bands"),
    (["co", "nodes"], "has other temperatures or pressures than .*; build both on one grid"),
    (["co", "profile"], "has other temperatures or pressures than .*; build both on one grid"),
    (["co", "five"], "has other points in g than .*; choose points for both: `opacity g-points "),
    (["co", "split"], "has other points in g than .*; choose points for both: `opacity g-points "),
    (["co", "band"], "has other points in g than .*; choose points for both: `opacity g-points "),
]


@pytest.mark.parametrize("names, words", REFUSED)
def test_tables_that_do_not_mix(table: Callable[[str], Path], tmp_path: Path, names: list[str], words: str) -> None:
    with pytest.raises(OpacityError, match=words) as caught:
        mix_tables([(table(name), 0.5) for name in names], tmp_path / "mixed.h5")
    assert "\n" not in str(caught.value)
    assert not list(tmp_path.iterdir())


def test_the_remedy_for_other_points_helps(table: Callable[[str], Path], tmp_path: Path, opacity: Opacity) -> None:
    tables = [table("co"), table("split")]
    code, _, err = opacity("g-points", *tables, "-o", tmp_path, "--count", 4, "--quiet")
    assert code == 0, err
    parts = [f"{tmp_path / one.name}=0.5" for one in tables]
    code, out, err = opacity("mix", *parts, "-o", tmp_path / "mixed.h5", "--quiet")
    assert code == 0, err
    assert out.splitlines()[-1] == f"table: {tmp_path / 'mixed.h5'}"


@pytest.mark.parametrize("fractions", [[0.5, 0.6], [0.0, 0.5], [-0.1, 0.5], [float("nan"), 0.5], [1.5], []], ids=str)
def test_impossible_fractions(table: Callable[[str], Path], tmp_path: Path, fractions: list[float]) -> None:
    parts = [(table(name), x) for name, x in zip(("co", "rest"), fractions, strict=False)]
    with pytest.raises(InputError, match=r"^fractions: impossible; expected fractions above 0 with a sum of at most 1"):
        mix_tables(parts, tmp_path / "mixed.h5")


@pytest.mark.parametrize(
    "asked, words",
    [
        (wanted(0), "^g_points: impossible; expected a whole number from 1 to 200, found 0$"),
        (wanted(201), "^g_points: impossible; expected a whole number from 1 to 200, found 201$"),
        (wanted(1, quadrature="split"), "^g_points: impossible; expected a whole number from 2 to 200, found 1$"),
        (wanted(None, float("nan")), "^transmission_error: impossible; expected a number between 0 and 1, found nan$"),
        (wanted(None, 0.0), "^transmission_error: impossible; expected a number between 0 and 1, found 0$"),
        (wanted(None, quadrature="split"), "^quadrature: only matched is made to fit; .*, found split$"),
        (wanted(4, quadrature="split", weights="optimised"), "^quadrature: only matched is made to fit"),
        (wanted(None, 1e-9), "^transmission_error: too small; expected an error that 200 points can meet"),
    ],
)
def test_impossible_points(table: Callable[[str], Path], tmp_path: Path, asked: Wanted, words: str) -> None:
    with pytest.raises(InputError, match=words):
        choose_again([table("co")], asked, tmp_path / "new")
    assert not (tmp_path / "new").exists()


def test_a_table_is_not_written_over_its_source(table: Callable[[str], Path], tmp_path: Path, opacity: Opacity) -> None:
    path = tmp_path / "co.k-coefficient.h5"
    shutil.copy(table("co"), path)
    before = path.read_bytes()
    (tmp_path / "link.h5").symlink_to(path)
    for command in (
        ("g-points", path, "-o", tmp_path, "--count", 3),
        ("mix", f"{path}=1.0", "-o", path),
        ("mix", f"{path}=0.5", f"{table('rest')}=0.5", "-o", tmp_path / "link.h5"),
    ):
        code, _, err = opacity(*command, "--quiet")
        assert code == 2
        words = "would be written over its source; choose another folder or name"
        assert err.splitlines() in ([f"{path}: {words}"], [f"{tmp_path / 'link.h5'}: {words}"])
    assert path.read_bytes() == before


def test_two_tables_of_one_name(table: Callable[[str], Path], tmp_path: Path) -> None:
    shutil.copy(table("co"), tmp_path / "co.k-coefficient.h5")
    with pytest.raises(InputError, match=r"^tables: two of one name; expected names that differ$"):
        choose_again([table("co"), tmp_path / "co.k-coefficient.h5"], wanted(), tmp_path / "new")


def test_a_mixture_holds_no_cells_to_choose_from(
    table: Callable[[str], Path], tmp_path: Path, opacity: Opacity
) -> None:
    path, _ = mix_tables([(table("co"), 0.5), (table("rest"), 0.5)], tmp_path / "mixed.h5")
    code, _, err = opacity("g-points", path, "-o", tmp_path / "new", "--count", 3, "--quiet")
    assert code == 1
    assert err == f"{path}: holds no fine cells to choose points from; build it from its recipe\n"
    again, checks = mix_tables([(path, 0.5)], tmp_path / "again.h5")
    assert checks["results"] == []
    assert "without fine cells the rebinning is not certified" in checks["warnings"]
    for command in ("check", "show"):
        assert opacity(command, again)[0] == 0


def test_a_cross_section_table_is_not_mixed(
    write_recipe: Callable[..., Path], tmp_path: Path, opacity: Opacity
) -> None:
    build_tables(load_recipe(write_recipe()), tmp_path, crew=Crew(1), quiet=True)
    path = tmp_path / "co.cross-section.h5"
    for command in (("mix", f"{path}=0.5", "-o", tmp_path / "m.h5"), ("g-points", path, "-o", tmp_path / "new")):
        code, _, err = opacity(*command, "--quiet")
        assert code == 1
        assert len(err.splitlines()) == 1
        assert err.startswith(f"{path}: ")
