"""The embedded archive: a loopback server that speaks the protocols of real archives, faults included.

It answers at ``/<host><path>`` for every host it stands for, so that the product asks it exactly what it would ask
the real archive. Nothing leaves this machine.
"""

from __future__ import annotations

import io
import re
import socket
import threading
from collections.abc import Iterator, Mapping, Sequence
from dataclasses import dataclass, replace
from http import HTTPStatus
from http.server import BaseHTTPRequestHandler, ThreadingHTTPServer
from types import TracebackType
from typing import Any
from urllib.parse import parse_qs, unquote, urlsplit

import numpy as np

from xmatch.demo import services
from xmatch.demo.faults import HTTP_STATUS, Fault, spoil
from xmatch.demo.services import file_answer
from xmatch.demo.tables import (
    DemoColumn,
    DemoTable,
    computed_columns,
    document,
    info,
    load_table,
    separation_deg,
    table_xml,
)

__all__ = ["DemoColumn", "DemoTable", "EmbeddedArchive", "Logged", "load_table"]

VIZIER_PATH = "/viz-bin/votable"
VOTABLE_TYPE = "text/xml;charset=UTF-8"
DEFAULT_ROWS = 50
"""Rows that VizieR gives when no number is asked for."""
_CENTRE = re.compile(r"\s*(\d+(?:\.\d*)?)\s*([+-]\s*\d+(?:\.\d*)?)\s*$")
_RADIUS_DEG = {"-c.rd": 1.0, "-c.rm": 1.0 / 60.0, "-c.rs": 1.0 / 3600.0}
MAX_CONE_DEG = 180.0


@dataclass(frozen=True)
class Logged:
    """One request as it arrived."""

    method: str
    path: str
    headers: dict[str, str]
    body: str


@dataclass
class _Planned:
    remote_table: str
    fault: Fault
    left: int | None


class EmbeddedArchive:
    """Serves tables on 127.0.0.1 for as long as its ``with`` block lasts.

    Parameters
    ----------
    tables : sequence of DemoTable
        What it serves: by the VizieR request form under ``remote_table``, and by cone search under
        ``cone_path``, by TAP and as files likewise.
    documents : mapping of str to bytes, optional
        Files that are served as they are, by ``host/path?query``; their faults are those of ``documents``.

    Attributes
    ----------
    address : str
        ``http://127.0.0.1:<port>``, once started: what a transport takes as ``addresses``.
    requests : list of Logged
        Everything that was asked, in the order of arrival.
    """

    def __init__(self, tables: Sequence[DemoTable], documents: Mapping[str, bytes] | None = None) -> None:
        self.tables = tuple(tables)
        self.documents = dict(documents or {})
        self.requests: list[Logged] = []
        self.address = ""
        self.closing = threading.Event()
        self.jobs = services.Jobs()
        self._lock = threading.Lock()
        self._planned: list[_Planned] = []
        self._server: _Server | None = None
        self._thread: threading.Thread | None = None

    def __enter__(self) -> EmbeddedArchive:
        self.closing.clear()
        self._server = _Server(("127.0.0.1", 0), _Handler)
        self._server.archive = self
        self.address = f"http://127.0.0.1:{self._server.server_address[1]}"
        self._thread = threading.Thread(
            target=self._server.serve_forever, kwargs={"poll_interval": 0.02}, name="embedded archive", daemon=True
        )
        self._thread.start()
        return self

    def __exit__(
        self, kind: type[BaseException] | None, fault: BaseException | None, trace: TracebackType | None
    ) -> None:
        self.closing.set()
        if self._server is not None:
            self._server.shutdown()
            self._server.close_connections()
            self._server.server_close()
        if self._thread is not None:
            self._thread.join()

    def misbehave(self, remote_table: str, fault: Fault, times: int | None = None) -> None:
        """Commit a fault at one table, or at all with ``"*"``, some number of times or for good. Faults add up."""
        with self._lock:
            self._planned.append(_Planned(remote_table, fault, times))

    def behave(self) -> None:
        """Forget every fault."""
        with self._lock:
            self._planned.clear()

    def faults_for(self, remote_table: str) -> list[Fault]:
        """The faults due at a table now; each counts as committed."""
        due = []
        with self._lock:
            for planned in self._planned:
                if planned.remote_table not in ("*", remote_table) or planned.left == 0:
                    continue
                if planned.left is not None:
                    planned.left -= 1
                due.append(planned.fault)
        return due

    def planned_for(self, remote_table: str) -> list[Fault]:
        """The faults due at a table, without counting them as committed."""
        with self._lock:
            return [p.fault for p in self._planned if p.remote_table in ("*", remote_table) and p.left != 0]

    def log(self, request: Logged) -> None:
        """Note a request."""
        with self._lock:
            self.requests.append(request)


_Served = tuple[bytes, list[Fault], str, int, dict[str, str]]
"""Body, faults to commit, content type, HTTP status and headers."""


class _Server(ThreadingHTTPServer):
    daemon_threads = True
    block_on_close = False
    request_queue_size = 128
    archive: EmbeddedArchive

    def __init__(self, *args: Any) -> None:
        self._open: set[socket.socket] = set()
        self._open_lock = threading.Lock()
        super().__init__(*args)

    def process_request(self, request: Any, client_address: Any) -> None:
        with self._open_lock:
            self._open.add(request)
        super().process_request(request, client_address)

    def shutdown_request(self, request: Any) -> None:
        with self._open_lock:
            self._open.discard(request)
        super().shutdown_request(request)

    def close_connections(self) -> None:
        """End connections that clients keep alive, so that no handler outlives the archive."""
        with self._open_lock:
            still_open = tuple(self._open)
        for request in still_open:
            try:
                request.shutdown(socket.SHUT_RDWR)
            except OSError:  # the client was quicker
                continue

    def handle_error(self, request: Any, client_address: Any) -> None:
        """A client that hangs up is no event here; a fault of ours still shows as a closed connection."""


class _Handler(BaseHTTPRequestHandler):
    protocol_version = "HTTP/1.1"
    wbufsize = -1
    disable_nagle_algorithm = True
    server: _Server

    def log_message(self, format: str, *args: Any) -> None:
        """Say nothing: the archive keeps its own log."""

    def do_GET(self) -> None:
        self.answer("")

    def do_POST(self) -> None:
        self.answer(self.rfile.read(int(self.headers.get("Content-Length", 0))).decode())

    def answer(self, body: str) -> None:
        archive = self.server.archive
        archive.log(Logged(self.command, self.path, dict(self.headers.items()), body))
        parts = urlsplit(self.path)
        host, _, path = unquote(parts.path).lstrip("/").partition("/")
        path = "/" + path
        tables = [table for table in archive.tables if table.host == host]
        served = self.served(path, parts.query, body, tables)
        if served is None:
            self.send(404, b"no such service\n", "text/plain", {}, [])
            return
        reply, faults, content_type, status, headers = served
        for fault in faults:
            reply = spoil(reply, fault)
            status = HTTP_STATUS.get(fault.kind, status)
            if fault.kind in ("html", "bad gateway", "wrong content type"):
                content_type = "text/html"
            if fault.kind in ("unavailable", "too many") and fault.asked_wait is not None:
                headers["Retry-After"] = fault.asked_wait
            if fault.kind == "moved":
                headers["Location"] = fault.to
        self.send(status, reply, content_type, headers, faults)

    def served(self, path: str, query: str, body: str, tables: list[DemoTable]) -> _Served | None:
        """What the service at this path says, before it is spoilt; None where there is no service."""
        plain: tuple[int, dict[str, str]] = (200, {})
        document = self.server.archive.documents.get(unquote(self.path).lstrip("/"))
        if document is not None:
            return document, self.faults(["documents"]), "application/octet-stream", *plain
        if self.command == "POST" and path == VIZIER_PATH and tables:
            form = VizierForm.of(body)
            named = form.tables(tables)
            faults = self.faults([table.remote_table for table in named] or [""])
            return form.answer([_altered(table, faults) for table in named]), faults, VOTABLE_TYPE, *plain
        for table in tables:
            if self.command == "GET" and table.cone_path and table.cone_path == path:
                faults = self.faults([table.remote_table])
                return cone_answer(_altered(table, faults), parse_qs(query)), faults, VOTABLE_TYPE, *plain
            if self.command == "GET" and table.file_path and table.file_path == path:
                faults = self.faults([table.remote_table])
                whole, content_type = file_answer(_altered(table, faults))
                return whole, faults, content_type, *plain
        at_tap = [table for table in tables if table.tap_path and path.startswith(f"{table.tap_path}/")]
        if at_tap:
            return self.tap(path.removeprefix(f"{at_tap[0].tap_path}/"), services.form_of(body), at_tap)
        return None

    def tap(self, step: str, form: dict[str, list[str]], tables: list[DemoTable]) -> _Served | None:
        """One step of TAP: a query at once, or the life of a job."""
        jobs = self.server.archive.jobs
        text = form.get("QUERY", [""])[-1]
        _, _, name = step.partition("async/")
        name, _, rest = name.partition("/")
        job = jobs.get(name)
        if job is not None:
            text = job.query
        about = [t for t in tables if re.search(rf"{re.escape(t.tap_table)}\W|{re.escape(t.tap_table)}$", text)]
        due = (
            self.faults([t.remote_table for t in about[:1]] or [""])
            if step == "sync" or rest == "results/result"
            else []
        )
        if step == "sync":
            if any(f.kind == "refuses format" for f in due) and "RESPONSEFORMAT" not in form:
                return services.tap_error("FORMAT not accepted: name one"), [], VOTABLE_TYPE, 400, {}
            return services.tap_answer([_altered(t, due) for t in tables], form), due, VOTABLE_TYPE, 200, {}
        if step == "async" and self.command == "POST":
            made = jobs.make(text)
            return b"", [], "text/plain", 303, {"Location": f"{self.own_address()}/{made}"}
        if job is None:
            return None
        stuck = {f.kind for f in self.server.archive.planned_for(about[0].remote_table if about else "")}
        if self.command == "POST":
            job.started = job.started or form.get("PHASE") == ["RUN"]
            if form.get("ACTION") == ["DELETE"]:
                jobs.delete(name)
            return b"", [], "text/plain", 303, {"Location": self.own_address()}
        if rest == "phase":
            job.looks += 1
            phase = (
                "PENDING" if not job.started else "EXECUTING" if job.looks < 2 or "job stuck" in stuck else "COMPLETED"
            )
            phase = {"job error": "ERROR", "job aborted": "ABORTED"}.get(
                next(iter(stuck & {"job error", "job aborted"}), ""), phase
            )
            return phase.encode(), [], "text/plain", 200, {}
        if rest == "error":
            return b"<p>column RAXX does not exist</p>", [], "text/html", 200, {}
        if rest == "results/result":
            query = {"QUERY": [text]}
            return services.tap_answer([_altered(t, due) for t in tables], query), due, VOTABLE_TYPE, 200, {}
        return None

    def own_address(self) -> str:
        """The address asked, as the archive that it stands for would write it."""
        return "https://" + unquote(urlsplit(self.path).path).lstrip("/")

    def faults(self, remote_tables: list[str]) -> list[Fault]:
        return [fault for name in remote_tables for fault in self.server.archive.faults_for(name)]

    def send(self, status: int, body: bytes, content_type: str, headers: dict[str, str], faults: list[Fault]) -> None:
        closing = self.server.archive.closing
        kinds = {fault.kind: fault for fault in faults}
        # tables of one request are worked off one after the other
        delay_s = sum(fault.seconds for fault in faults if fault.kind == "delay")
        if delay_s and closing.wait(delay_s):
            self.close_connection = True
            return
        if "closed" in kinds:
            self.close_connection = True
            return
        whole = io.BytesIO()
        head = {"Content-Type": content_type, "Content-Length": str(len(body)), **headers}
        whole.write(f"HTTP/1.1 {status} {HTTPStatus(status).phrase}\r\n".encode())
        whole.write("".join(f"{name}: {value}\r\n" for name, value in head.items()).encode() + b"\r\n")
        n_head = whole.tell()
        whole.write(body)
        data = whole.getvalue()
        if "cut stream" in kinds:
            data = data[: n_head + int(len(body) * kinds["cut stream"].fraction)]
            self.close_connection = True
        slow = kinds.get("drip") or kinds.get("drip headers")
        if slow is None:
            self.wfile.write(data)
            self.wfile.flush()
            return
        at = 0 if slow.kind == "drip headers" else n_head
        self.wfile.write(data[:at])
        for drop in range(at, len(data)):
            self.wfile.write(data[drop : drop + 1])
            self.wfile.flush()
            if closing.wait(slow.seconds):
                break
        self.close_connection = True


@dataclass(frozen=True)
class VizierForm:
    """One request in VizieR's form: parameters, one a line, each possibly several times."""

    values: dict[str, list[str]]

    @classmethod
    def of(cls, body: str) -> VizierForm:
        """Read the body of a request."""
        values: dict[str, list[str]] = {}
        for line in body.splitlines():
            name, _, value = line.partition("=")
            values.setdefault(name.strip(), []).append(value)
        return cls(values)

    def several(self, name: str) -> list[str]:
        """All values of a parameter, comma lists taken apart."""
        return [part.strip() for value in self.values.get(name, []) for part in value.split(",") if part.strip()]

    def one(self, name: str) -> str | None:
        """The last value of a parameter."""
        return self.values[name][-1] if self.values.get(name) else None

    def tables(self, served: Sequence[DemoTable]) -> list[DemoTable]:
        """The tables named; a catalog's name stands for all its tables."""
        names = self.several("-source")
        return [
            table
            for table in served
            if any(table.remote_table == name or table.remote_table.startswith(f"{name}/") for name in names)
        ]

    def answer(self, tables: Sequence[DemoTable]) -> bytes:
        """The whole VOTable: one resource per table, nothing for a table that is not there."""
        lines = [info("MaxTuples", str(self.rows_wanted()))]
        for table in tables:
            lines += self.resource(table)
        return document(lines)

    def rows_wanted(self) -> int:
        """``-out.max``."""
        text = self.one("-out.max") or str(DEFAULT_ROWS)
        return 10**9 if text == "unlimited" else int(text)

    def cone(self) -> tuple[float, float, float] | None:
        """Centre and radius in degrees; None without a centre."""
        found = _CENTRE.match(self.one("-c") or "")
        if found is None:
            return None
        radii = (float(self.one(name) or 0) * factor for name, factor in _RADIUS_DEG.items() if self.one(name))
        return float(found[1]), float(found[2].replace(" ", "")), next(radii, 0.0)

    def resource(self, table: DemoTable) -> Iterator[str]:
        """One table's answer; columns that it does not have are left out with a warning, as VizieR does."""
        cone = self.cone()
        warnings = [] if cone is not None else ["No center provided++++"]
        if cone is None:
            separation = np.zeros(len(table.ra_deg))
            inside = np.arange(len(separation))
        else:
            separation = separation_deg(cone[0], cone[1], table.ra_deg, table.dec_deg)
            inside = np.flatnonzero(separation <= cone[2])
            inside = inside[np.argsort(separation[inside], kind="stable")]
        shown = inside[: self.rows_wanted()]
        known = computed_columns(table, separation)
        own = {column.name: (column, table.rows[column.name]) for column in table.columns}
        wanted = [*self.several("-out"), *self.several("-out.add")] or list(own)
        picked = []
        for name in wanted:
            if name == "*":
                picked += list(own.values())
            elif name in known or name in own:
                picked.append(known[name] if name in known else own[name])
            else:
                warnings.append(f"Column '{name}' unknown in '{table.remote_table}'")
        yield f'<RESOURCE type="results" name="{table.remote_table}">'
        yield from table_xml(
            table.remote_table, table.description, [c for c, _ in picked], [array[shown] for _, array in picked]
        )
        if len(shown):
            yield info("matches", str(len(shown)))
        if len(shown) < len(inside):
            warnings.append(f"truncated result (maxtup={self.rows_wanted()})")
        for warning in warnings:
            yield info("Warning", warning)
        if len(shown) < len(inside):
            yield info("QUERY_STATUS", "OVERFLOW")
        yield "</RESOURCE>"


def cone_answer(table: DemoTable, values: dict[str, list[str]]) -> bytes:
    """Answer a cone search: all columns of the rows inside, or the error form of version 1.03 of the standard."""
    given = {name.upper(): value[-1] for name, value in values.items()}
    numbers = []
    for name, low, high in (("RA", 0.0, 360.0), ("DEC", -90.0, 90.0), ("SR", 0.0, MAX_CONE_DEG)):
        try:
            number = float(given[name])
        except (KeyError, ValueError):
            number = np.nan
        if not low <= number <= high:
            text = f"Error in input {name} value: {given.get(name, 'missing')}"
            return document([info("Error", text)], table.description)
        numbers.append(number)
    ra, dec, radius = numbers
    separation = separation_deg(ra, dec, table.ra_deg, table.dec_deg)
    inside = np.flatnonzero(separation <= radius)
    inside = inside[np.argsort(separation[inside], kind="stable")]
    most = int(given.get("MAXREC", 10**9))
    shown = inside[:most]
    lines = ['<RESOURCE type="results">', info("QUERY_STATUS", "OK")]
    lines += table_xml(
        table.remote_table,
        table.description,
        table.columns,
        [table.rows[column.name][shown] for column in table.columns],
    )
    if len(shown) < len(inside):
        lines.append(info("QUERY_STATUS", "OVERFLOW"))
    lines.append("</RESOURCE>")
    return document(lines)


def _altered(table: DemoTable, faults: Sequence[Fault]) -> DemoTable:
    """The table as faults of its content make it."""
    for fault in faults:
        if fault.kind == "renamed column":
            columns = tuple(replace(c, name=fault.to) if c.name == fault.column else c for c in table.columns)
            rows = {fault.to if name == fault.column else name: array for name, array in table.rows.items()}
            ra, dec = (fault.to if name == fault.column else name for name in (table.ra_column, table.dec_column))
            table = replace(table, columns=columns, rows=rows, ra_column=ra, dec_column=dec)
        elif fault.kind == "changed unit":
            columns = tuple(replace(c, unit=fault.to or None) if c.name == fault.column else c for c in table.columns)
            table = replace(table, columns=columns)
        elif fault.kind == "out of range":
            table = replace(table, rows={**table.rows, fault.column: table.rows[fault.column] * fault.factor})
    return table
