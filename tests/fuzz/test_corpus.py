"""Every input of the corpus once more: a correct list, or an error of one line, in little time."""

from __future__ import annotations

import faulthandler
import importlib.util
import sys
import time
from pathlib import Path
from types import ModuleType

import pytest

HERE = Path(__file__).parent
SAMPLE = HERE.parents[1] / "data-samples" / "carbon-monoxide.par"
LONGEST = 20.0
"""Seconds that an input may take; it takes some milliseconds."""

INPUTS = sorted(path for path in (HERE / "corpus").rglob("*") if path.is_file())
FORMATS = sorted({path.parent.name for path in INPUTS})


@pytest.fixture(scope="module")
def targets() -> ModuleType:
    """The targets as `run.py` imports them, which is no part of a package."""
    with pytest.MonkeyPatch.context() as patch:
        patch.syspath_prepend(str(HERE))
        spec = importlib.util.spec_from_file_location("targets", HERE / "targets.py")
        assert spec is not None
        assert spec.loader is not None
        module = importlib.util.module_from_spec(spec)
        spec.loader.exec_module(module)
        yield module
        module.clean_up()
        sys.modules.pop("reference", None)


def test_every_format_has_inputs_and_all_are_small(targets: ModuleType) -> None:
    assert sorted(targets.TARGETS) == FORMATS
    assert sum(path.stat().st_size for path in INPUTS) < 1_000_000


@pytest.mark.nojit
@pytest.mark.parametrize("name", FORMATS)
@pytest.mark.filterwarnings("ignore::RuntimeWarning:opacity.kernels")
def test_the_corpus(targets: ModuleType, name: str) -> None:
    inputs = [path for path in INPUTS if path.parent.name == name]
    assert len(inputs) > 5
    targets.TARGETS[name](inputs[0].read_bytes())  # compiles
    for path in inputs:
        faulthandler.dump_traceback_later(LONGEST, exit=True)  # a kernel that hangs hears nothing else
        start = time.perf_counter()
        try:
            targets.TARGETS[name](path.read_bytes())
        except Exception as error:
            raise AssertionError(f"{path.name}: {error!r}") from error
        finally:
            faulthandler.cancel_dump_traceback_later()
        assert time.perf_counter() - start < LONGEST, path.name


def test_a_wrong_number_is_found(targets: ModuleType, monkeypatch: pytest.MonkeyPatch) -> None:
    """The targets hold what is read against numbers of their own."""
    data = b"".join(SAMPLE.read_bytes().splitlines(keepends=True)[:3])
    read = targets.read_lines

    def wrong(*given: object, **named: object) -> object:
        lines = read(*given, **named)
        lines.lower_energy[1] *= 1.0 + 1e-12
        return lines

    targets.hitran(data)
    monkeypatch.setattr(targets, "read_lines", wrong)
    with pytest.raises(AssertionError, match="Not equal to tolerance"):
        targets.hitran(data)
