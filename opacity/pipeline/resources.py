"""What this process may really use: CPUs, memory and disk, whatever the machine has.

Limits of control groups are read from the group that the process is in and from all groups above it, in version 2
and version 1 of the interface (Linux: Documentation/admin-guide/cgroup-v2.rst and cgroup-v1/memory.rst).  `root` is
where the system's files are looked for; tests put another tree there.
"""

from __future__ import annotations

import functools
import os
import platform
import shutil
from collections.abc import Iterator
from pathlib import Path

ROOT = Path("/")


@functools.cache
def processor(root: Path = ROOT) -> str:
    """The type of processor: on another one the last bits of a sum may differ."""
    for line in _lines(root / "proc/cpuinfo"):
        name, _, value = line.partition(":")
        if name.strip() == "model name":
            return f"{platform.machine()}, {value.strip()}"
    return platform.processor() or platform.machine()


def allowed_cpus(root: Path = ROOT) -> int:
    """CPUs that affinity and the control groups allow, 1 or more."""
    try:
        count = len(os.sched_getaffinity(0))
    except AttributeError:  # not on every system
        count = os.cpu_count() or 1
    for version, group in _groups("cpu", root):
        if version == 2:
            words = _words(group / "cpu.max")
        else:
            words = _words(group / "cpu.cfs_quota_us") + _words(group / "cpu.cfs_period_us")
        # "max", or -1, where there is no limit.
        if len(words) == 2 and words[0].isdigit() and words[1].isdigit() and int(words[1]):
            count = min(count, int(words[0]) // int(words[1]))
    return max(count, 1)


def available_memory(root: Path = ROOT) -> int | None:
    """Bytes of memory that can still be had, None where the system does not say."""
    limits = []
    for line in _lines(root / "proc/meminfo"):
        if line.startswith("MemAvailable:"):
            limits.append(int(line.split()[1]) * 1024)
    for version, group in _groups("memory", root):
        names = ("memory.max", "memory.current") if version == 2 else ("memory.limit_in_bytes", "memory.usage_in_bytes")
        limit, used = (_words(group / name) for name in names)
        if limit and used and limit[0].isdigit() and used[0].isdigit():
            in_use = max(int(used[0]) - _reclaimable(group), 0)
            limits.append(max(int(limit[0]) - in_use, 0))
    return min(limits) if limits else None


def free_disk(folder: Path) -> int | None:
    """Bytes free in the nearest existing folder above `folder`, None where the system does not say."""
    for place in (folder, *folder.absolute().parents):
        try:
            return shutil.disk_usage(place).free
        except (OSError, ValueError):
            continue
    return None


def _groups(controller: str, root: Path) -> Iterator[tuple[int, Path]]:
    """Version of the interface and folder of each control group that limits this process, its own first.

    Inside a container the folder of the process's group may not be there: what is mounted then is the container's own.
    """
    for line in _lines(root / "proc/self/cgroup"):
        _, _, rest = line.partition(":")
        controllers, _, name = rest.partition(":")
        if not controllers:
            version, mounts = 2, ("sys/fs/cgroup", "sys/fs/cgroup/unified")
        elif controller in controllers.split(","):
            version, mounts = 1, (f"sys/fs/cgroup/{controller}", f"sys/fs/cgroup/{controllers}")
        else:
            continue
        parts = [part for part in name.split("/") if part not in ("", "..")]
        for mount in dict.fromkeys(mounts):
            for length in range(len(parts), -1, -1):
                yield version, root.joinpath(mount, *parts[:length])


def _reclaimable(group: Path) -> int:
    """Bytes of files in a group's page cache that the system gives up when memory is asked for."""
    found = dict(line.split(" ", 1) for line in _lines(group / "memory.stat") if " " in line)
    words = found.get("total_inactive_file", found.get("inactive_file", "0"))
    return int(words) if words.isdigit() else 0


def _lines(path: Path) -> list[str]:
    try:
        return path.read_text(encoding="ascii").splitlines()
    except (OSError, UnicodeDecodeError):
        return []


def _words(path: Path) -> list[str]:
    lines = _lines(path)
    return lines[0].split() if lines else []


def several(processors: set[str]) -> list[str]:
    """A warning where units were computed on several types of processor."""
    if len(processors) < 2:
        return []
    kinds = "; ".join(sorted(processors))
    return [f"units were computed on several types of processor, whose last bits may differ: {kinds}"]
