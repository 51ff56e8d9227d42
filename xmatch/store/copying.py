"""Moving a whole store from one kind of database to another, with proof that nothing changed on the way."""

from __future__ import annotations

import hashlib
from collections.abc import Iterator, Sequence
from pathlib import Path
from typing import Any, NamedTuple

from sqlalchemy import Connection, Table, func, insert, select, text

from xmatch.errors import StoreError
from xmatch.store.schema import metadata, schema_revision
from xmatch.store.store import Store, open_store

_PART = 5_000
_MODULUS = 1 << 128


class Copied(NamedTuple):
    """One table as it was copied: the same on both sides."""

    table: str
    rows: int
    checksum: str


class _Sum:
    """A checksum that does not depend on the order of the rows."""

    def __init__(self) -> None:
        self.rows = 0
        self.total = 0

    def add(self, row: Sequence[Any]) -> None:
        """Add one row: exact text of each value, with its type."""
        told = "\x1f".join(f"{type(value).__name__}:{value!r}" for value in row)
        self.total = (self.total + int.from_bytes(hashlib.sha256(told.encode()).digest()[:16], "big")) % _MODULUS
        self.rows += 1

    @property
    def text(self) -> str:
        """The sum in hexadecimal."""
        return f"{self.total:032x}"


def tables() -> list[Table]:
    """All tables that hold contents, those that others refer to first."""
    return [table for table in metadata.sorted_tables if table is not schema_revision]


def copy_store(where: str | Path | None, to: str | Path) -> list[Copied]:
    """Copy a store into a new one of either kind.

    Parameters
    ----------
    where : str or Path, optional
        The store, as for :func:`xmatch.store.store.open_store`.
    to : str or Path
        Path or URL of the new one.

    Returns
    -------
    list of Copied
        Each table with its number of rows and a checksum over all of them, read from both sides and found equal.

    Raises
    ------
    StoreError
        The new one is not empty, or differs after copying; then it holds nothing.
    """
    with open_store(where, read_only=True) as source, open_store(to) as target:
        if source.url == target.url:
            raise StoreError(f"{source.name} cannot be copied onto itself; give another place")
        with source.reading() as old, target.writing() as new:
            if old.dialect.name == "postgresql":
                old.exec_driver_sql("SET TRANSACTION ISOLATION LEVEL REPEATABLE READ")
            return _copy(old, new, target)


def _copy(old: Connection, new: Connection, target: Store) -> list[Copied]:
    for table in tables():
        if new.execute(select(func.count()).select_from(table)).scalar_one():
            raise StoreError(f"{target.name} is not empty: it has rows in {table.name}; give a new place")
    done = []
    for table in tables():
        sent = _Sum()
        statement = insert(table)
        for part in _parts(old, table):
            for row in part:
                sent.add(row)
            names = [column.name for column in table.columns]
            new.execute(statement, [dict(zip(names, row, strict=True)) for row in part])
        arrived = _Sum()
        for part in _parts(new, table):
            for row in part:
                arrived.add(row)
        if (sent.rows, sent.total) != (arrived.rows, arrived.total):
            raise StoreError(
                f"{table.name} differs after copying: {sent.rows} rows ({sent.text}) left and {arrived.rows} "
                f"({arrived.text}) arrived; nothing was kept; please report this"
            )
        done.append(Copied(table.name, sent.rows, sent.text))
        if new.dialect.name == "postgresql":
            _continue_keys(new, table)
    return done


def _parts(connection: Connection, table: Table) -> Iterator[list[tuple[Any, ...]]]:
    # in the order of the key, so that a clustered table is written as it lies
    statement = select(table).order_by(*table.primary_key.columns)
    result = connection.execute(statement, execution_options={"stream_results": True})
    while part := result.fetchmany(_PART):
        yield [tuple(row) for row in part]


def _continue_keys(connection: Connection, table: Table) -> None:
    """Let new keys begin after those that were copied."""
    column = table.autoincrement_column
    if column is not None:
        connection.execute(
            text(
                f"SELECT setval(pg_get_serial_sequence(:name, :column), coalesce(max({column.name}), 0) + 1, false) "
                f'FROM "{table.name}"'
            ),
            {"name": f'"{table.name}"', "column": column.name},
        )
