"""Units of work on the workers of a dask cluster (the `cluster` extra), which share the folder of the shards.

Workers compute and write the shards themselves; what travels is a unit's number.  One thread a worker.
"""

from __future__ import annotations

import hashlib
import logging
import sys
import threading
from collections.abc import Iterator, Sequence
from contextlib import contextmanager
from dataclasses import replace
from pathlib import Path
from typing import Any

from opacity.errors import ResourceError, one_line, problem
from opacity.pipeline.workers import Done, Origin, Prepared, WorkUnit, prepare_process

RETRIES = 3
"""So often a unit is given to another worker when its own was lost."""
SECONDS_TO_CONNECT = 30

_prepared: list[tuple[Origin, Prepared]] = []
_preparing = threading.Lock()


def on_cluster(scheduler: str, origin: Origin, units: Sequence[WorkUnit], workers: int, done: Done) -> None:
    """Units side by side on a cluster: the address of its scheduler, the file that names it, or "local".

    Raises ResourceError where the cluster is not to be had or loses a unit too often.
    """
    try:
        from distributed import CancelledError, KilledWorker, as_completed
        from distributed.comm import CommClosedError
    except ImportError as error:
        what, remedy = "dask.distributed is not installed", "pip install 'opacity[cluster]'"
        raise ResourceError(problem("--scheduler", what, remedy=remedy)) from error
    origin = replace(origin, known=None)  # other machines have packages and files of their own
    with _client(scheduler, workers) as client:
        if not client.scheduler_info()["workers"]:
            print("the scheduler has no workers yet: waiting for them", file=sys.stderr, flush=True)
        folder = hashlib.sha256(str(origin.shards).encode("utf-8", "surrogateescape")).hexdigest()[:16]
        waiting = {
            client.submit(
                _do, origin, unit.number, key=f"opacity-{folder}-{unit.name}", retries=RETRIES, pure=False
            ): unit
            for unit in units
        }
        try:
            for future in as_completed(list(waiting)):
                future.result()
                done(waiting[future])
        except (KilledWorker, CancelledError, CommClosedError) as error:
            what = "the cluster lost a unit, with its workers or altogether"
            raise ResourceError(problem("--scheduler", what, found=one_line(error))) from error
        finally:
            client.cancel(list(waiting))


@contextmanager
def _client(scheduler: str, workers: int) -> Iterator[Any]:
    from distributed import Client, LocalCluster

    # What goes wrong on the way is told in one line.
    logging.getLogger("distributed").setLevel(logging.CRITICAL)
    if scheduler == "local":
        local = LocalCluster(n_workers=workers, threads_per_worker=1, dashboard_address=None)
        with local as cluster, Client(cluster) as client:
            yield client
        return
    where = {"scheduler_file": scheduler} if Path(scheduler).is_file() else {"address": scheduler}
    try:
        client = Client(**where, timeout=SECONDS_TO_CONNECT)
    except (OSError, ValueError, TimeoutError) as error:
        remedy = "give the scheduler's address, or the file that names it"
        raise ResourceError(problem("--scheduler", "no scheduler answers", found=scheduler, remedy=remedy)) from error
    with client:
        yield client


def _do(origin: Origin, number: int) -> int:
    """A unit on a worker, which loads recipe and lines for the first one."""
    with _preparing:  # a worker of a cluster of others' making may have several threads
        if not _prepared or _prepared[0][0] != origin:
            _prepared[:] = [(origin, prepare_process(origin))]
        ((_, prepared),) = _prepared
    prepared.do(number)
    return number
