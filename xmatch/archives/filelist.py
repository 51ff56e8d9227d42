"""Small lists that an archive keeps as one file: fetched whole, read as CSV, FITS, ECSV or VOTable.

Only a VOTable can say that it was cut. A plain file is believed whole when its length is the one declared, every row has
all its cells, and it holds at least as many rows as the list is known to have.
"""

from __future__ import annotations

import csv
import io
import warnings
from threading import Lock
from typing import Any

import numpy as np

from xmatch.archives.transport import Request
from xmatch.archives.words import plain
from xmatch.errors import MisreadError
from xmatch.records import Column, Question

NO_VALUE = frozenset({"", "-", "--", "---", "...", "null", "none", "n/a", "nan"})
"""What lists write where there is no value."""
_reading = Lock()


def request(question: Question) -> Request:
    """The GET request of a list; its cone is cut on this side."""
    return Request("GET", question.address)


def read_list(raw: bytes, question: Question) -> dict[str, Column]:
    """Read a list that is not a VOTable.

    Parameters
    ----------
    raw : bytes
        The whole file.
    question : Question
        Its ``format``, and the ``units`` of columns that the file gives none for.

    Returns
    -------
    dict of str to Column
        All scalar columns under the file's names; text columns keep their spelling, whole numbers are exact.

    Raises
    ------
    MisreadError
        When the file is cut, is not of its format, or a row lacks cells.
    """
    columns = _read_csv(raw) if question.format == "csv" else _read_table(raw, question.format)
    return {
        name: Column(column.values, column.unit or question.units.get(name), column.missing)
        for name, column in columns.items()
    }


def _read_csv(raw: bytes) -> dict[str, Column]:
    try:
        text = raw.decode("utf-8-sig")
    except UnicodeDecodeError as fault:
        raise MisreadError(
            f"the list is not UTF-8 text ({fault.reason} at byte {fault.start}); check its format"
        ) from None
    try:
        rows = [row for row in csv.reader(io.StringIO(text), strict=True) if row]
    except csv.Error as fault:
        raise MisreadError(f"the list is no CSV: {fault}; it may have been cut: ask again") from None
    if not rows or len(rows[0]) < 2:
        raise MisreadError("the list has no head with column names; check its address and format")
    head = [name.strip() for name in rows[0]]
    if len(set(head)) != len(head):
        head = [name if head.index(name) == i else f"{name} ({i + 1})" for i, name in enumerate(head)]
    for number, row in enumerate(rows[1:], start=2):
        if len(row) != len(head):
            raise MisreadError(
                f"row {number} of the list has {len(row)} cells where {len(head)} are named; it may have been cut: ask again"
            )
    return {name: _as_column([row[i].strip() for row in rows[1:]]) for i, name in enumerate(head)}


def _as_column(cells: list[str]) -> Column:
    """Whole numbers, numbers or text, whichever holds for every cell that has a value."""
    missing = np.array([cell.lower() in NO_VALUE for cell in cells], dtype=bool)
    present = [cell for cell, gone in zip(cells, missing, strict=True) if not gone]
    for kind, nothing in ((int, 0), (float, np.nan)):
        try:
            for cell in present:
                if kind is int and (not cell.lstrip("+-").isdigit() or len(cell.lstrip("+-")) > 18):
                    raise ValueError(cell)
                kind(cell)
        except ValueError:
            continue
        if not present:
            break
        values = [nothing if gone else kind(cell) for cell, gone in zip(cells, missing, strict=True)]
        return Column(np.array(values, dtype=np.int64 if kind is int else np.float64), None, missing)
    return Column(np.array(cells, dtype=str) if cells else np.empty(0, dtype="U1"), None, missing)


def _read_table(raw: bytes, form: str) -> dict[str, Column]:
    with _reading, warnings.catch_warnings():
        warnings.simplefilter("error")  # a truncated FITS file is only a warning to its reader
        warnings.simplefilter("ignore", DeprecationWarning)
        from astropy.table import Table
        from astropy.units import UnitsWarning

        warnings.simplefilter("ignore", UnitsWarning)
        try:
            if form == "fits":
                table = Table.read(io.BytesIO(raw), format="fits", hdu=1)
            else:
                table = Table.read(raw.decode("utf-8"), format="ascii.ecsv")
        except Exception as fault:  # the readers raise many kinds: whatever they are, there are no rows to trust
            raise MisreadError(f"the list cannot be read as {form}: {plain(str(fault))}; ask again later") from None
    return {name: column for name in table.colnames if (column := _of_table(table[name])) is not None}


def _of_table(served: Any) -> Column | None:
    values, mask = np.ma.getdata(served), np.ma.getmaskarray(np.ma.asarray(served))
    if values.ndim != 1:
        return None
    unit = str(served.unit) if getattr(served, "unit", None) is not None else None
    if values.dtype.kind in "SUO":
        text = np.array([_text(value) for value in values], dtype=str) if len(values) else np.empty(0, dtype="U1")
        return Column(text, unit, mask | (np.char.str_len(text) == 0))
    if values.dtype.kind not in "biuf":
        return None
    plain_values = np.asarray(values).astype(values.dtype.newbyteorder("="))
    if plain_values.dtype.kind == "f":
        mask = mask | np.isnan(plain_values)
    return Column(plain_values, unit, np.asarray(mask, dtype=bool))


def _text(value: Any) -> str:
    return (value.decode("utf-8", "replace") if isinstance(value, bytes) else str(value)).strip()
