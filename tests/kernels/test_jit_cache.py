"""Machine code kept on disk must never outlive a change of any kernel's source."""

import shutil
import subprocess
import sys
from pathlib import Path

import opacity

CALL = "from opacity.kernels.accumulate import voigt_value; print(voigt_value(50.0, 1.0, 1e-3, 5.0, 10.0))"


def run(folder: Path) -> float:
    done = subprocess.run(
        [sys.executable, "-c", CALL], cwd=folder, env={"PYTHONPATH": str(folder)}, capture_output=True, check=True
    )
    return float(done.stdout)


def test_a_change_in_a_called_kernel_reaches_its_callers(tmp_path: Path) -> None:
    """numba alone would go on with the old machine code: it looks at the caller's file only."""
    shutil.copytree(Path(opacity.__file__).parent, tmp_path / "opacity", ignore=shutil.ignore_patterns("__pycache__"))
    before = run(tmp_path)
    source = tmp_path / "opacity" / "kernels" / "voigt.py"
    changed = source.read_text(encoding="utf-8").replace("sums[i] += max(factor * a", "sums[i] += max(2.0 * factor * a")
    source.write_text(changed, encoding="utf-8")
    assert run(tmp_path) == 2.0 * before
