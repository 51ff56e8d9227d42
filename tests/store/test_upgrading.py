"""A store of any earlier version comes to this one without loss, with a copy of it as it was; or stays as it was."""

from __future__ import annotations

import re
import sqlite3
import subprocess
import sys
from contextlib import closing
from datetime import UTC, datetime
from pathlib import Path
from typing import Any

import pytest
from click.testing import CliRunner

from xmatch.cli.store import command
from xmatch.errors import StoreError, StoreVersionError
from xmatch.resources import db_path, fixture_path
from xmatch.store import schema, upgrading
from xmatch.store.store import open_store

VERSIONS = range(1, schema.SCHEMA_VERSION)


def old_store(path: Path, version: int) -> Path:
    with closing(sqlite3.connect(path)) as connection:
        connection.executescript(fixture_path(f"store/v{version}.sql").read_text(encoding="utf-8"))
        assert connection.execute("PRAGMA user_version").fetchone() == (version,)
    return path


def contents(path: Path) -> dict[str, list[Any]]:
    """Every line of every table."""
    with closing(sqlite3.connect(path)) as connection:
        names = [name for (name,) in connection.execute("SELECT name FROM sqlite_master WHERE type = 'table'")]
        return {name: sorted(connection.execute(f'SELECT * FROM "{name}"').fetchall(), key=repr) for name in names}


def shape(path: Path) -> set[tuple[Any, ...]]:
    with closing(sqlite3.connect(path)) as connection:
        return {
            (kind, name, re.sub(r"\s+", "", text or ""))
            for kind, name, text in connection.execute("SELECT type, name, sql FROM sqlite_master")
        }


@pytest.mark.parametrize("version", VERSIONS)
def test_an_earlier_store_is_upgraded_without_loss_and_a_copy_is_kept(tmp_path: Path, version: int) -> None:
    path = old_store(tmp_path / "old.sqlite", version)
    before = contents(path)
    assert sum(map(len, before.values())) > 20
    with open_store(path) as store:
        (remark,) = store.remarks
        assert store.status()["schema_version"] == schema.SCHEMA_VERSION
        assert len(store.frame("SELECT * FROM current_limit")) == 2
        assert len(store.near(264.50625, -33.81583, 3600.0)) == 6
    after = contents(path)
    assert {name: after[name] for name in before} == before
    (copy,) = tmp_path.glob("*.backup")
    assert str(copy) in remark
    assert contents(copy) == before
    # the second time there is nothing to do
    with open_store(path) as store:
        assert store.remarks == ()
    assert len(list(tmp_path.glob("*.backup"))) == 1


@pytest.mark.parametrize("version", VERSIONS)
def test_an_upgraded_store_is_like_a_new_one(tmp_path: Path, version: int) -> None:
    open_store(old_store(tmp_path / "old.sqlite", version)).close()
    open_store(tmp_path / "new.sqlite").close()
    assert shape(tmp_path / "old.sqlite") == shape(tmp_path / "new.sqlite")


@pytest.mark.parametrize("version", VERSIONS)
def test_a_reader_leaves_an_earlier_store_alone(tmp_path: Path, version: int) -> None:
    path = old_store(tmp_path / "old.sqlite", version)
    before = path.read_bytes()
    with pytest.raises(StoreVersionError, match="blankfield store upgrade"):
        open_store(path, read_only=True)
    assert path.read_bytes() == before


def test_a_migration_that_fails_changes_nothing(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    path = old_store(tmp_path / "old.sqlite", 1)
    before, looks = contents(path), shape(path)

    def broken(connection: Any) -> None:
        raise StoreError("the views are nowhere")

    monkeypatch.setattr(upgrading, "make_views", broken)
    with pytest.raises(StoreError, match=r"nowhere; the store was left as it was, and .*\.backup is a copy"):
        open_store(path)
    assert (contents(path), shape(path)) == (before, looks)
    monkeypatch.undo()
    with open_store(path) as store:
        assert store.status()["searches"] == 2


def test_a_disk_too_full_for_the_copy_stops_the_upgrade(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    path = old_store(tmp_path / "old.sqlite", 1)
    before = contents(path)

    def full(source: Any, target: Any) -> None:
        raise OSError(28, "No space left on device")

    monkeypatch.setattr(upgrading.os, "link", full)
    with pytest.raises(StoreError, match=r"could not be copied .*No space left"):
        open_store(path)
    assert contents(path) == before
    assert {one.suffix for one in tmp_path.iterdir()} <= {".sqlite", ".sqlite-wal", ".sqlite-shm"}


def test_two_that_upgrade_at_once_upgrade_once(tmp_path: Path) -> None:
    path = old_store(tmp_path / "old.sqlite", 1)
    code = f"from xmatch.store.store import open_store\nwith open_store({str(path)!r}) as s: s.status()"
    both = [subprocess.Popen([sys.executable, "-W", "error", "-c", code]) for _ in range(2)]
    assert [process.wait(100) for process in both] == [0, 0]
    assert len(list(tmp_path.glob("*.backup"))) == 1
    assert contents(path)["schema_revision"] == [(schema.REVISION,)]


def test_opening_a_current_store_imports_no_migration_tool(tmp_path: Path) -> None:
    code = (
        f"import sys\nfrom xmatch.store.store import open_store\nopen_store({str(tmp_path / 'a.sqlite')!r}).close()\n"
        "sys.exit('alembic' in sys.modules or 'mako' in sys.modules)"
    )
    assert subprocess.run([sys.executable, "-c", code]).returncode == 0


def test_there_is_one_migration_a_version_and_one_fixture_an_earlier_one() -> None:
    migrations = sorted(db_path("migrations/versions").glob("*.py"))
    assert [path.name[:4] for path in migrations] == [f"{n:04d}" for n in range(1, schema.SCHEMA_VERSION + 1)]
    assert sorted(path.name for path in fixture_path("store").glob("*.sql")) == [f"v{n}.sql" for n in VERSIONS]


def test_a_copy_never_replaces_a_file(tmp_path: Path, scene: Any, path: Path) -> None:
    to = tmp_path / "copy.sqlite"
    upgrading.copy_file(path, to)
    assert contents(to) == contents(path)
    with pytest.raises(StoreError, match="never replaces"):
        upgrading.copy_file(path, to)
    moment = datetime(2026, 12, 1, tzinfo=UTC)
    first = upgrading.backup_name(path, 1, moment)
    first.touch()
    assert upgrading.backup_name(path, 1, moment) != first


# --- the command ---------------------------------------------------------------------------------
def run(*args: str) -> Any:
    return CliRunner().invoke(command, list(args), env={"BLANKFIELD_STORE": None})


def test_the_command_upgrades_copies_and_checks(tmp_path: Path) -> None:
    path = old_store(tmp_path / "old.sqlite", 1)
    done = run("upgrade", "--store", str(path))
    assert done.exit_code == 0 and f"from schema version 1 to {schema.SCHEMA_VERSION}" in done.output
    assert "already" in run("upgrade", "--store", str(path)).output
    assert f"schema version         {schema.SCHEMA_VERSION}" in run("--store", str(path)).output
    assert f"schema version         {schema.SCHEMA_VERSION}" in run("status", "--store", str(path)).output
    assert '"rows": 6' in run("--store", str(path), "status", "--json").output
    assert "is sound: 2 searches with 6 rows" in run("check", "--store", str(path)).output
    assert run("backup", "--store", str(path), str(tmp_path / "b.sqlite")).exit_code == 0
    assert contents(tmp_path / "b.sqlite") == contents(path)


@pytest.mark.parametrize(
    ("damage", "told"),
    [
        ("DROP TRIGGER row_no_delete; DELETE FROM flux; DELETE FROM row WHERE ordinal = 2", "should have 6 rows but 5"),
        ("DROP TRIGGER row_no_update; UPDATE row SET hpx29 = 7 WHERE ordinal = 2", "indexed at another place"),
        ("UPDATE target SET content = '{}'", "target 1 does not have the content"),
        ("UPDATE assumptions SET content = '{}'", "do not have the content"),
        ("DELETE FROM assumptions", "refers to a assumptions that is not there"),
    ],
    ids=["row lost", "row misplaced", "target changed", "assumptions changed", "assumptions lost"],
)
def test_check_finds_damage(tmp_path: Path, damage: str, told: str) -> None:
    path = old_store(tmp_path / "old.sqlite", 1)
    open_store(path).close()
    with closing(sqlite3.connect(path)) as connection:
        connection.execute("DROP TRIGGER IF EXISTS flux_no_delete")
        connection.executescript(damage)
    done = run("check", "--store", str(path))
    assert isinstance(done.exception, StoreError)
    assert told in str(done.exception)


def test_nothing_to_upgrade_is_said(tmp_path: Path) -> None:
    for where, told in ((tmp_path / "none.sqlite", "no store at"), (tmp_path / "empty.sqlite", "not a store yet")):
        if "empty" in where.name:
            where.touch()
        assert told in str(run("upgrade", "--store", str(where)).exception)
        assert where.exists() == ("empty" in where.name)
