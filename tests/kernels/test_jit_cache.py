"""Machine code kept on disk must never outlive a change of any kernel's source."""

import shutil
import subprocess
import sys
from pathlib import Path

import pytest

import opacity

CALL = (
    "import numpy as np; from opacity.kernels.node_line import Formulas, voigt_value;"
    " print(voigt_value(50.0, 1.0, Formulas(5.0, 10.0, np.full(120, 5.0))))"
)


def run(folder: Path) -> float:
    environment = {"PYTHONPATH": str(folder), "HOME": str(folder)}
    done = subprocess.run(
        [sys.executable, "-c", CALL], cwd=folder, env=environment, capture_output=True, text=True, check=True
    )
    assert not done.stderr
    return float(done.stdout)


@pytest.mark.parametrize("unusable", [(), ("opacity/kernels/__pycache__",), ("opacity/kernels/__pycache__", ".cache")])
def test_a_change_in_a_called_kernel_reaches_its_callers(tmp_path: Path, unusable: tuple[str, ...]) -> None:
    """numba alone would go on with the old machine code: it looks at the caller's file only.

    Also where machine code cannot be kept in the package, or nowhere at all.
    """
    shutil.copytree(Path(opacity.__file__).parent, tmp_path / "opacity", ignore=shutil.ignore_patterns("__pycache__"))
    for name in unusable:
        (tmp_path / name).write_text("in the way of a folder", encoding="ascii")
    before = run(tmp_path)
    source = tmp_path / "opacity" / "kernels" / "voigt.py"
    changed = source.read_text(encoding="utf-8").replace("out[i] += max(factor * a", "out[i] += max(2.0 * factor * a")
    source.write_text(changed, encoding="utf-8")
    assert run(tmp_path) == 2.0 * before
