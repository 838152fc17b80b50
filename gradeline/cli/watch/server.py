"""A server for one reader on this machine: the page that follows a survey, and the files of its results."""

from __future__ import annotations

import secrets
import socketserver
from collections.abc import Iterator
from contextlib import contextmanager
from http.server import BaseHTTPRequestHandler, ThreadingHTTPServer
from pathlib import Path
from threading import Thread
from typing import Any
from urllib.parse import parse_qs, unquote, urlsplit

from gradeline.cli.watch.live import Live, page_of

__all__ = ["Server", "inside", "serving"]

_LOOPBACK = "127.0.0.1"
#: s that a question for the next version is held open.
_HELD = 20.0
_KINDS = {
    ".html": "text/html; charset=utf-8",
    ".json": "application/json",
    ".csv": "text/csv; charset=utf-8",
    ".svg": "image/svg+xml",
    ".png": "image/png",
}
_STRICT = "default-src 'none'; style-src 'unsafe-inline'; img-src data:; frame-ancestors 'none'"


def inside(folder: Path, asked: str) -> Path | None:
    """Return the file of a folder that a path of an address names, None where it names nothing inside.

    Parameters
    ----------
    folder : Path
        What may be served.
    asked : str
        As it stands in the address, such as ``/figures/residuals.svg``.

    Examples
    --------
    >>> inside(Path("results"), "/../survey.toml"), inside(Path("results"), "/%2e%2e/survey.toml")
    (None, None)
    """
    names = unquote(asked).lstrip("/").split("/")
    # a backslash or a colon would begin anew elsewhere on Windows
    if any(name in ("", ".", "..") or set(name) & set("\\:\0") for name in names):
        return None
    try:
        found = folder.joinpath(*names).resolve(strict=True)
        known = found.is_relative_to(folder.resolve()) and found.is_file()
    except (OSError, ValueError):
        return None
    return found if known and found.suffix in _KINDS else None


class Server(ThreadingHTTPServer):
    """Listens on the loopback interface alone, on a port that is free.

    Parameters
    ----------
    live : Live
        What is shown.
    folder : Path
        The results; nothing else is served.
    """

    daemon_threads = True

    def __init__(self, live: Live, folder: Path) -> None:
        self.live, self.folder = live, folder
        super().__init__((_LOOPBACK, 0), _Handler)

    def server_bind(self) -> None:
        """Bind without asking for this machine's name, which can take long."""
        socketserver.TCPServer.server_bind(self)
        self.server_name, self.server_port = _LOOPBACK, int(self.server_address[1])

    def handle_error(self, request: Any, client_address: Any) -> None:
        """Say nothing: a reader who goes away in the middle of an answer is no fault."""

    @property
    def address(self) -> str:
        """What a browser opens."""
        return f"http://{_LOOPBACK}:{self.server_port}/"


class _Handler(BaseHTTPRequestHandler):
    server: Server
    timeout = 30
    server_version = "gradeline"
    sys_version = ""

    def do_GET(self) -> None:
        self._answer()

    def do_HEAD(self) -> None:
        self._answer()

    def _answer(self) -> None:
        # A page elsewhere whose name was made to lead here still asks by that name.
        here = self.server.server_port
        if self.headers.get("Host") not in {f"{_LOOPBACK}:{here}", f"localhost:{here}"}:
            self._send(403, b"this server answers to 127.0.0.1 and localhost alone\n", "text/plain")
            return
        asked = urlsplit(self.path)
        if asked.path == "/":
            live = self.server.live
            page, policy = page_of(live.shown, live.source, secrets.token_urlsafe(16))
            self._send(200, page.encode("utf-8", "backslashreplace"), _KINDS[".html"], policy)
        elif asked.path == "/version":
            known = parse_qs(asked.query).get("after", [""])[0]
            self._send(200, self.server.live.after(known, _HELD).encode(), "text/plain")
        else:
            self._send_file(inside(self.server.folder, asked.path))

    def _send_file(self, path: Path | None) -> None:
        try:
            content = None if path is None else path.read_bytes()
        except OSError:  # the results are just being replaced
            content = None
        if path is None or content is None:
            self._send(404, b"there is no such file among the results\n", "text/plain")
        else:
            self._send(200, content, _KINDS[path.suffix])

    def _send(self, status: int, content: bytes, kind: str, policy: str = _STRICT) -> None:
        self.send_response(status)
        for name, value in (
            ("Content-Type", kind),
            ("Content-Length", str(len(content))),
            ("Content-Security-Policy", policy),
            ("Cache-Control", "no-store"),
            ("X-Content-Type-Options", "nosniff"),
            ("Referrer-Policy", "no-referrer"),
            ("Cross-Origin-Resource-Policy", "same-origin"),
        ):
            self.send_header(name, value)
        self.end_headers()
        if self.command != "HEAD":
            self.wfile.write(content)

    def log_message(self, format: str, *args: Any) -> None:  # noqa: A002 (the name is the base class's)
        """Requests are not worth a line each."""


@contextmanager
def serving(live: Live, folder: Path) -> Iterator[Server]:
    """Serve while the block runs; close the port and let go of every reader at its end."""
    server = Server(live, folder)
    thread = Thread(target=server.serve_forever, kwargs={"poll_interval": 0.1}, daemon=True)
    thread.start()
    try:
        yield server
    finally:
        live.close()
        server.shutdown()
        server.server_close()
        thread.join()
