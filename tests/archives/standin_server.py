"""A stand-in for the online archive on the loopback address: made-up rows, made-up faults."""

from __future__ import annotations

import gzip
import sqlite3
import threading
import time
from collections import Counter
from http.server import BaseHTTPRequestHandler, ThreadingHTTPServer
from pathlib import Path

HEADER = (
    "year,month,day,hour,temp,temp_source,rhum,rhum_source,wdir,wdir_source,"
    "wspd,wspd_source,pres,pres_source,coco,coco_source"
)


def year_text(year: int, days: int = 2, source: str = "isd_lite") -> str:
    """Return the rows of the first days of a year: temperature = hour, 1013.2 hPa, 18.52 km/h."""
    rows = [HEADER]
    for day in range(1, days + 1):
        for hour in range(24):
            s = source
            rows.append(
                f"{year},1,{day},{hour},{hour}.0,{s},60,{s},270,{s},18.52,{s},1013.2,{s},1,{s}"
            )
    return "\n".join(rows) + "\n"


def packed(text: str) -> bytes:
    """Return the text as the archive sends it, gzip without a time stamp."""
    return gzip.compress(text.encode(), mtime=0)


def stations_database(path: Path, rows: list[tuple]) -> bytes:
    """Return a list of stations as the archive's SQLite file.

    Each row: id, country, region, latitude, longitude, elevation, timezone, English name.
    """
    connection = sqlite3.connect(path)
    with connection:
        connection.execute(
            "CREATE TABLE stations (id TEXT, country TEXT, region TEXT, latitude REAL, "
            "longitude REAL, elevation INTEGER, timezone TEXT)"
        )
        connection.execute("CREATE TABLE names (station TEXT, language TEXT, name TEXT)")
        for row in rows:
            connection.execute("INSERT INTO stations VALUES (?, ?, ?, ?, ?, ?, ?)", row[:7])
            connection.execute("INSERT INTO names VALUES (?, 'en', ?)", (row[0], row[7]))
    connection.close()
    return path.read_bytes()


class StandIn:
    """An HTTP server whose answers are given path by path, and which counts requests.

    An answer is the body as bytes (status 200), or a tuple of a status and a body or a
    location, or a list of answers that are used up in turn, the last one staying.
    The special statuses ``cut`` and ``hang`` break off half way and keep silent.
    """

    def __init__(self) -> None:
        self.answers: dict[str, object] = {}
        self.requests: Counter[str] = Counter()
        self.hosts: Counter[str] = Counter()
        handler = type("Handler", (_Handler,), {"standin": self})
        self.server = ThreadingHTTPServer(("127.0.0.1", 0), handler)
        self.server.daemon_threads = True
        self.port = self.server.server_address[1]
        self.url = f"http://127.0.0.1:{self.port}"
        self._thread = threading.Thread(target=self.server.serve_forever, daemon=True)

    def __enter__(self) -> StandIn:
        """Start serving."""
        self._thread.start()
        return self

    def __exit__(self, *_: object) -> None:
        """Stop serving and close the socket."""
        self.server.shutdown()
        self.server.server_close()
        self._thread.join(timeout=5)

    def answer(self, path: str) -> object:
        """Return what to send for a path and count the request."""
        self.requests[path] += 1
        given = self.answers.get(path, (404, b"no such file"))
        if isinstance(given, list):
            return given.pop(0) if len(given) > 1 else given[0]
        return given


class _Handler(BaseHTTPRequestHandler):
    """Sends what the stand-in has for the path."""

    standin: StandIn

    def do_GET(self) -> None:  # noqa: N802 - the name is the standard library's
        """Answer one request."""
        self.standin.hosts[self.headers.get("Host", "")] += 1
        given = self.standin.answer(self.path)
        status, body = given if isinstance(given, tuple) else (200, given)
        if status == "hang":
            time.sleep(3.0)
            return
        if status in (301, 302):
            self.send_response(status)
            self.send_header("Location", body)
            self.send_header("Content-Length", "0")
            self.end_headers()
            return
        self.send_response(200 if status == "cut" else status)
        self.send_header("Content-Length", str(len(body) * (2 if status == "cut" else 1)))
        self.end_headers()
        self.wfile.write(body)

    def log_message(self, *_: object) -> None:
        """Say nothing on stderr."""
