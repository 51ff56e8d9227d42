"""Stored rows near a position, by the clustered HEALPix key and an exact separation.

The driver's cursor is used as it is, and the text of a statement never changes: both are what makes a query cheap.
"""

from __future__ import annotations

import json
import math
from collections.abc import Iterable, Mapping, Sequence
from operator import itemgetter
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
_SEARCHES = """
    SELECT search.search_id, catalog.catalog_id, catalog.release, search.table_name
    FROM search JOIN catalog ON catalog.catalog_key = search.catalog_key
    WHERE search.search_id IN ({wanted})
"""
_BY_H = itemgetter(5)
_H = (
    "power(sin(radians(row.dec_deg - {dec}) / 2.0), 2)"
    " + {cos_dec} * cos(radians(row.dec_deg)) * power(sin(radians(row.ra_deg - {ra}) / 2.0), 2)"
)
"""Square of the sine of half the separation (the haversine formula), exact down to milliarcseconds."""


class Dialect(NamedTuple):
    """The statements of one kind of database, with its own marks for parameters."""

    within: str
    searches: str
    pairs: str


def _sqlite() -> Dialect:
    h = _H.format(dec=":dec", ra=":ra", cos_dec=":cos_dec")
    near = _NEAR.format(
        h=h,
        stretches="json_each(:stretches) AS stretch",
        low="json_extract(stretch.value, '$[0]')",
        high="json_extract(stretch.value, '$[1]')",
    )
    return Dialect(
        within=f"SELECT * FROM ({near}) WHERE h <= :h",
        searches=_SEARCHES.format(wanted="SELECT value FROM json_each(:wanted)"),
        pairs="SELECT row.search_id, row.ordinal, " + h
        + " AS h FROM json_each(:stretches) AS stretch CROSS JOIN row WHERE row.hpx29 BETWEEN "
        "json_extract(stretch.value, '$[0]') AND json_extract(stretch.value, '$[1]') AND " + h + " <= :h",
    )  # fmt: skip


def _postgresql() -> Dialect:
    h = _H.format(dec="%(dec)s::float8", ra="%(ra)s::float8", cos_dec="%(cos_dec)s::float8")
    stretches = (
        "(SELECT (part ->> 0)::bigint AS low, (part ->> 1)::bigint AS high"
        " FROM json_array_elements(%(stretches)s::json) AS part) AS stretch"
    )
    near = _NEAR.format(h=h, stretches=stretches, low="stretch.low", high="stretch.high")
    return Dialect(
        # materialised, because this planner would rather work out the separation twice
        within=f"WITH near AS MATERIALIZED ({near}) SELECT * FROM near WHERE h <= %(h)s",
        searches=_SEARCHES.format(wanted="SELECT value::bigint FROM json_array_elements_text(%(wanted)s::json)"),
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


Origins = dict[int, tuple[str, str, str]]
"""Catalog, release and table of each search: a search never changes, so that they are looked up once."""


def near(
    cursor: Any,
    dialect: Dialect,
    origins: Origins,
    ra_deg: float,
    dec_deg: float,
    radius_arcsec: float | Mapping[str, float],
    *,
    history: bool = False,
) -> list[Near]:
    """Return the rows within a radius, nearest first; see :meth:`xmatch.store.store.Store.near`."""
    radii = radius_arcsec if isinstance(radius_arcsec, Mapping) else None
    if radii is not None:
        for radius in radii.values():
            cone.check_cone(ra_deg, dec_deg, radius)
        if not radii:
            return []
    widest = max(radii.values()) if radii is not None else float(radius_arcsec)  # type: ignore[arg-type]
    stretches = cone.ranges(ra_deg, dec_deg, widest)
    values = {
        "ra": ra_deg, "dec": dec_deg, "cos_dec": math.cos(math.radians(dec_deg)), "h": _h(widest),
        "stretches": _as_json(stretches),
    }  # fmt: skip
    found = cursor.execute(dialect.within, values).fetchall()
    unknown = {line[0] for line in found} - origins.keys()
    if unknown:
        cursor.execute(dialect.searches, {"wanted": json.dumps(sorted(unknown))})
        origins.update((search_id, (*origin,)) for search_id, *origin in cursor.fetchall())
    if radii is not None:
        allowed = {name: _h(radius) for name, radius in radii.items()}
        found = [line for line in found if line[5] <= allowed.get(origins[line[0]][0], -1.0)]
    if not history:
        found = _latest(found, origins)
    found.sort(key=_BY_H)
    return [Near._make((*origins[line[0]], *line[:5], _arcsec(line[5]))) for line in found]


def _as_json(stretches: Sequence[tuple[int, int]]) -> str:
    """Pairs of whole numbers; a tuple's own text needs only other brackets."""
    return str(stretches).replace("(", "[").replace(")", "]")


def _latest(found: Iterable[Any], origins: Origins) -> list[Any]:
    """Of several listings of one source of one table, that of the latest search."""
    kept: dict[tuple[Any, ...], Any] = {}
    for line in found:
        key = (origins[line[0]], line[2])
        if key not in kept or kept[key][0] < line[0]:
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
