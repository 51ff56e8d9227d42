"""Further protocols of the embedded archive: TAP with a little ADQL, jobs, and lists as files."""

from __future__ import annotations

import csv
import io
import re
import threading
from collections.abc import Sequence
from dataclasses import dataclass
from urllib.parse import parse_qs

import numpy as np
from numpy.typing import NDArray

from xmatch.demo.tables import DemoColumn, DemoTable, document, info, separation_deg, table_xml
from xmatch.records import Bools

_SELECT = re.compile(r"SELECT\s+TOP\s+(\d+)\s+(.+?)\s+FROM\s+(\S+)(.*?)(?:\s+WHERE\s+(.+))?\Z", re.I | re.S)
_CIRCLE = re.compile(r"1 = CONTAINS\(POINT\('ICRS', (\S+), (\S+)\), CIRCLE\('ICRS', (\S+), (\S+), (\S+)\)\)\Z")
_BETWEEN = re.compile(r"(\S+) BETWEEN (\S+) AND (\S+)")
_WRAP = re.compile(r"\((\S+) >= (\S+) OR (\S+) <= (\S+)\)")
_SCHEMA = re.compile(r"FROM TAP_SCHEMA\.columns WHERE table_name\s*=\s*'([^']+)'", re.I)


@dataclass
class DemoJob:
    """One job of the service: its parameters, and how often its phase was asked for."""

    query: str
    started: bool = False
    looks: int = 0


class Jobs:
    """The jobs of one embedded archive."""

    def __init__(self) -> None:
        self._lock = threading.Lock()
        self._made: dict[str, DemoJob] = {}
        self._count = 0

    def make(self, query: str) -> str:
        """Keep a job and return its name."""
        with self._lock:
            self._count += 1
            self._made[str(self._count)] = DemoJob(query)
            return str(self._count)

    def get(self, name: str) -> DemoJob | None:
        """A job that was not deleted."""
        with self._lock:
            return self._made.get(name)

    def delete(self, name: str) -> None:
        """Forget a job."""
        with self._lock:
            self._made.pop(name, None)

    def __len__(self) -> int:
        return len(self._made)


def bare(name: str) -> str:
    """A name without quotes and without the table in front of a plain column."""
    if name.startswith('"') and name.endswith('"'):
        return name[1:-1].replace('""', '"')
    return name.removeprefix("basic.").strip('"')


def tap_error(text: str) -> bytes:
    """How TAP says no."""
    return document([f'<RESOURCE type="results"><INFO name="QUERY_STATUS" value="ERROR">{text}</INFO></RESOURCE>'])


def tap_answer(tables: Sequence[DemoTable], form: dict[str, list[str]]) -> bytes:
    """Answer one ADQL query over the tables of a service."""
    query = form["QUERY"][-1]
    schema = _SCHEMA.search(query)
    if schema:
        return _columns_of(tables, schema[1])
    found = _SELECT.match(query)
    if found is None:
        return tap_error("Incorrect ADQL query")
    top, names, source, _, where = found.groups()
    fitting = [table for table in tables if table.tap_table.lower() == bare(source).lower()]
    if not fitting:
        return tap_error(f"Unknown table {bare(source)}")
    table = fitting[0]
    own = {column.name.lower(): column for column in table.columns}
    picked: list[tuple[DemoColumn, NDArray[np.generic]]] = []
    for name in _split(names):
        wanted, _, alias = name.partition(" AS ")
        column = own.get(bare(alias or wanted).lower())
        if column is None:
            return tap_error(f"Unknown column {bare(wanted)} in {table.tap_table}")
        picked.append((column, table.rows[column.name]))
    inside = np.flatnonzero(_where(table, where))
    most = min(int(top), int(form.get("MAXREC", [top])[-1]))
    shown = inside[:most]
    lines = ['<RESOURCE type="results">', info("QUERY_STATUS", "OK")]
    lines += table_xml(
        table.tap_table, table.description, [column for column, _ in picked], [array[shown] for _, array in picked]
    )
    if len(inside) > most and int(form.get("MAXREC", [10**9])[-1]) <= most:
        lines.append(info("QUERY_STATUS", "OVERFLOW"))
    lines.append("</RESOURCE>")
    return document(lines)


def _split(names: str) -> list[str]:
    return [part.strip() for part in next(csv.reader([names], skipinitialspace=True, quotechar="\0"))]


def _where(table: DemoTable, where: str | None) -> Bools:
    ra, dec = table.ra_deg, table.dec_deg
    if where is None:
        return np.ones(len(ra), dtype=bool)
    circle = _CIRCLE.match(where)
    if circle:
        return separation_deg(float(circle[3]), float(circle[4]), ra, dec) <= float(circle[5])
    keep = np.ones(len(ra), dtype=bool)
    for name, low, high in _BETWEEN.findall(where):
        value = ra if bare(name).lower() == table.ra_column.lower() else dec
        keep &= (value >= float(low)) & (value <= float(high))
    for _, low, _, high in _WRAP.findall(where):
        keep &= (ra >= float(low)) | (ra <= float(high))
    return keep


def _columns_of(tables: Sequence[DemoTable], name: str) -> bytes:
    """TAP_SCHEMA's description of a table; no rows for one that is not there."""
    found = [table for table in tables if table.tap_table.lower() == name.lower()]
    columns = list(found[0].columns) if found else []
    fields = [DemoColumn(field, "char", None, "", "*") for field in ("column_name", "unit", "ucd", "datatype")]
    values = [
        np.array([getattr(column, key) or "" for column in columns], dtype=str)
        for key in ("name", "unit", "ucd", "datatype")
    ]
    lines = ['<RESOURCE type="results">', info("QUERY_STATUS", "OK")]
    lines += table_xml("TAP_SCHEMA.columns", "Columns", fields, values)
    return document([*lines, "</RESOURCE>"])


def file_answer(table: DemoTable) -> tuple[bytes, str]:
    """The table as a file, in its format, and its content type."""
    names = [column.name for column in table.columns]
    if table.file_format == "csv":
        out = io.StringIO()
        writer = csv.writer(out, lineterminator="\n")
        writer.writerow(names)
        columns = [np.ma.filled(np.ma.asarray(table.rows[name]).astype(object), "") for name in names]
        writer.writerows(["" if cell != cell else cell for cell in row] for row in zip(*columns, strict=True))
        return out.getvalue().encode(), "text/csv"
    if table.file_format == "votable":
        lines = ['<RESOURCE type="results">']
        lines += table_xml(table.remote_table, table.description, table.columns, [table.rows[name] for name in names])
        return document([*lines, "</RESOURCE>"]), "application/x-votable+xml"
    from astropy.table import Table

    made = Table({name: table.rows[name] for name in names})
    for column in table.columns:
        made[column.name].unit = column.unit
    if table.file_format == "ecsv":
        text = io.StringIO()
        made.write(text, format="ascii.ecsv")
        return text.getvalue().encode(), "text/plain"
    binary = io.BytesIO()
    made.write(binary, format="fits")
    return binary.getvalue(), "application/fits"


def form_of(body: str) -> dict[str, list[str]]:
    """A form's values."""
    return parse_qs(body, keep_blank_values=True)
