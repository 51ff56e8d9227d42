"""Whether a store holds what it promises: whole searches, sound references, contents that match their hashes."""

from __future__ import annotations

import hashlib
import json
from collections.abc import Iterator

import numpy as np
from sqlalchemy import Connection, func, select

from xmatch.store import cones, schema, schema_lists
from xmatch.store.cone import PAD_ARCSEC
from xmatch.store.writing import digest

_PART = 50_000
_MOST = 5
"""Faults of one kind that are listed one by one."""


def faults(connection: Connection) -> list[str]:
    """Return what is wrong with the store, in words; an empty list when nothing is."""
    found: list[str] = []
    for check in (_file, _searches, _positions, _hashes):
        listed = list(check(connection))
        found += listed[:_MOST]
        if len(listed) > _MOST:
            found.append(f"and {len(listed) - _MOST} more of this kind")
    return found


def _file(connection: Connection) -> Iterator[str]:
    if connection.dialect.name != "sqlite":
        return
    for (line,) in connection.exec_driver_sql("PRAGMA integrity_check"):
        if line != "ok":
            yield f"SQLite finds the file damaged: {line}"
    for table, rowid, parent, _ in connection.exec_driver_sql("PRAGMA foreign_key_check"):
        yield f"{table} (line {rowid}) refers to a {parent} that is not there"


def _searches(connection: Connection) -> Iterator[str]:
    search, row = schema.search, schema.row
    counted = select(row.c.search_id, func.count().label("n")).group_by(row.c.search_id).subquery()
    uneven = (
        select(search.c.search_id, search.c.n_rows, func.coalesce(counted.c.n, 0))
        .outerjoin(counted, counted.c.search_id == search.c.search_id)
        .where(search.c.n_rows != func.coalesce(counted.c.n, 0))
        .order_by(search.c.search_id)
    )
    for key, promised, there in connection.execute(uneven):
        yield f"search {key} should have {promised} rows but {there} are there"
    copies, listed = schema_lists.list_copy, schema_lists.list_row
    n = select(func.count()).where(listed.c.list_id == copies.c.list_id).scalar_subquery()
    for key, promised, there in connection.execute(select(copies.c.list_id, copies.c.n_rows, n)):
        if promised != there:
            yield f"list {key} should have {promised} rows but {there} are there"


def _positions(connection: Connection) -> Iterator[str]:
    row = schema.row
    result = connection.execute(
        select(row.c.hpx29, row.c.ra_deg, row.c.dec_deg, row.c.search_id, row.c.ordinal),
        execution_options={"stream_results": True},
    )
    while part := result.fetchmany(_PART):
        hpx, ra, dec, search, ordinal = (np.array(column) for column in zip(*part, strict=True))
        for place in np.flatnonzero(cones.index(ra, dec) != hpx).tolist():
            # rounding may put a row into the next cell, which every cover allows for
            _, low, high = cones.covers(ra[place : place + 1], dec[place : place + 1], np.array([PAD_ARCSEC]))
            if not ((low <= hpx[place]) & (hpx[place] <= high)).any():
                yield f"row {ordinal[place]} of search {search[place]} is indexed at another place than it lies"


def _hashes(connection: Connection) -> Iterator[str]:
    for table, name in ((schema.target, "target_id"), (schema.band, "band_id")):
        for key, wanted, content in connection.execute(select(table.c[name], table.c.digest, table.c.content)):
            if digest(content) != wanted:
                yield f"{table.name} {key} does not have the content that its digest tells"
    assumptions = schema.assumptions
    for wanted, content in connection.execute(select(assumptions.c.assumptions_digest, assumptions.c.content)):
        ordered = json.dumps(json.loads(content), sort_keys=True, separators=(",", ":"))
        if not hashlib.sha256(ordered.encode()).hexdigest().startswith(wanted):
            yield f"assumptions {wanted} do not have the content that their digest tells"
