"""`opacity fetch` as a command: from a recipe whose files are not there to one that a build can use."""

from __future__ import annotations

import hashlib
import json
import os
import signal
import subprocess
import sys
import threading
import time
from collections.abc import Callable, Iterator
from http.server import BaseHTTPRequestHandler, ThreadingHTTPServer
from pathlib import Path

import pytest

ROOT = Path(__file__).parents[2]
NAME = "carbon-monoxide.par"


class _Handler(BaseHTTPRequestHandler):
    """One file under any path; with `stall` it falls silent after half of it, until the test is over."""

    def do_GET(self) -> None:
        data = self.server.data
        self.send_response(200)
        self.send_header("Content-Length", str(len(data)))
        self.send_header("ETag", '"first"')
        self.end_headers()
        if self.command == "HEAD":
            return
        self.server.gets += 1
        self.wfile.write(data[: len(data) // 2] if self.server.stall else data)
        if self.server.stall:
            self.wfile.flush()
            self.server.released.wait(30.0)

    do_HEAD = do_GET  # noqa: N815 - the base class names it so

    def log_message(self, *parts: object) -> None:
        pass


class Server(ThreadingHTTPServer):
    """On 127.0.0.1; `gets` counts the files asked for."""

    daemon_threads = True
    block_on_close = False

    def __init__(self, data: bytes) -> None:
        super().__init__(("127.0.0.1", 0), _Handler)
        self.data, self.stall, self.gets, self.released = data, False, 0, threading.Event()

    def handle_error(self, *parts: object) -> None:
        """A client that goes away is no error here."""


@pytest.fixture
def server(samples: Path, monkeypatch: pytest.MonkeyPatch) -> Iterator[Server]:
    for name in ("http_proxy", "https_proxy", "all_proxy", "HTTP_PROXY", "HTTPS_PROXY", "ALL_PROXY"):
        monkeypatch.delenv(name, raising=False)
    with Server((samples / NAME).read_bytes()) as made:
        thread = threading.Thread(target=made.serve_forever, kwargs={"poll_interval": 0.02})
        thread.start()
        yield made
        made.released.set()
        made.shutdown()
        thread.join()


@pytest.fixture
def recipe(server: Server, write_recipe: Callable[..., Path], samples: Path) -> Path:
    """A small recipe of a list that only the server has, and its checksum."""
    digest = hashlib.sha256(server.data).hexdigest()
    keys = f'urls = ["http://127.0.0.1:{server.server_port}/db/{NAME}"]\nsha256 = {{ "{NAME}" = "{digest}" }}'
    return write_recipe("co", (f'files = ["{samples}/{NAME}"]', f'files = ["lines/*.par"]\n{keys}'))


@pytest.mark.parametrize("command", ["plan", "build"])
def test_without_the_files_the_remedy_is_fetch(opacity, recipe, command):
    code, out, err = opacity(command, recipe)
    assert (code, out) == (2, "")
    assert err.count("\n") == 1
    assert "line_list[0].files[0]: no such file; " in err
    assert err.endswith('found "lines/*.par"; `opacity fetch RECIPE` brings it\n')


def test_fetch_then_plan(opacity, recipe, server, tmp_path):
    code, out, err = opacity("fetch", recipe)
    assert (code, err, server.gets) == (0, "", 0)
    assert out.startswith(f"to fetch  {tmp_path}/lines/{NAME} from http://127.0.0.1:{server.server_port}/db/{NAME} (")
    assert out.endswith(f"nothing fetched: `opacity fetch {recipe} --yes` starts it\n")
    code, out, err = opacity("fetch", recipe, "--yes")
    assert (code, server.gets) == (0, 1)
    assert out.endswith("all files are there (1 fetched)\n")
    assert (tmp_path / "lines" / NAME).read_bytes() == server.data
    code, out, err = opacity("plan", recipe, "--json", "-o", tmp_path / "tables")
    assert code == 0
    assert json.loads(out)["lines"] > 0
    assert opacity("fetch", recipe, "--yes", "--quiet") == (0, "all files are there\n", "")
    assert server.gets == 1


def test_options(opacity, recipe, server):
    code, out, _ = opacity("fetch", recipe, "--json")
    assert (code, json.loads(out)["started"]) == (0, False)
    code, out, err = opacity("fetch", recipe, "--yes", "--quiet", "--json")
    assert (code, err, json.loads(out)["passed"]) == (0, "", True)


def test_failures_are_lines_with_an_exit_code(opacity, recipe, server, tmp_path):
    server.data = server.data[:-1]
    code, out, err = opacity("fetch", recipe, "--yes", "--quiet")
    assert (code, out) == (1, "")
    assert f"/db/{NAME}: " in err
    assert "expected sha256 " in err
    (tmp_path / "lines" / NAME).write_bytes(b"something else\n")
    code, out, err = opacity("fetch", recipe, "--yes", "--json")
    assert code == 1
    assert json.loads(out)["error"] == err.splitlines()
    assert f"lines/{NAME}: not the sha256 of the recipe; " in err


@pytest.mark.parametrize("command", ["fetch", "plan"])
def test_faults_of_the_keys_are_told_by_every_command(opacity, recipe, command):
    recipe.write_text(recipe.read_text().replace('urls = ["http', 'urls = ["gopher'))
    code, out, err = opacity(command, recipe)
    assert (code, out) == (2, "")
    assert err.count("\n") == 1
    assert err.startswith(f"{recipe}:8: line_list[0].urls[0]: not an http or https URL; ")


def test_wrong_use(opacity):
    code, out, err = opacity("fetch")
    assert (code, out) == (2, "")
    assert err.startswith("opacity fetch: the following arguments are required: RECIPE")


@pytest.mark.parametrize("number, code", [(signal.SIGINT, 130), (signal.SIGTERM, 75)])
def test_stopped_from_outside_it_keeps_what_came(recipe, server, tmp_path, number, code):
    server.stall = True
    part = tmp_path / "lines" / f"{NAME}.part"
    words = "interrupted: what came so far is kept as .part, and the same command goes on from there"
    with subprocess.Popen(
        [sys.executable, "-m", "opacity", "fetch", str(recipe), "--yes", "--json", "--quiet"],
        env={**os.environ, "PYTHONPATH": str(ROOT)},
        stdout=subprocess.PIPE,
        stderr=subprocess.PIPE,
    ) as process:
        deadline = time.monotonic() + 20.0
        while not (part.exists() and part.stat().st_size == len(server.data) // 2) and time.monotonic() < deadline:
            time.sleep(0.02)
        process.send_signal(number)
        out, err = process.communicate(timeout=20.0)
    assert (process.returncode, err.decode()) == (code, words + "\n")
    assert json.loads(out) == {"error": [words]}
    assert part.exists()
