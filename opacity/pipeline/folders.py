"""Folders that tables are written to."""

from __future__ import annotations

import os
from pathlib import Path

from opacity.errors import ResourceError, problem


def make_folder(folder: Path) -> None:
    """Make the folder for tables, and those above it.  Raises ResourceError where nothing can be written there."""
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
    """Raise ResourceError where a file to be written is a folder: before hours of work, not after them."""
    for path in paths:
        if path.is_dir():
            raise ResourceError(problem(path, "is a folder", expected="a file or nothing", remedy="move it away"))
