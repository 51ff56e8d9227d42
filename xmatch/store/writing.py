"""Writing searches: targets, catalogs, replies and their rows. Every function runs inside its caller's transaction."""

from __future__ import annotations

import hashlib
from collections.abc import Mapping, Sequence
from typing import Any

import numpy as np
from sqlalchemy import Connection, Table, func, insert, select

from xmatch.errors import RangeError, StoreError
from xmatch.records import Band, Reply, ReplyStatus, Rows, Search, Target
from xmatch.store import cones, schema
from xmatch.store.border import computed, integer, json_text, measured, required, text, utc_text

CHUNK = 20_000
"""Rows bound to one statement at a time, so that a large reply does not double in memory."""


def digest(content: str) -> str:
    """Return the SHA-256 of a text."""
    return hashlib.sha256(content.encode()).hexdigest()


def put_target(connection: Connection, target: Target, now: str) -> int:
    """Return the key of a target; one with any difference is a new version under its name."""
    table = schema.target
    position, distance = target.position, target.distance
    content = json_text(target)
    known = connection.execute(select(table.c.target_id).where(table.c.digest == digest(content))).scalar()
    if known is not None:
        return int(known)
    name = text(target.name)
    before = connection.execute(select(func.max(table.c.version)).where(table.c.name == name)).scalar()
    return insert_one(
        connection,
        table,
        name=name,
        version=(before or 0) + 1,
        digest=digest(content),
        ra_deg=required(position.ra_deg, "right ascension of the target in degrees"),
        dec_deg=required(position.dec_deg, "declination of the target in degrees"),
        sigma_major_arcsec=required(position.sigma_major_arcsec, "position error in arcsec"),
        sigma_minor_arcsec=required(position.sigma_minor_arcsec, "position error in arcsec"),
        angle_deg=required(position.angle_deg, "position angle in degrees"),
        epoch_yr=computed(position.epoch_yr, "epoch of the target in years"),
        distance_low_pc=None if distance is None else required(distance.low_pc, "distance in pc"),
        distance_high_pc=None if distance is None else required(distance.high_pc, "distance in pc"),
        dm_pc_cm3=computed(target.dm_pc_cm3, "dispersion measure"),
        period_s=None if target.spin is None else required(target.spin.period_s, "period in s"),
        content=content,
        first_seen_at=now,
    )


def put_band(connection: Connection, band: Band) -> int:
    """Return the key of a band; one with any difference is a new row."""
    table = schema.band
    content = json_text(band)
    known = connection.execute(select(table.c.band_id).where(table.c.digest == digest(content))).scalar()
    if known is not None:
        return int(known)
    return insert_one(
        connection,
        table,
        digest=digest(content),
        catalog_id=text(band.catalog_id),
        name=text(band.name),
        waveband=text(band.waveband),
        quantity=text(band.quantity),
        unit=text(band.unit),
        system=None if band.system is None else text(band.system),
        nu_low_hz=required(band.nu_low_hz, f"lower edge of {band.label} in Hz"),
        nu_high_hz=required(band.nu_high_hz, f"upper edge of {band.label} in Hz"),
        nu_hz=required(band.nu_hz, f"frequency of {band.label} in Hz"),
        zero_point_jy=computed(band.zero_point_jy, f"zero point of {band.label} in Jy"),
        depth=computed(band.depth, f"depth of {band.label}"),
        depth_source=text(band.depth_source),
        content=content,
    )


def put_catalog(
    connection: Connection,
    catalog_id: str,
    release: str,
    title: str,
    waveband: str,
    fingerprint: str,
    bands: Sequence[Band],
    now: str,
) -> int:
    """Return the key of one state of a catalog file."""
    table = schema.catalog
    known = connection.execute(
        select(table.c.catalog_key).where(
            table.c.catalog_id == catalog_id, table.c.release == release, table.c.fingerprint == fingerprint
        )
    ).scalar()
    if known is not None:
        return int(known)
    key = insert_one(
        connection,
        table,
        catalog_id=text(catalog_id),
        release=text(release),
        title=text(title),
        waveband=text(waveband),
        fingerprint=text(fingerprint),
        first_seen_at=now,
    )
    described = [{"catalog_key": key, "band_id": put_band(connection, band)} for band in bands]
    if described:
        connection.execute(insert(schema.catalog_band), described)
    return key


def catalog_key_of(connection: Connection, catalog_id: str, release: str) -> int:
    """Return the key of the state of a catalog file that was added last."""
    table = schema.catalog
    key = connection.execute(
        select(func.max(table.c.catalog_key)).where(table.c.catalog_id == catalog_id, table.c.release == release)
    ).scalar()
    if key is None:
        raise StoreError(f"the store knows no catalog {catalog_id!r} release {release!r}; put_catalog comes first")
    return int(key)


def put_search(
    connection: Connection, run_id: int, target_id: int, catalog_key: int, reply: Reply, rows: Rows | None
) -> Search:
    """Write one search with all its rows; the caller's transaction makes it whole or nothing."""
    if reply.status is ReplyStatus.WHOLE and rows is None:
        raise StoreError(
            f"{reply.question.catalog_id}: a whole reply came without its rows, which would read as an empty sky; "
            "normalise it first"
        )
    if rows is not None and reply.status not in (ReplyStatus.WHOLE, ReplyStatus.TRUNCATED):
        raise StoreError(
            f"{reply.question.catalog_id}: rows came with a reply that is {reply.status}; store it without"
        )
    question = reply.question
    n_rows = 0 if rows is None else len(rows)
    values: dict[str, Any] = {
        "asked_at": utc_text(reply.asked_at, "time of asking"),
        "detail": text(reply.detail),
        "request": text(reply.request),
        "ra_deg": required(question.ra_deg, "right ascension of the cone in degrees"),
        "dec_deg": required(question.dec_deg, "declination of the cone in degrees"),
        "radius_arcsec": required(question.radius_arcsec, "radius of the cone in arcsec"),
        "n_rows": n_rows,
        "elapsed_s": required(reply.elapsed_s, "elapsed time in s"),
        "http_status": None if reply.http_status is None else integer(reply.http_status, "HTTP status"),
        "retry_after_s": computed(reply.retry_after_s, "time to wait in s"),
        "sha256": text(reply.sha256),
    }
    search_id = insert_one(
        connection,
        schema.search,
        run_id=integer(run_id, "run_id"),
        target_id=integer(target_id, "target_id"),
        catalog_key=catalog_key,
        table_name=text(question.table),
        protocol=text(question.protocol),
        address=text(question.address),
        remote_table=text(question.remote_table),
        status=text(reply.status),
        row_limit=integer(question.row_limit, "row limit"),
        n_rows_served=integer(reply.n_rows, "number of rows"),
        reply_bytes=integer(reply.reply_bytes, "size of the reply"),
        tries=integer(reply.tries, "number of tries"),
        client=text(reply.client),
        **values,
    )
    if rows is not None and n_rows:
        _put_rows(connection, search_id, catalog_key, question.catalog_id, rows)
    return Search(
        search_id=search_id,
        catalog_id=question.catalog_id,
        release=question.release,
        table=question.table,
        status=reply.status,
        **values,
    )


def _put_rows(connection: Connection, search_id: int, catalog_key: int, catalog_id: str, rows: Rows) -> None:
    n = len(rows)
    ra, dec = np.asarray(rows.ra_deg, dtype=np.float64), np.asarray(rows.dec_deg, dtype=np.float64)
    _check_shapes(catalog_id, rows, n)
    wrong = ~(np.isfinite(ra) & np.isfinite(dec) & (ra >= 0.0) & (ra <= 360.0) & (np.abs(dec) <= 90.0))
    if wrong.any():
        first = int(np.argmax(wrong))
        raise RangeError(
            f"{catalog_id}: row {text(rows.key[first])!r} lies at RA {ra[first]}, Dec {dec[first]} deg; the store "
            "takes 0 to 360 and -90 to 90; leave rows without a position out"
        )
    hpx29 = cones.index(ra, dec)
    # in the order of the table: neighbours on the sky go to the same page
    order = np.argsort(hpx29, kind="stable")
    ordered = order.tolist()
    columns: dict[str, list[Any]] = {
        "hpx29": hpx29[order].tolist(),
        "search_id": [search_id] * n,
        "ordinal": ordered,
        "source_key": [text(rows.key[i]) for i in ordered],
        "ra_deg": ra[order].tolist(),
        "dec_deg": dec[order].tolist(),
        **{name: measured(np.ma.asarray(getattr(rows, name))[order]) for name in _MEASURED},
        "raw": [json_text(rows.raw[i]) for i in ordered] if rows.raw else [None] * n,
    }
    insert_columns(connection, schema.row, columns)
    band_ids = _band_ids(connection, catalog_key)
    for name, photometry in rows.flux.items():
        if name not in band_ids:
            raise StoreError(f"{catalog_id}: the store knows no band {name!r} of it; put_catalog comes first")
        value, error = measured(photometry.value), measured(photometry.error)
        limit = np.asarray(photometry.is_limit, dtype=bool).tolist()
        given = [i for i in range(n) if value[i] is not None or error[i] is not None or limit[i]]
        insert_columns(
            connection,
            schema.flux,
            {
                "search_id": [search_id] * len(given),
                "ordinal": given,
                "band_id": [band_ids[name]] * len(given),
                "value": [value[i] for i in given],
                "error": [error[i] for i in given],
                "is_limit": [int(limit[i]) for i in given],
            },
        )


_MEASURED = (
    "sigma_major_arcsec", "sigma_minor_arcsec", "angle_deg", "epoch_yr",
    "pm_ra_mas_yr", "pm_dec_mas_yr", "pm_ra_error_mas_yr", "pm_dec_error_mas_yr",
)  # fmt: skip


def _check_shapes(catalog_id: str, rows: Rows, n: int) -> None:
    sizes = {name: len(getattr(rows, name)) for name in ("ra_deg", "dec_deg", *_MEASURED)}
    sizes |= {"raw": len(rows.raw) or n}
    for name, photometry in rows.flux.items():
        sizes |= {f"{name} {part}": len(getattr(photometry, part)) for part in ("value", "error", "is_limit")}
    wrong = {name: size for name, size in sizes.items() if size != n}
    if wrong:
        raise RangeError(f"{catalog_id}: {n} rows, but {wrong}; every array must have one value a row")


def _band_ids(connection: Connection, catalog_key: int) -> dict[str, int]:
    band, link = schema.band, schema.catalog_band
    found = connection.execute(select(band.c.name, band.c.band_id).join(link).where(link.c.catalog_key == catalog_key))
    return {name: band_id for name, band_id in found}


def insert_one(connection: Connection, table: Table, **values: Any) -> int:
    """Insert one line and return its key."""
    result = connection.execute(insert(table).values(values))
    key = result.inserted_primary_key
    assert key is not None
    return int(key[0])


def insert_many(connection: Connection, table: Table, listed: Sequence[dict[str, Any]]) -> None:
    """Insert lines, or nothing when there are none."""
    statement = insert(table)
    for start in range(0, len(listed), CHUNK):
        connection.execute(statement, listed[start : start + CHUNK])


def insert_columns(connection: Connection, table: Table, columns: Mapping[str, Sequence[Any]]) -> None:
    """Insert lines that are given column by column, with the driver's own statement.

    A dictionary for each line would take longer than the writing.
    """
    mark = "?" if connection.dialect.name == "sqlite" else "%s"
    names = ", ".join(f'"{name}"' for name in columns)
    statement = f'INSERT INTO "{table.name}" ({names}) VALUES ({", ".join([mark] * len(columns))})'
    n = len(next(iter(columns.values())))
    for start in range(0, n, CHUNK):
        part = (values[start : start + CHUNK] for values in columns.values())
        connection.exec_driver_sql(statement, list(zip(*part, strict=True)))


def put_assumptions(connection: Connection, name: str, content: Mapping[str, object]) -> None:
    """Write a set of assumptions once."""
    table = schema.assumptions
    if connection.execute(select(table.c.content).where(table.c.assumptions_digest == name)).scalar() is None:
        connection.execute(insert(table), [{"assumptions_digest": text(name), "content": json_text(content)}])
