"""Bring what `run.py` learnt into the corpus: `python tests/fuzz/minimise.py FORMAT FOLDER`, the folder that it named.

Of all inputs, shortest first, those stay that take a step from line to line of the package that none before took, or
took as often: once, a few times, many times.
"""

from __future__ import annotations

import os

os.environ["NUMBA_DISABLE_JIT"] = "1"

import argparse
import bisect
import hashlib
import sys
import warnings
from collections import Counter
from pathlib import Path
from types import FrameType
from typing import Any

sys.path.insert(0, str(Path(__file__).parents[2]))
import targets

import opacity

PACKAGE = str(Path(opacity.__file__).parent)
CORPUS = Path(__file__).parent / "corpus"


Step = tuple[str, int, int, int]
OFTEN = (1, 2, 8)


def steps_of(name: str, data: bytes) -> set[Step]:
    """Pairs of lines that follow each other in the package while a target runs, and how often."""
    found: Counter[tuple[str, int, int]] = Counter()

    def trace(frame: FrameType, event: str, argument: Any) -> Any:
        file, last = frame.f_code.co_filename, 0
        if not file.startswith(PACKAGE):
            return None

        def step(frame: FrameType, event: str, argument: Any) -> Any:
            nonlocal last
            found[file, last, frame.f_lineno] += 1
            last = frame.f_lineno
            return step

        return step

    sys.settrace(trace)
    try:
        targets.TARGETS[name](data)
    finally:
        sys.settrace(None)
    return {(*step, bisect.bisect(OFTEN, count)) for step, count in found.items()}


def main() -> None:
    arguments = argparse.ArgumentParser(description=__doc__)
    arguments.add_argument("format", choices=sorted(targets.TARGETS))
    arguments.add_argument("folder", type=Path)
    given = arguments.parse_args()
    warnings.simplefilter("ignore", RuntimeWarning)
    corpus = CORPUS / given.format
    learnt = [path for path in given.folder.rglob("*") if path.is_file() and path.suffix != ".txt"]
    inputs = {path.read_bytes() for path in (*corpus.iterdir(), *learnt)}
    taken: set[Step] = set()
    kept: set[bytes] = set()
    for data in sorted(inputs, key=lambda one: (len(one), one)):
        fresh = steps_of(given.format, data) - taken
        if fresh:
            taken |= fresh
            kept.add(data)
    for path in corpus.iterdir():
        path.unlink()
    for data in kept:
        (corpus / hashlib.sha256(data).hexdigest()[:12]).write_bytes(data)
    print(f"{given.format}: {len(kept)} of {len(inputs)} inputs, {sum(map(len, kept))} bytes, {len(taken)} steps")
    targets.clean_up()


if __name__ == "__main__":
    main()
