"""One file over HTTP, whole, resumed, changed meanwhile, cut; nothing unverified ever has the final name."""

from __future__ import annotations

import bz2
import errno
import hashlib
import json
import os
import random
import shutil
import subprocess
from pathlib import Path

import pytest

from opacity.errors import LineListError, ResourceError
from opacity.pipeline.fetch import partial
from opacity.pipeline.fetch.partial import PartFile
from opacity.pipeline.fetch.transfer import Patience

TEXT = random.Random(1).randbytes(1_000_000).hex().encode()
BZ2 = bz2.compress(TEXT)


def digest_of(data: bytes) -> str:
    return hashlib.sha256(data).hexdigest()


def names_in(folder: Path) -> list[str]:
    return sorted(path.name for path in folder.iterdir())


def failure(call, *arguments, **options) -> str:
    with pytest.raises(LineListError) as caught:
        call(*arguments, **options)
    assert "\n" not in str(caught.value)
    return str(caught.value)


def leave_part(lines: Path, url: str, data: bytes, **notes: object) -> None:
    """What an earlier attempt left."""
    lines.mkdir()
    name = url.rpartition("/")[2]
    (lines / f"{name}.part").write_bytes(data)
    (lines / f"{name}.part.json").write_text(json.dumps({"url": url, "size": None, "validator": None, **notes}))


def test_a_file_comes_whole_with_its_checksum_beside_it(server, get, lines):
    server.serve("/x.trans.bz2", BZ2)
    assert get() == digest_of(BZ2)
    assert (lines / "x.trans.bz2").read_bytes() == BZ2
    assert (lines / "x.trans.bz2.sha256").read_text() == f"{digest_of(BZ2)}  x.trans.bz2\n"
    assert names_in(lines) == ["x.trans.bz2", "x.trans.bz2.sha256"]
    assert server.gets()[0]["User-Agent"].startswith("opacity/")
    if shutil.which("sha256sum"):
        subprocess.run(
            ["sha256sum", "--strict", "-c", "x.trans.bz2.sha256"], cwd=lines, check=True, capture_output=True
        )


def test_the_checksum_of_the_recipe_is_held_and_not_written_again(server, get, lines):
    server.serve("/x.trans.bz2", BZ2)
    get(sha256=digest_of(BZ2))
    assert names_in(lines) == ["x.trans.bz2"]


def test_a_wrong_checksum_leaves_nothing(server, get, lines):
    server.serve("/x.trans.bz2", BZ2)
    message = failure(get, sha256="0" * 64)
    assert message.startswith(server.url("/x.trans.bz2"))
    assert f"expected sha256 {'0' * 64}, found {digest_of(BZ2)}" in message
    assert message.endswith(f"download it by hand and save it as {lines / 'x.trans.bz2'}")
    assert names_in(lines) == []


def test_broken_transfers_are_resumed_where_they_stopped(server, get, lines):
    server.serve("/x.trans.bz2", BZ2, cuts=[300_000, 400_000])
    get()
    assert (lines / "x.trans.bz2").read_bytes() == BZ2
    assert [one.get("Range") for one in server.gets()] == [None, "bytes=300000-", "bytes=700000-"]
    assert [one.get("If-Range") for one in server.gets()] == [None, '"first"', '"first"']


def test_what_never_comes_whole_is_kept_as_part_and_gone_on_with_later(server, get, lines, capsys):
    served = server.serve("/x.trans.bz2", BZ2, cuts=[1000, 1000, 1000])
    message = failure(get)
    assert f"broke off after 3000 of {len(BZ2)} bytes (3 attempts); download it by hand" in message
    assert names_in(lines) == ["x.trans.bz2.part", "x.trans.bz2.part.json"]
    assert served.cuts == []
    get(quiet=False)
    assert server.gets()[-1]["Range"] == "bytes=3000-"
    assert (lines / "x.trans.bz2").read_bytes() == BZ2
    assert "x.trans.bz2: goes on after 3 kB" in capsys.readouterr().err


def test_attempts_are_counted_anew_when_much_has_come(server, get, lines, waits):
    data = b"x" * 7_000_000
    server.serve("/x.trans", data, cuts=[1_100_000] * 6)
    get("x.trans", patience=Patience(attempts=2, first_wait=1.0, silence=1.0))
    assert (lines / "x.trans").read_bytes() == data
    assert waits == [1.0] * 6


def test_a_server_that_ignores_ranges_sends_it_all_again(server, get, lines):
    server.serve("/x.trans.bz2", BZ2, ranges=False, cuts=[300_000])
    get()
    assert (lines / "x.trans.bz2").read_bytes() == BZ2
    assert server.gets()[1]["Range"] == "bytes=300000-"


@pytest.mark.parametrize("honest", [True, False], ids=["heeds If-Range", "ignores If-Range"])
@pytest.mark.parametrize(
    "before, after, new",
    [
        ({"etag": '"old"'}, {"etag": '"new"'}, TEXT[::-1]),
        ({"etag": None, "modified": "Mon"}, {"etag": None, "modified": "Tue"}, TEXT[::-1]),
        ({"etag": '"same"'}, {"etag": '"same"'}, TEXT[1:]),
    ],
    ids=["tag", "time", "size"],
)
def test_a_file_that_changed_meanwhile_begins_anew(server, get, lines, honest, before, after, new):
    server.serve("/x.trans", TEXT, cuts=[300_000], **before)
    failure(get, "x.trans", patience=Patience(attempts=1, silence=1.0))
    server.serve("/x.trans", new, honest=honest, **after)
    get("x.trans")
    assert server.gets()[1]["Range"] == "bytes=300000-"
    assert (lines / "x.trans").read_bytes() == new


def test_more_bytes_than_stated_are_not_taken(server, get, lines):
    def longer(handler) -> None:
        if handler.headers["Range"]:
            handler.send_response(206)
            handler.send_header("Content-Range", f"bytes 1000-1999/{len(BZ2)}")
            handler.end_headers()
            handler.wfile.write(BZ2[1000:] + b"more")
        else:
            served(handler)

    served = server.serve("/x.trans.bz2", BZ2, cuts=[1000])
    server.routes["/x.trans.bz2"] = longer
    get()
    assert [one.get("Range") for one in server.gets()] == [None, "bytes=1000-", None]
    assert (lines / "x.trans.bz2").read_bytes() == BZ2


def test_weak_tags_name_no_state_of_a_file(server, get, lines):
    server.serve("/x.trans.bz2", BZ2, etag='W/"1"', cuts=[300_000])
    get()
    assert (lines / "x.trans.bz2").read_bytes() == BZ2
    assert all("Range" not in one for one in server.gets())


def test_with_a_checksum_in_the_recipe_no_tag_is_needed_to_resume(server, get, lines):
    server.serve("/x.trans.bz2", BZ2, etag=None, cuts=[300_000])
    get(sha256=digest_of(BZ2))
    assert [one.get("Range") for one in server.gets()] == [None, "bytes=300000-"]
    assert (lines / "x.trans.bz2").read_bytes() == BZ2


def test_a_part_of_another_url_is_not_gone_on_with(server, get, lines):
    leave_part(lines, "http://127.0.0.1/elsewhere/x.trans.bz2", b"BZh9 other", validator='"first"')
    server.serve("/x.trans.bz2", BZ2)
    get(sha256=digest_of(BZ2))
    assert "Range" not in server.gets()[0]
    assert (lines / "x.trans.bz2").read_bytes() == BZ2


@pytest.mark.parametrize("notes", ["", "[]", "{", '{"url": 3}', "\0"])
def test_a_part_without_readable_notes_is_not_gone_on_with(server, get, lines, notes):
    leave_part(lines, server.url("/x.trans.bz2"), b"BZh9 other", validator='"first"')
    (lines / "x.trans.bz2.part.json").write_text(notes)
    server.serve("/x.trans.bz2", BZ2)
    get()
    assert (lines / "x.trans.bz2").read_bytes() == BZ2


def test_a_part_that_is_whole_needs_no_request(server, get, lines):
    leave_part(lines, server.url("/x.trans.bz2"), BZ2, size=len(BZ2))
    assert get() == digest_of(BZ2)
    assert server.seen == []


def test_a_part_longer_than_the_file_begins_anew(server, get, lines):
    leave_part(lines, server.url("/x.trans.bz2"), BZ2 + b"more", validator='"first"')
    server.serve("/x.trans.bz2", BZ2)
    get()  # the server answers 416 first
    assert len(server.gets()) == 2
    assert (lines / "x.trans.bz2").read_bytes() == BZ2


def test_a_wrong_range_is_not_pasted_in(server, get, lines):
    def shifted(handler) -> None:
        if handler.headers["Range"] and not shifted.done:
            shifted.done = True
            handler.send_response(206)
            handler.send_header("Content-Range", f"bytes 0-{len(BZ2) - 1}/{len(BZ2)}")
            handler.end_headers()
            handler.wfile.write(BZ2)
        else:
            served(handler)

    shifted.done = False
    served = server.serve("/x.trans.bz2", BZ2, cuts=[300_000])
    server.routes["/x.trans.bz2"] = shifted
    get()
    assert shifted.done
    assert (lines / "x.trans.bz2").read_bytes() == BZ2


def test_a_part_that_nobody_asked_for_is_refused(server, get, lines):
    def partly(handler) -> None:
        handler.send_response(206)
        handler.send_header("Content-Range", f"bytes 0-9/{len(BZ2)}")
        handler.end_headers()
        handler.wfile.write(BZ2[:10])

    server.routes["/x.trans.bz2"] = partly
    assert "answers with a part that was not asked for (3 attempts)" in failure(get)
    assert names_in(lines) == []


def test_a_body_shorter_than_stated_is_never_taken(server, get, lines):
    server.serve("/x.trans.bz2", BZ2, stated=len(BZ2) + 10, etag=None)
    assert f"broke off after {len(BZ2)} of {len(BZ2) + 10} bytes (3 attempts)" in failure(get)
    assert not (lines / "x.trans.bz2").exists()


def test_without_a_stated_length_the_end_is_believed(server, get, lines):
    server.serve("/x.trans.bz2", BZ2, length=False)
    get()
    assert (lines / "x.trans.bz2").read_bytes() == BZ2


@pytest.mark.parametrize("last", [b"0\r\n\r\n", b""], ids=["whole", "cut"])
def test_chunked_answers_have_to_end(server, get, lines, last):
    def chunked(handler) -> None:
        handler.protocol_version = "HTTP/1.1"
        handler.send_response(200)
        handler.send_header("Transfer-Encoding", "chunked")
        handler.send_header("Connection", "close")
        handler.end_headers()
        handler.wfile.write(b"%x\r\n%b\r\n" % (len(BZ2), BZ2) + last)
        handler.close_connection = True

    server.routes["/x.trans.bz2"] = chunked
    if last:
        get()
        assert (lines / "x.trans.bz2").read_bytes() == BZ2
    else:
        assert "the connection broke off (3 attempts)" in failure(get)
        assert not (lines / "x.trans.bz2").exists()


def test_a_full_disk_keeps_the_part(server, get, lines, monkeypatch):
    server.serve("/x.trans.bz2", BZ2)
    write = os.write

    def full(descriptor: int, data) -> int:
        if os.readlink(f"/proc/self/fd/{descriptor}").endswith("x.trans.bz2.part"):
            if os.fstat(descriptor).st_size > 300_000:
                raise OSError(errno.ENOSPC, "No space left on device")
            return write(descriptor, data[:1000])
        return write(descriptor, data)

    with monkeypatch.context() as patched:
        patched.setattr(partial.os, "write", full)
        with pytest.raises(ResourceError, match=r"No space left on device.*make room on the disk") as caught:
            get()
    assert "\n" not in str(caught.value)
    kept = (lines / "x.trans.bz2.part").read_bytes()
    assert len(kept) > 300_000
    assert BZ2.startswith(kept)
    get()
    assert server.gets()[-1]["Range"] == f"bytes={len(kept)}-"
    assert (lines / "x.trans.bz2").read_bytes() == BZ2


def test_a_folder_that_cannot_be_made(server, get, tmp_path):
    (tmp_path / "lines").write_text("a file")
    with pytest.raises(ResourceError, match=r"cannot be written \(File exists\)"):
        get()


def test_two_processes_do_not_write_one_file(server, get, lines):
    server.serve("/x.trans.bz2", BZ2)
    with (
        PartFile(lines / "x.trans.bz2", server.url("/x.trans.bz2")),
        pytest.raises(ResourceError, match=r"another process is downloading it; wait for it"),
    ):
        get()
    get()
    assert (lines / "x.trans.bz2").read_bytes() == BZ2
