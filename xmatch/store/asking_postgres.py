"""Questions in SQL to a PostgreSQL store, through the driver alone.

Every question runs as a cursor inside a read-only transaction: the server itself takes nothing but one SELECT there.
"""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from contextlib import contextmanager
from decimal import Decimal
from typing import Any

from xmatch.errors import BlankfieldError, ConfigurationError, StoreError, StoreVersionError
from xmatch.resources import db_path
from xmatch.store.asof import WAS_THERE, past_views
from xmatch.store.functions import FUNCTIONS
from xmatch.store.place import REVISION, REVISION_TABLE, driver_url, shown

WAIT_S = 10
_PART = 500
_HELP = "the tables, views and functions are told in db/README.md"


def driver() -> Any:
    """Return the driver's module.

    Raises
    ------
    ConfigurationError
        It is not installed.
    """
    try:
        import psycopg
    except ImportError:
        raise ConfigurationError(
            "a PostgreSQL store needs psycopg, which is not installed; pip install 'blankfield[postgresql]'"
        ) from None
    return psycopg


def marks(sql: str) -> str:
    """Turn ``:name`` and ``?`` into the driver's own marks; quotes, comments and casts are left alone."""
    out, place, n = [], 0, len(sql)
    while place < n:
        char = sql[place]
        end = place + 1
        if char in "'\"":
            while end < n and sql[end] != char:
                end += 1
            end += 1
        elif sql.startswith("--", place):
            end = sql.find("\n", place)
            end = n if end < 0 else end
        elif sql.startswith("/*", place):
            end = sql.find("*/", place)
            end = n if end < 0 else end + 2
        elif sql.startswith("::", place):
            end = place + 2
        elif char == ":" and end < n and (sql[end].isalpha() or sql[end] == "_"):
            while end < n and (sql[end].isalnum() or sql[end] == "_"):
                end += 1
            out.append(f"%({sql[place + 1 : end]})s")
            place = end
            continue
        elif char == "?":
            out.append("%s")
            place = end
            continue
        out.append(sql[place:end].replace("%", "%%"))
        place = end
    return "".join(out)


@contextmanager
def ask(
    url: str, sql: str, params: Mapping[str, object], moment: str | None, time_limit_s: float
) -> Iterator[tuple[list[str], Iterator[tuple[Any, ...]]]]:
    """Put one question to a PostgreSQL store; see :func:`xmatch.store.asking.ask`."""
    psycopg = driver()
    try:
        with psycopg.connect(driver_url(url), connect_timeout=WAIT_S, autocommit=True) as connection:
            _prepare(connection, url, moment)
            connection.execute(f"SET statement_timeout = {int(time_limit_s * 1000)}")
            connection.autocommit = False
            connection.read_only = True
            with connection.cursor(name="question") as cursor:
                cursor.itersize = _PART
                # a server-side cursor goes by the protocol that takes one statement only
                cursor.execute(marks(sql.strip().rstrip(";")), dict(params))
                columns = [column.name for column in cursor.description or ()]
                yield columns, (tuple(map(_plain, line)) for line in cursor)
            # whatever a function did on the side is undone
            connection.rollback()
    except psycopg.Error as fault:
        raise _as_error(fault, url, time_limit_s) from fault


def _prepare(connection: Any, url: str, moment: str | None) -> None:
    found = connection.execute("SELECT to_regclass(%s)", (REVISION_TABLE,)).fetchone()[0]
    if found is None:
        raise StoreError(f"{shown(url)} holds no store of blankfield; run a look first, or give another --store")
    (version,) = connection.execute(f"SELECT version_num FROM {REVISION_TABLE}").fetchone()
    if version != REVISION:
        raise StoreVersionError(
            f"{shown(url)} is at migration {version} and this blankfield reads {REVISION}; blankfield store upgrade "
            "brings an earlier one there"
        )
    if moment is None:
        return
    (schema,) = connection.execute("SELECT current_schema()").fetchone()
    columns: dict[str, list[str]] = {table: [] for table in WAS_THERE}
    for table, column in connection.execute(
        "SELECT table_name, column_name FROM information_schema.columns WHERE table_schema = %s "
        "ORDER BY table_name, ordinal_position", (schema,)
    ):  # fmt: skip
        columns.setdefault(table, []).append(column)
    from xmatch.store.scripts import statements

    views = statements(db_path("views.sql").read_text(encoding="utf-8"))
    for statement in past_views(moment, columns, views, f'"{schema}"'):
        connection.execute(statement)
    connection.execute("SELECT set_config('blankfield.now', %s, false)", (moment,))


def _plain(value: Any) -> Any:
    if isinstance(value, Decimal):
        return int(value) if value == value.to_integral_value() else float(value)
    return int(value) if isinstance(value, bool) else value


def _as_error(fault: Any, url: str, time_limit_s: float) -> BlankfieldError:
    state = str(getattr(fault, "sqlstate", "") or "")
    first = str(fault).strip().partition("\n")[0]
    if state == "57014":
        return StoreError(
            f"the question was stopped after {time_limit_s:g} s, its time limit; ask for less, or allow more with --seconds"
        )
    if state in ("42883", "42P01"):
        only = [name for name, function in FUNCTIONS.items() if not function.on_postgresql and name in first]
        if only:
            return ConfigurationError(
                f"the function {only[0]} exists on SQLite stores only; on PostgreSQL use in_cone or separation_arcsec"
            )
    if (
        state == "25006"
        or "DECLARE" in first
        or "multiple commands" in first
        or (state == "42601" and "question" in first)
    ):
        return ConfigurationError(
            f"only one question that changes nothing may be asked ({first}); write a single SELECT; {_HELP}"
        )
    if state.startswith(("42", "22")) or "placeholder" in first or "parameter" in first:
        return ConfigurationError(f"the question cannot be answered: {first}; {_HELP}")
    return StoreError(f"{shown(url)}: {first}; check that the server runs and lets you in")
