"""ADQL for one cone at one table: names quoted where the language needs it, geometry or plain comparisons."""

from __future__ import annotations

import math
import re

from xmatch.records import Question

ARCSEC_PER_DEG = 3600.0
_REGULAR = re.compile(r"[A-Za-z][A-Za-z0-9_]*(\.[A-Za-z][A-Za-z0-9_]*)*\Z")
"""A regular identifier, possibly with schema and catalog (ADQL 2.1, section 2.1.2)."""
_RESERVED = frozenset(
    [
        "all",
        "and",
        "any",
        "area",
        "as",
        "asc",
        "at",
        "avg",
        "between",
        "box",
        "by",
        "centroid",
        "circle",
        "contains",
        "coord1",
        "coord2",
        "coordsys",
        "count",
        "cross",
        "date",
        "day",
        "dec",
        "distance",
        "desc",
        "distinct",
        "end",
        "escape",
        "exists",
        "false",
        "first",
        "float",
        "for",
        "from",
        "full",
        "group",
        "having",
        "hour",
        "in",
        "inner",
        "intersects",
        "is",
        "join",
        "last",
        "left",
        "level",
        "like",
        "max",
        "min",
        "minute",
        "mode",
        "mod",
        "month",
        "name",
        "natural",
        "not",
        "null",
        "on",
        "or",
        "order",
        "outer",
        "point",
        "polygon",
        "position",
        "power",
        "prior",
        "public",
        "read",
        "region",
        "right",
        "rows",
        "second",
        "select",
        "set",
        "size",
        "sum",
        "table",
        "time",
        "timestamp",
        "top",
        "true",
        "union",
        "unique",
        "user",
        "using",
        "value",
        "values",
        "where",
        "year",
        "zone",
    ]
) - {"dec", "name", "mode", "position", "size"}
"""Words that may not stand bare. Left out are words that archives use as column names and take bare, as HEASARC's ``dec``
and ``name``: a quoted name is case-sensitive, and these services keep their names in either case."""
POLE_DEG = 89.9
"""A box that comes nearer to a pole takes every right ascension."""


def quoted(name: str) -> str:
    """A table or column name as ADQL takes it: bare where it is a regular identifier, in double quotes otherwise.

    Parameters
    ----------
    name : str
        As the archive spells it; may hold dots, slashes, or begin with a digit.
    """
    if _REGULAR.match(name) and not any(part.lower() in _RESERVED for part in name.split(".")):
        return name
    return '"' + name.replace('"', '""') + '"'


def select(question: Question, columns: list[str] | None = None, source: str | None = None) -> str:
    """The query of one question.

    Parameters
    ----------
    question : Question
        ``ra_deg``, ``dec_deg`` ICRS degrees; ``radius_arcsec`` arcsec, 180 degrees for the whole table; ``geometry`` says
        whether the service knows ADQL geometry. One row more than ``row_limit`` is asked for, so that a cut answer
        shows itself. The position columns are those wanted in degrees.
    columns : list of str, optional
        What stands behind SELECT; by default the wanted columns by name.
    source : str, optional
        What stands behind FROM; by default the table.

    Returns
    -------
    str
        One line of ADQL.

    References
    ----------
    Mantelet et al. 2023, IVOA Recommendation "Astronomical Data Query Language", version 2.1.
    """
    names = columns if columns is not None else [quoted(column.name) for column in question.columns]
    query = f"SELECT TOP {question.row_limit + 1} {', '.join(names)} FROM {source or quoted(question.remote_table)}"
    return query if question.is_whole else f"{query} WHERE {_where(question)}"


def _where(question: Question) -> str:
    ra, dec = position_columns(question)
    radius_deg = question.radius_arcsec / ARCSEC_PER_DEG
    if question.geometry == "circle":
        centre = f"{_number(question.ra_deg)}, {_number(question.dec_deg)}"
        return f"1 = CONTAINS(POINT('ICRS', {ra}, {dec}), CIRCLE('ICRS', {centre}, {_number(radius_deg)}))"
    low, high = question.dec_deg - radius_deg, question.dec_deg + radius_deg
    strip = f"{dec} BETWEEN {_number(max(-90.0, low))} AND {_number(min(90.0, high))}"
    if low <= -POLE_DEG or high >= POLE_DEG:
        return strip
    # the meridians that just touch the circle
    reach = math.degrees(
        math.asin(min(1.0, math.sin(math.radians(radius_deg)) / math.cos(math.radians(question.dec_deg))))
    )
    west, east = question.ra_deg - reach, question.ra_deg + reach
    if west >= 0.0 and east < 360.0:
        return f"{strip} AND {ra} BETWEEN {_number(west)} AND {_number(east)}"
    return f"{strip} AND ({ra} >= {_number(west % 360.0)} OR {ra} <= {_number(east % 360.0)})"


def position_columns(question: Question) -> tuple[str, str]:
    """The quoted names of right ascension and declination."""
    ra = next(c.name for c in question.columns if (c.unit, c.low, c.high) == ("deg", 0.0, 360.0))
    dec = next(c.name for c in question.columns if (c.unit, c.low, c.high) == ("deg", -90.0, 90.0))
    return quoted(ra), quoted(dec)


def _number(value: float) -> str:
    """Without an exponent: some services do not read one. 1e-10 deg is far below any error."""
    return f"{value:.10f}".rstrip("0").rstrip(".")
