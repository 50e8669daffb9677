"""Units of work done by one process, by threads or by processes of this machine, or by those of a cluster.

Whoever does a unit writes its shard; only that it is done comes back.  A unit is done once its shard has its name.
"""

from __future__ import annotations

import contextlib
import multiprocessing
import os
import signal
import threading
from collections.abc import Callable, Iterator, Sequence
from concurrent.futures import Executor, Future, ProcessPoolExecutor, ThreadPoolExecutor, as_completed
from concurrent.futures.process import BrokenProcessPool
from dataclasses import dataclass
from pathlib import Path
from typing import Protocol

from opacity.cross_sections.source import LineSource
from opacity.errors import ResourceError, problem
from opacity.pipeline.fingerprint import Fingerprint
from opacity.pipeline.kinds import units_of
from opacity.recipe.model import Recipe
from opacity.tables.atomic import remove_own_leftovers

KINDS = ("threads", "processes")
MOST_RESTARTS = 5
"""So often lost worker processes are replaced before a build gives up."""


class WorkUnit(Protocol):
    """Nodes `rows` of some part of a table; `name` is the hash of its inputs."""

    @property
    def number(self) -> int:
        """Its number among all of the table."""

    @property
    def rows(self) -> tuple[int, ...]:
        """Numbers of its nodes in stored order."""

    @property
    def name(self) -> str:
        """The hash of its inputs."""

    def path(self, folder: Path) -> Path:
        """Where its shard lies."""

    def do(self, recipe: Recipe, source: LineSource, path: Path, executor: Executor | None = None) -> None:
        """Compute the unit and write its shard."""


@dataclass(frozen=True)
class Work:
    """What units are computed from, and where their shards go."""

    recipe: Recipe
    source: LineSource
    shards: Path

    def do(self, unit: WorkUnit, executor: Executor | None = None) -> None:
        """Compute a unit and write its shard."""
        # A task that ended may have taken the empty folder with it.
        self.shards.mkdir(parents=True, exist_ok=True)
        unit.do(self.recipe, self.source, unit.path(self.shards), executor)


@dataclass(frozen=True)
class Origin:
    """What a process of its own needs to come to the same work: where recipe and tables lie, the inputs' hash,
    and the kind of table.

    `known` is what the inputs' hash was made of, for a process of this machine, which then hashes only files that
    were changed since.
    """

    recipe: Path
    tables: Path
    shards: Path
    inputs_sha256: str
    memory: int
    kind: str
    known: Fingerprint | None = None


@dataclass(frozen=True)
class Prepared:
    """Work and units of it as a process of its own has them."""

    work: Work
    units: tuple[WorkUnit, ...]

    def do(self, number: int) -> None:
        """Do a unit by its number."""
        self.work.do(self.units[number])


Done = Callable[[WorkUnit], None]


def in_threads(work: Work, units: Sequence[WorkUnit], workers: int, done: Done) -> None:
    """Units side by side in threads; tiles of one unit after the other where units are fewer than threads."""
    if workers == 1:
        for unit in units:
            work.do(unit)
            done(unit)
        return
    with _ended(ThreadPoolExecutor(workers)) as executor:
        if len(units) < 2 * workers:
            for unit in units:
                work.do(unit, executor)
                done(unit)
            return
        _all_done({executor.submit(work.do, unit): unit for unit in units}, done)


def in_processes(origin: Origin, units: Sequence[WorkUnit], workers: int, done: Done) -> None:
    """Units side by side in processes; those of a process that was killed are done by another."""
    left = {unit.number: unit for unit in units}

    def finished(unit: WorkUnit) -> None:
        left.pop(unit.number, None)
        done(unit)

    for _ in range(MOST_RESTARTS + 1):
        context = multiprocessing.get_context("spawn")
        count = max(min(workers, len(left)), 1)
        pool = ProcessPoolExecutor(count, mp_context=context, initializer=start_process, initargs=(origin,))
        try:
            with _ended(pool) as executor:
                with _interrupts_ignored():  # by the processes that are started here
                    waiting = {executor.submit(do_in_process, number): unit for number, unit in left.items()}
                _all_done(waiting, finished)
            return
        except BrokenProcessPool:
            continue
    raise ResourceError(
        problem(origin.shards, f"worker processes were killed {MOST_RESTARTS + 1} times", remedy="try fewer workers")
    )


def _all_done(waiting: dict[Future[None], WorkUnit], done: Done) -> None:
    """Tell of each unit when it is done; the first failure ends the wait."""
    for one in as_completed(waiting):
        one.result()
        done(waiting[one])


@contextlib.contextmanager
def _ended(executor: ThreadPoolExecutor | ProcessPoolExecutor) -> Iterator[Executor]:
    """An executor that, whatever happens, begins nothing more and ends what it is at."""
    try:
        yield executor
    finally:
        executor.shutdown(wait=True, cancel_futures=True)


@contextlib.contextmanager
def _interrupts_ignored() -> Iterator[None]:
    """Ignore Ctrl-C for a moment: processes that are started meanwhile ignore it from their first instruction on."""
    if threading.current_thread() is not threading.main_thread():
        yield
        return
    before = signal.signal(signal.SIGINT, signal.SIG_IGN)
    try:
        yield
    finally:
        signal.signal(signal.SIGINT, before)


_process: list[Prepared | Exception] = []
"""What this worker process has prepared, or why it could not."""


def start_process(origin: Origin) -> None:
    """What a worker process does first; a failure is told by its first unit, since here it would break the pool."""
    signal.signal(signal.SIGINT, signal.SIG_IGN)  # Ctrl-C is the parent's
    signal.signal(signal.SIGTERM, lambda *_: _end_at_once(origin.shards))
    threading.Thread(target=_end_with_parent, daemon=True).start()
    try:
        _process.append(prepare_process(origin))
    except Exception as error:
        _process.append(error)


def _end_at_once(shards: Path) -> None:
    """End this process and take what it was writing along."""
    remove_own_leftovers(shards)
    os._exit(1)


def _end_with_parent() -> None:
    """End this process when the one that started it is gone, however that ended."""
    parent = multiprocessing.parent_process()
    if parent is not None:
        parent.join()
        os._exit(1)


def prepare_process(origin: Origin) -> Prepared:
    """A recipe and its lines, loaded in a worker process."""
    from opacity.pipeline.inputs import load_inputs
    from opacity.recipe.load import load_recipe

    recipe = load_recipe(origin.recipe)
    known = origin.known if origin.known is not None and origin.known.still_of(recipe) else None
    inputs = load_inputs(recipe, origin.tables, known, origin.memory, quiet=True)
    if inputs.sha256 != origin.inputs_sha256:
        what = "the recipe or its files changed while the build ran"
        raise ResourceError(problem(origin.recipe, what, remedy="build again when they are at rest"))
    return Prepared(Work(recipe, inputs.lines, origin.shards), units_of(recipe, inputs, origin.kind))


def do_in_process(number: int) -> None:
    """Do a unit in a worker process."""
    (prepared,) = _process
    if isinstance(prepared, Exception):
        raise prepared
    prepared.do(number)
