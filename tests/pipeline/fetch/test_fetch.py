"""The whole of `fetch`: what is listed, what starts it, what is left in each case, and its exit code."""

from __future__ import annotations

import hashlib
import io
import json
import signal
import subprocess
import sys
import time
from argparse import Namespace
from pathlib import Path

import pytest

from opacity.cli.fetch import fetch
from opacity.errors import LineListError, ResourceError
from opacity.pipeline.fetch import hitran
from opacity.pipeline.fetch import plan as plan_module
from opacity.pipeline.fetch import run as run_module
from opacity.pipeline.fetch.plan import plan_fetch
from opacity.pipeline.fetch.transfer import Patience

STATES = b"1 0.0 1 0\n" * 300
TRANS = b"2 1 1.0E-05\n" * 5000


@pytest.fixture
def recipe(server, write_list):
    """Two files that the server has."""
    server.serve("/db/x.states", STATES)
    server.serve("/db/x.trans", TRANS)
    return write_list(listing(server))


def listing(server, more: str = "", names: str = '"lines/x.states", "lines/*.trans"') -> str:
    urls = ", ".join(f'"{server.url(f"/db/{name}")}"' for name in ("x.states", "x.trans"))
    return f'format = "exomol"\nfiles = [{names}]\nurls = [{urls}]\n{more}'


@pytest.fixture
def run(capsys):
    def call(recipe: Path, **options: bool) -> tuple[int, str, str]:
        arguments = {"recipe": str(recipe), "yes": False, "json": False, "quiet": False, **options}
        capsys.readouterr()
        code = fetch(Namespace(**arguments))
        return code, *capsys.readouterr()

    return call


@pytest.fixture(autouse=True)
def in_haste(monkeypatch):
    monkeypatch.setattr(run_module, "Patience", lambda: Patience(attempts=2, first_wait=0.0, silence=0.3))


def test_without_yes_it_only_lists(server, recipe, run, tmp_path):
    code, out, err = run(recipe)
    lines = out.splitlines()
    assert (code, err) == (0, "")
    assert lines[0] == f"to fetch  {tmp_path}/lines/x.states from {server.url('/db/x.states')} (3 kB)"
    assert lines[1] == f"to fetch  {tmp_path}/lines/x.trans from {server.url('/db/x.trans')} (60 kB)"
    assert lines[2].startswith("total     63 kB to fetch; ")
    assert lines[2].endswith(" free on disk")
    assert lines[3:] == [f"nothing fetched: `opacity fetch {recipe} --yes` starts it"]
    assert [command for command, _, _ in server.seen] == ["HEAD", "HEAD"]
    assert not (tmp_path / "lines").exists()


def test_with_yes_it_fetches_and_the_next_time_all_is_there(server, recipe, run, tmp_path):
    code, out, err = run(recipe, yes=True)
    assert (code, err) == (0, "")
    assert out.splitlines()[-1] == "all files are there (2 fetched)"
    assert (tmp_path / "lines" / "x.states").read_bytes() == STATES
    assert (tmp_path / "lines" / "x.trans").read_bytes() == TRANS
    server.seen.clear()
    code, out, err = run(recipe, yes=True)
    assert (code, err) == (0, "")
    assert out.splitlines() == [
        f"present  {tmp_path}/lines/x.states (3 kB, sha256 as recorded)",
        f"present  {tmp_path}/lines/x.trans (60 kB, sha256 as recorded)",
        "all files are there",
    ]
    assert server.seen == []


def test_json_is_all_that_is_on_stdout(recipe, run, tmp_path):
    code, out, _ = run(recipe, json=True)
    listed = json.loads(out)
    assert code == 0
    assert (listed["started"], listed["bytes_to_fetch"], listed["missing"]) == (False, 63_000, [])
    assert [(one["state"], one["size"]) for one in listed["files"]] == [("to fetch", 3000), ("to fetch", 60_000)]
    code, out, _ = run(recipe, json=True, yes=True)
    done = json.loads(out)
    assert (code, done["started"], done["passed"], done["failures"]) == (0, True, True, [])
    assert done["fetched"][0] == {
        "file": str(tmp_path / "lines" / "x.states"),
        "sha256": hashlib.sha256(STATES).hexdigest(),
    }


class Terminal(io.StringIO):
    def isatty(self) -> bool:
        return True


@pytest.mark.parametrize(
    "answer, started", [("y\n", True), ("Yes\n", True), ("\n", False), ("n\n", False), ("", False)]
)
def test_on_a_terminal_it_asks(recipe, monkeypatch, tmp_path, answer, started):
    monkeypatch.setattr(sys, "stdin", Terminal(answer))
    monkeypatch.setattr(sys, "stderr", terminal := Terminal())
    assert fetch(Namespace(recipe=str(recipe), yes=False, json=False, quiet=False)) == 0
    assert terminal.getvalue().startswith("fetch 2 file(s)? [y/N] ")
    assert (tmp_path / "lines" / "x.trans").exists() == started


def test_quiet_says_only_the_result(recipe, run):
    assert run(recipe, yes=True, quiet=True) == (0, "all files are there (2 fetched)\n", "")


def test_one_failure_does_not_keep_the_others(server, recipe, run, tmp_path):
    server.routes["/db/x.states"] = 404
    code, out, err = run(recipe, yes=True)
    place = f"{tmp_path}/lines/x.states"
    assert code == 1
    assert f"{place} from {server.url('/db/x.states')} (size unknown, the server answers 404 Not Found)" in out
    assert "total     60 kB to fetch, and 1 of unknown size" in out
    assert err.splitlines() == [
        "x.states (1 of 2): failed",
        f"{server.url('/db/x.states')}: the server answers 404 Not Found; download it by hand and save it as {place}",
    ]
    assert (tmp_path / "lines" / "x.trans").read_bytes() == TRANS


def test_servers_that_tell_no_size(server, recipe, run):
    server.serve("/db/x.states", STATES, head=False)
    server.serve("/db/x.trans", TRANS, length=False)
    code, out, _ = run(recipe, yes=True)
    assert code == 0
    assert "x.states (size unknown, the server answers 405 Method Not Allowed)" in out
    assert "x.trans (size unknown)" in out
    assert "total     0 B to fetch, and 2 of unknown size" in out


def test_a_host_that_is_not_there_is_asked_once(write_list, run, monkeypatch):
    asked = []

    def nobody(url: str) -> int:
        asked.append(url)
        time.sleep(0.05)
        raise plan_module.TransferError("host name not found", reached=False)

    monkeypatch.setattr(plan_module, "size_of", nobody)
    monkeypatch.setattr(plan_module, "_AT_ONCE", 2)
    urls = ", ".join(f'"https://lists.invalid/{i}.trans"' for i in range(20))
    code, out, _ = run(write_list(f'files = ["lines/*.trans"]\nurls = [{urls}]'))
    assert code == 0
    assert out.count("(size unknown, host name not found)") == 20
    assert len(asked) <= 2


def test_without_a_network_every_file_has_its_line(write_list, run, tmp_path):
    urls = '"https://lists.invalid/a.trans", "http://127.0.0.1:1/b.trans"'
    code, _, err = run(write_list(f'files = ["lines/*.trans"]\nurls = [{urls}]'), yes=True, quiet=True)
    assert code == 1
    assert err.splitlines() == [
        "https://lists.invalid/a.trans: host name not found: no network, or no such host;"
        f" download it by hand and save it as {tmp_path}/lines/a.trans",
        "http://127.0.0.1:1/b.trans: no connection (Connection refused);"
        f" download it by hand and save it as {tmp_path}/lines/b.trans",
    ]


def test_a_part_counts_as_here(server, recipe, run, tmp_path):
    server.serve("/db/x.trans", TRANS, cuts=[20_000, 0])
    assert run(recipe, yes=True)[0] == 1
    _, out, _ = run(recipe)
    assert f"x.trans from {server.url('/db/x.trans')} (60 kB, 20 kB of it here)" in out
    assert "total     40 kB to fetch; " in out
    assert run(recipe, yes=True)[0] == 0
    assert (tmp_path / "lines" / "x.trans").read_bytes() == TRANS


def test_the_checksum_of_the_recipe_judges_what_is_there(server, write_list, run, tmp_path):
    right = hashlib.sha256(STATES).hexdigest()
    recipe = write_list(listing(server, f'sha256 = {{ "x.states" = "{right}" }}'))
    (tmp_path / "lines").mkdir()
    (tmp_path / "lines" / "x.states").write_bytes(STATES)
    (tmp_path / "lines" / "x.trans").write_bytes(TRANS)
    code, out, _ = run(recipe)
    assert code == 0
    assert "x.states (3 kB, sha256 as in the recipe)" in out
    assert "x.trans (60 kB, no checksum to hold it against)" in out
    (tmp_path / "lines" / "x.states").write_bytes(STATES[:-1])
    with pytest.raises(LineListError) as caught:
        run(recipe, yes=True)
    message = str(caught.value)
    assert message.startswith(f"{tmp_path}/lines/x.states: not the sha256 of the recipe; expected {right}, found ")
    assert message.endswith("; move it away and fetch again")
    assert (tmp_path / "lines" / "x.states").read_bytes() == STATES[:-1]


def test_the_checksum_recorded_when_it_was_fetched_judges_it_later(recipe, run, tmp_path):
    run(recipe, yes=True)
    (tmp_path / "lines" / "x.trans").write_bytes(TRANS + b"more\n")
    with pytest.raises(LineListError, match=r"x\.trans: not the sha256 recorded beside it; expected"):
        run(recipe, yes=True)


def test_a_folder_in_place_of_a_file(recipe, run, tmp_path):
    (tmp_path / "lines" / "x.trans").mkdir(parents=True)
    with pytest.raises(LineListError, match=r"x\.trans: there, but not a file; move it away"):
        run(recipe, yes=True)


def test_a_disk_too_small_is_said_before_anything_comes(server, recipe, run, monkeypatch, tmp_path):
    monkeypatch.setattr(plan_module, "free_disk", lambda folder: 50_000)
    with pytest.raises(ResourceError, match=r"lines: not enough disk; expected 63 kB, found 50 kB free; make room"):
        run(recipe, yes=True)
    assert all(command == "HEAD" for command, _, _ in server.seen)
    assert not (tmp_path / "lines").exists()


def test_files_that_nothing_brings_are_named(server, recipe, write_list, run, tmp_path):
    names = '"lines/x.states", "lines/*.trans", "lines/x.pf", "lines/*.broad*", "lines/[z-a].x"'
    path = write_list(listing(server, names=names))
    (tmp_path / "lines").mkdir()
    (tmp_path / "lines" / "x.broad.part").touch()
    (tmp_path / "lines" / "H2.broad").touch()
    code, out, err = run(path, yes=True)
    assert code == 1
    assert "missing   lines/x.pf: the recipe has no urls for it" in out
    assert "missing   lines/[z-a].x: " in out
    assert ".broad" not in out
    assert "all files are there" not in out
    assert err == "some files have no urls in the recipe: get them by hand\n"
    (tmp_path / "lines" / "H2.broad").unlink()
    assert plan_fetch(path).missing == ("lines/x.pf", "lines/*.broad*", "lines/[z-a].x")


def test_a_file_that_no_entry_names_is_noted(server, recipe, write_list, run):
    _, out, _ = run(write_list(listing(server, names='"lines/x.states", "lines/y*"')))
    assert "note      x.trans is fetched, but no entry of `files` names it" in out
    assert "x.states is fetched, but" not in out


def test_a_recipe_with_nothing_to_fetch(write_list, run, tmp_path):
    (tmp_path / "CO.par").touch()
    assert run(write_list('format = "hitran"\nfiles = ["CO.par"]')) == (0, "all files are there\n", "")


HITRAN = """format = "hapi"
files = ["lines/CO.data"]
hitran = {{ molecule = 5, isotopologues = [1], range = [1900.0, {stop}], parameters = ["gamma_h2"] }}"""


def test_lines_of_hitran(write_list, run, tmp_path, monkeypatch):
    record = b" 51 1900.000000".ljust(160) + b",0.07\n"
    asked = []

    def query(wanted, folder: Path) -> None:
        asked.append(wanted.range)
        (folder / "CO.data").write_bytes(record)
        (folder / "CO.header").write_text('{"extra": ["gamma_h2"]}')

    monkeypatch.setattr(hitran, "_query", query)
    words = "HITRAN molecule 5, isotopologues 1, 1900 to 2300 cm-1, with gamma_h2"
    path = write_list(HITRAN.format(stop="2300.0"))
    code, out, _ = run(path)
    assert (code, asked) == (0, [])
    assert f"to fetch  {tmp_path}/lines/CO.data from {words} (size unknown)" in out
    code, out, err = run(path, yes=True)
    assert (code, asked) == (0, [(1900.0, 2300.0)])
    assert err == f"CO.data (1 of 1): asking {words}; this can take minutes\n"
    assert "sha256 as recorded" in run(path)[1]

    with pytest.raises(LineListError, match=r"CO\.data: fetched for another request \(HITRAN .*2300 cm-1"):
        run(write_list(HITRAN.format(stop="2400.0")), yes=True)
    (tmp_path / "lines" / "CO.header").unlink()
    with pytest.raises(LineListError, match=r"CO\.data: there, but without CO\.header beside it; move it away"):
        run(path, yes=True)
    assert asked == [(1900.0, 2300.0)]


SCRIPT = """
import sys
from argparse import Namespace
from opacity.cli.fetch import fetch
sys.exit(fetch(Namespace(recipe=sys.argv[1], yes=True, json=False, quiet=False)))
"""


def test_an_interrupt_keeps_what_came_and_the_next_run_goes_on(server, recipe, run, tmp_path):
    server.serve("/db/x.trans", TRANS, stall=20_000)
    root = Path(plan_module.__file__).parents[3]
    part = tmp_path / "lines" / "x.trans.part"
    with subprocess.Popen(
        [sys.executable, "-c", SCRIPT, str(recipe)], cwd=root, stdout=subprocess.DEVNULL, stderr=subprocess.PIPE
    ) as process:
        deadline = time.monotonic() + 20.0
        while not (part.exists() and part.stat().st_size == 20_000) and time.monotonic() < deadline:
            time.sleep(0.02)
        process.send_signal(signal.SIGINT)
        error = process.stderr.read().decode()
    assert process.returncode == 130
    assert error == "interrupted: what came so far is kept as .part, and the same command goes on from there\n"
    assert part.stat().st_size == 20_000
    server.serve("/db/x.trans", TRANS)
    assert run(recipe, yes=True)[0] == 0
    assert server.gets()[-1]["Range"] == "bytes=20000-"
    assert (tmp_path / "lines" / "x.trans").read_bytes() == TRANS
    assert not part.exists()
