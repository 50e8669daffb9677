"""What this process may really use: CPUs, memory and disk, whatever the machine has."""

from __future__ import annotations

import os
import shutil
from pathlib import Path


def allowed_cpus() -> int:
    """CPUs that affinity and the control group allow, 1 or more."""
    try:
        count = len(os.sched_getaffinity(0))
    except AttributeError:  # not on every system
        count = os.cpu_count() or 1
    quota = _first_words(Path("/sys/fs/cgroup/cpu.max"))
    if len(quota) == 2 and quota[0].isdigit() and quota[1].isdigit():
        count = min(count, max(int(quota[0]) // int(quota[1]), 1))
    return max(count, 1)


def available_memory() -> int | None:
    """Bytes of memory that can still be had, None where the system does not say."""
    limits = []
    for line in _lines(Path("/proc/meminfo")):
        if line.startswith("MemAvailable:"):
            limits.append(int(line.split()[1]) * 1024)
    quota = _first_words(Path("/sys/fs/cgroup/memory.max"))
    used = _first_words(Path("/sys/fs/cgroup/memory.current"))
    if quota and used and quota[0].isdigit() and used[0].isdigit():
        limits.append(max(int(quota[0]) - int(used[0]), 0))
    return min(limits) if limits else None


def free_disk(folder: Path) -> int | None:
    """Bytes free in the nearest existing folder above `folder`, None where the system does not say."""
    for place in (folder, *folder.absolute().parents):
        try:
            return shutil.disk_usage(place).free
        except (OSError, ValueError):
            continue
    return None


def _lines(path: Path) -> list[str]:
    try:
        return path.read_text(encoding="ascii").splitlines()
    except OSError:
        return []


def _first_words(path: Path) -> list[str]:
    lines = _lines(path)
    return lines[0].split() if lines else []
