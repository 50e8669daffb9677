"""The folder of the tables, and the log beside them."""

from __future__ import annotations

import json
import os
import platform
import time
from pathlib import Path

from opacity.errors import ResourceError, problem
from opacity.pipeline.resources import processor
from opacity.recipe.model import Recipe
from opacity.tables.atomic import write_atomically


def make_folder(folder: Path) -> None:
    """Make a folder that can be written to.  Raises ResourceError where there can be none."""
    try:
        folder.mkdir(parents=True, exist_ok=True)
    except (OSError, ValueError) as error:
        reason = getattr(error, "strerror", None) or str(error)
        raise ResourceError(problem(folder, f"the folder for the tables cannot be made ({reason})")) from error
    if not os.access(folder, os.W_OK | os.X_OK):
        raise ResourceError(
            problem(folder, "nothing can be written here", remedy="choose a folder in which you may write")
        )


def refuse_folders(*paths: Path) -> None:
    """Before hours of work, not after them."""
    for path in paths:
        if path.is_dir():
            raise ResourceError(problem(path, "is a folder", expected="a file or nothing", remedy="move it away"))


def write_log(log: Path, recipe: Recipe, seconds: float, workers: int) -> None:
    """What depends on time and place, beside the table and not in it."""
    entry = {
        "recipe": str(recipe.path.absolute()),
        "finished": time.strftime("%Y-%m-%dT%H:%M:%SZ", time.gmtime()),
        "seconds": round(seconds, 3),
        "workers": workers,
        "host": platform.node(),
        "processor": processor(),
        "python": platform.python_version(),
    }
    write_atomically(log, (json.dumps(entry, indent=2) + "\n").encode("utf-8"))
