"""From a judged table to columns: names, units and values checked against what was asked."""

from __future__ import annotations

import io
import re
import warnings
from threading import Lock
from typing import Any

import numpy as np

from xmatch.archives.structure import FieldHead, Skeleton, TableHead
from xmatch.archives.words import plain
from xmatch.errors import MisreadError
from xmatch.records import Bools, Column, Floats, Question, WantedColumn
from xmatch.units import unit_factor

IMPLAUSIBLE_FRACTION = 0.05
"""Fraction of values outside their plausible range from which a column is not believed (our choice)."""
ELSEWHERE_MARGIN_ARCSEC = 300.0
"""How far outside the cone a row may lie: fast stars over half a century, and rounding (our choice)."""
_MAIN_POSITION_UCDS = frozenset({"pos_eq_ra_main", "pos_eq_dec_main", "pos.eq.ra;meta.main", "pos.eq.dec;meta.main"})
_TEXT_TYPES = frozenset({"char", "unicodeChar"})
_CLIPPED, _NO_NUMBER = "W51", "W30"
"""astropy's warnings for an integer moved to its type's limit, and for text taken for a missing float."""
_QUOTED = re.compile(r"'(.*)'")
_NO_VALUE = frozenset({"-", "--", "null", "none", "n/a", "...", "nan"})
"""What archives write in number columns where there is no number."""

_DATATYPE = {"U": "char", "i": "long", "u": "long", "f": "double", "b": "boolean"}

# astropy's parser and its warning filters belong to the whole process
_decoding = Lock()


def decode(raw: bytes, skeleton: Skeleton, table: TableHead, question: Question) -> tuple[dict[str, Column], str]:
    """Decode the scalar columns of a table and hold the wanted ones against the question.

    Parameters
    ----------
    raw : bytes
        The whole VOTable.
    skeleton : Skeleton
        Its skeleton.
    table : TableHead
        The table of the skeleton to decode.
    question : Question
        The columns wanted, with units and plausible ranges in those units.

    Returns
    -------
    columns : dict of str to Column
        Under the names served, the wanted ones under the names they were asked by. Array columns are left
        out. 64-bit integers are exact; floats without a value are ``nan`` and marked missing.
    remark : str
        What a reader should know, or nothing.

    Raises
    ------
    MisreadError
        A wanted column is missing, comes twice, in text or in a unit that cannot be converted, or holds
        values that cannot be true; or the rows lie outside the cone.
    """
    places = _places_of(table, question)
    for wanted, place in places.items():
        _check_unit(wanted, table.fields[place], question)
    values = _values(raw, skeleton, table)
    names = _names(table, {place: wanted.name for wanted, place in places.items()})
    columns: dict[str, Column] = {}
    left_out = 0
    for place, name in names.items():
        column = _column(values[place], table, place, question)
        if column is not None:
            columns[name] = column
        elif any(place == other for other in places.values()):
            raise MisreadError(f"column {name!r} holds several values a row, not one; check the catalog file")
        else:
            left_out += 1
    for wanted in places:
        _check_plausible(wanted, columns[wanted.name])
    _check_place(columns, question)
    return columns, f" ({left_out} array columns left out)" if left_out else ""


def check_list(columns: dict[str, Column], question: Question) -> dict[str, Column]:
    """Hold the columns of a list that is no VOTable against the question, as :func:`decode` does for a table.

    Raises
    ------
    MisreadError
        As :func:`decode`.
    """
    heads = [
        FieldHead(name, _DATATYPE[column.values.dtype.kind], column.unit, "", None, "")
        for name, column in columns.items()
    ]
    table = TableHead("", "", "", False, True, None, 0, fields=heads)
    places = _places_of(table, question)
    for wanted, place in places.items():
        _check_unit(wanted, heads[place], question)
    names = _names(table, {place: wanted.name for wanted, place in places.items()})
    served = list(columns.values())
    found = {name: served[place] for place, name in names.items()}
    for wanted in places:
        _check_plausible(wanted, found[wanted.name])
    return found


def _places_of(table: TableHead, question: Question) -> dict[WantedColumn, int]:
    """Where each wanted column stands. Case is ignored: archives change it between releases."""
    places: dict[WantedColumn, int] = {}
    missing = []
    for wanted in question.columns:
        exact = [i for i, served in enumerate(table.fields) if served.name == wanted.name]
        found = exact or [i for i, served in enumerate(table.fields) if served.name.lower() == wanted.name.lower()]
        if len(found) > 1:
            raise MisreadError(f"column {wanted.name!r} comes {len(found)} times; ask another table")
        if found:
            places[wanted] = found[0]
        elif wanted.required:
            missing.append(wanted.name)
    if missing:
        came = ", ".join(plain(served.name, 30) for served in table.fields[:40])
        raise MisreadError(
            f"column{'s' if len(missing) > 1 else ''} {', '.join(map(repr, missing))} not in the reply, which holds "
            f"{came}; the archive changed or the catalog file is wrong"
        )
    return places


def _names(table: TableHead, wanted: dict[int, str]) -> dict[int, str]:
    """A name for each column, unique in any case, so that a reader by name finds the wanted one."""
    names = dict(wanted)
    taken = {name.lower() for name in wanted.values()}
    for place, served in enumerate(table.fields):
        if place in names:
            continue
        name, count = served.name, 1
        while name.lower() in taken:
            count += 1
            name = f"{served.name} ({count})"
        names[place] = name
        taken.add(name.lower())
    return dict(sorted(names.items()))


def _unit_of(served: FieldHead, question: Question) -> str | None:
    """Unit as served. The cone-search standard fixes degrees for the main position, so it may go unsaid there."""
    if served.unit is None and question.protocol == "cone" and served.ucd.lower() in _MAIN_POSITION_UCDS:
        return "deg"
    # a unit that the catalog file states stands only where the archive states none
    return served.unit or question.units.get(served.name)


def _check_unit(wanted: WantedColumn, served: FieldHead, question: Question) -> None:
    if wanted.unit is None:
        return
    unit = _unit_of(served, question)
    if served.datatype in _TEXT_TYPES:
        raise MisreadError(
            f"column {wanted.name!r} comes as text in {unit or 'no unit'}, where numbers in {wanted.unit} are wanted; "
            "the archive changed or the catalog file is wrong"
        )
    if unit_factor(unit, wanted.unit) is None:
        raise MisreadError(
            f"column {wanted.name!r} comes in {plain(unit, 30) if unit else 'no unit'}, which cannot be converted to "
            f"{wanted.unit}; the archive changed or the catalog file is wrong"
        )


def _values(raw: bytes, skeleton: Skeleton, table: TableHead) -> list[Any]:
    """The masked arrays of all fields of one table, in order."""
    if table.form == "":  # a head without data is how several archives say "no rows"
        return [np.ma.masked_all(0, dtype=_dtype_of(served)) for served in table.fields]
    with _decoding, warnings.catch_warnings(record=True) as warned:
        warnings.simplefilter("always")
        from astropy.io import votable

        alone = _alone(raw, skeleton, table)
        try:
            parsed = votable.parse(io.BytesIO(alone or raw), verify="warn", invalid="exception")
            found = list(parsed.iter_tables())[0 if alone else table.position]
            values = [found.array[served.ID] for served in found.fields]
        except Exception as fault:  # the parser raises many kinds: whatever they are, there are no rows to trust
            raise MisreadError(
                f"a value in table {plain(table.name, 40)!r} cannot be read: {plain(str(fault))}; ask again later"
            ) from None
    for warning in warned:
        _check_warning(warning.category.__name__, str(warning.message), table)
    if len(values) != len(table.fields) or any(len(column) != table.rows for column in values):
        raise MisreadError(
            f"counted {table.rows} rows of {len(table.fields)} columns, but decoded "
            f"{len(values[0]) if values else 0} of {len(values)}; ask again later"
        )
    return values


def _alone(raw: bytes, skeleton: Skeleton, table: TableHead) -> bytes | None:
    """A VOTable of this table only, so that an answer of many tables is not parsed once for each; None if it must be."""
    plain_tags = raw[table.begin : table.begin + 6] == b"<TABLE" and raw[table.end : table.end + 8] == b"</TABLE>"
    if len(skeleton.tables) < 2 or table.depth != 1 or not plain_tags:
        return None
    element = raw[table.begin : table.end] + b"</TABLE>"
    return raw[: skeleton.body_begin] + b"<RESOURCE>" + element + b"</RESOURCE></VOTABLE>"


def _check_warning(code: str, text: str, table: TableHead) -> None:
    """Of all that astropy finds odd, these two change values without a trace."""
    quoted = _QUOTED.search(text)
    if code == _CLIPPED or (code == _NO_NUMBER and quoted and quoted[1].strip().lower() not in _NO_VALUE):
        raise MisreadError(
            f"a value in table {plain(table.name, 40)!r} does not fit its column's type "
            f"({plain(text.rpartition(': ')[2])}); ask again later"
        )


def _dtype_of(served: FieldHead) -> str:
    return {
        "short": "i2", "int": "i4", "long": "i8", "unsignedByte": "u1", "float": "f4", "double": "f8",
        "boolean": "bool",
    }.get(served.datatype, "U1")  # fmt: skip


def _column(values: Any, table: TableHead, place: int, question: Question) -> Column | None:
    """One column as plain arrays; None for a column of arrays."""
    served = table.fields[place]
    data, mask = np.ma.getdata(values), np.ma.getmaskarray(values)
    if data.ndim > 1:
        if data.size != len(data):
            return None
        data, mask = data.reshape(len(data)), mask.reshape(len(data))
    if served.datatype in _TEXT_TYPES:
        text = np.array([_text(value) for value in data], dtype=str) if len(data) else np.empty(0, dtype="U1")
        return Column(text, _unit_of(served, question), np.char.str_len(np.char.strip(text)) == 0)
    if data.dtype.kind not in "biuf":
        return None
    missing = mask.astype(bool)
    if data.dtype.kind == "f":
        missing = missing | np.isnan(data)
        data = np.where(missing, np.nan, data).astype(data.dtype)
    for row, field in table.empty_integers:
        if field == place:
            missing[row] = True
    return Column(data, _unit_of(served, question), missing)


def _text(value: Any) -> str:
    return value.decode("utf-8", "replace") if isinstance(value, bytes) else str(value)


def _check_plausible(wanted: WantedColumn, column: Column) -> None:
    if wanted.low is None and wanted.high is None:
        return
    present = _present(column, wanted)
    if not present.size:
        return
    low = -np.inf if wanted.low is None else wanted.low
    high = np.inf if wanted.high is None else wanted.high
    outside = ~(np.isfinite(present) & (present >= low) & (present <= high))
    if outside.mean() > IMPLAUSIBLE_FRACTION:
        raise MisreadError(
            f"column {wanted.name!r}: {outside.sum()} of {present.size} values, such as {present[outside][0]:g}, lie "
            f"outside {low:g} to {high:g} {wanted.unit or ''}".rstrip()
            + "; the archive changed its meaning or unit, or the catalog file is wrong"
        )


def _present(column: Column, wanted: WantedColumn) -> Floats:
    """Values that are there, in the wanted unit."""
    if column.values.dtype.kind not in "iufb":
        raise MisreadError(f"column {wanted.name!r} holds text where numbers are wanted; check the catalog file")
    values = column.values[~column.missing].astype(np.float64)
    factor = 1.0 if wanted.unit is None else unit_factor(column.unit, wanted.unit)
    return values * (1.0 if factor is None else factor)


def _check_place(columns: dict[str, Column], question: Question) -> None:
    """Rows must lie where they were asked for: a table in hours of right ascension passes every other check."""
    if question.is_whole or question.protocol == "file":
        return
    ra = [wanted for wanted in question.columns if (wanted.unit, wanted.low, wanted.high) == ("deg", 0.0, 360.0)]
    dec = [wanted for wanted in question.columns if (wanted.unit, wanted.low, wanted.high) == ("deg", -90.0, 90.0)]
    if len(ra) != 1 or len(dec) != 1 or not {ra[0].name, dec[0].name} <= columns.keys():
        return
    both: Bools = ~(columns[ra[0].name].missing | columns[dec[0].name].missing)
    if not both.any():
        return
    ra_deg, dec_deg = (
        columns[wanted.name].values[both].astype(np.float64) * (unit_factor(columns[wanted.name].unit, "deg") or 1.0)
        for wanted in (ra[0], dec[0])
    )
    # a box around the cone holds corners that are cut on this side
    reach = 1.1 if question.geometry == "circle" else 2.0
    separation = _separation_arcsec(question.ra_deg, question.dec_deg, ra_deg, dec_deg)
    outside = separation > reach * question.radius_arcsec + ELSEWHERE_MARGIN_ARCSEC
    if outside.mean() > IMPLAUSIBLE_FRACTION:
        raise MisreadError(
            f"{outside.sum()} of {both.sum()} rows lie outside the cone, the farthest "
            f"{separation.max() / 3600.0:.3g} deg away where {question.radius_arcsec / 3600.0:.3g} deg were asked for; "
            "the archive left the position out, or its positions are in another unit or frame"
        )


def _separation_arcsec(ra0_deg: float, dec0_deg: float, ra_deg: Floats, dec_deg: Floats) -> Floats:
    """Great-circle separation by the haversine formula (definition)."""
    d0, d = np.radians(dec0_deg), np.radians(dec_deg)
    half = np.sin((d - d0) / 2.0) ** 2 + np.cos(d0) * np.cos(d) * np.sin(np.radians(ra_deg - ra0_deg) / 2.0) ** 2
    return np.degrees(2.0 * np.arcsin(np.sqrt(np.clip(half, 0.0, 1.0)))) * 3600.0
