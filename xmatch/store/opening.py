"""Checking and opening the file."""

from __future__ import annotations

import os
import sqlite3
import time
from contextlib import closing
from pathlib import Path
from urllib.parse import quote

from sqlalchemy import URL, Connection, Engine, create_engine, event

from xmatch.errors import StoreError, StoreVersionError
from xmatch.store import functions
from xmatch.store.making import make
from xmatch.store.place import APPLICATION_ID, SCHEMA_VERSION
from xmatch.store.translating import WRITE, is_busy, translated

OLDEST_SQLITE = (3, 37, 0)
"""First SQLite with STRICT tables (sqlite.org/stricttables.html)."""
NETWORK_FILE_SYSTEMS = frozenset(
    (
        "9p",
        "afs",
        "afpfs",
        "beegfs",
        "ceph",
        "cifs",
        "fuse.ceph",
        "fuse.glusterfs",
        "fuse.s3fs",
        "fuse.sshfs",
        "gfs2",
        "glusterfs",
        "gpfs",
        "lustre",
        "ncpfs",
        "nfs",
        "nfs4",
        "orangefs",
        "pvfs2",
        "smb3",
        "smbfs",
    )
)
"""File systems whose locks and shared memory do not reach the other machines that use them."""
MOUNTS = Path("/proc/mounts")
_RETRY_S = 0.02


def connect(path: Path, *, read_only: bool, wait_s: float) -> tuple[Engine, list[str]]:
    """Open the store, make it where there is none, and refuse what is not one.

    Parameters
    ----------
    path : Path
        The file.
    read_only : bool
        Never write, never make.
    wait_s : float
        How long to wait for another writer.

    Returns
    -------
    engine : Engine
        Connections with foreign keys on; those with the option ``WRITE`` hold the write lock from the start.
    remarks : list of str
        What the user should know of the place.

    Raises
    ------
    StoreError, StoreVersionError, StoreBusyError
        When it cannot be opened.
    """
    if sqlite3.sqlite_version_info < OLDEST_SQLITE:
        oldest = ".".join(map(str, OLDEST_SQLITE))
        raise StoreError(f"this Python holds SQLite {sqlite3.sqlite_version}; {oldest} is needed; use a newer Python")
    _check_place(path, read_only)
    remarks = []
    network = network_file_system(path)
    if network is not None:
        remarks.append(
            f"the store {path} lies on a network file system ({network}); use it from one machine at a time, "
            "or move it to a local disk"
        )
    engine = _engine(path, read_only=read_only, wait_s=wait_s, durable=network is not None)
    try:
        with translated(path):
            version = _version(engine, path)
            if read_only and version == 0:
                raise StoreError(f"{path} is an empty file, not a store yet; run a look first, or give another --store")
            if read_only and version < SCHEMA_VERSION:
                raise StoreVersionError(
                    f"{path} has schema version {version} and this blankfield reads {SCHEMA_VERSION}; "
                    "blankfield store upgrade brings it there and keeps a copy; it was left alone"
                )
            if not read_only:
                _set_journal(engine, "delete" if network is not None else "wal", wait_s)
                if version == 0:
                    _make(engine, path)
                elif version < SCHEMA_VERSION:
                    from xmatch.store.upgrading import upgrade_file

                    copy = upgrade_file(engine.execution_options(**{WRITE: True}), path, version)
                    if copy is not None:
                        remarks.append(
                            f"the store {path} was brought from schema version {version} to {SCHEMA_VERSION}; "
                            f"{copy} is a copy of it as it was"
                        )
    except BaseException:
        engine.dispose()
        raise
    return engine, remarks


def _check_place(path: Path, read_only: bool) -> None:
    if path.is_dir():
        raise StoreError(f"{path} is a folder; give the path of a file in it")
    if path.exists():
        if not os.access(path, os.R_OK if read_only else os.R_OK | os.W_OK):
            what = "read" if read_only else "written"
            raise StoreError(f"{path} cannot be {what} by you; change its permissions or give another --store")
        return
    if read_only:
        raise StoreError(f"there is no store at {path}; run a look first, or give another --store")
    try:
        path.parent.mkdir(parents=True, exist_ok=True)
    except OSError as fault:
        raise StoreError(f"the folder of {path} cannot be made ({fault.strerror}); give another --store") from fault
    if not os.access(path.parent, os.W_OK | os.X_OK):
        raise StoreError(f"{path.parent} cannot be written by you; change its permissions or give another --store")


def _engine(path: Path, *, read_only: bool, wait_s: float, durable: bool) -> Engine:
    mode = "mode=ro" if read_only else "mode=rwc"
    if read_only and not os.access(path.parent, os.W_OK) and not Path(f"{path}-wal").exists():
        # a reader must be able to make the write-ahead files; where nobody can, nobody writes either
        mode = "immutable=1"
    uri = f"file:{quote(str(path))}?{mode}"

    def opened() -> sqlite3.Connection:
        # isolation_level None: SQLAlchemy's "begin" below says BEGIN, not the driver at its own time
        connection = sqlite3.connect(uri, uri=True, timeout=wait_s, isolation_level=None, check_same_thread=False)
        connection.execute("PRAGMA foreign_keys = ON")
        functions.register(connection)
        # with a write-ahead log, NORMAL survives a crash of the program and keeps the file whole in a power cut
        connection.execute(f"PRAGMA synchronous = {'FULL' if durable else 'NORMAL'}")
        return connection

    engine = create_engine(URL.create("sqlite", database=str(path)), creator=opened)

    @event.listens_for(engine, "begin")
    def begin(connection: Connection) -> None:
        write = connection.get_execution_options().get(WRITE, False)
        connection.exec_driver_sql("BEGIN IMMEDIATE" if write else "BEGIN")

    return engine


def _version(engine: Engine, path: Path) -> int:
    """Schema version of the file, 0 when it holds nothing yet. A file that is neither empty nor ours is refused."""
    with engine.connect() as connection:
        ours = connection.exec_driver_sql("PRAGMA application_id").scalar_one()
        version = int(connection.exec_driver_sql("PRAGMA user_version").scalar_one())
        things = connection.exec_driver_sql("SELECT count(*) FROM sqlite_master").scalar_one()
    if ours != APPLICATION_ID:
        if ours == 0 and version == 0 and things == 0:
            return 0
        raise StoreError(f"{path} is an SQLite file but not a store of blankfield; left alone; give another path")
    if not 1 <= version <= SCHEMA_VERSION:
        raise StoreVersionError(
            f"{path} has schema version {version}, this blankfield reads and writes {SCHEMA_VERSION}; "
            f"use the blankfield that made it, or give another --store; it was left alone"
        )
    return version


def version_of(path: Path) -> int:
    """Return the schema version of a store without changing anything.

    Raises
    ------
    StoreError, StoreVersionError
        When there is none, it is not a store, or of a version yet to come.
    """
    _check_place(path, True)
    engine = _engine(path, read_only=True, wait_s=1.0, durable=False)
    try:
        with translated(path):
            return _version(engine, path)
    finally:
        engine.dispose()


def _set_journal(engine: Engine, mode: str, wait_s: float) -> None:
    """Set the journal mode, which lasts in the file. SQLite may refuse at once while another process opens."""
    deadline = time.monotonic() + wait_s
    # the driver's own connection: the mode cannot be set inside a transaction
    with closing(engine.raw_connection()) as pooled:
        driver = pooled.driver_connection
        assert isinstance(driver, sqlite3.Connection)
        while True:
            try:
                if driver.execute("PRAGMA journal_mode").fetchone()[0] != mode:
                    driver.execute(f"PRAGMA journal_mode = {mode}").fetchone()
                return
            except sqlite3.Error as fault:
                if not is_busy(fault) or time.monotonic() > deadline:
                    raise
                time.sleep(_RETRY_S)


def _make(engine: Engine, path: Path) -> None:
    """Make tables, triggers and views in one transaction, unless another process was faster."""
    with engine.execution_options(**{WRITE: True}).begin() as connection:
        if connection.exec_driver_sql("PRAGMA application_id").scalar_one() == APPLICATION_ID:
            return
        make(connection)


def network_file_system(path: Path, mounts: str | None = None) -> str | None:
    """Return the type of the network file system that holds a path, None on a local one or when unknown.

    Parameters
    ----------
    path : Path
        The file; it need not exist.
    mounts : str, optional
        Mount table in the form of ``/proc/mounts``; by default that of this machine.
    """
    if mounts is None:
        try:
            mounts = MOUNTS.read_text(encoding="utf-8", errors="surrogateescape")
        except OSError:
            return None
    place = path.resolve()
    longest, kind = -1, ""
    for line in mounts.splitlines():
        fields = line.split(" ")
        if len(fields) < 3:
            continue
        point = Path(fields[1].replace("\\040", " ").replace("\\011", "\t").replace("\\134", "\\"))
        # of two mounts on one point the later one is what is seen
        if place.is_relative_to(point) and len(point.parts) >= longest:
            longest, kind = len(point.parts), fields[2]
    return kind if kind in NETWORK_FILE_SYSTEMS else None
