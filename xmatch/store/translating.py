"""Turning what a database says into errors a person can act on."""

from __future__ import annotations

import sqlite3
from collections.abc import Iterator
from contextlib import contextmanager
from pathlib import Path

from sqlalchemy.exc import DBAPIError

from xmatch.errors import StoreBusyError, StoreError
from xmatch.store.place import shown

WRITE = "blankfield_write"
"""Execution option of connections that take the write lock when they begin, not when they first write."""


@contextmanager
def translated(place: Path | str) -> Iterator[None]:
    """Turn what the driver says inside the block into a :class:`StoreError` that names the file."""
    try:
        yield
    except DBAPIError as fault:
        if isinstance(place, str):
            raise _of_postgresql(fault.orig or fault, place) from fault
        raise _as_store_error(fault.orig or fault, place) from fault
    except sqlite3.Error as fault:
        raise _as_store_error(fault, Path(place)) from fault
    except Exception as fault:
        # the driver of PostgreSQL used without SQLAlchemy; it may not be installed, so it is known by its state
        if isinstance(place, str) and hasattr(fault, "sqlstate"):
            raise _of_postgresql(fault, place) from fault
        raise


def is_busy(fault: BaseException | None) -> bool:
    return str(getattr(fault, "sqlite_errorname", "")).startswith(("SQLITE_BUSY", "SQLITE_LOCKED"))


def _as_store_error(fault: BaseException, path: Path) -> StoreError:
    name = str(getattr(fault, "sqlite_errorname", ""))
    if is_busy(fault):
        return StoreBusyError(f"{path} is locked by another writer; wait until it has finished, then repeat")
    if name.startswith("SQLITE_FULL"):
        return StoreError(f"no room left to write {path}; free some space, then repeat; what was stored is whole")
    if name.startswith(("SQLITE_READONLY", "SQLITE_CANTOPEN", "SQLITE_PERM")):
        return StoreError(f"{path} cannot be opened for this ({fault}); check its permissions and those of its folder")
    if name.startswith("SQLITE_NOTADB"):
        return StoreError(f"{path} is not an SQLite file; it was left alone; give another --store")
    if name.startswith("SQLITE_CORRUPT"):
        return StoreError(f"{path} is damaged ({fault}); restore it from a copy, or look again with another --store")
    if name.startswith("SQLITE_CONSTRAINT"):
        return StoreError(f"{path} refused what was to be stored ({fault}); nothing of it was kept; please report this")
    return StoreError(f"{path}: {fault}; the tables are told in db/README.md")


def _of_postgresql(fault: BaseException, url: str) -> StoreError:
    # classes and codes: PostgreSQL documentation, appendix A
    state = str(getattr(fault, "sqlstate", "") or "")
    first = str(fault).strip().partition("\n")[0]
    if state in ("55P03", "40P01", "57014"):
        return StoreBusyError(f"{shown(url)} is locked by another writer; wait until it has finished, then repeat")
    if state.startswith("53"):
        return StoreError(f"the server of {shown(url)} has no room left ({first}); what was stored is whole")
    if state.startswith("23"):
        return StoreError(
            f"{shown(url)} refused what was to be stored ({first}); nothing of it was kept; please report this"
        )
    if state.startswith("08") or not state:
        return StoreError(f"{shown(url)} cannot be reached ({first}); check that the server runs and lets you in")
    return StoreError(f"{shown(url)}: {first}; the tables are told in db/README.md")
