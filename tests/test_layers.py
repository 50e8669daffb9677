"""The order of the house: who may import whom, what is loaded when, and how long files and functions may be."""

from __future__ import annotations

import ast
import json
import subprocess
import sys
from collections.abc import Iterator
from pathlib import Path

import pytest

import opacity as package

ROOT = Path(package.__file__).parent
MODULES = sorted(ROOT.rglob("*.py"))

LEVELS = {
    "errors": 0,
    "constants": 0,
    "units": 0,
    "arguments": 1,
    "chi_factors": 1,
    "grids": 1,
    "provenance": 1,
    "kernels": 1,
    "recipe": 2,
    "molecule": 2,
    "tables": 2,
    "line_list": 3,
    "line_store": 4,
    "cross_sections": 5,
    "k_coefficient": 6,
    "check": 7,
    "pipeline": 8,
    "api": 9,
    "": 9,  # the package's own __init__
    "cli": 10,
    "__main__": 11,
}
"""Level by folder, or by module where it lies in the package itself."""

ONLY_IN = {
    "numba": ("kernels/",),
    "llvmlite": ("kernels/",),
    "h5py": ("tables/", "line_store/"),
    "hapi": ("molecule/",),
    "matplotlib": ("tables/draw.py",),
}
SIDE_BY_SIDE = {"errors", "constants", "units", "arguments", "chi_factors", "grids", "provenance", "api", ""}
"""Modules in the package itself: it is their own folder, so that those of one level may import each other."""

LONGEST_FILE = 350
LONGEST_FUNCTION = 50


def imports_of(source: str, home: str) -> Iterator[tuple[int, str]]:
    """Line and full dotted name of every import in a module at `home` (such as "check/audit.py"), late ones too."""
    folder = ["opacity", *Path(home).parent.parts]
    for node in ast.walk(ast.parse(source)):
        if isinstance(node, ast.Import):
            yield from ((node.lineno, alias.name) for alias in node.names)
        elif isinstance(node, ast.ImportFrom):
            base = folder[: len(folder) - node.level + 1] if node.level else []
            module = ".".join([*base, *([node.module] if node.module else [])])
            yield from ((node.lineno, f"{module}.{alias.name}") for alias in node.names)
        elif isinstance(node, ast.Call) and _is_importer(node.func):
            first = node.args[0] if node.args else None
            known = isinstance(first, ast.Constant) and isinstance(first.value, str)
            yield node.lineno, str(first.value) if known else "?"


def _is_importer(function: ast.expr) -> bool:
    name = function.attr if isinstance(function, ast.Attribute) else getattr(function, "id", "")
    return name in ("import_module", "__import__")


def part_of(home: str) -> str:
    """The folder, or the module in the package itself, that a file belongs to."""
    first = Path(home).parts[0]
    return first.removesuffix(".py").removesuffix("__init__") if first != "__main__.py" else "__main__"


def violations(source: str, home: str) -> list[str]:
    """What a module imports against the rules."""
    found = []
    own = part_of(home)
    for line, name in imports_of(source, home):
        parts = name.split(".")
        if parts[0] != "opacity":
            if name == "?" and home != "__init__.py":
                found.append(f"{home}:{line}: imports a name made at run time")
            allowed = ONLY_IN.get(parts[0])
            if allowed is not None and not home.startswith(allowed):
                found.append(f"{home}:{line}: {parts[0]} belongs in {' and '.join(allowed)}")
            continue
        target = parts[1] if len(parts) > 1 else ""
        if target not in LEVELS or target == "":
            found.append(f"{home}:{line}: imports from the package itself ({name})")
        elif target != own and LEVELS[target] >= LEVELS[own] + (own in SIDE_BY_SIDE and target in SIDE_BY_SIDE):
            found.append(f"{home}:{line}: level {LEVELS[own]} imports {target}, level {LEVELS[target]}")
    return found


def home_of(path: Path) -> str:
    return path.relative_to(ROOT).as_posix()


@pytest.mark.parametrize("path", MODULES, ids=home_of)
def test_a_module_imports_only_what_lies_below_it(path: Path):
    assert violations(path.read_text(encoding="utf-8"), home_of(path)) == []


def test_every_folder_has_a_level_and_every_late_name_a_home():
    assert {part_of(home_of(path)) for path in MODULES} <= set(LEVELS)
    for module in package._HOMES.values():
        assert LEVELS[module.split(".")[1]] <= LEVELS[""]
        assert (ROOT.parent / Path(*module.split("."))).with_suffix(".py").is_file()


@pytest.mark.parametrize(
    "home, source, expected",
    [
        ("tables/read.py", "from opacity.check.run import run_checks", "level 2 imports check, level 7"),
        ("tables/read.py", "from opacity.recipe import model", "level 2 imports recipe, level 2"),
        ("grids.py", "import opacity.kernels.voigt", "level 1 imports kernels, level 1"),
        ("check/run.py", "def f():\n    from opacity.pipeline.plan import Plan", "level 7 imports pipeline, level 8"),
        ("check/run.py", "from ..cli import text", "level 7 imports cli, level 10"),
        ("cli/main.py", "import opacity", "from the package itself"),
        ("cli/main.py", "from opacity import open_table", "from the package itself"),
        ("api.py", "import opacity.cli.main", "level 9 imports cli, level 10"),
        ("check/run.py", "import numba", "numba belongs in kernels/"),
        ("pipeline/build.py", "from numba.core import config", "numba belongs in kernels/"),
        ("cli/commands.py", "import h5py as h", "h5py belongs in tables/ and line_store/"),
        ("line_list/read.py", 'import importlib\nimportlib.import_module("hapi")', "hapi belongs in molecule/"),
        ("line_list/read.py", '__import__("hapi")', "hapi belongs in molecule/"),
        ("check/run.py", 'from importlib import import_module\nimport_module(f"h{x}")', "made at run time"),
        ("tables/curves.py", "from matplotlib import pyplot", "matplotlib belongs in tables/draw.py"),
        ("errors.py", "if TYPE_CHECKING:\n    from opacity.grids import X", "level 0 imports grids, level 1"),
        ("__init__.py", "from opacity.cli import main", "level 9 imports cli, level 10"),
    ],
)
def test_a_planted_violation_is_found(home: str, source: str, expected: str):
    assert len(violations(source, home)) == 1
    assert expected in violations(source, home)[0]


@pytest.mark.parametrize(
    "home, source",
    [
        ("check/run.py", "from opacity.check.audit import audit\nfrom opacity.errors import problem\nimport scipy"),
        ("tables/draw.py", "from matplotlib import rc_context\nfrom opacity.tables import curves"),
        ("molecule/hapi_tables.py", 'import importlib\nimportlib.import_module("hapi")'),
        ("__init__.py", "import importlib\nimportlib.import_module(name)\nfrom opacity.api import plan"),
        ("check/run.py", "from . import audit\nfrom ..grids import as_axis"),
    ],
)
def test_what_is_allowed_is_not_a_violation(home: str, source: str):
    assert violations(source, home) == []


def too_long(source: str) -> list[str]:
    """Files beyond 350 lines and functions whose body is beyond 50."""
    found = [] if source.count("\n") <= LONGEST_FILE else [f"{source.count(chr(10))} lines"]
    for node in ast.walk(ast.parse(source)):
        if isinstance(node, (ast.FunctionDef, ast.AsyncFunctionDef)):
            body = node.body[1:] if ast.get_docstring(node) is not None else node.body
            length = node.end_lineno - body[0].lineno + 1 if body else 0
            if length > LONGEST_FUNCTION:
                found.append(f"{node.name}: {length} lines")
    return found


@pytest.mark.parametrize("path", MODULES, ids=home_of)
def test_files_and_functions_are_short(path: Path):
    assert too_long(path.read_text(encoding="utf-8")) == []


def test_what_is_too_long_is_found():
    body = "    x = 1\n"
    assert too_long('def f():\n    """Words."""\n' + body * 50) == []
    assert too_long("def f():\n" + body * 51) == ["f: 51 lines"]
    assert too_long("#\n" * 351) == ["351 lines"]


def loaded_by(code: str, *watched: str) -> list[str]:
    """Which of the packages watched a fresh interpreter has loaded after some code."""
    probe = f"import json, sys\n{code}\nsys.stderr.write(json.dumps([m for m in {watched!r} if m in sys.modules]))"
    done = subprocess.run([sys.executable, "-c", probe], capture_output=True, text=True, cwd=ROOT.parent, check=True)
    return json.loads(done.stderr)


def test_reading_a_table_loads_no_compiler_and_no_line_list_package():
    table = next(iter(sorted((ROOT.parent / "tests" / "tables" / "data").glob("*.h5"))))
    code = f"""
import opacity
with opacity.open_table({str(table)!r}) as table:
    table.verify()
    table.spectrum(*[0] * (len(table.shape) - 1))
    if not table.profile:
        table.at(float(table.temperature[0]), float(table.pressure[0]))
"""
    assert loaded_by(code, "numba", "hapi", "scipy", "matplotlib", "h5py") == ["h5py"]


def test_help_loads_nothing_slow():
    code = """
from opacity.cli.main import main
for words in (["--help"], ["build", "--help"], ["--version"]):
    try:
        main(words)
    except SystemExit:
        pass
"""
    assert loaded_by(code, "numba", "hapi", "h5py", "scipy", "matplotlib", "numpy") == []
