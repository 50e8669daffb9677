"""HTTP for downloads: one opener for http and https only, and every failure of it in words.

The standard library does the transfer: pooch (1.9.0) fetches whole files only, whereas lists of many
gigabytes have to be resumed, and only if they are still the same (Range with If-Range).
"""

from __future__ import annotations

import contextlib
import http.client
import socket
import ssl
import urllib.error
import urllib.request
from collections.abc import Iterator, Mapping
from typing import Any
from urllib.parse import urlsplit

from opacity.errors import printable
from opacity.provenance import VERSION
from opacity.recipe.downloads import url_fault

PROBE_SECONDS = 15.0
"""How long a server may take to say a file's size (s)."""
LONGEST_WAIT = 120.0
"""The longest wait that a server may ask for before the next attempt (s)."""

_TRY_AGAIN = frozenset({408, 416, 425, 429, 500, 502, 503, 504})
_REDIRECTS = frozenset({301, 302, 303, 307, 308})
_LOOP = urllib.request.HTTPRedirectHandler.inf_msg[:40]


class TransferError(Exception):
    """A transfer that failed, in words; `transient` if another attempt may succeed, after `wait` s if stated.

    `reached` is false where no server was found at all, `silent` true where one did not answer in time.
    """

    def __init__(
        self,
        what: str,
        *,
        transient: bool = False,
        wait: float | None = None,
        reached: bool = True,
        silent: bool = False,
    ) -> None:
        super().__init__(what)
        self.what, self.transient, self.wait = what, transient, wait
        self.reached, self.silent = reached, silent


class _Redirects(urllib.request.HTTPRedirectHandler):
    """Redirects keep the method and the headers, and lead neither away from http nor from https to http."""

    def redirect_request(
        self, req: urllib.request.Request, fp: Any, code: int, msg: str, headers: Any, newurl: str
    ) -> urllib.request.Request:
        newurl = newurl.replace(" ", "%20")
        wrong = url_fault(newurl)
        if wrong is None and req.type == "https" and urlsplit(newurl).scheme.lower() != "https":
            wrong = "from https to http"
        if wrong is not None:
            raise urllib.error.HTTPError(req.full_url, code, f"a redirect that is refused: {wrong}", headers, fp)
        return urllib.request.Request(
            newurl,
            headers=dict(req.headers),
            method=req.get_method(),
            origin_req_host=req.origin_req_host,
            unverifiable=True,
        )


def _opener() -> urllib.request.OpenerDirector:
    """Neither file: nor ftp: nor data: has a handler here; proxies are those of the environment."""
    opener = urllib.request.OpenerDirector()
    for handler in (
        urllib.request.ProxyHandler(),
        urllib.request.HTTPHandler(),
        urllib.request.HTTPSHandler(),
        _Redirects(),
        urllib.request.HTTPDefaultErrorHandler(),
        urllib.request.HTTPErrorProcessor(),
        urllib.request.UnknownHandler(),
    ):
        opener.add_handler(handler)
    return opener


@contextlib.contextmanager
def opened(url: str, timeout: float, headers: Mapping[str, str] | None = None, method: str = "GET") -> Iterator[Any]:
    """The response to a request; every failure of it, also while it is read inside, as `TransferError`.

    `timeout` (s) is how long the server may send nothing.
    """
    request = urllib.request.Request(
        url, headers={"User-Agent": f"opacity/{VERSION}", **(headers or {})}, method=method
    )
    try:
        response = _opener().open(request, timeout=timeout)
        if response is None:
            raise TransferError("no answer that can be read")
        with response:
            yield response
    except urllib.error.HTTPError as error:
        with error:
            raise _answer(error) from error
    except (OSError, http.client.HTTPException, UnicodeError) as error:
        raise _broken(error, timeout) from error


def size_of(url: str) -> int | None:
    """The size that a server states for a file (bytes), None where it states none.  Raises TransferError."""
    with opened(url, PROBE_SECONDS, method="HEAD") as response:
        return stated_length(response.headers)


def stated_length(headers: Mapping[str, str]) -> int | None:
    """Content-Length as a number, None where there is none that can be one."""
    text = (headers.get("Content-Length") or "").strip()
    return int(text) if text.isascii() and text.isdecimal() and len(text) <= 18 else None


def _answer(error: urllib.error.HTTPError) -> TransferError:
    code, reason = error.code, printable(str(error.reason or ""))[:200]
    if code in _REDIRECTS:
        return TransferError("redirected in a circle" if reason.startswith(_LOOP) else reason or f"answer {code}")
    words = http.client.responses.get(code, reason)
    return TransferError(
        f"the server answers {code} {words}".rstrip(), transient=code in _TRY_AGAIN, wait=_wait_of(error.headers)
    )


def _wait_of(headers: Any) -> float | None:
    text = (headers.get("Retry-After") or "").strip()
    return min(float(text), LONGEST_WAIT) if text.isascii() and text.isdecimal() else None


def _broken(error: Exception, timeout: float) -> TransferError:
    cause = error.reason if isinstance(error, urllib.error.URLError) else error
    if isinstance(cause, socket.gaierror | UnicodeError):
        return TransferError("host name not found: no network, or no such host", transient=True, reached=False)
    if isinstance(cause, TimeoutError):
        # The library wraps what happens before the request is out, and only that.
        reached = not isinstance(error, urllib.error.URLError)
        what = f"no data for {timeout:g} s" if reached else f"no connection within {timeout:g} s"
        return TransferError(what, transient=True, reached=reached, silent=True)
    if isinstance(cause, ssl.SSLCertVerificationError):
        return TransferError(f"certificate not trusted ({printable(cause.verify_message)})")
    if isinstance(cause, http.client.InvalidURL):
        return TransferError(f"not a URL ({printable(str(cause))})")
    if isinstance(cause, http.client.IncompleteRead | http.client.RemoteDisconnected | ConnectionResetError):
        return TransferError("the connection broke off", transient=True)
    if isinstance(cause, http.client.HTTPException):
        return TransferError(f"no answer in HTTP ({type(cause).__name__})", transient=True)
    if isinstance(cause, OSError):
        what = f"no connection ({printable(cause.strerror or str(cause))})"
        return TransferError(what, transient=True, reached=isinstance(cause, ssl.SSLError))
    return TransferError(printable(str(cause)))
