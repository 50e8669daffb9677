"""Coverage-guided fuzzing of one format's readers, by hand: `python tests/fuzz/run.py FORMAT SECONDS`.

Needs the package atheris.  The JIT is off, so that the branches of the kernels are seen too, and an index beyond an
array's end is an error.  Starts from `corpus/FORMAT`; what it learns and what it finds lies in the folder that it names
first, from where `minimise.py` brings into the corpus what is new.
"""

from __future__ import annotations

import os

os.environ["NUMBA_DISABLE_JIT"] = "1"

import argparse
import hashlib
import random
import re
import sys
import tempfile
import traceback
import warnings
from pathlib import Path

import atheris

sys.path.insert(0, str(Path(__file__).parents[2]))
with atheris.instrument_imports(include=["opacity"], enable_loader_override=False):
    import targets

CORPUS = Path(__file__).parent / "corpus"
LONGEST = 4096
SLOWEST = 20
TOKENS = [
    b"nan", b"inf", b"-inf", b"1e999", b"9E999", b"1_0", b"0x10", b"1e-320", b"-1", b"0", b"00", b"-0.0", b"+.5", b"5.",
    b"1-101", b"1+300", b"9223372036854775807", b"9" * 25, b"0." + b"0" * 30 + b"1", b"#", b"####", b"*****", b"--1",
    b"A", b"B", b"\xff", b"\0", b"\t", b"\r", b"\x0b", b"\x85", b"\xc3\xa9", b"null", b"true", b"[]", b"{}", b'""',
    b"a0", b"a1", b"m0", b"v1", b"%%", b"\\ud800", b",", b"%9d", b"1e-170", b"1e5", b"0.5", b"296", b"10000",
    b"2147483648",
]  # fmt: skip


def mutate(data: bytes, size: int, seed: int) -> bytes:
    """Half of the time a field overwritten in its place or rows moved, which keep columns where they are."""
    choice = random.Random(seed)
    fields = [match.span() for match in re.finditer(rb"[^\s,#]+[ ]*", data)]
    kind = choice.randrange(8)
    if kind < 4 or not fields:
        return atheris.Mutate(data, size)
    first, last = choice.choice(fields)
    token = choice.choice([*TOKENS, data[slice(*choice.choice(fields))].rstrip()])
    if kind == 4:
        changed = data[:first] + token + data[last:]
    elif kind < 7:  # in place, at either end
        room = data[first:last]
        keep = len(room) - len(token)
        at = choice.choice([0, max(keep, 0)])
        changed = data[: first + at] + token + data[max(first + at + len(token), first) :]
    else:
        rows = data.split(b"\n")
        row = choice.choice(rows)
        rows.insert(choice.randrange(len(rows) + 1), row)
        if choice.random() < 0.5:
            rows.pop(choice.randrange(len(rows)))
        changed = b"\n".join(rows)
    return changed[:size]


class Harness:
    """Calls a target; what it finds is kept once a place, and the search goes on."""

    def __init__(self, name: str, folder: Path) -> None:
        self.target, self.folder, self.places = targets.TARGETS[name], folder, set()

    def __call__(self, data: bytes) -> None:
        try:
            self.target(data)
        except Exception as error:
            frames = traceback.extract_tb(error.__traceback__)
            place = [f"{Path(one.filename).name}:{one.lineno}" for one in frames if "fuzz" in one.filename]
            inside = [f"{Path(one.filename).name}:{one.lineno}" for one in frames if "/opacity/" in one.filename][-1:]
            key = (type(error).__name__, *place[-1:], *inside)
            if key not in self.places:
                self.places.add(key)
                name = hashlib.sha256(data).hexdigest()[:12]
                (self.folder / name).write_bytes(data)
                (self.folder / f"{name}.txt").write_text(traceback.format_exc())
                print(f"FOUND {key}: {str(error)[:300]}", flush=True)


def main() -> None:
    arguments = argparse.ArgumentParser(description=__doc__)
    arguments.add_argument("format", choices=sorted(targets.TARGETS))
    arguments.add_argument("seconds", type=int)
    arguments.add_argument("--folder", type=Path, help="where to go on from an earlier run")
    given = arguments.parse_args()
    warnings.simplefilter("error")
    warnings.filterwarnings("ignore", category=RuntimeWarning, module=r"opacity\.kernels")  # silent when compiled
    folder = given.folder or Path(tempfile.mkdtemp(prefix=f"fuzz-{given.format}-"))
    found, learnt = folder / "found", folder / "learnt"
    for one in (found, learnt):
        one.mkdir(parents=True, exist_ok=True)
    seeds = CORPUS / given.format
    seeds.mkdir(parents=True, exist_ok=True)
    options = [sys.argv[0], f"-max_len={LONGEST}", f"-timeout={SLOWEST}", f"-artifact_prefix={found}/"]
    print(f"learnt and found inputs: {folder}", flush=True)
    options += [f"-max_total_time={given.seconds}", "-print_final_stats=1", str(learnt), str(seeds)]
    atheris.Setup(options, Harness(given.format, found), custom_mutator=mutate)
    atheris.Fuzz()


if __name__ == "__main__":
    main()
