"""Making the tables, triggers and views of a store, on either kind of database."""

from __future__ import annotations

from sqlalchemy import Connection, delete, insert, inspect, text

from xmatch.resources import db_path
from xmatch.store.schema import (
    APPEND_ONLY,
    APPLICATION_ID,
    REVISION,
    SCHEMA_VERSION,
    metadata,
    schema_revision,
    triggers,
)
from xmatch.store.schema_lists import ADDED_IN_2
from xmatch.store.scripts import statements


def make(connection: Connection) -> None:
    """Make everything an empty database lacks; runs inside its caller's transaction."""
    metadata.create_all(connection)
    make_views(connection)
    stamp(connection)


def make_views(connection: Connection) -> None:
    """Make triggers, functions and views anew: they hold no data, so an upgrade never has to change one."""
    for statement in triggers(connection.dialect.name, (*APPEND_ONLY, *ADDED_IN_2)):
        connection.exec_driver_sql(statement)
    if connection.dialect.name == "postgresql":
        # one text: plpgsql bodies hold semicolons
        connection.exec_driver_sql(db_path("functions-postgresql.sql").read_text(encoding="utf-8").replace("%", "%%"))
    for statement in statements(db_path("views.sql").read_text(encoding="utf-8")):
        connection.exec_driver_sql(
            statement.replace("%", "%%") if connection.dialect.name == "postgresql" else statement
        )


def drop_views(connection: Connection) -> None:
    """Remove triggers and views, so that the tables below them may be changed."""
    views = inspect(connection).get_view_names()
    if connection.dialect.name == "postgresql":
        for name in views:
            connection.execute(text(f'DROP VIEW IF EXISTS "{name}" CASCADE'))
        return
    made = connection.exec_driver_sql("SELECT type, name FROM sqlite_master WHERE type IN ('view', 'trigger')").all()
    for kind, name in made:
        connection.exec_driver_sql(f'DROP {kind} "{name}"')


def stamp(connection: Connection, revision: str = REVISION) -> None:
    """Write down which migration the tables are at."""
    connection.execute(delete(schema_revision))
    connection.execute(insert(schema_revision).values(version_num=revision))
    if connection.dialect.name == "sqlite":
        connection.exec_driver_sql(f"PRAGMA application_id = {APPLICATION_ID}")
        if revision == REVISION:
            connection.exec_driver_sql(f"PRAGMA user_version = {SCHEMA_VERSION}")
