"""Whole lists, footprints, pointings and checks: writing and reading. Every function runs inside its caller's transaction."""

from __future__ import annotations

import json
import zlib
from collections.abc import Mapping
from dataclasses import dataclass

import numpy as np
from sqlalchemy import Connection, insert, select

from xmatch.errors import StoreError
from xmatch.records import Pointings, Reply, Rows
from xmatch.store import cones
from xmatch.store import schema_lists as tables
from xmatch.store.border import integer, json_text, required, text, utc_text
from xmatch.store.schema_lists import CheckVerdict
from xmatch.store.writing import CHUNK, insert_one


@dataclass(frozen=True)
class ListCopy:
    """One whole list as it was received."""

    list_id: int
    request: str
    asked_at: str
    sha256: str
    client: str
    n_rows: int
    body: bytes


@dataclass(frozen=True)
class Checked:
    """The latest check of a catalog."""

    catalog_id: str
    fingerprint: str
    checked_at: str
    verdict: CheckVerdict
    detail: str
    resolved: Mapping[str, str]


def put_list(connection: Connection, reply: Reply, rows: Rows) -> int:
    """Write one whole list with all its rows."""
    if reply.body is None:
        raise StoreError(f"{reply.question.catalog_id}: the reply of a whole list came without its bytes; ask again")
    ra, dec = np.asarray(rows.ra_deg, dtype=np.float64), np.asarray(rows.dec_deg, dtype=np.float64)
    list_id = insert_one(
        connection,
        tables.list_copy,
        catalog_id=text(reply.question.catalog_id),
        release=text(reply.question.release),
        table_name=text(reply.question.table),
        request=text(reply.request),
        asked_at=utc_text(reply.asked_at, "time of asking"),
        sha256=text(reply.sha256),
        reply_bytes=integer(reply.reply_bytes, "size of the reply"),
        client=text(reply.client),
        n_rows=len(rows),
        body=zlib.compress(reply.body),
    )
    hpx29 = cones.index(ra, dec).tolist()
    values = [
        {
            "list_id": list_id,
            "ordinal": i,
            "source_key": text(key),
            "ra_deg": a,
            "dec_deg": d,
            "hpx29": h,
            "raw": json_text(raw),
        }
        for i, (key, a, d, h, raw) in enumerate(zip(rows.key, ra.tolist(), dec.tolist(), hpx29, rows.raw, strict=True))
    ]
    for begin in range(0, len(values), CHUNK):
        connection.execute(insert(tables.list_row), values[begin : begin + CHUNK])
    return list_id


def latest_list(connection: Connection, catalog_id: str, release: str, table_name: str) -> ListCopy | None:
    """Return the newest copy of a list, None where there is none."""
    table = tables.list_copy
    found = connection.execute(
        select(table)
        .where(table.c.catalog_id == catalog_id, table.c.release == release, table.c.table_name == table_name)
        .order_by(table.c.asked_at.desc(), table.c.list_id.desc())
        .limit(1)
    ).first()
    if found is None:
        return None
    return ListCopy(
        list_id=int(found.list_id),
        request=found.request,
        asked_at=found.asked_at,
        sha256=found.sha256,
        client=found.client,
        n_rows=int(found.n_rows),
        body=zlib.decompress(found.body),
    )


def put_footprint(
    connection: Connection,
    catalog_id: str,
    release: str,
    address: str,
    asked_at: str,
    sha256: str,
    fraction: float,
    body: bytes,
) -> int:
    """Write one footprint."""
    return insert_one(
        connection,
        tables.footprint,
        catalog_id=text(catalog_id),
        release=text(release),
        address=text(address),
        asked_at=utc_text(asked_at, "time of asking"),
        sha256=text(sha256),
        sky_fraction=required(fraction, "sky fraction of a footprint"),
        body=zlib.compress(body),
    )


def footprints(connection: Connection) -> dict[tuple[str, str], bytes]:
    """Return the newest footprint of each catalog and address."""
    table = tables.footprint
    found = connection.execute(select(table).order_by(table.c.footprint_id))
    return {(row.catalog_id, row.address): zlib.decompress(row.body) for row in found}


def put_pointings(connection: Connection, search_id: int, pointings: Pointings, off_axis_arcmin: np.ndarray) -> None:
    """Write the pointings of one search of an observation log."""
    listed = [
        {
            "search_id": search_id,
            "ordinal": i,
            "name": text(pointings.key[i]),
            "instrument": text(pointings.instrument[i]),
            "started": text(pointings.start[i]),
            "ra_deg": float(pointings.ra_deg[i]),
            "dec_deg": float(pointings.dec_deg[i]),
            "exposure_s": float(pointings.exposure_s[i]),
            "field_radius_arcmin": float(pointings.field_radius_arcmin[i]),
            "off_axis_arcmin": float(off_axis_arcmin[i]),
            "holds_target": int(off_axis_arcmin[i] <= pointings.field_radius_arcmin[i]),
        }
        for i in range(len(pointings))
    ]
    if listed:
        connection.execute(insert(tables.pointing), listed)


def pointings_of(connection: Connection, search_id: int) -> Pointings:
    """Return the pointings of one search, in the order of the reply."""
    table = tables.pointing
    rows = connection.execute(select(table).where(table.c.search_id == search_id).order_by(table.c.ordinal)).all()
    return Pointings(
        key=tuple(row.name for row in rows),
        ra_deg=np.array([row.ra_deg for row in rows], dtype=float),
        dec_deg=np.array([row.dec_deg for row in rows], dtype=float),
        exposure_s=np.array([row.exposure_s for row in rows], dtype=float),
        field_radius_arcmin=np.array([row.field_radius_arcmin for row in rows], dtype=float),
        start=tuple(row.started for row in rows),
        instrument=tuple(row.instrument for row in rows),
    )


def put_check(
    connection: Connection,
    catalog_id: str,
    release: str,
    fingerprint: str,
    checked_at: str,
    verdict: CheckVerdict,
    detail: str,
    resolved: Mapping[str, str],
    found: Mapping[str, object],
) -> int:
    """Write one check of a catalog."""
    return insert_one(
        connection,
        tables.catalog_check,
        catalog_id=text(catalog_id),
        release=text(release),
        fingerprint=text(fingerprint),
        checked_at=utc_text(checked_at, "time of the check"),
        verdict=text(verdict),
        detail=text(detail),
        resolved=json_text(dict(resolved)),
        found=json_text(dict(found)),
    )


def latest_checks(connection: Connection) -> dict[str, Checked]:
    """Return the latest check of each catalog that said something of the catalog; an unanswered one takes nothing back."""
    table = tables.catalog_check
    said = select(table).where(table.c.verdict != CheckVerdict.UNANSWERED.value).order_by(table.c.check_id)
    return {
        row.catalog_id: Checked(
            catalog_id=row.catalog_id,
            fingerprint=row.fingerprint,
            checked_at=row.checked_at,
            verdict=CheckVerdict(row.verdict),
            detail=row.detail,
            resolved=json.loads(row.resolved),
        )
        for row in connection.execute(said)
    }
