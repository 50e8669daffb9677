"""A name is never given to a file that is not whole, and nothing is left behind."""

from __future__ import annotations

import errno
import os
import subprocess
from pathlib import Path

import pytest

from opacity.errors import InputError, ResourceError
from opacity.tables import atomic
from opacity.tables.atomic import write_atomically
from opacity.tables.write import write_cross_section_table


def test_writes_and_replaces(tmp_path):
    path = tmp_path / "a.json"
    assert write_atomically(path, b"one") == path
    write_atomically(path, b"two")
    assert path.read_bytes() == b"two"
    assert list(tmp_path.iterdir()) == [path]


def test_the_mode_follows_the_umask(tmp_path):
    before = os.umask(0o027)
    try:
        path = write_atomically(tmp_path / "a", b"x")
    finally:
        os.umask(before)
    assert path.stat().st_mode & 0o777 == 0o640


@pytest.mark.parametrize("name", ["missing/a.h5", "x" * 300, "file/a.h5", "folder"])
def test_places_that_cannot_be_written(tmp_path, make_table, name):
    (tmp_path / "file").write_bytes(b"")
    (tmp_path / "folder").mkdir()
    before = sorted(tmp_path.rglob("*"))
    with pytest.raises(ResourceError, match=r"cannot be written \(.+\); (create|choose)") as caught:
        write_cross_section_table(tmp_path / name, make_table())
    assert "\n" not in str(caught.value)
    assert sorted(tmp_path.rglob("*")) == before


@pytest.mark.parametrize("path", [Path("a\0b"), Path(".."), Path("/")])
def test_names_that_are_none(path):
    with pytest.raises(InputError, match="not the name of a file"):
        write_atomically(path, b"x")


@pytest.mark.parametrize("call", ["open", "write", "fsync", "replace"])
@pytest.mark.parametrize("number", [errno.ENOSPC, errno.EIO, errno.EROFS, errno.EACCES, errno.EDQUOT])
def test_every_call_that_can_fail(tmp_path, monkeypatch, call, number):
    (tmp_path / "a").write_bytes(b"old")

    def fail(*_, **__):
        raise OSError(number, os.strerror(number))

    monkeypatch.setattr(atomic.os, call, fail)
    with pytest.raises(ResourceError, match=os.strerror(number)):
        write_atomically(tmp_path / "a", b"new")
    monkeypatch.undo()
    assert [p.read_bytes() for p in tmp_path.iterdir()] == [b"old"]


def test_short_writes_are_continued(tmp_path, monkeypatch):
    real = os.write
    monkeypatch.setattr(atomic.os, "write", lambda descriptor, data: real(descriptor, data[:3]))
    assert write_atomically(tmp_path / "a", b"0123456789").read_bytes() == b"0123456789"


def test_a_disk_that_gives_back_something_else(tmp_path, monkeypatch):
    real = os.write
    monkeypatch.setattr(atomic.os, "write", lambda descriptor, data: real(descriptor, bytes(data).replace(b"5", b"6")))
    with pytest.raises(ResourceError, match="not what was written"):
        write_atomically(tmp_path / "a", b"0123456789")
    assert list(tmp_path.iterdir()) == []


def test_a_folder_that_cannot_be_synced(tmp_path, monkeypatch):
    """EINVAL is what a file system says that knows no such thing; the file is there."""
    real = os.fsync

    def fsync(descriptor):
        if os.path.isdir(f"/proc/self/fd/{descriptor}"):
            raise OSError(errno.EINVAL, os.strerror(errno.EINVAL))
        real(descriptor)

    monkeypatch.setattr(atomic.os, "fsync", fsync)
    assert write_atomically(tmp_path / "a", b"x").read_bytes() == b"x"


@pytest.mark.parametrize("error", [KeyboardInterrupt, ResourceError("no")])
def test_a_check_that_fails_leaves_nothing(tmp_path, error):
    def check(written):
        assert written.read_bytes() == b"x"
        raise error

    with pytest.raises(type(error) if isinstance(error, Exception) else error):
        write_atomically(tmp_path / "a", b"x", check)
    assert list(tmp_path.iterdir()) == []


def test_a_table_that_does_not_read_back(make_table, tmp_path, monkeypatch):
    """An image that is damaged before it reaches the disk: only the block hashes can tell."""
    from opacity.tables import write

    real = write.table_image

    def spoilt(table, dtype):
        image = bytearray(real(table, dtype))
        place = image.index(b"\x78\x5e")  # where a block deflated at level 4 starts (RFC 1950: CMF, FLG)
        image[place + 200] ^= 1
        return bytes(image)

    monkeypatch.setattr(write, "table_image", spoilt)
    with pytest.raises(ResourceError, match=r"a\.h5: what was written does not read back \(.*block cross_section\["):
        write.write_cross_section_table(tmp_path / "a.h5", make_table())
    assert list(tmp_path.iterdir()) == []


@pytest.fixture
def small_disk(tmp_path):
    folder = tmp_path / "disk"
    folder.mkdir()
    command = ["mount", "-t", "tmpfs", "-o", "size=64k", "tmpfs", str(folder)]
    try:
        mounted = subprocess.run(command, capture_output=True, check=False).returncode == 0
    except FileNotFoundError:
        mounted = False
    if not mounted:
        pytest.skip("mounting a small file system is not permitted here")
    yield folder
    subprocess.run(["umount", str(folder)], check=True)


def test_full_disk(make_table, small_disk):
    with pytest.raises(ResourceError, match=r"No space left on device\); make room"):
        write_cross_section_table(small_disk / "a.h5", make_table(points=20000))
    assert list(small_disk.iterdir()) == []
    write_cross_section_table(small_disk / "a.h5", make_table(points=200))
    assert [p.name for p in small_disk.iterdir()] == ["a.h5"]
