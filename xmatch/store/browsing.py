"""The store in a browser: Datasette on this machine only, with our titles, units, descriptions and studies.

The file is opened read-only, so that no page can change it; requests that name another host than this machine are
turned away, so that no page of somebody else's can read it through the user's browser.
"""

from __future__ import annotations

import importlib
import re
import secrets
import socket
from collections.abc import Awaitable, Callable
from html import escape
from pathlib import Path
from typing import Any
from urllib.parse import urlsplit

from xmatch.errors import ConfigurationError, StoreError
from xmatch.store import functions
from xmatch.store.asking import _now, _open
from xmatch.store.contract import contract
from xmatch.store.place import locate, shown
from xmatch.store.studies import Parameter, Study, studies

HOST = "127.0.0.1"
PORT = 8742
"""Our choice; not registered for anything well known."""
TIME_LIMIT_MS = 10_000
PAGE_ROWS = 100
MOST_ROWS = 5_000
_HERE = frozenset({HOST, "localhost"})
_TURNED_AWAY = b"This page is for this machine only; use the address that blankfield browse printed.\n"

Scope = dict[str, Any]
App = Callable[[Scope, Any, Any], Awaitable[None]]


def file_of(where: str | Path | None) -> Path:
    """Return the file to show, after opening it once as any question would.

    Raises
    ------
    ConfigurationError
        The store is a database on a server.
    StoreError, StoreVersionError
        It is no store that can be read.
    """
    place = locate(where)
    if not isinstance(place, Path):
        raise ConfigurationError(
            f"{shown(place)} is a database on a server; browse shows files; blankfield store copy FILE makes one of it"
        )
    _open(place).close()
    return place


def metadata(path: Path) -> dict[str, Any]:
    """Return titles, descriptions, units and studies as Datasette takes them."""
    tables = {
        name: {
            "description": told.meaning,
            "columns": {
                column: meaning + (f" [{unit}]" if unit else "") for column, (unit, meaning) in told.columns.items()
            },
        }
        for name, told in contract().items()
    }
    return {
        "title": "blankfield",
        "description": "What was asked at each position, what was answered, and what follows. Nothing here can be changed.",
        "databases": {
            path.stem: {
                "description": "Ready-made questions stand below; write your own in SQL above them. A limit rests on the "
                "assumptions of its look, and no row does not mean an empty sky.",
                "tables": tables,
                "queries": {name: _query(one) for name, one in studies().items()},
            }
        },
    }


def _query(one: Study) -> dict[str, Any]:
    body = one.sql.partition("\n\n")[2].strip().rstrip(";")
    for parameter in one.parameters:
        body = re.sub(rf":{parameter.name}\b", lambda _, p=parameter: _with_default(p), body)  # type: ignore[misc]
    listed = "".join(
        f"<dt>{escape(column.name)}</dt><dd>{escape(column.meaning)}{f' [{escape(column.unit)}]' if column.unit else ''}</dd>"
        for column in one.columns
    )
    given = "".join(
        f"<li>{escape(parameter.name)}: {escape(parameter.meaning)}"
        + (" (must be given)" if parameter.required else f" (left empty: {escape(str(parameter.default))})")
        + "</li>"
        for parameter in one.parameters
    )
    return {
        "sql": body,
        "title": one.title,
        "params": [parameter.name for parameter in one.parameters],
        "description_html": f"<p>{escape(one.question)}</p>"
        + (f"<ul>{given}</ul>" if given else "")
        + f"<dl>{listed}</dl>",
    }


def _with_default(parameter: Parameter) -> str:
    """A parameter of a web form, which is text and empty when left out, as SQL that has a type and a default."""
    if isinstance(parameter.default, int | float):
        return f"CAST(coalesce(nullif(:{parameter.name}, ''), {parameter.default!r}) AS REAL)"
    return f":{parameter.name}"


class _Plugin:
    """What Datasette asks of us: functions on its connections, and a guard at its door."""

    __name__ = "blankfield"

    def __init__(self, hookimpl: Callable[[Any], Any]) -> None:
        # marked here, because the marker comes from a package that is loaded only when it is used
        self.prepare_connection = hookimpl(_prepare)
        self.asgi_wrapper = hookimpl(_wrapper)


def _prepare(conn: Any, database: str) -> None:
    functions.register(conn)
    conn.create_function("now_utc", 0, _now)
    # Datasette keeps lists of its own in a database in memory
    if database != "_internal":
        conn.execute("PRAGMA query_only = ON")


def _wrapper(datasette: Any) -> Callable[[App], App]:
    return guarded


def guarded(app: App) -> App:
    """Turn away requests that name another host than this machine."""

    async def only_here(scope: Scope, receive: Any, send: Any) -> None:
        if scope["type"] == "http" and not _is_here(scope):
            await send({"type": "http.response.start", "status": 403, "headers": [(b"content-type", b"text/plain")]})
            await send({"type": "http.response.body", "body": _TURNED_AWAY})
            return
        await app(scope, receive, send)

    return only_here


def _is_here(scope: Scope) -> bool:
    hosts = [value.decode("latin-1") for name, value in scope["headers"] if name == b"host"]
    try:
        return len(hosts) == 1 and urlsplit(f"//{hosts[0]}").hostname in _HERE
    except ValueError:
        return False


def bound_socket(port: int) -> socket.socket:
    """Return a socket that listens on this machine's own address only.

    Parameters
    ----------
    port : int
        Port; 0 for any that is free.

    Raises
    ------
    ConfigurationError
        The port cannot be had.
    """
    made = socket.socket(socket.AF_INET, socket.SOCK_STREAM)
    made.setsockopt(socket.SOL_SOCKET, socket.SO_REUSEADDR, 1)
    try:
        made.bind((HOST, port))
        # from now on a browser waits for the page instead of being refused
        made.listen()
    except OSError as fault:
        made.close()
        raise ConfigurationError(
            f"port {port} cannot be used ({fault.strerror}); give another --port, or 0 for any"
        ) from None
    return made


def serve(path: Path, listening: socket.socket) -> None:
    """Show a store until the user stops it.

    Raises
    ------
    ConfigurationError
        Datasette is not installed.
    StoreError
        It ended by itself.
    """
    try:
        import uvicorn
        from datasette import hookimpl
        from datasette.app import Datasette
        from datasette.plugins import pm
    except ImportError:
        raise ConfigurationError(
            "browsing needs Datasette, which is not installed; pip install 'blankfield[browse]'"
        ) from None
    # with rich there, it would print every local variable of every question that has a mistake in it
    # (asked for by name after the application, which registers its parts in an order of its own)
    vars(importlib.import_module("datasette.handle_exception"))["rich"] = None
    plugin = _Plugin(hookimpl)
    pm.register(plugin, name="blankfield")
    try:
        site = Datasette(
            [str(path)],
            metadata=metadata(path),
            settings={
                "sql_time_limit_ms": TIME_LIMIT_MS, "default_page_size": PAGE_ROWS, "max_returned_rows": MOST_ROWS,
                "allow_download": False, "allow_facet": True, "suggest_facets": False,
            },
            secret=secrets.token_hex(32),
        )  # fmt: skip
        server = uvicorn.Server(uvicorn.Config(site.app(), log_level="warning", lifespan="on"))
        server.run(sockets=[listening])
    finally:
        pm.unregister(plugin)
    if not server.started:
        raise StoreError(f"the page of {path} could not be started; see above")
