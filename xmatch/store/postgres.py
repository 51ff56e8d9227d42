"""A store in a PostgreSQL database, for a team. The tables, views and promises are those of the file.

Writers take turns by a lock of the whole store, as they do on SQLite: a version number or a catalog told twice is then
the same one.
"""

from __future__ import annotations

from sqlalchemy import Connection, Engine, create_engine, event, inspect, make_url, text

from xmatch.errors import ConfigurationError, StoreError, StoreVersionError
from xmatch.store.making import make
from xmatch.store.place import APPLICATION_ID, REVISION, REVISION_TABLE, shown
from xmatch.store.translating import WRITE, translated

CONNECT_S = 10
"""How long to wait for the server to answer at all (our choice)."""
_TAKE_TURNS = text(f"SELECT pg_advisory_xact_lock({APPLICATION_ID}, hashtext(current_schema()))")


def connect(url: str, *, read_only: bool, wait_s: float) -> tuple[Engine, list[str]]:
    """Open the store in a database, make it where there is none, upgrade an earlier one.

    Parameters
    ----------
    url : str
        From :func:`xmatch.store.place.locate`.
    read_only : bool
        Never write, never make.
    wait_s : float
        How long to wait for another writer.

    Returns
    -------
    engine : Engine
        Its connections with the option ``WRITE`` hold the store's lock until they end.
    remarks : list of str
        What the user should know.

    Raises
    ------
    StoreError, StoreVersionError, StoreBusyError
        When it cannot be opened.
    ConfigurationError
        When the driver is not installed.
    """
    engine = _engine(url, read_only=read_only, wait_s=wait_s)
    remarks = []
    try:
        with translated(url):
            found = _revision(engine, url)
            if read_only and found is None:
                raise StoreError(f"{shown(url)} holds no store; run a look first, or give another --store")
            if read_only and found != REVISION:
                raise StoreVersionError(
                    f"{shown(url)} is at migration {found} and this blankfield reads {REVISION}; "
                    "blankfield store upgrade brings it there; it was left alone"
                )
            if found != REVISION:
                before = _bring_up(engine, url)
                if before is not None:
                    remarks.append(
                        f"the store {shown(url)} was brought from schema version {int(before)} to {int(REVISION)} in one "
                        "transaction; copies of a database are its administrator's"
                    )
    except BaseException:
        engine.dispose()
        raise
    return engine, remarks


def _engine(url: str, *, read_only: bool, wait_s: float) -> Engine:
    try:
        engine = create_engine(make_url(url), connect_args={"connect_timeout": CONNECT_S})
    except ImportError:
        raise ConfigurationError(
            "a PostgreSQL store needs psycopg, which is not installed; pip install 'blankfield[postgresql]'"
        ) from None

    @event.listens_for(engine, "begin")
    def begin(connection: Connection) -> None:
        if read_only:
            connection.exec_driver_sql("SET TRANSACTION READ ONLY")
        elif connection.get_execution_options().get(WRITE, False):
            connection.exec_driver_sql(f"SET LOCAL lock_timeout = {max(1, int(wait_s * 1000))}")
            connection.execute(_TAKE_TURNS)

    return engine


def _revision(engine: Engine, url: str) -> str | None:
    """Migration the tables are at, None when there are none. A later one is refused."""
    with engine.connect() as connection:
        if connection.execute(text("SELECT to_regclass(:name)"), {"name": REVISION_TABLE}).scalar() is None:
            strangers = inspect(connection).get_table_names()
            if "search" in strangers or "target" in strangers:
                raise StoreError(f"{shown(url)} holds tables of somebody else; give a database or schema of its own")
            return None
        found = str(connection.execute(text(f"SELECT version_num FROM {REVISION_TABLE}")).scalar_one())
    if found > REVISION:
        raise StoreVersionError(
            f"{shown(url)} is at migration {found}, this blankfield reads and writes {REVISION}; "
            "use the blankfield that made it; it was left alone"
        )
    return found


def _bring_up(engine: Engine, url: str) -> str | None:
    """Make the store, or upgrade it, in one transaction; return the migration it was at, if it was older."""
    with engine.execution_options(**{WRITE: True}).begin() as connection:
        # another process may have been faster while we waited for our turn
        if connection.execute(text("SELECT to_regclass(:name)"), {"name": REVISION_TABLE}).scalar() is None:
            make(connection)
            return None
        found = str(connection.execute(text(f"SELECT version_num FROM {REVISION_TABLE}")).scalar_one())
        if found == REVISION:
            return None
        from xmatch.store.upgrading import upgrade

        upgrade(connection)
        return found
