"""Stored rows near a position, by the clustered HEALPix key and an exact separation.

The driver's cursor is used as it is, and the text of a statement never changes: both are what makes a query cheap.
"""

from __future__ import annotations

import json
import math
from collections.abc import Iterable, Mapping, Sequence
from typing import Any, NamedTuple

import numpy as np

from xmatch.records import Floats
from xmatch.store import cone, cones

_NEAR = """
    SELECT row.search_id, row.ordinal, row.source_key, row.ra_deg, row.dec_deg,
           {h} AS h
    FROM {stretches}
    CROSS JOIN row
    WHERE row.hpx29 BETWEEN {low} AND {high}
"""
_ROWS = """
    SELECT catalog.catalog_id, catalog.release, search.table_name, near.search_id, near.ordinal, near.source_key,
           near.ra_deg, near.dec_deg, near.h
    FROM {near} AS near
    JOIN search ON search.search_id = near.search_id
    JOIN catalog ON catalog.catalog_key = search.catalog_key
"""
_H = (
    "power(sin(radians(row.dec_deg - {dec}) / 2.0), 2)"
    " + {cos_dec} * cos(radians(row.dec_deg)) * power(sin(radians(row.ra_deg - {ra}) / 2.0), 2)"
)
"""Square of the sine of half the separation (the haversine formula), exact down to milliarcseconds."""


class Dialect(NamedTuple):
    """The statements of one kind of database, with its own marks for parameters."""

    within: str
    within_each: str
    keys: str
    pairs: str


def _sqlite() -> Dialect:
    near = _NEAR.format(
        h=_H.format(dec=":dec", ra=":ra", cos_dec=":cos_dec"),
        stretches="json_each(:stretches) AS stretch",
        low="json_extract(stretch.value, '$[0]')",
        high="json_extract(stretch.value, '$[1]')",
    )
    rows = _ROWS.format(near=f"({near})")
    wanted = "WITH wanted AS MATERIALIZED (SELECT json_extract(value, '$[0]') AS catalog_key, json_extract(value, '$[1]') AS h FROM json_each(:wanted)) "
    return Dialect(
        within=rows + "WHERE near.h <= :h",
        within_each=wanted + rows + "JOIN wanted ON wanted.catalog_key = catalog.catalog_key WHERE near.h <= wanted.h",
        keys="SELECT catalog_id, catalog_key FROM catalog",
        pairs="SELECT row.search_id, row.ordinal, " + _H.format(dec=":dec", ra=":ra", cos_dec=":cos_dec")
        + " AS h FROM json_each(:stretches) AS stretch CROSS JOIN row WHERE row.hpx29 BETWEEN "
        "json_extract(stretch.value, '$[0]') AND json_extract(stretch.value, '$[1]') AND "
        + _H.format(dec=":dec", ra=":ra", cos_dec=":cos_dec") + " <= :h",
    )  # fmt: skip


def _postgresql() -> Dialect:
    h = _H.format(dec="%(dec)s::float8", ra="%(ra)s::float8", cos_dec="%(cos_dec)s::float8")
    stretches = (
        "(SELECT (part ->> 0)::bigint AS low, (part ->> 1)::bigint AS high"
        " FROM json_array_elements(%(stretches)s::json) AS part) AS stretch"
    )
    near = _NEAR.format(h=h, stretches=stretches, low="stretch.low", high="stretch.high")
    # materialised, because this planner would rather come in by search and read every row of it
    near = f"near AS MATERIALIZED ({near})"
    rows = _ROWS.format(near="near")
    wanted = (
        "wanted AS MATERIALIZED (SELECT (part ->> 0)::bigint AS catalog_key, (part ->> 1)::float8 AS h"
        " FROM json_array_elements(%(wanted)s::json) AS part)"
    )
    return Dialect(
        within=f"WITH {near} {rows} WHERE near.h <= %(h)s",
        within_each=f"WITH {near}, {wanted} {rows} JOIN wanted ON wanted.catalog_key = catalog.catalog_key "
        "WHERE near.h <= wanted.h",
        keys="SELECT catalog_id, catalog_key FROM catalog",
        pairs=f"SELECT row.search_id, row.ordinal, {h} AS h FROM {stretches} CROSS JOIN row "
        f"WHERE row.hpx29 BETWEEN stretch.low AND stretch.high AND {h} <= %(h)s",
    )


DIALECTS = {"sqlite": _sqlite(), "postgresql": _postgresql()}


class Near(NamedTuple):
    """One stored row near a position."""

    catalog_id: str
    release: str
    table: str
    search_id: int
    ordinal: int
    source_key: str
    ra_deg: float
    dec_deg: float
    separation_arcsec: float


def _h(radius_arcsec: float) -> float:
    return math.sin(math.radians(radius_arcsec / 7200.0)) ** 2


def _arcsec(h: float) -> float:
    return math.degrees(2.0 * math.asin(min(1.0, math.sqrt(h)))) * 3600.0


def near(
    cursor: Any,
    dialect: Dialect,
    ra_deg: float,
    dec_deg: float,
    radius_arcsec: float | Mapping[str, float],
    *,
    history: bool = False,
) -> list[Near]:
    """Return the rows within a radius, nearest first; see :meth:`xmatch.store.store.Store.near`."""
    centre = {"ra": ra_deg, "dec": dec_deg, "cos_dec": math.cos(math.radians(dec_deg))}
    if isinstance(radius_arcsec, Mapping):
        for radius in radius_arcsec.values():
            cone.check_cone(ra_deg, dec_deg, radius)
        cursor.execute(dialect.keys)
        wanted = [(key, _h(radius_arcsec[name])) for name, key in cursor.fetchall() if name in radius_arcsec]
        if not wanted:
            return []
        stretches = cone.ranges(ra_deg, dec_deg, max(radius_arcsec.values()))
        more = {"stretches": json.dumps(stretches), "wanted": json.dumps(wanted)}
        cursor.execute(dialect.within_each, centre | more)
    else:
        stretches = cone.ranges(ra_deg, dec_deg, radius_arcsec)
        cursor.execute(dialect.within, centre | {"stretches": json.dumps(stretches), "h": _h(radius_arcsec)})
    found = cursor.fetchall()
    if not history:
        found = _latest(found)
    found.sort(key=lambda line: line[8])
    return [Near._make((*line[:8], _arcsec(line[8]))) for line in found]


def _latest(found: Iterable[Any]) -> list[Any]:
    """Of several listings of one source of one table, that of the latest search."""
    kept: dict[tuple[Any, ...], Any] = {}
    for line in found:
        key = (line[0], line[1], line[2], line[5])
        if key not in kept or kept[key][3] < line[3]:
            kept[key] = line
    return list(kept.values())


class Pairs(NamedTuple):
    """Which stored rows lie near which of many positions: arrays of one length."""

    position: np.ndarray[Any, np.dtype[np.int64]]
    search_id: np.ndarray[Any, np.dtype[np.int64]]
    ordinal: np.ndarray[Any, np.dtype[np.int64]]
    separation_arcsec: Floats


def near_many(cursor: Any, dialect: Dialect, ra_deg: Floats, dec_deg: Floats, radius_arcsec: Floats) -> Pairs:
    """Return all pairs of a position and a stored row; see :meth:`xmatch.store.store.Store.near_many`."""
    ra, dec = np.asarray(ra_deg, dtype=np.float64), np.asarray(dec_deg, dtype=np.float64)
    radius = np.broadcast_to(np.asarray(radius_arcsec, dtype=np.float64), ra.shape)
    listed = cones.as_lists(*cones.covers(ra, dec, radius), len(ra))
    # in the order of the sky, so that a page is read once
    order = np.argsort([stretches[0][0] for stretches in listed], kind="stable").tolist()
    columns = zip(ra.tolist(), dec.tolist(), np.cos(np.radians(dec)).tolist(),
                  (np.sin(np.radians(radius / 7200.0)) ** 2).tolist(), listed, strict=True)  # fmt: skip
    cases: Sequence[Any] = list(columns)
    found: list[Any] = []
    counts = []
    text = dialect.pairs
    for place in order:
        a, d, flat, h, stretches = cases[place]
        values = {"ra": a, "dec": d, "cos_dec": flat, "h": h, "stretches": str(stretches)}
        lines = cursor.execute(text, values).fetchall()
        found += lines
        counts.append(len(lines))
    position = np.repeat(np.array(order, dtype=np.int64), counts)
    search_id, ordinal, squared = zip(*found, strict=True) if found else ((), (), ())
    away = np.degrees(2.0 * np.arcsin(np.minimum(1.0, np.sqrt(np.array(squared, dtype=np.float64))))) * 3600.0
    by_position = np.argsort(position, kind="stable")
    searches, ordinals = np.array(search_id, dtype=np.int64), np.array(ordinal, dtype=np.int64)
    return Pairs(position[by_position], searches[by_position], ordinals[by_position], away[by_position])
