"""What a process may use, read from made-up trees of the system's files."""

from __future__ import annotations

from collections import namedtuple

import pytest

from opacity.pipeline import resources


@pytest.fixture
def tree(tmp_path, monkeypatch):
    """Write files of the system below a folder of the test; gives the folder."""
    monkeypatch.setattr(resources.os, "sched_getaffinity", lambda who: set(range(8)), raising=False)

    def write(files):
        for name, text in files.items():
            path = tmp_path / name
            path.parent.mkdir(parents=True, exist_ok=True)
            path.write_text(text + "\n")
        return tmp_path

    return write


def test_disk_is_that_of_the_nearest_folder_that_exists(tmp_path, monkeypatch):
    usage = namedtuple("usage", "total used free")  # as shutil.disk_usage gives it
    asked = []

    def disk_usage(place):
        asked.append(place)
        if not place.exists():
            raise FileNotFoundError(place)
        return usage(10, 3, 7)

    monkeypatch.setattr(resources.shutil, "disk_usage", disk_usage)
    assert resources.free_disk(tmp_path / "not" / "yet") == 7
    assert asked[-1] == tmp_path


def test_where_the_system_says_nothing(tree):
    root = tree({})
    assert resources.available_memory(root) is None
    assert resources.allowed_cpus(root) == 8


def test_without_groups_the_machine_itself_counts(tree):
    root = tree({"proc/meminfo": "MemTotal: 9 kB\nMemAvailable:       5000 kB"})
    assert resources.available_memory(root) == 5000 * 1024


VERSION_2 = {
    "proc/meminfo": "MemAvailable:  100000000 kB",
    "proc/self/cgroup": "0::/user.slice/job",
    "sys/fs/cgroup/user.slice/job/memory.max": "3000000",
    "sys/fs/cgroup/user.slice/job/memory.current": "2500000",
    "sys/fs/cgroup/user.slice/job/memory.stat": "anon 400000\ninactive_file 2000000\nactive_file 100000",
    "sys/fs/cgroup/user.slice/job/cpu.max": "350000 100000",
}


def test_the_page_cache_of_a_group_is_not_in_use(tree):
    root = tree(VERSION_2)
    assert resources.available_memory(root) == 2_500_000
    assert resources.allowed_cpus(root) == 3


def test_no_limit_is_none(tree):
    job = "sys/fs/cgroup/user.slice/job"
    root = tree({**VERSION_2, f"{job}/memory.max": "max", f"{job}/cpu.max": "max 100000"})
    assert resources.available_memory(root) == 100_000_000 * 1024
    assert resources.allowed_cpus(root) == 8


def test_a_group_above_may_be_the_narrower_one(tree):
    above = "sys/fs/cgroup/user.slice"
    root = tree(
        {
            **VERSION_2,
            f"{above}/memory.max": "1000000",
            f"{above}/memory.current": "900000",
            f"{above}/memory.stat": "inactive_file 0",
            f"{above}/cpu.max": "20000 100000",
        }
    )
    assert resources.available_memory(root) == 100_000
    assert resources.allowed_cpus(root) == 1


def test_in_a_container_the_mount_is_the_group(tree):
    root = tree(
        {
            "proc/self/cgroup": "0::/../../elsewhere/not-mounted",
            "sys/fs/cgroup/memory.max": "3000000",
            "sys/fs/cgroup/memory.current": "1000000",
            "sys/fs/cgroup/cpu.max": "250000 100000",
        }
    )
    assert resources.available_memory(root) == 2_000_000
    assert resources.allowed_cpus(root) == 2


def test_version_1_has_a_tree_for_each_controller(tree):
    root = tree(
        {
            "proc/self/cgroup": "9:name=systemd:/\n4:memory:/batch/7\n2:cpu,cpuacct:/batch/7\n0::/",
            "sys/fs/cgroup/memory/memory.limit_in_bytes": "9223372036854771712",
            "sys/fs/cgroup/memory/memory.usage_in_bytes": "5",
            "sys/fs/cgroup/memory/batch/7/memory.limit_in_bytes": "8000000",
            "sys/fs/cgroup/memory/batch/7/memory.usage_in_bytes": "7000000",
            "sys/fs/cgroup/memory/batch/7/memory.stat": "inactive_file 1\ntotal_inactive_file 4000000",
            "sys/fs/cgroup/cpu,cpuacct/batch/7/cpu.cfs_quota_us": "500000",
            "sys/fs/cgroup/cpu,cpuacct/batch/7/cpu.cfs_period_us": "100000",
            "sys/fs/cgroup/cpu,cpuacct/cpu.cfs_quota_us": "-1",
            "sys/fs/cgroup/cpu,cpuacct/cpu.cfs_period_us": "100000",
        }
    )
    assert resources.available_memory(root) == 5_000_000
    assert resources.allowed_cpus(root) == 5


def test_a_group_of_another_controller_does_not_count(tree):
    root = tree(
        {
            "proc/self/cgroup": "4:pids:/job",
            "sys/fs/cgroup/memory/job/memory.limit_in_bytes": "10",
            "sys/fs/cgroup/memory/job/memory.usage_in_bytes": "5",
        }
    )
    assert resources.available_memory(root) is None


def test_this_machine_is_understood():
    assert resources.allowed_cpus() >= 1
    memory = resources.available_memory()
    assert memory is None or memory > 1_000_000
