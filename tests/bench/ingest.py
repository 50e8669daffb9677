"""How fast lists are read, as ratios measured side by side in one run; run by hand:

    python tests/bench/ingest.py [MILLIONS_OF_TRANSITIONS]

An invented list in ExoMol format (states and unsorted transitions in several files) and one of 160-character records
are generated; the readers and the whole ingest are timed beside pandas on the same files, and bz2 beside what its
decompressor alone takes.  Peak resident memory is that of a process of its own.
"""

from __future__ import annotations

import bz2
import subprocess
import sys
import tempfile
import time
from collections.abc import Callable
from concurrent.futures import ThreadPoolExecutor
from functools import partial
from pathlib import Path

import numpy as np

from opacity.line_list.batches import in_order, record_batches
from opacity.line_list.exomol.broadening import read_broadening
from opacity.line_list.exomol.states import read_states
from opacity.line_list.exomol.transitions import state_join, transition_batches
from opacity.line_list.read import parser_of
from opacity.line_list.records import ReadOptions
from opacity.line_list.text import read_raw
from opacity.line_store.ingest import InputFile, ingest
from opacity.line_store.store import LineStore
from opacity.molecule.isotopologue import isotopologue

STATES = 200_000
FILES = 4
SAMPLE = Path(__file__).parents[2] / "data-samples" / "carbon-monoxide.par"


def generate(folder: Path, millions: float) -> list[Path]:
    """States and unsorted transitions, invented."""
    rng = np.random.default_rng(1)
    energy, j = np.sort(rng.uniform(0.0, 30000.0, STATES)), rng.integers(0, 80, STATES)
    with open(folder / "vl.states", "w", encoding="ascii") as file:
        for i in range(STATES):
            file.write(f"{i + 1:12d} {energy[i]:14.6f} {2 * j[i] + 1:6d} {j[i]:7d}\n")
    (folder / "vl__H2.broad").write_text("".join(f"a0 {0.09 - 0.0005 * k:.4f} 0.60 {k}\n" for k in range(80)))
    paths = []
    for number in range(FILES):
        path = folder / f"vl__{number:05d}.trans"
        with open(path, "w", encoding="ascii") as file:
            left = int(millions * 1e6 / FILES)
            while left > 0:
                n = min(left, 200_000)
                lower = rng.integers(0, STATES // 2, n)
                upper = lower + 1 + rng.integers(0, STATES // 2 - 1, n)
                # A rises with the square of the wavenumber, so that no line is stronger than any can be.
                a = 10.0 ** rng.uniform(-10, 0, n) * ((energy[upper] - energy[lower]) / 1000.0) ** 2
                rows = (f"{u:12d} {low:12d} {x:10.4E}\n" for u, low, x in zip(upper + 1, lower + 1, a, strict=True))
                file.writelines(rows)
                left -= n
        paths.append(path)
    return paths


def inputs_of(folder: Path, paths: list[Path], executor: ThreadPoolExecutor | None) -> list[InputFile]:
    """The generated list as what an ingest takes."""
    states = read_states(folder / "vl.states")
    join = state_join(states, {"H2": read_broadening(folder / "vl__H2.broad")}, isotopologue(5, 1))
    return [InputFile(path, partial(transition_batches, path, join, False, None, executor)) for path in paths]


def seconds(work: Callable[[], object]) -> float:
    """Time of one run."""
    start = time.perf_counter()
    work()
    return time.perf_counter() - start


def drain(batches: object) -> int:
    """Records of all batches."""
    return sum(batch.ledger.read for batch in batches)  # type: ignore[attr-defined]


def peak_memory() -> int:
    """Peak resident memory of this process so far, bytes; getrusage would count that of the process it came from."""
    for line in Path("/proc/self/status").read_text(encoding="ascii").splitlines():
        if line.startswith("VmHWM:"):
            return int(line.split()[1]) * 1024
    return 0


def whole_ingest(folder: Path) -> None:
    """Ingest in this process, and say what it took: run in a process of its own."""
    paths = sorted(folder.glob("*.trans"))
    with ThreadPoolExecutor(2) as executor:
        base = peak_memory()
        start = time.perf_counter()
        ingest(folder / "store", inputs_of(folder, paths, executor), "k", 2_000_000_000, lambda records, read: None)
        took = time.perf_counter() - start
    peak = peak_memory()
    with LineStore(folder / "store") as store:
        lines, per_line = store.index.lines, store.index.bytes / store.index.lines
        window = store.window(5000.0, 5001.0)
    print(
        f"whole ingest, unsorted, 2 threads: {lines / took / 1e6:.2f} M/s, {per_line:.2f} bytes a line, peak"
        f" {peak / 1e9:.2f} GB ({base / 1e9:.2f} GB before it); a window of 1 cm-1 holds {len(window)} lines"
    )


def main(millions: float) -> None:
    """Print the rates."""
    import pandas as pd

    with tempfile.TemporaryDirectory() as scratch, ThreadPoolExecutor(2) as executor:
        folder = Path(scratch)
        paths = generate(folder, millions)
        n = millions * 1e6
        one = inputs_of(folder, paths, None)
        drain(one[0].batches())
        alone = seconds(lambda: [drain(x.batches()) for x in one])
        both = inputs_of(folder, paths, executor)
        two = seconds(lambda: [drain(x.batches()) for x in both])
        frame = seconds(lambda: [pd.read_csv(p, sep=r"\s+", header=None, engine="c") for p in paths])
        print(f"transitions joined with states: {n / alone / 1e6:.2f} M/s on 1 thread, {n / two / 1e6:.2f} on 2;")
        print(f"    pandas read_csv alone: {n / frame / 1e6:.2f} M/s")
        packed = folder / "vl.trans.bz2"
        packed.write_bytes(bz2.compress(paths[0].read_bytes()))
        part = n / FILES
        join = state_join(read_states(folder / "vl.states"), {}, isotopologue(5, 1))
        ours = seconds(lambda: drain(transition_batches(packed, join, False, None, executor)))
        library = seconds(lambda: bz2.decompress(packed.read_bytes()))
        print(f"the same in bz2: {part / ours / 1e6:.2f} M/s; the standard library's decompressor alone"
              f" {part / library / 1e6:.2f} M/s")  # fmt: skip
        records = folder / "many.par"
        records.write_bytes(SAMPLE.read_bytes() * 5000)
        count = 5000 * 202
        parse = parser_of(records, "hitran")
        read = seconds(lambda: [None for _ in in_order(lambda raw: parse(raw.lines()), read_raw(records), executor)])
        judged = seconds(lambda: drain(record_batches(records, "hitran", ReadOptions(), False, None, executor)))
        widths = [2, 1, 12, 10, 10, 5, 5, 10, 4, 8]
        pandas_rate = 20 * 202 / seconds(lambda: pd.read_fwf(records, widths=widths, header=None, nrows=20 * 202))
        print(f"records of 160 characters, 2 threads: {count / read / 1e6:.2f} M/s read and parsed,"
              f" {count / judged / 1e6:.2f} judged and packed;")  # fmt: skip
        print(f"    pandas read_fwf {pandas_rate / 1e6:.3f} M/s")
        subprocess.run([sys.executable, __file__, "--whole", str(folder)], check=True)


if __name__ == "__main__":
    if sys.argv[1:2] == ["--whole"]:
        whole_ingest(Path(sys.argv[2]))
    else:
        main(float(sys.argv[1]) if len(sys.argv) > 1 else 4.0)
