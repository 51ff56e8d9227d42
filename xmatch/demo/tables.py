"""Tables of the embedded archive: what they hold, and how they are written as VOTable."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from pathlib import Path
from typing import Any
from xml.sax.saxutils import escape, quoteattr

import numpy as np
from numpy.typing import NDArray

from xmatch.errors import ConfigurationError
from xmatch.records import Floats

VIZIER_HOST = "vizier.cds.unistra.fr"


@dataclass(frozen=True)
class DemoColumn:
    """One column as it is declared in a VOTable."""

    name: str
    datatype: str
    unit: str | None = None
    ucd: str = ""
    arraysize: str | None = None


@dataclass(frozen=True)
class DemoTable:
    """One table that the embedded archive serves.

    ``rows`` holds one array per column, and may hold further ones that are not served, such as positions
    in degrees behind sexagesimal columns. Floats that are ``nan`` and masked values are left empty.
    """

    remote_table: str
    columns: Sequence[DemoColumn]
    rows: Mapping[str, NDArray[Any]]
    ra_column: str
    dec_column: str
    host: str = VIZIER_HOST
    """Host it answers for."""
    cone_path: str = ""
    """Path of its cone search at that host; none when empty."""
    description: str = ""
    tap_path: str = ""
    """Path of the TAP service that has it; none when empty."""
    tap_table: str = ""
    """Its name there."""
    file_path: str = ""
    """Path at which the whole table is a file; none when empty."""
    file_format: str = "csv"
    """``csv``, ``fits``, ``votable`` or ``ecsv``."""

    @property
    def ra_deg(self) -> Floats:
        """Right ascension of the rows."""
        return np.asarray(np.ma.filled(np.ma.asarray(self.rows[self.ra_column], dtype=np.float64), np.nan))

    @property
    def dec_deg(self) -> Floats:
        """Declination of the rows."""
        return np.asarray(np.ma.filled(np.ma.asarray(self.rows[self.dec_column], dtype=np.float64), np.nan))


def load_table(path: Path | str) -> DemoTable:
    """Read a table from an ECSV file.

    The file's metadata holds ``remote_table``, ``ra`` and ``dec``, and may hold ``host``, ``cone_path``, ``tap_path`` with
    ``tap_table``, ``file_path`` with ``file_format``, and ``description``. A column's unit, or ``unit`` in its metadata where astropy would not parse it, is served as
    written; ``ucd`` may stand there too. Columns that begin with an underscore are not served.

    Raises
    ------
    ConfigurationError
        When the file lacks one of the three.
    """
    from astropy.table import Table

    table = Table.read(path, format="ascii.ecsv")
    meta = table.meta
    for key in ("remote_table", "ra", "dec"):
        if key not in meta:
            raise ConfigurationError(f"{path}: the table's metadata lacks {key!r}; add it to the file's head")
    columns = []
    for name in table.colnames:
        if name.startswith("_"):
            continue
        column = table[name]
        datatype, arraysize = _type_of(np.asarray(column).dtype)
        unit = column.meta.get("unit") or (str(column.unit) if column.unit is not None else None)
        columns.append(DemoColumn(name, datatype, unit, column.meta.get("ucd", ""), arraysize))
    rows = {name: np.ma.asarray(table[name]) for name in table.colnames}
    return DemoTable(
        remote_table=meta["remote_table"],
        columns=tuple(columns),
        rows=_filled(rows, meta, int(meta.get("filler_rows", 0)) - len(table)),
        ra_column=meta["ra"],
        dec_column=meta["dec"],
        host=meta.get("host", VIZIER_HOST),
        cone_path=meta.get("cone_path", ""),
        description=meta.get("description", ""),
        tap_path=meta.get("tap_path", ""),
        tap_table=meta.get("tap_table", ""),
        file_path=meta.get("file_path", ""),
        file_format=meta.get("file_format", "csv"),
    )


def _filled(rows: dict[str, Any], meta: Mapping[str, Any], n: int) -> dict[str, Any]:
    """The rows, and as many more as a list must hold, all in the northern cap, where nothing of the demo is."""
    if n <= 0:
        return rows
    rng = np.random.default_rng(n)
    ra, dec = rng.uniform(0.0, 360.0, n), rng.uniform(70.0, 89.0, n)
    filled: dict[str, Any] = {}
    for name, values in rows.items():
        if name in (meta["ra"], meta["dec"]):
            more: Any = ra if name == meta["ra"] else dec
        elif values.dtype.kind == "U":
            numbered = np.char.add("filler ", np.arange(n).astype(str))
            more = np.resize(np.ma.getdata(values), n) if " " in str(values[0]) else numbered
        else:
            more = np.resize(np.ma.getdata(values), n)
        filled[name] = np.ma.concatenate([values, more])
    for name in rows:
        # a position in a column of its own follows the true one
        if name in (meta.get("ra_served"), meta.get("dec_served")):
            filled[name] = filled[meta["ra"] if name == meta["ra_served"] else meta["dec"]]
    return filled


def _type_of(dtype: np.dtype[Any]) -> tuple[str, str | None]:
    """VOTable type and array size of a numpy type."""
    if dtype.kind in "OU":
        return "char", "*"
    if dtype.kind == "b":
        return "boolean", None
    if dtype.kind == "i":
        return {1: "short", 2: "short", 4: "int", 8: "long"}[dtype.itemsize], None
    return ("float", None) if dtype.itemsize == 4 else ("double", None)


def separation_deg(ra0_deg: float, dec0_deg: float, ra_deg: Floats, dec_deg: Floats) -> Floats:
    """Angle between unit vectors, by atan2: exact at the poles and across RA 0. Not the product's own formula."""

    def vector(ra: Any, dec: Any) -> NDArray[np.float64]:
        a, d = np.radians(ra), np.radians(dec)
        return np.array([np.cos(d) * np.cos(a), np.cos(d) * np.sin(a), np.sin(d)])

    centre, rows = vector(ra0_deg, dec0_deg), vector(ra_deg, dec_deg)
    across = np.linalg.norm(np.cross(centre, rows, axisb=0), axis=-1)
    return np.degrees(np.arctan2(across, centre @ rows))


def computed_columns(table: DemoTable, separation: Floats) -> dict[str, tuple[DemoColumn, NDArray[Any]]]:
    """The columns that VizieR computes on demand; ``_r`` comes in arcsec, as for a radius in arcsec."""
    return {
        "_RAJ2000": (DemoColumn("_RAJ2000", "double", "deg", "pos.eq.ra"), table.ra_deg),
        "_DEJ2000": (DemoColumn("_DEJ2000", "double", "deg", "pos.eq.dec"), table.dec_deg),
        "_r": (DemoColumn("_r", "double", "arcsec", "pos.angDistance"), separation * 3600.0),
    }


def table_xml(name: str, description: str, columns: Sequence[DemoColumn], values: Sequence[NDArray[Any]]) -> list[str]:
    """One TABLE element in lines; a table without rows keeps its fields and has no data."""
    lines = [f"<TABLE name={quoteattr(name)} ID={quoteattr(_identity(name))}>", _described(description)]
    for column in columns:
        attributes = {"name": column.name, "datatype": column.datatype, "arraysize": column.arraysize,
                      "unit": column.unit, "ucd": column.ucd or None}  # fmt: skip
        shown = " ".join(f"{key}={quoteattr(value)}" for key, value in attributes.items() if value is not None)
        lines.append(f"<FIELD {shown}/>")
    n = len(values[0]) if len(values) else 0
    if n:
        cells = [_cells(np.ma.asarray(array)) for array in values]
        lines.append("<DATA><TABLEDATA>")
        lines += ["<TR>" + "".join(f"<TD>{cell}</TD>" for cell in row) + "</TR>" for row in zip(*cells, strict=True)]
        lines.append("</TABLEDATA></DATA>")
    lines.append("</TABLE>")
    return lines


def document(lines: Sequence[str], description: str = "Embedded archive of invented rows") -> bytes:
    """A whole VOTable around some lines."""
    head = [
        '<?xml version="1.0" encoding="UTF-8"?>',
        '<VOTABLE version="1.4" xmlns="http://www.ivoa.net/xml/VOTable/v1.3">',
        _described(description),
    ]
    return "\n".join([*head, *lines, "</VOTABLE>", ""]).encode()


def info(name: str, value: str) -> str:
    """One INFO element."""
    return f"<INFO name={quoteattr(name)} value={quoteattr(value)}/>"


def _described(text: str) -> str:
    return f"<DESCRIPTION>{escape(text)}</DESCRIPTION>"


def _identity(name: str) -> str:
    return "T_" + "".join(c if c.isalnum() else "_" for c in name)


def _cells(array: NDArray[Any]) -> list[str]:
    """One column as text: empty where there is no value."""
    values, mask = np.ma.getdata(array).tolist(), np.ma.getmaskarray(array).tolist()
    return ["" if missing else _cell(value) for value, missing in zip(values, mask, strict=True)]


def _cell(value: Any) -> str:
    if isinstance(value, float):
        return "" if value != value else repr(value)
    if isinstance(value, bool):
        return "T" if value else "F"
    return escape(str(value))
