"""A local page that shows a run while it goes on: ``dda watch``."""

from __future__ import annotations

import html
import json
import math
import threading
import time
from collections.abc import Callable
from dataclasses import asdict
from http import HTTPStatus
from http.server import BaseHTTPRequestHandler, ThreadingHTTPServer
from importlib.resources import files
from pathlib import Path
from typing import Any
from urllib.parse import parse_qs, urlsplit

from dda.errors import InputError
from dda.report.status import Status, kind_of, read_status, set_text
from dda.report.status_text import headline, holder_text, next_text, place, previews_text
from dda.study.ledger import LEDGER, Ledger
from dda.study.rows import Row

HOST = "127.0.0.1"
#: Doubtful points that the page lists.
LISTED = 100
#: Curves that are sent at most at a time, and sets of varied values that can be chosen from.
MOST_CURVES, MOST_SETS = 6, 2000
# The page asks again after this many times the seconds an answer took, so that a large run is not
# slowed down by being watched.
_REST = 10.0
_ASSETS = {
    "/": ("watch.html", "text/html"),
    "/watch.js": ("watch.js", "text/javascript"),
    "/watch_plot.js": ("watch_plot.js", "text/javascript"),
    "/watch.css": ("watch.css", "text/css"),
}
_HEADERS = {
    "Content-Security-Policy": "default-src 'none'; script-src 'self'; style-src 'self'; "
    "connect-src 'self'; img-src data:; base-uri 'none'; form-action 'none'; "
    "frame-ancestors 'none'",
    "X-Content-Type-Options": "nosniff",
    "Referrer-Policy": "no-referrer",
    "Cache-Control": "no-store",
}


def serve(folder: Path, port: int = 0, ready: Callable[[LiveServer], None] | None = None) -> None:
    """Serve the page of a run on this machine alone, until Ctrl-C.

    Parameters
    ----------
    folder : Path
        The run folder; it is only read.
    port : int
        0 for any free one.
    ready : callable, optional
        Called with the server before it begins to answer.

    Raises
    ------
    InputError
        There is no run, or the port cannot be had.
    """
    server = LiveServer(folder, port)
    with server:
        print(f"{folder} is shown at {server.url}", flush=True)
        print("Ctrl-C ends the page; the run goes on", flush=True)
        if ready is not None:
            ready(server)
        try:
            server.serve_forever()
        except KeyboardInterrupt:
            print()


class LiveServer(ThreadingHTTPServer):
    """Answers the page, and what it asks for: ``/state`` and ``/curves?set=0&set=1``.

    Parameters
    ----------
    folder : Path
    port : int
    """

    daemon_threads = True
    allow_reuse_address = False

    def __init__(self, folder: Path, port: int = 0) -> None:
        if not 0 <= port <= 65535:
            raise InputError(f"--port {port}: a port is a number from 0 to 65535")
        self.folder = folder
        self._lock = threading.Lock()
        self._seen: tuple | None = None
        self._sets: list[tuple[dict[str, Any], int, int, int]] = []
        self.title = read_status(folder, 0).study  # so that a folder without a run is told now
        try:
            super().__init__((HOST, port), _Handler)
        except OSError as error:
            raise InputError(
                f"port {port} cannot be had ({error.strerror}); give another --port, or none"
            ) from None

    @property
    def url(self) -> str:
        """Where the page is."""
        return f"http://{HOST}:{self.server_port}/"

    def state(self) -> dict[str, Any]:
        """Return what the page shows beside its curves."""
        begun = time.perf_counter()
        try:
            status = read_status(self.folder, LISTED)
            sets = self._sets_now()
        except InputError as error:
            return {"error": str(error), "wait": 2.0}
        return _state(status, sets) | {
            "version": json.dumps(self._seen),
            "wait": max(1.0, _REST * (time.perf_counter() - begun)),
        }

    def curves(self, chosen: list[int]) -> dict[str, Any]:
        """Return the spectra so far of some sets of varied values, by their place in the list."""
        try:
            sets = self._sets_now()
            with Ledger(self.folder) as ledger:
                found = [
                    {
                        "set": number,
                        "points": [_point(row) for _, row in ledger.rows(sets[number][0])],
                    }
                    for number in chosen[:MOST_CURVES]
                    if 0 <= number < len(sets)
                ]
        except InputError as error:
            return {"error": str(error)}
        return {"curves": found}

    def _sets_now(self) -> list[tuple[dict[str, Any], int, int, int]]:
        """The sets of varied values, read again when the ledger has changed."""
        with self._lock:
            if (now := _signature(self.folder)) != self._seen:
                with Ledger(self.folder) as ledger:
                    self._sets = ledger.sets()
                self._seen = now
            return self._sets


class _Handler(BaseHTTPRequestHandler):
    server: LiveServer
    server_version = "motelight"
    sys_version = ""

    def do_GET(self) -> None:
        """Answer a request."""
        port = self.server.server_port
        # A page of another origin could otherwise read this one through a name that it controls.
        if self.headers.get("Host") not in (f"{HOST}:{port}", f"localhost:{port}"):
            self._send(HTTPStatus.FORBIDDEN, "text/plain", b"this page is for this machine alone\n")
            return
        url = urlsplit(self.path)
        if url.path in _ASSETS:
            name, kind = _ASSETS[url.path]
            self._send(HTTPStatus.OK, kind, _asset(name, self.server.title))
        elif url.path == "/state":
            self._send_json(self.server.state())
        elif url.path == "/curves":
            asked = parse_qs(url.query).get("set", [])
            self._send_json(self.server.curves([int(a) for a in asked if a.isdecimal()]))
        else:
            self._send(HTTPStatus.NOT_FOUND, "text/plain", b"there is nothing here\n")

    do_HEAD = do_GET

    def log_message(self, format: str, *args: Any) -> None:
        """Say nothing: the terminal is the user's."""

    def _send_json(self, data: dict[str, Any]) -> None:
        text = json.dumps(data, default=str, allow_nan=False)
        self._send(HTTPStatus.OK, "application/json", text.encode())

    def _send(self, code: HTTPStatus, kind: str, content: bytes) -> None:
        self.send_response(code)
        self.send_header("Content-Type", f"{kind}; charset=utf-8")
        self.send_header("Content-Length", str(len(content)))
        for name, value in _HEADERS.items():
            self.send_header(name, value)
        self.end_headers()
        if self.command != "HEAD":
            try:
                self.wfile.write(content)
            except ConnectionError:
                self.close_connection = True  # the page was closed meanwhile


def _asset(name: str, title: str) -> bytes:
    text = files("dda.report").joinpath(name).read_text(encoding="utf-8")
    return text.replace("{{title}}", html.escape(title)).encode()


def _state(status: Status, sets: list[tuple[dict[str, Any], int, int, int]]) -> dict[str, Any]:
    return {
        "title": status.study,
        "folder": status.folder,
        "total": status.total,
        "done": status.done,
        "counts": status.counts,
        "headline": headline(status),
        "holder": "; ".join(filter(None, (holder_text(status.holder), previews_text(status)))),
        "held": status.holder is not None,
        "next": f"{next_text(status)}: {status.next}",
        "tasks": [
            {"place": place(t.varied, t.wavelength_nm), "seconds": t.seconds} for t in status.tasks
        ],
        "doubtful": status.doubtful,
        "doubts": [{**asdict(d), "place": place(d.varied, d.wavelength_nm)} for d in status.doubts],
        "sets": [
            {"name": set_text(varied), "total": total, "done": done, "there": there}
            for varied, total, done, there in sets[:MOST_SETS]
        ],
        "more_sets": max(0, len(sets) - MOST_SETS),
        "now": time.strftime("%H:%M:%S"),
    }


def _point(row: Row) -> dict[str, Any]:
    """A point of the curves: wavelength, kind, and value and error of each cross section."""
    found: dict[str, Any] = {"x": row.wavelength_nm, "kind": kind_of(row.status)}
    for name in ("ext", "abs", "sca"):
        pair = getattr(row, f"c_{name}_nm2"), getattr(row, f"c_{name}_error_nm2")
        found[name] = [value if math.isfinite(value) else None for value in pair]
    return found


def _signature(folder: Path) -> tuple:
    """What changes whenever something is written to the ledger."""
    found = []
    for name in (LEDGER, f"{LEDGER}-wal"):
        try:
            stat = (folder / name).stat()
        except FileNotFoundError:
            continue
        found.append((name, stat.st_mtime_ns, stat.st_size))
    return tuple(found)
