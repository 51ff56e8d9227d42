"""Reading back: searches, rows as arrays, and tables for work of one's own."""

from __future__ import annotations

import json
from collections.abc import Iterator, Mapping, Sequence
from typing import TYPE_CHECKING, Any

import numpy as np
from sqlalchemy import Connection, Select, func, select

from xmatch.errors import StoreError
from xmatch.records import Band, Floats, Photometry, ReplyStatus, Rows, Search, Target
from xmatch.store import schema
from xmatch.store.border import required

if TYPE_CHECKING:
    import pandas as pd

_PART = 500
"""Rows fetched at a time: fewer than the allocations after which Python looks for garbage."""
_ARRAYS = (
    "ra_deg", "dec_deg", "sigma_major_arcsec", "sigma_minor_arcsec", "angle_deg", "epoch_yr",
    "pm_ra_mas_yr", "pm_dec_mas_yr", "pm_ra_error_mas_yr", "pm_dec_error_mas_yr",
)  # fmt: skip


def _searches(connection: Connection, latest: Select[Any]) -> list[Search]:
    search, catalog = schema.search, schema.catalog
    names = ("search_id", "asked_at", "detail", "request", "ra_deg", "dec_deg", "radius_arcsec", "n_rows",
             "elapsed_s", "http_status", "retry_after_s", "sha256")  # fmt: skip
    found = connection.execute(
        select(
            *(search.c[name] for name in names),
            search.c.status,
            search.c.table_name.label("table"),
            catalog.c.catalog_id,
            catalog.c.release,
        )
        .join(catalog)
        .where(search.c.search_id.in_(latest))
        .order_by(search.c.search_id)
    )
    return [_as_search(line) for line in found]


def _as_search(line: Any) -> Search:
    values = dict(line._mapping)
    return Search(**{**values, "status": ReplyStatus(values["status"])})


def _same_place(connection: Connection, target_id: int) -> Select[Any]:
    """Keys of all targets at the same position: what is known of the object does not change the sky."""
    target = schema.target
    place = connection.execute(
        select(target.c.ra_deg, target.c.dec_deg).where(target.c.target_id == target_id)
    ).one_or_none()
    if place is None:
        raise StoreError(f"the store knows no target {target_id}; put_target comes first")
    return select(target.c.target_id).where(target.c.ra_deg == place.ra_deg, target.c.dec_deg == place.dec_deg)


def find_target(connection: Connection, wanted: Target) -> int | None:
    """Return the key of the latest target at the same position, None where there is none."""
    target = schema.target
    ra_deg = required(wanted.position.ra_deg, "right ascension of the target in degrees")
    dec_deg = required(wanted.position.dec_deg, "declination of the target in degrees")
    key: int | None = connection.execute(
        select(func.max(target.c.target_id)).where(target.c.ra_deg == ra_deg, target.c.dec_deg == dec_deg)
    ).scalar()
    return key


def current_searches(connection: Connection, target_id: int) -> list[Search]:
    """Return the latest whole search per catalog, release, table, centre and radius, oldest first."""
    search, catalog = schema.search, schema.catalog
    latest = (
        select(func.max(search.c.search_id))
        .join(catalog)
        .where(search.c.target_id.in_(_same_place(connection, target_id)), search.c.status == ReplyStatus.WHOLE.value)
        .group_by(
            catalog.c.catalog_id,
            catalog.c.release,
            search.c.table_name,
            search.c.ra_deg,
            search.c.dec_deg,
            search.c.radius_arcsec,
        )
    )
    return _searches(connection, latest)


def last_attempts(connection: Connection, target_id: int) -> list[Search]:
    """Return the latest search of any status per catalog, release and table, oldest first."""
    search, catalog = schema.search, schema.catalog
    latest = (
        select(func.max(search.c.search_id))
        .join(catalog)
        .where(search.c.target_id.in_(_same_place(connection, target_id)))
        .group_by(catalog.c.catalog_id, catalog.c.release, search.c.table_name)
    )
    return _searches(connection, latest)


def rows_of(
    connection: Connection, search_ids: Sequence[int], bands: Sequence[Band], *, raw: bool = False
) -> tuple[Rows, list[str]]:
    """Return the rows of some searches, and remarks on what cannot be used.

    Rows stand in the order of ``search_ids`` and of the replies. A band whose unit, quantity or magnitude system
    is not the one its values were stored in gets no values: they would be read wrongly.
    """
    search = schema.search
    wanted = list(dict.fromkeys(int(key) for key in search_ids))
    promised = {
        line.search_id: line.n_rows
        for line in connection.execute(
            select(search.c.search_id, search.c.n_rows).where(search.c.search_id.in_(wanted))
        )
    }
    missing = [key for key in wanted if key not in promised]
    if missing:
        raise StoreError(f"the store holds no search {', '.join(map(str, missing))}; give search_id of this store")
    keys: list[str] = []
    served: list[Mapping[str, object]] = []
    parts: list[dict[str, Floats]] = []
    photometry = _Bands(bands, sum(promised.values()))
    for search_id in wanted:
        key, arrays, as_served = _rows_of_one(connection, search_id, promised[search_id], raw)
        photometry.read(connection, search_id, len(keys))
        keys += key
        served += as_served
        parts.append(arrays)
    rows = Rows(
        key=tuple(keys),
        flux=photometry.filled,
        raw=tuple(served),
        **{name: np.concatenate([np.empty(0), *(part[name] for part in parts)]) for name in _ARRAYS},
    )
    return rows, photometry.remarks


def _rows_of_one(
    connection: Connection, search_id: int, n: int, raw: bool
) -> tuple[list[str], dict[str, Floats], list[Mapping[str, object]]]:
    row = schema.row
    wanted = [row.c.ordinal, row.c.source_key, *(row.c[name] for name in _ARRAYS)]
    if raw:
        wanted.append(row.c.raw)
    columns = _columns(connection, select(*wanted).where(row.c.search_id == search_id).order_by(row.c.ordinal))
    if columns[0] != list(range(n)):
        raise StoreError(
            f"search {search_id} should have {n} rows but {len(columns[0])} are there; the file is damaged; restore it "
            "from a copy, or ask again"
        )
    arrays = {name: np.array(columns[2 + i], dtype=np.float64) for i, name in enumerate(_ARRAYS)}
    return columns[1], arrays, [json.loads(text or "{}") for text in columns[-1]] if raw else []


class _Bands:
    """The photometry of several searches, filled search by search."""

    def __init__(self, bands: Sequence[Band], n: int) -> None:
        self.bands = bands
        self.filled = {
            item.name: Photometry(np.full(n, np.nan), np.full(n, np.nan), np.zeros(n, bool)) for item in bands
        }
        self.remarks: list[str] = []

    def read(self, connection: Connection, search_id: int, first: int) -> None:
        """Fill in one search, whose rows begin at ``first``."""
        flux = schema.flux
        if not self.bands:
            return
        listed = _columns(
            connection,
            select(flux.c.ordinal, flux.c.band_id, flux.c.value, flux.c.error, flux.c.is_limit).where(
                flux.c.search_id == search_id
            ),
        )
        kinds = (np.int64, np.int64, np.float64, np.float64, np.bool_)
        arrays: list[Any] = [np.array(column, dtype=kind) for column, kind in zip(listed, kinds, strict=True)]
        ordinal, band_id, value, error, is_limit = arrays
        for key, item in self.usable(connection, np.unique(band_id).tolist()):
            mine = band_id == key
            place = first + ordinal[mine]
            self.filled[item.name].value[place] = value[mine]
            self.filled[item.name].error[place] = error[mine]
            self.filled[item.name].is_limit[place] = is_limit[mine]

    def usable(self, connection: Connection, band_ids: Sequence[int]) -> Iterator[tuple[int, Band]]:
        """Yield the bands read that are wanted and still mean the same; remark on the others."""
        band = schema.band
        stored = connection.execute(
            select(band.c.band_id, band.c.catalog_id, band.c.name, band.c.unit, band.c.quantity, band.c.system).where(
                band.c.band_id.in_(band_ids)
            )
        ).all()
        for item in self.bands:
            now = (item.unit, item.quantity.value, None if item.system is None else item.system.value)
            for line in stored:
                if (line.catalog_id, line.name) != (item.catalog_id, item.name):
                    continue
                then = (line.unit, line.quantity, line.system)
                if then == now:
                    yield line.band_id, item
                else:
                    self.remarks.append(
                        f"{item.label}: stored as {_words(then)}, the catalog file now says {_words(now)}; "
                        "the stored values are not used; ask again"
                    )


def _words(facts: tuple[str, str, str | None]) -> str:
    unit, quantity, system = facts
    return f"{quantity} in {unit}" + (f" ({system})" if system else "")


def _columns(connection: Connection, statement: Select[Any]) -> list[list[Any]]:
    """Fetch column by column from the driver, in parts small enough that the garbage collector has no work."""
    result = connection.execute(statement)
    columns: list[list[Any]] = [[] for _ in statement.selected_columns]
    cursor = result.cursor
    assert cursor is not None
    while part := cursor.fetchmany(_PART):
        for column, values in zip(columns, zip(*part, strict=True), strict=True):
            column.extend(values)
    result.close()
    return columns


def frame(connection: Connection, sql: str, params: Any) -> pd.DataFrame:
    """Return the answer to a statement as a table in which 64-bit integers stay exact beside NULL."""
    import pandas as pd

    result = connection.exec_driver_sql(sql, params)
    if not result.returns_rows:
        raise StoreError("the statement returns no rows; the store answers SELECT only")
    names = list(result.keys())
    lines = [tuple(line) for line in result]
    columns = [[line[i] for line in lines] for i in range(len(names))]
    listed = pd.concat([_series(column) for column in columns], axis=1) if columns else pd.DataFrame()
    # set afterwards: a join may bring one name twice
    listed.columns = pd.Index(names)
    return listed


def _series(column: list[Any]) -> pd.Series[Any]:
    import pandas as pd

    kinds = {type(value) for value in column if value is not None}
    if kinds == {int}:
        return pd.Series(pd.array(column, dtype="Int64"))
    if kinds and kinds <= {int, float}:
        return pd.Series(np.array(column, dtype=np.float64))
    if kinds == {str}:
        return pd.Series(pd.array(column, dtype="string"))
    return pd.Series(column, dtype=object)
