"""What ``blankfield store`` does beside telling its state."""

from __future__ import annotations

from pathlib import Path

from xmatch.errors import StoreError
from xmatch.store import checking
from xmatch.store.opening import version_of
from xmatch.store.place import locate
from xmatch.store.schema import SCHEMA_VERSION
from xmatch.store.store import open_store
from xmatch.store.upgrading import copy_file


def upgrade_store(where: str | Path | None) -> list[str]:
    """Bring a store to the schema of this blankfield; return what was done, in words.

    Raises
    ------
    StoreError, StoreVersionError
        There is no store, it is of a later version, or the upgrade failed; then it is as it was.
    """
    path = locate(where)
    before = version_of(path) if isinstance(path, Path) else None
    if before == 0:
        raise StoreError(f"{path} is an empty file, not a store yet; run a look first, or give another --store")
    with open_store(where) as store:
        done = [remark for remark in store.remarks if "schema version" in remark]
        return done or [f"{store.name} is at schema version {SCHEMA_VERSION} already; nothing was changed"]


def backup_store(where: str | Path | None, to: Path) -> Path:
    """Copy a store to a new file; return its path.

    Raises
    ------
    StoreError
        There is no store, or the file exists or cannot be written.
    """
    path = locate(where)
    if not isinstance(path, Path):
        from xmatch.store.copying import copy_store

        copy_store(where, to)
        return to
    version_of(path)
    return copy_file(path, to)


def check_store(where: str | Path | None) -> list[str]:
    """Return what was checked, in words.

    Raises
    ------
    StoreError
        Something is wrong; the message lists it.
    """
    with open_store(where, read_only=True) as store:
        with store.reading() as connection:
            found = checking.faults(connection)
        if found:
            raise StoreError(
                f"{store.name} is not sound: " + "; ".join(found) + ". Restore it from a copy, or ask again"
            )
        facts = store.status()
    return [
        f"{facts['store']} is sound: {facts['searches']} searches with {facts['rows']} rows, "
        f"{facts['findings']} findings and {facts['limits']} limits"
    ]
