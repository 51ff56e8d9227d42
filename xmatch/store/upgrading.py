"""From an older schema to this one: a copy first, then every migration in one transaction, or nothing.

Alembic is imported only here, so that opening a store of the current version does not pay for it.
"""

from __future__ import annotations

import os
import sqlite3
from contextlib import closing
from datetime import UTC, datetime
from pathlib import Path

from sqlalchemy import Connection, Engine

from xmatch.errors import StoreError
from xmatch.resources import db_path
from xmatch.store.making import drop_views, make_views, stamp
from xmatch.store.schema import REVISION, SCHEMA_VERSION, schema_revision

PAGES = 4096
"""Pages copied at a time, so that an interrupt is heard."""


def backup_name(path: Path, version: int, now: datetime | None = None) -> Path:
    """Return the path of the copy that is made before an upgrade; one that does not exist yet."""
    moment = (now or datetime.now(UTC)).strftime("%Y%m%dT%H%M%SZ")
    for number in range(1000):
        extra = f"-{number}" if number else ""
        found = path.with_name(f"{path.name}.version-{version}-{moment}{extra}.backup")
        if not found.exists():
            return found
    raise StoreError(f"{path.parent} holds a thousand copies of {path.name} of this second; clear some away")


def copy_file(path: Path, to: Path) -> Path:
    """Copy a store as it is at one moment, also while others write; the copy appears whole or not at all.

    Raises
    ------
    StoreError
        When ``to`` exists, or cannot be written.
    """
    if to.exists():
        raise StoreError(f"{to} exists already; a copy never replaces a file; give another name")
    part = to.with_name(f"{to.name}.part-{os.getpid()}")
    try:
        with (
            closing(sqlite3.connect(f"{path.absolute().as_uri()}?mode=ro", uri=True)) as source,
            closing(sqlite3.connect(part)) as target,
        ):
            source.backup(target, pages=PAGES)
            # one file: the copy carries no write-ahead log of its own
            target.execute("PRAGMA journal_mode = delete").fetchone()
        os.link(part, to)
    except FileExistsError:
        raise StoreError(f"{to} exists already; a copy never replaces a file; give another name") from None
    except (sqlite3.Error, OSError) as fault:
        raise StoreError(f"{path} could not be copied to {to} ({fault}); free some space or give another place") from (
            fault
        )
    finally:
        for left in (part, Path(f"{part}-journal"), Path(f"{part}-wal"), Path(f"{part}-shm")):
            left.unlink(missing_ok=True)
    return to


def upgrade_file(engine: Engine, path: Path, found: int) -> Path | None:
    """Bring an SQLite store to this schema; return the copy made before, None when another process was faster.

    Parameters
    ----------
    engine : Engine
        Of the store, its connections with ``isolation_level = None``.
    path : Path
        The file.
    found : int
        Its schema version as seen.
    """
    with engine.connect() as connection:
        driver = connection.connection.driver_connection
        assert isinstance(driver, sqlite3.Connection)
        # a table that is rebuilt is dropped for a moment, which must not touch what refers to it;
        # this cannot be switched inside a transaction
        driver.execute("PRAGMA foreign_keys = OFF")
        try:
            return _upgrade_file(connection, path, found)
        finally:
            connection.rollback()
            driver.execute("PRAGMA foreign_keys = ON")


def _upgrade_file(connection: Connection, path: Path, found: int) -> Path | None:
    # the first statement begins the transaction and takes the write lock, as the caller's option says
    version = connection.exec_driver_sql("PRAGMA user_version").scalar_one()
    if version == SCHEMA_VERSION:
        return None
    copy = copy_file(path, backup_name(path, found))
    try:
        upgrade(connection)
        broken = connection.exec_driver_sql("PRAGMA foreign_key_check").all()
        if broken:
            raise StoreError(
                f"{path}: after the upgrade {len(broken)} lines refer to nothing, the first in {broken[0][0]}"
            )
        connection.commit()
    except BaseException as fault:
        connection.rollback()
        if isinstance(fault, StoreError):
            raise StoreError(f"{fault}; the store was left as it was, and {copy} is a copy of it") from fault
        raise
    return copy


def upgrade(connection: Connection) -> None:
    """Run the migrations that are missing, inside the transaction of the connection."""
    from alembic import command
    from alembic.config import Config

    schema_revision.create(connection, checkfirst=True)
    if connection.execute(schema_revision.select()).first() is None:
        # until version 3 a file knew its version only by a number of SQLite's own
        stamp(connection, f"{connection.exec_driver_sql('PRAGMA user_version').scalar_one():04d}")
    drop_views(connection)
    config = Config()
    config.set_main_option("script_location", str(db_path("migrations")).replace("%", "%%"))
    config.attributes["connection"] = connection
    command.upgrade(config, "head")
    reached = connection.execute(schema_revision.select()).scalar_one()
    if reached != REVISION:
        raise StoreError(f"the migrations end at {reached!r} and this blankfield needs {REVISION!r}; install it again")
    make_views(connection)
    stamp(connection)
