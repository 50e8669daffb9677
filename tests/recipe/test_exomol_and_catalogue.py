"""Lists in ExoMol format and catalogues in a recipe: their files, what else they ask for and what they allow."""

from __future__ import annotations

from collections.abc import Callable
from pathlib import Path

import pytest

from opacity.recipe.formats import exomol_kind
from opacity.recipe.load import load_recipe
from opacity.recipe.model import Recipe

Load = Callable[..., Recipe]
Faults = Callable[..., list[str]]

DATA_SET = ("x.def", "x.states.bz2", "x__0-1.trans.bz2", "x__1-2.trans", "x.pf", "x__H2.broad")
HAPI = 'format = "hapi"\nfiles = [\n    "lines/hot.data",\n]\n'
PARTITION = 'source = "file"\nfile = "CO.pf"\n'


def exomol(files: str = '"data/x*"', form: str = "exomol") -> tuple[str, str]:
    """A change of the full recipe: the second list in another format, on as many lines."""
    return HAPI, f'format = "{form}"\nfiles = [\n    {files},\n]\n'


@pytest.fixture(autouse=True)
def data_set(folder: Path) -> Path:
    """A data set beside the files of the full recipe."""
    (folder / "data").mkdir()
    for name in DATA_SET:
        (folder / "data" / name).touch()
    return folder / "data"


@pytest.fixture
def load(folder: Path, full: str) -> Load:
    def changed(*changes: tuple[str, str]) -> Recipe:
        text = full
        for old, new in changes:
            assert text.count(old) == 1, old
            text = text.replace(old, new)
        (folder / "co.toml").write_text(text, encoding="utf-8")
        return load_recipe(folder / "co.toml")

    return changed


@pytest.mark.parametrize(
    "name, kind",
    [
        ("12C-16O__Li2015.def", "def"),
        ("12C-16O__Li2015.def.json", "def"),
        ("x.DEF.JSON.BZ2", "def"),
        ("x.states.bz2", "states"),
        ("x__00000-00100.trans", "trans"),
        ("x.pf.bz2", "pf"),
        ("x__H2.broad", "broad"),
        ("x.json", None),
        ("x.states.gz", "states"),
        ("x.PF.GZ", "pf"),
        ("x.bz2", None),
        ("states", None),
        ("x.trans.part", None),
    ],
)
def test_endings_tell_files_apart(name: str, kind: str | None) -> None:
    assert exomol_kind(name) == kind


def test_one_pattern_for_a_data_set(load: Load, data_set: Path) -> None:
    source = load(exomol()).line_lists[1]
    assert (source.format, source.isotopologue) == ("exomol", "(12C)(16O)")
    assert source.paths == tuple(data_set / name for name in sorted(DATA_SET))


def test_what_a_download_leaves_beside_is_passed_over(load: Load, faults: Faults, data_set: Path) -> None:
    for name in ("x__2-3.trans.bz2.part", "x__2-3.trans.bz2.part.json", "x.pf.sha256", "y.states.part"):
        (data_set / name).touch()
    assert len(load(exomol()).line_lists[1].paths) == len(DATA_SET)
    assert faults(exomol('"data/x*", "data/y*"')) == [
        'co.toml:16: line_list[1].files[1]: no such file; expected a file in FOLDER, found "data/y*"'
    ]
    assert faults(exomol('"data/x*", "data/y.states.part"')) == [
        "co.toml:16: line_list[1].files[1]: what a download leaves beside a file, not a line list; "
        'expected no file that ends in .part, .part.json or .sha256, found "data/y.states.part"'
    ]


def test_a_catalogue_of_any_name(load: Load, data_set: Path) -> None:
    (data_set / "c028503.cat").touch()
    source = load(exomol('"data/c*"', "catalogue")).line_lists[1]
    assert (source.format, source.paths) == ("catalogue", (data_set / "c028503.cat",))


@pytest.mark.parametrize("form", ["exomol", "catalogue"])
def test_the_isotopologue_has_to_be_named(faults: Faults, form: str) -> None:
    assert faults(exomol(form=form), ('isotopologue = "(12C)(16O)"\n', "")) == [
        "co.toml:13: line_list[1].isotopologue: missing; expected an isotopologue such as (12C)(16O)"
    ]


@pytest.mark.parametrize(
    "names, files, expected",
    [
        (
            ["x.opacity.h5", "x.pdf", "x.cont", "x.nc"],
            '"data/*"',
            "[0]: not a file of a list in ExoMol format; expected files that end in .def, .def.json, .states, .trans, "
            ".pf or .broad, plain, .gz or .bz2, found x.cont, x.nc, x.opacity.h5 and 1 more",
        ),
        (
            [],
            '"data/*.broad"',
            ": no .states or .trans file; expected one .states file and one or more .trans files, plain, .gz or .bz2",
        ),
        (
            [],
            '"data/*.trans*"',
            ": no .states file; expected one .states file and one or more .trans files, plain, .gz or .bz2",
        ),
        (["x.def.json"], '"data/x*"', ": several .def files; expected one data set, found x.def, x.def.json"),
        (["y.pf"], '"data/*"', ": several .pf files; expected one data set, found x.pf, y.pf"),
        (["y.states"], '"data/*"', ": several .states files; expected one data set, found x.states.bz2, y.states"),
        (
            ["x__0-1.trans"],
            '"data/x*"',
            "[0]: file already named in line_list[1] as x__0-1.trans; expected each file once, "
            "found FOLDER/data/x__0-1.trans.bz2",
        ),
        ([], '"data/x*", "data/x.pf"', "[1]: file already named in line_list[1]; expected each file once, found "
         "FOLDER/data/x.pf"),
        ([], '"data/x*", "data/z.pf"', '[1]: no such file; expected a file in FOLDER, found "data/z.pf"; '
         'did you mean "x.pf"?'),
    ],
)  # fmt: skip
def test_one_fault_of_a_data_set_gives_one_line(
    faults: Faults, data_set: Path, names: list[str], files: str, expected: str
) -> None:
    for name in names:
        (data_set / name).touch()
    (line,) = faults(exomol(files))
    place, _, text = line.partition("line_list[1].files")
    assert (place, text) == (f"co.toml:{16 if text.startswith('[') else 15}: ", expected)


def test_an_entry_that_is_no_name_is_not_said_to_lack(faults: Faults) -> None:
    (line,) = faults(exomol('"data/x.states.bz2", 7'))
    assert line.startswith("co.toml:16: line_list[1].files[1]: not text")


def test_records_plain_and_compressed_would_count_twice(faults: Faults, folder: Path) -> None:
    (folder / "lines" / "CO-a.par.gz").touch()
    assert faults(('["lines/CO-*.par"]', '["lines/CO-*"]')) == [
        "co.toml:9: line_list[0].files[0]: file already named in line_list[0] as CO-a.par; expected each file once, "
        "found FOLDER/lines/CO-a.par.gz"
    ]


def test_partition_function_summed_over_states(load: Load, faults: Faults) -> None:
    choice = load(exomol(), (PARTITION, 'source = "states"\n')).partition_function
    assert (choice.source, choice.file, choice.path) == ("states", None, None)
    assert faults((PARTITION, 'source = "states"\n')) == [
        'co.toml:26: partition_function.source: no line list has states; expected a line list of format "exomol", '
        'or "TIPS-2021", "TIPS-2025" or "file", found "states"'
    ]
    assert faults(exomol(), ('"file"\n', '"states"\n')) == [
        'co.toml:27: partition_function.file: not read with this source; expected source = "file", found "states"'
    ]


def test_a_list_of_a_format_misspelt_is_not_said_to_lack_states(faults: Faults) -> None:
    for partition in ('source = "states"\n', 'source = "file"\n'):
        (line,) = faults(exomol(form="exmol"), (PARTITION, partition))
        assert line.startswith("co.toml:14: line_list[1].format: unknown value")


def test_partition_function_of_the_data_set(load: Load, data_set: Path, folder: Path) -> None:
    choice = load(exomol(), (PARTITION, 'source = "file"\n')).partition_function
    assert (choice.source, choice.file, choice.path) == ("file", None, data_set / "x.pf")
    choice = load(exomol()).partition_function
    assert (choice.source, choice.file, choice.path) == ("file", "CO.pf", folder / "CO.pf")


def test_a_compressed_partition_function_of_the_data_set(load: Load, data_set: Path) -> None:
    (data_set / "x.pf").rename(data_set / "x.pf.bz2")
    assert load(exomol(), (PARTITION, 'source = "file"\n')).partition_function.path == data_set / "x.pf.bz2"


MISSING = "partition_function.file: missing; expected the name of a file of temperature and partition function"
SERVES = '; a .pf among the files of the one list of format "exomol" would serve'


def test_no_partition_function_beside_the_list(faults: Faults, data_set: Path) -> None:
    (data_set / "x.pf").unlink()
    assert faults(exomol(), (PARTITION, 'source = "file"\n')) == [f"co.toml:25: {MISSING}{SERVES}"]


def test_of_two_data_sets_neither_gives_the_partition_function(faults: Faults, data_set: Path) -> None:
    for name in ("y.states", "y.trans", "y.pf"):
        (data_set / name).touch()
    first = ('format = "hitran"\nfiles = ["lines/CO-*.par"]', 'format = "exomol"\nfiles = ["data/y*"]')
    lines = faults(exomol(), first, ("range = [0, 9000.0]", 'isotopologue = "2"'), (PARTITION, 'source = "file"\n'))
    assert lines == [f"co.toml:25: {MISSING}{SERVES}"]


@pytest.mark.parametrize("files", ['"data/x.def", "data/*.states*", "data/x__*", "data/z.pf"', '"data/z*"'])
def test_a_partition_function_that_is_not_found_is_one_fault(faults: Faults, files: str) -> None:
    (line,) = faults(exomol(files), (PARTITION, 'source = "file"\n'))
    assert ": no such file; " in line


MIXTURE = "mixture = { H2 = 0.85, He = 0.15 }\n"


def test_broadening_files(load: Load, folder: Path, data_set: Path) -> None:
    (folder / "He.broad.bz2").touch()
    files = 'files = { H2 = "data/x__H2.broad", He = "He.broad.bz2" }\n'
    broadening = load((MIXTURE, MIXTURE + files)).broadening
    assert broadening.files == {"H2": data_set / "x__H2.broad", "He": folder / "He.broad.bz2"}
    assert set(broadening.default) == {"H2"}
    assert load().broadening.files == {}


@pytest.mark.parametrize(
    "files, expected",
    [
        ('{ H2 = "x__H2.broad" }', '.H2: no such file; expected a file in FOLDER, found "x__H2.broad"'),
        ('{ H2 = "data" }', '.H2: not a broadening file; expected a file that ends in .broad or .broad.bz2, '
         'found "data"'),
        ('{ H2 = "data/x.pf" }', '.H2: not a broadening file; expected a file that ends in .broad or .broad.bz2, '
         'found "data/x.pf"'),
        ('{ H2 = ["x.broad"] }', ".H2: not text; expected a file that ends in .broad or .broad.bz2, found a list of 1"),
        ('{ h2 = "data/x__H2.broad" }', ".h2: not in broadening.mixture; expected H2 or He; did you mean H2?"),
        ('"data/x__H2.broad"', ': not a table; expected files by broadener, such as { H2 = "CO__H2.broad" }, '
         'found "data/x__H2.broad"'),
    ],
)  # fmt: skip
def test_one_fault_of_broadening_files_gives_one_line(faults: Faults, files: str, expected: str) -> None:
    assert faults((MIXTURE, MIXTURE + f"files = {files}\n")) == [f"co.toml:31: broadening.files{expected}"]
