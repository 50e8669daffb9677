"""A server on 127.0.0.1 that behaves as badly as it is told, and a guard against any other traffic."""

from __future__ import annotations

import socket
import threading
from collections.abc import Callable, Iterator
from dataclasses import dataclass, field
from http.server import BaseHTTPRequestHandler, ThreadingHTTPServer
from pathlib import Path
from typing import Any

import pytest

from opacity.pipeline.fetch import transfer
from opacity.pipeline.fetch.transfer import Patience, download
from opacity.recipe.downloads import UrlDownload

LOOPBACK = ("127.0.0.1", "localhost")


@pytest.fixture(autouse=True)
def no_outside_traffic(monkeypatch):
    """Names other than this machine's are not found, and other addresses not connected to."""
    connect, getaddrinfo = socket.socket.connect, socket.getaddrinfo

    def guarded_connect(self: socket.socket, address: Any) -> None:
        if self.family != socket.AF_UNIX and address[0] not in LOOPBACK:
            raise OSError(f"traffic to {address}")
        connect(self, address)

    def guarded_names(host: Any, *rest: Any, **more: Any) -> Any:
        if host not in LOOPBACK:
            raise socket.gaierror(socket.EAI_NONAME, "Name or service not known")
        return getaddrinfo(host, *rest, **more)

    monkeypatch.setattr(socket.socket, "connect", guarded_connect)
    monkeypatch.setattr(socket, "getaddrinfo", guarded_names)
    for name in ("http_proxy", "https_proxy", "all_proxy", "HTTP_PROXY", "HTTPS_PROXY", "ALL_PROXY"):
        monkeypatch.delenv(name, raising=False)


@dataclass
class Served:
    """One file on the server.

    `cuts`: bytes after which each answer breaks off; `stall`: after which it falls silent.
    """

    data: bytes
    etag: str | None = '"first"'
    modified: str | None = None
    ranges: bool = True
    honest: bool = True
    length: bool = True
    head: bool = True
    stated: int | None = None
    cuts: list[int] = field(default_factory=list)
    stall: int | None = None
    headers: dict[str, str] = field(default_factory=dict)

    def __call__(self, handler: BaseHTTPRequestHandler) -> None:
        if handler.command == "HEAD" and not self.head:
            handler.send_error(405)
            return
        start = self._start(handler.headers)
        if start is not None and start >= len(self.data):
            handler.send_error(416)
            return
        handler.send_response(200 if start is None else 206)
        if start is not None:
            handler.send_header("Content-Range", f"bytes {start}-{len(self.data) - 1}/{len(self.data)}")
        if self.length:
            handler.send_header("Content-Length", str(self.stated or len(self.data) - (start or 0)))
        for name, value in {"ETag": self.etag, "Last-Modified": self.modified, **self.headers}.items():
            if value is not None:
                handler.send_header(name, value)
        handler.end_headers()
        if handler.command == "GET":
            self._send(handler, self.data[start or 0 :])

    def _start(self, headers: Any) -> int | None:
        asked, condition = headers["Range"], headers["If-Range"]
        if asked is None or not self.ranges:
            return None
        if self.honest and condition is not None and condition not in (self.etag, self.modified):
            return None
        return int(asked.removeprefix("bytes=").removesuffix("-"))

    def _send(self, handler: BaseHTTPRequestHandler, body: bytes) -> None:
        if self.stall is not None:
            handler.wfile.write(body[: self.stall])
            handler.server.released.wait(20.0)
            return
        handler.wfile.write(body[: self.cuts.pop(0)] if self.cuts else body)


class _Handler(BaseHTTPRequestHandler):
    def do_GET(self) -> None:
        self.server.seen.append((self.command, self.path, dict(self.headers)))
        route = self.server.routes.get(self.path)
        if route is None:
            self.send_error(404)
        elif isinstance(route, int):
            self.send_error(route)
        else:
            route(self)

    do_HEAD = do_GET  # noqa: N815 - the base class names it so

    def log_message(self, *parts: Any) -> None:
        pass


class Server(ThreadingHTTPServer):
    """Routes by path: a `Served`, a status code, or any function of the handler.  `seen` are the requests."""

    daemon_threads = True
    block_on_close = False

    def __init__(self) -> None:
        super().__init__(("127.0.0.1", 0), _Handler)
        self.routes: dict[str, Any] = {}
        self.seen: list[tuple[str, str, dict[str, str]]] = []
        self.released = threading.Event()

    def handle_error(self, *parts: Any) -> None:
        """A client that goes away is no error here."""

    def serve(self, path: str, data: bytes, **options: Any) -> Served:
        """Put a file on the server, in place of what was there."""
        self.routes[path] = served = Served(data, **options)
        return served

    def url(self, path: str) -> str:
        return f"http://127.0.0.1:{self.server_port}{path}"

    def gets(self) -> list[dict[str, str]]:
        """Headers of all GET requests so far."""
        return [headers for command, _, headers in self.seen if command == "GET"]


@pytest.fixture
def server() -> Iterator[Server]:
    with Server() as made:
        thread = threading.Thread(target=made.serve_forever, kwargs={"poll_interval": 0.02})
        thread.start()
        yield made
        made.released.set()
        made.shutdown()
        thread.join()


@pytest.fixture
def redirect() -> Callable[[str], Callable[[BaseHTTPRequestHandler], None]]:
    """A route that sends on to another place."""

    def to(place: str) -> Callable[[BaseHTTPRequestHandler], None]:
        def answer(handler: BaseHTTPRequestHandler) -> None:
            handler.send_response(302)
            handler.send_header("Location", place)
            handler.send_header("Content-Length", "0")
            handler.end_headers()

        return answer

    return to


@pytest.fixture
def waits(monkeypatch) -> list[float]:
    """Waits between attempts, noted and not waited."""
    noted: list[float] = []
    monkeypatch.setattr(transfer.time, "sleep", noted.append)
    return noted


@pytest.fixture
def hasty() -> Patience:
    return Patience(attempts=3, first_wait=0.0, silence=0.3)


@pytest.fixture
def write_list(tmp_path: Path) -> Callable[[str], Path]:
    """A recipe with these keys of its line list; nothing else of it matters here."""

    def write(keys: str) -> Path:
        path = tmp_path / "co.toml"
        path.write_text(f"[[line_list]]\n{keys}\n", encoding="utf-8")
        return path

    return write


@pytest.fixture
def get(server, tmp_path, hasty):
    """Download /NAME of the server to lines/NAME, quietly."""

    def run(
        name: str = "x.trans.bz2", sha256: str | None = None, patience: Patience = hasty, quiet: bool = True
    ) -> str:
        wanted = UrlDownload(server.url(f"/{name}"), tmp_path / "lines" / name, sha256)
        return download(wanted, patience, name, quiet)

    return run


@pytest.fixture
def lines(tmp_path) -> Path:
    return tmp_path / "lines"
