"""An answer in SQL as text or as a file: table, CSV, JSON, Parquet, ECSV, VOTable."""

from __future__ import annotations

import csv
import io
import json
import math
from collections.abc import Iterable, Mapping, Sequence
from typing import Any, TextIO

from xmatch.errors import ConfigurationError

FORMATS = ("table", "csv", "json", "parquet", "ecsv", "votable")
BINARY = frozenset({"parquet"})
WIDEST = 60
"""Characters of one cell of a printed table; longer ones are cut, and files never are."""
_ENDINGS = {
    "_erg_s_cm2": "erg / (s cm2)", "_mas_yr": "mas / yr", "_pc_cm3": "pc / cm3", "_per_deg2": "1 / deg2",
    "_erg_s": "erg / s", "_arcsec": "arcsec", "_arcmin": "arcmin", "_days": "d", "_deg": "deg", "_kpc": "kpc",
    "_pc": "pc", "_mjy": "mJy", "_jy": "Jy", "_hz": "Hz", "_kev": "keV", "_yr": "yr", "_s": "s",
}  # fmt: skip
"""Units that stand in the names of columns, longest first."""

Rows = Iterable[Sequence[Any]]


def unit_of(column: str) -> str:
    """Return the unit that the name of a column tells; empty when it tells none."""
    return next((unit for ending, unit in _ENDINGS.items() if column.endswith(ending)), "")


def distinct(columns: Sequence[str]) -> list[str]:
    """Return the names with a number behind each repetition, because a file holds one column a name."""
    seen: set[str] = set()
    names = []
    for column in columns:
        name, number = column, 1
        while name in seen:
            number += 1
            name = f"{column}_{number}"
        seen.add(name)
        names.append(name)
    return names


def write_text(kind: str, columns: Sequence[str], rows: Rows, out: TextIO, notes: Mapping[str, str]) -> int:
    """Write an answer in a text format; return the number of rows.

    Parameters
    ----------
    kind : str
        One of ``FORMATS`` that is not binary.
    columns : sequence of str
        Names of the columns.
    rows : iterable of sequence
        The rows; those of CSV and JSON are written as they come.
    out : file
        Where to.
    notes : mapping of str to str
        What a file should say of itself: store, question.
    """
    if kind == "csv":
        return _csv(columns, rows, out)
    if kind == "json":
        return _json(columns, rows, out)
    listed = list(rows)
    if kind == "table":
        _table(columns, listed, out)
    elif kind == "ecsv":
        _as_table(columns, listed, notes).write(out, format="ascii.ecsv")
    else:
        _votable(columns, listed, out, notes)
    return len(listed)


def write_parquet(columns: Sequence[str], rows: Rows, out: Any, notes: Mapping[str, str]) -> int:
    """Write an answer as Parquet; return the number of rows.

    Raises
    ------
    ConfigurationError
        pyarrow is not installed.
    """
    try:
        import pyarrow as pa
        import pyarrow.parquet as pq
    except ImportError:
        raise ConfigurationError(
            "Parquet needs pyarrow, which is not installed; pip install 'blankfield[parquet]'"
        ) from None
    listed = list(rows)
    arrays = []
    kinds = {"int": pa.int64(), "float": pa.float64(), "text": pa.string()}
    fields = []
    for name, (kind, values) in zip(distinct(columns), _typed(columns, listed), strict=True):
        arrays.append(pa.array(values, type=kinds[kind]))
        unit = unit_of(name)
        fields.append(pa.field(name, kinds[kind], metadata={"unit": unit} if unit else None))
    pq.write_table(pa.table(arrays, schema=pa.schema(fields, metadata=dict(notes))), out)
    return len(listed)


def _csv(columns: Sequence[str], rows: Rows, out: TextIO) -> int:
    writer = csv.writer(out, lineterminator="\n")
    writer.writerow(columns)
    n = 0
    for row in rows:
        writer.writerow(["" if value is None else _text(value) for value in row])
        n += 1
    return n


def _text(value: Any) -> Any:
    return value.decode("utf-8", "backslashreplace") if isinstance(value, bytes) else value


def _json(columns: Sequence[str], rows: Rows, out: TextIO) -> int:
    names = distinct(columns)
    n = 0
    out.write("[")
    for row in rows:
        line = {name: _finite(_text(value)) for name, value in zip(names, row, strict=True)}
        out.write(("," if n else "") + "\n  " + json.dumps(line, ensure_ascii=False, allow_nan=False))
        n += 1
    out.write("\n]\n" if n else "]\n")
    return n


def _finite(value: Any) -> Any:
    return str(value) if isinstance(value, float) and not math.isfinite(value) else value


def _table(columns: Sequence[str], rows: Sequence[Sequence[Any]], out: TextIO) -> None:
    numbers = [
        all(isinstance(row[i], int | float) or row[i] is None for row in rows) and bool(rows)
        for i in range(len(columns))
    ]
    cells = [list(columns)] + [[_cell(value) for value in row] for row in rows]
    widths = [max(len(line[i]) for line in cells) for i in range(len(columns))]
    for number, line in enumerate(cells):
        padded = [
            text.rjust(width) if right else text.ljust(width)
            for text, width, right in zip(line, widths, numbers, strict=True)
        ]
        out.write("  ".join(padded).rstrip() + "\n")
        if number == 0:
            out.write("  ".join("-" * width for width in widths) + "\n")


def _cell(value: Any) -> str:
    if value is None:
        return ""
    if isinstance(value, float):
        return f"{value:.8g}"
    # a line of a table is a line: control characters of whatever the archive sent are shown, not obeyed
    text = "".join(char if char.isprintable() else repr(char)[1:-1] for char in str(_text(value)))
    return text if len(text) <= WIDEST else text[: WIDEST - 1] + "…"


def _typed(columns: Sequence[str], rows: Sequence[Sequence[Any]]) -> list[tuple[str, list[Any]]]:
    """Columns with one type each: whole numbers stay whole where all are, mixtures with text become text."""
    typed = []
    for i in range(len(columns)):
        values = [_text(row[i]) for row in rows]
        kinds = {type(value) for value in values if value is not None}
        if kinds and kinds <= {int}:
            typed.append(("int", values))
        elif kinds and kinds <= {int, float}:
            typed.append(("float", [None if value is None else float(value) for value in values]))
        else:
            typed.append(("text", [None if value is None else str(value) for value in values]))
    return typed


def _as_table(columns: Sequence[str], rows: Sequence[Sequence[Any]], notes: Mapping[str, str]) -> Any:
    import numpy as np
    from astropy.table import MaskedColumn, Table

    made = []
    kinds: dict[str, tuple[Any, Any]] = {"int": (np.int64, 0), "float": (np.float64, np.nan), "text": (str, "")}
    for name, (kind, values) in zip(distinct(columns), _typed(columns, rows), strict=True):
        dtype, empty = kinds[kind]
        filled = [empty if value is None else value for value in values]
        mask = [value is None for value in values]
        made.append(MaskedColumn(filled, name=name, dtype=dtype, mask=mask, unit=unit_of(name) or None))
    return Table(made, meta=dict(notes))


def _votable(columns: Sequence[str], rows: Sequence[Sequence[Any]], out: TextIO, notes: Mapping[str, str]) -> None:
    from astropy.io.votable import from_table

    file = from_table(_as_table(columns, rows, {}))
    file.description = "; ".join(f"{name}: {text}" for name, text in notes.items())
    buffer = io.BytesIO()
    file.to_xml(buffer)
    out.write(buffer.getvalue().decode("utf-8"))
