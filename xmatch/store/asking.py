"""Questions in SQL of the user's own: read-only by construction, bounded in time and rows, and quick to start.

Only the database's own driver is used, because importing more would take longer than most answers.
"""

from __future__ import annotations

import os
import signal
import sqlite3
import time
from collections.abc import Iterator, Mapping
from contextlib import closing, contextmanager
from datetime import UTC, datetime
from pathlib import Path
from typing import Any
from urllib.parse import quote

from xmatch.errors import BlankfieldError, ConfigurationError, StoreBusyError, StoreError, StoreVersionError
from xmatch.resources import db_path
from xmatch.store import functions
from xmatch.store.asof import WAS_THERE, moment_of, past_views
from xmatch.store.place import APPLICATION_ID, SCHEMA_VERSION, locate

TIME_LIMIT_S = 60.0
ROW_LIMIT = 10_000
WAIT_S = 10.0
_STEPS = 20_000
"""Steps of SQLite's engine between two looks at the clock: under a millisecond."""
_PART = 500
_HELP = "the tables, views and functions are told in db/README.md"
_ALLOWED = frozenset((sqlite3.SQLITE_SELECT, sqlite3.SQLITE_READ, sqlite3.SQLITE_FUNCTION, sqlite3.SQLITE_RECURSIVE))
_NEVER = frozenset({"load_extension", "fts3_tokenizer"})

Parameters = Mapping[str, object]


class Answer:
    """Columns of an answer and its rows, which are fetched while they are read. Ends at the row limit."""

    def __init__(self, columns: list[str], rows: Iterator[tuple[Any, ...]], limit: int) -> None:
        self.columns = columns
        self.limit = limit
        self.more = False
        """Whether there were more rows than the limit; known when all have been read."""
        self._rows = rows

    def __iter__(self) -> Iterator[tuple[Any, ...]]:
        for number, row in enumerate(self._rows):
            if self.limit and number == self.limit:
                self.more = True
                return
            yield row


@contextmanager
def ask(
    sql: str,
    params: Parameters | None = None,
    *,
    where: str | Path | None = None,
    as_of: str | None = None,
    time_limit_s: float = TIME_LIMIT_S,
    row_limit: int = ROW_LIMIT,
) -> Iterator[Answer]:
    """Put one question to the store.

    Parameters
    ----------
    sql : str
        One SELECT, with ``:name`` for parameters.
    params : mapping, optional
        Their values: numbers or text.
    where : str or Path, optional
        The store, as for :func:`xmatch.store.place.locate`.
    as_of : str, optional
        A date or time: the store as it was then.
    time_limit_s : float
        Longest time for the whole answer, in seconds.
    row_limit : int
        Most rows; 0 for all.

    Raises
    ------
    ConfigurationError
        The statement cannot be understood, would change something, or lacks a parameter.
    StoreError
        The store cannot be read, or the time is up.
    KeyboardInterrupt
        The user stopped it; the question is ended in the database too.
    """
    if not sql.strip():
        raise ConfigurationError(f"the question is empty; write a SELECT; {_HELP}")
    moment = None if as_of is None else moment_of(as_of)
    place = locate(where)
    if isinstance(place, Path):
        with closing(_open(place)) as connection, _bounded(connection, time_limit_s, place):
            if moment is not None:
                _go_back(connection, moment)
            functions.register_clock(connection, moment or _now())
            connection.execute("PRAGMA query_only = ON")
            # a table-valued function is set up on first use, which the authorizer would take for a change
            connection.execute("SELECT 1 FROM json_each('[]'), json_tree('[]')").fetchall()
            connection.set_authorizer(_authorize)
            cursor = connection.execute(sql, dict(params or {}))
            columns = [column[0] for column in cursor.description or ()]
            yield Answer(columns, _fetched(cursor), row_limit)
        return
    from xmatch.store.asking_postgres import ask as ask_postgres

    with ask_postgres(place, sql, params or {}, moment, time_limit_s) as (columns, rows):
        yield Answer(columns, rows, row_limit)


def _now() -> str:
    return datetime.now(UTC).replace(microsecond=0, tzinfo=None).isoformat() + "Z"


def _fetched(cursor: Any) -> Iterator[tuple[Any, ...]]:
    while part := cursor.fetchmany(_PART):
        yield from part


def open_reading(path: Path) -> str:
    """Return the URI with which a store is opened for reading only."""
    mode = "mode=ro"
    if not os.access(path.parent, os.W_OK) and not Path(f"{path}-wal").exists():
        # a reader must be able to make the write-ahead files; where nobody can, nobody writes either
        mode = "immutable=1"
    return f"file:{quote(str(path))}?{mode}"


def _open(path: Path) -> sqlite3.Connection:
    if not path.is_file():
        raise StoreError(f"there is no store at {path}; run a look first, or give another --store")
    try:
        connection = sqlite3.connect(open_reading(path), uri=True, timeout=WAIT_S, isolation_level=None)
    except sqlite3.Error as fault:
        raise StoreError(f"{path} cannot be opened ({fault}); check its permissions") from fault
    try:
        ours, version = (
            connection.execute(f"PRAGMA {name}").fetchone()[0] for name in ("application_id", "user_version")
        )
        if ours != APPLICATION_ID:
            raise StoreError(f"{path} is not a store of blankfield; give another --store")
        if version != SCHEMA_VERSION:
            advice = (
                "blankfield store upgrade brings it there" if version < SCHEMA_VERSION else "use a newer blankfield"
            )
            raise StoreVersionError(
                f"{path} has schema version {version} and this blankfield reads {SCHEMA_VERSION}; {advice}"
            )
        functions.register(connection)
    except sqlite3.DatabaseError as fault:
        connection.close()
        raise StoreError(f"{path} cannot be read ({fault}); give another --store") from fault
    except BaseException:
        connection.close()
        raise
    return connection


def _go_back(connection: sqlite3.Connection, moment: str) -> None:
    columns = {table: [line[1] for line in connection.execute(f'PRAGMA table_info("{table}")')] for table in WAS_THERE}
    listed = connection.execute("SELECT sql FROM sqlite_master WHERE type = 'view' ORDER BY rowid")
    for statement in past_views(moment, columns, [text for (text,) in listed], "main"):
        connection.execute(statement)


def _authorize(action: int, first: str | None, second: str | None, *_: str | None) -> int:
    if action not in _ALLOWED or (action == sqlite3.SQLITE_FUNCTION and second in _NEVER):
        return sqlite3.SQLITE_DENY
    return sqlite3.SQLITE_OK


@contextmanager
def _bounded(connection: sqlite3.Connection, time_limit_s: float, path: Path) -> Iterator[None]:
    """End what runs inside when its time is up or the user says so; translate what SQLite says."""
    end = time.monotonic() + time_limit_s
    state = {"stopped": False}

    def stop(*_: object) -> None:
        state["stopped"] = True
        connection.interrupt()

    def tick() -> bool:
        return state["stopped"] or time.monotonic() > end

    try:
        before = signal.signal(signal.SIGINT, stop)
    except ValueError:  # not the main thread: signals are somebody else's
        before = None
    connection.set_progress_handler(tick, _STEPS)
    try:
        yield
        if state["stopped"]:
            raise KeyboardInterrupt
    except sqlite3.Error as fault:
        if state["stopped"]:
            raise KeyboardInterrupt from fault
        raise _as_error(fault, path, time_limit_s) from fault
    finally:
        connection.set_progress_handler(None, 0)
        if before is not None:
            signal.signal(signal.SIGINT, before)


def _as_error(fault: sqlite3.Error, path: Path, time_limit_s: float) -> BlankfieldError:
    name = str(getattr(fault, "sqlite_errorname", ""))
    if name.startswith("SQLITE_INTERRUPT"):
        return StoreError(
            f"the question was stopped after {time_limit_s:g} s, its time limit; ask for less, or allow more with --seconds"
        )
    if name.startswith("SQLITE_AUTH") or "readonly" in str(fault) or "one statement" in str(fault):
        return ConfigurationError(
            f"only one question that changes nothing may be asked ({fault}); write a single SELECT; {_HELP}"
        )
    if name.startswith(("SQLITE_BUSY", "SQLITE_LOCKED")):
        return StoreBusyError(f"{path} is locked by another process; wait until it has finished, then repeat")
    if name.startswith(("SQLITE_CORRUPT", "SQLITE_NOTADB", "SQLITE_IOERR")):
        return StoreError(f"{path} is damaged ({fault}); restore it from a copy")
    if "binding" in str(fault):
        return ConfigurationError(f"a parameter has no value ({fault}); give it with --param name=value")
    return ConfigurationError(f"the question cannot be answered: {fault}; {_HELP}")


def study_folder() -> Path:
    """Return the folder of the ready-made questions."""
    return db_path("studies")
