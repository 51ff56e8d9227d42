"""The contract: what db/README.md tells is what the file holds, and the file refuses what it should."""

from __future__ import annotations

import re
import sqlite3
from collections.abc import Iterator
from pathlib import Path
from typing import Any

import pytest

from xmatch import records
from xmatch.resources import db_path
from xmatch.store import schema
from xmatch.store.schema_lists import CheckVerdict
from xmatch.store.store import open_store

HEADING = re.compile(r"^### (\w+)$", re.MULTILINE)


@pytest.fixture
def raw(path: Path) -> Iterator[sqlite3.Connection]:
    """A connection of somebody else's to a new store."""
    open_store(path).close()
    connection = sqlite3.connect(path)
    connection.execute("PRAGMA foreign_keys = ON")
    yield connection
    connection.close()


def told() -> dict[str, list[tuple[str, str, str]]]:
    """Tables and views of db/README.md with their columns, units and meanings."""
    pieces = HEADING.split(db_path("README.md").read_text(encoding="utf-8"))
    found = {}
    for name, body in zip(pieces[1::2], pieces[2::2], strict=True):
        cells = [line.strip("|").split("|") for line in body.split("## ")[0].splitlines() if line.startswith("|")]
        found[name] = [(cell[0].strip(), cell[1].strip(), cell[2].strip()) for cell in cells[2:]]
    return found


def test_the_readme_tells_every_table_view_and_column_of_the_live_schema(raw: sqlite3.Connection) -> None:
    live = {
        name: [line[1] for line in raw.execute(f"PRAGMA table_info({name})")]
        for (name,) in raw.execute("SELECT name FROM sqlite_master WHERE type IN ('table', 'view')")
    }
    assert {name: [column for column, _, _ in columns] for name, columns in told().items()} == live


def test_the_readme_tells_units_and_meanings_as_the_schema_has_them() -> None:
    for name, columns in told().items():
        if name in schema.metadata.tables:
            table = schema.metadata.tables[name]
            assert columns == [(column.name, column.info["unit"], column.comment) for column in table.columns], name
        assert all(meaning.endswith(".") for _, _, meaning in columns), name


def test_the_readme_lists_the_words(raw: sqlite3.Connection) -> None:
    readme = db_path("README.md").read_text(encoding="utf-8")
    for words in (
        records.Waveband, records.Quantity, records.MagnitudeSystem, records.ReplyStatus, records.Outcome,
        records.LimitKind, records.LimitMethod, records.StandingWord, CheckVerdict,
    ):  # fmt: skip
        assert f"| {', '.join(word.value for word in words)} |" in readme, words


def test_every_real_number_has_a_unit() -> None:
    for table in schema.metadata.tables.values():
        for column in table.columns:
            if isinstance(column.type, type(schema.target.c.ra_deg.type)):
                assert column.info["unit"], f"{table.name}.{column.name}"


def test_the_file_says_whose_it_is(raw: sqlite3.Connection) -> None:
    assert raw.execute("PRAGMA user_version").fetchone() == (schema.SCHEMA_VERSION,)
    assert raw.execute("PRAGMA application_id").fetchone()[0].to_bytes(4, "big") == b"BLKF"
    assert raw.execute("PRAGMA journal_mode").fetchone() == ("wal",)


def test_every_table_is_strict(raw: sqlite3.Connection) -> None:
    listed = {line[1]: line[5] for line in raw.execute("PRAGMA table_list") if line[2] == "table"}
    listed = {name: strict for name, strict in listed.items() if not name.startswith("sqlite_")}
    assert set(listed) == set(schema.metadata.tables)
    assert set(listed.values()) == {1}


def insert(connection: sqlite3.Connection, **changes: Any) -> None:
    values: dict[str, Any] = {
        "catalog_id": "curlew", "release": "2", "title": "t", "waveband": "radio", "fingerprint": "f",
        "first_seen_at": "2026-12-01T00:00:00Z",
    } | changes  # fmt: skip
    marks = ", ".join("?" * len(values))
    connection.execute(f"INSERT INTO catalog ({', '.join(values)}) VALUES ({marks})", tuple(values.values()))


def test_what_may_be_stored_is_stored(raw: sqlite3.Connection) -> None:
    insert(raw)
    assert raw.execute("SELECT count(*) FROM catalog").fetchone() == (1,)


@pytest.mark.parametrize(
    "changes",
    [
        {"waveband": "wireless"},
        {"title": b"bytes"},
        {"title": None},
        {"first_seen_at": "2026-12-01 00:00:00"},
        {"first_seen_at": "2026-12-01T00:00:00+05:00"},
        {"catalog_key": 1.5},
        {"catalog_key": "one"},
    ],
    ids=str,
)
def test_what_may_not_be_stored_is_refused(raw: sqlite3.Connection, changes: dict[str, Any]) -> None:
    with pytest.raises(sqlite3.IntegrityError):
        insert(raw, **changes)


def test_a_run_needs_its_target(raw: sqlite3.Connection) -> None:
    with pytest.raises(sqlite3.IntegrityError, match="FOREIGN KEY"):
        raw.execute(
            "INSERT INTO run (target_id, version, options, started_at) VALUES (7, '1', '{}', '2026-12-01T00:00:00Z')"
        )


@pytest.mark.parametrize("table", ["search", "row", "flux"])
def test_history_cannot_be_rewritten_even_from_outside(scene: Any, build: Any, path: Path, table: str) -> None:
    scene.store.put_search(scene.run_id, scene.target_id, build.reply(4), build.rows(4))
    stranger = sqlite3.connect(path)
    try:
        before = stranger.execute(f"SELECT * FROM {table}").fetchall()
        assert before
        for statement in (f"DELETE FROM {table}", f"UPDATE {table} SET search_id = search_id + 1"):
            with pytest.raises(sqlite3.IntegrityError, match="append-only"):
                stranger.execute(statement)
        assert stranger.execute(f"SELECT * FROM {table}").fetchall() == before
    finally:
        stranger.close()


def plan(connection: sqlite3.Connection, sql: str) -> str:
    return " ".join(line[3] for line in connection.execute(f"EXPLAIN QUERY PLAN {sql}"))


def test_a_piece_of_sky_is_read_by_the_clustered_key(raw: sqlite3.Connection) -> None:
    assert "SEARCH row USING PRIMARY KEY (hpx29>? AND hpx29<?)" in plan(
        raw, "SELECT source_key FROM row WHERE hpx29 BETWEEN 1 AND 9"
    )


@pytest.mark.parametrize("table", ["row", "flux"])
def test_the_rows_of_a_search_are_found_without_a_scan_or_a_sort(raw: sqlite3.Connection, table: str) -> None:
    words = plan(raw, f"SELECT * FROM {table} WHERE search_id = 1 ORDER BY ordinal")
    assert f"SEARCH {table} USING" in words and "(search_id=?)" in words
    assert "SCAN" not in words and "TEMP B-TREE" not in words


def test_the_views_run_on_an_empty_store(raw: sqlite3.Connection) -> None:
    names = [name for (name,) in raw.execute("SELECT name FROM sqlite_master WHERE type = 'view'")]
    assert sorted(names) == [
        "current_candidate", "current_finding", "current_limit", "current_luminosity_limit", "current_row",
        "current_run", "current_search", "current_standing", "standing_history",
    ]  # fmt: skip  # fmt: skip
    for name in names:
        assert raw.execute(f"SELECT * FROM {name}").fetchall() == []
