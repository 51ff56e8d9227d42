"""Where the store is. Nothing heavy is imported here: a question in SQL starts with this."""

from __future__ import annotations

import os
from pathlib import Path
from urllib.parse import urlsplit

from xmatch.errors import ConfigurationError

ENVIRONMENT = "BLANKFIELD_STORE"
SCHEMA_VERSION = 3
"""Kept in ``PRAGMA user_version``; an older one is upgraded, a newer one never opened."""
REVISION = f"{SCHEMA_VERSION:04d}"
"""The same as the last file in ``db/migrations/versions`` names it."""
REVISION_TABLE = "schema_revision"
APPLICATION_ID = 0x424C4B46
"""``BLKF`` in ASCII, kept in ``PRAGMA application_id``."""
_POSTGRESQL = ("postgresql", "postgresql+psycopg", "postgres")


def locate(where: str | Path | None = None) -> Path | str:
    """Return where the store is: the argument, else ``BLANKFIELD_STORE``, else one file in the data folder.

    Parameters
    ----------
    where : str or Path, optional
        A path, a URL ``sqlite:///path``, or a URL ``postgresql+psycopg://user@host/database``.

    Returns
    -------
    Path or str
        The file, or the URL of a PostgreSQL database.

    Raises
    ------
    ConfigurationError
        For anything else.
    """
    if where is None or where == "":
        where = os.environ.get(ENVIRONMENT) or None
    if where is None:
        import platformdirs

        return Path(platformdirs.user_data_dir("blankfield", appauthor=False)) / "blankfield.sqlite"
    if isinstance(where, str) and ("://" in where or where.startswith("sqlite:")):
        kind = where.partition(":")[0]
        if kind in _POSTGRESQL:
            return _postgresql(where)
        where = _path_of(where, kind)
    if str(where) == ":memory:":
        raise ConfigurationError("the store is ':memory:', which would be lost at once; give the path of a file")
    return Path(where).expanduser().absolute()


def _path_of(text: str, kind: str) -> str:
    if kind not in ("sqlite", "sqlite+pysqlite"):
        # the text is not repeated: it may hold a password
        raise ConfigurationError(
            f"the store is a {kind} URL; a path, sqlite:///path and postgresql+psycopg://user@host/database can be used"
        )
    path = text.partition("://")[2]
    if not path.startswith("/") or not path[1:] or "?" in path:
        raise ConfigurationError(f"the store is {text!r}; write sqlite:///path, without options, or a path")
    return path[1:]


def _postgresql(text: str) -> str:
    try:
        parts = urlsplit(text)
        _ = parts.port
    except ValueError:
        parts = None
    if parts is None or not parts.path.strip("/"):
        raise ConfigurationError(
            "the store is a postgresql URL that names no database, or cannot be read; "
            "write postgresql+psycopg://user@host/database or the path of a file"
        )
    return "postgresql+psycopg" + text[text.index("://") :]


def shown(url: str) -> str:
    """Return the URL of a PostgreSQL store without its password, for people."""
    kind, _, rest = url.partition("://")
    netloc, slash, path = rest.partition("?")[0].partition("/")
    user, at, host = netloc.rpartition("@")
    return f"{kind}://{user.partition(':')[0]}{at}{host}{slash}{path}"


def driver_url(url: str) -> str:
    """Return the URL as the PostgreSQL driver itself takes it."""
    return "postgresql" + url[url.index("://") :]
