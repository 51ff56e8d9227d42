"""The PostgreSQL back-end where it differs: questions, copies between back-ends, writers at once, errors."""

from __future__ import annotations

import re
import subprocess
import sys
from collections.abc import Iterator
from pathlib import Path
from typing import Any

import pytest
from click.testing import CliRunner
from nine import make_store

from xmatch.cli import sql as sql_command
from xmatch.cli import store as store_command
from xmatch.errors import ConfigurationError, StoreBusyError, StoreError, StoreVersionError
from xmatch.store import copying, functions, near, schema
from xmatch.store.asking import ask
from xmatch.store.asking_postgres import marks
from xmatch.store.place import locate, shown
from xmatch.store.store import open_store
from xmatch.store.studies import filled, studies

WRITERS = Path(__file__).parent / "writers.py"


@pytest.fixture(scope="module")
def demo(tmp_path_factory: pytest.TempPathFactory) -> Path:
    path = tmp_path_factory.mktemp("demo") / "demo.sqlite"
    return make_store(path)


@pytest.fixture(scope="module")
def both(demo: Path, server: Any) -> tuple[Path, str]:
    """The demo's store as a file, and the same in PostgreSQL."""
    url = server.new_schema()
    copying.copy_store(demo, url)
    return demo, url


def answer(where: Any, sql: str, params: Any = None, **options: Any) -> list[tuple[Any, ...]]:
    with ask(sql, params, where=where, **options) as got:
        return list(got)


# --- copies --------------------------------------------------------------------------------------
def test_a_store_goes_there_and_back_with_nothing_changed(both: tuple[Path, str], tmp_path: Path) -> None:
    path, url = both
    back = tmp_path / "back.sqlite"
    there = copying.copy_store(url, back)
    again = copying.copy_store(path, tmp_path / "again.sqlite")
    assert there == again
    counts = {table.table: table.rows for table in there}
    assert set(counts) == set(schema.metadata.tables) - {"schema_revision"}
    assert counts["search"] == 9 and counts["row"] == 714 + 86 + 3 + 248 + 69 + 608 + 128 + 416
    assert len({table.checksum for table in there if table.rows}) == sum(1 for table in there if table.rows)
    # and a file made so is like any other
    with open_store(back) as store:
        assert store.remarks == ()
        assert store.status()["searches"] == 9


def test_a_copy_goes_on_counting_where_the_first_ended(both: tuple[Path, str], build: Any, empty_schema: Any) -> None:
    url = empty_schema()
    copying.copy_store(both[0], url)
    with open_store(url) as store:
        build.register(store)
        target = store.put_target(build.TARGET)
        run_id = store.begin_run(target, "0.1")
        assert store.put_search(run_id, target, build.reply(2), build.rows(2)).search_id == 10
        assert store.status()["targets"] == 2


def test_a_store_with_contents_is_never_copied_into(both: tuple[Path, str], tmp_path: Path) -> None:
    path, url = both
    with pytest.raises(StoreError, match="not empty"):
        copying.copy_store(path, url)
    with pytest.raises(StoreError, match="onto itself"):
        copying.copy_store(path, path)


def test_a_copy_that_differs_is_not_kept(
    both: tuple[Path, str], tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    # a driver that rounds: the first row of every table arrives changed
    parts = copying._parts

    def rounding(connection: Any, table: Any) -> Iterator[list[Any]]:
        for part in parts(connection, table):
            yield part if connection.engine.dialect.name == "postgresql" else [tuple(map(str, row)) for row in part]

    monkeypatch.setattr(copying, "_parts", rounding)
    with pytest.raises(StoreError, match="differs after copying"):
        copying.copy_store(both[1], tmp_path / "b.sqlite")
    monkeypatch.undo()
    with open_store(tmp_path / "b.sqlite") as store:
        assert store.status()["searches"] == store.status()["targets"] == 0


# --- questions -----------------------------------------------------------------------------------
def close(a: Any, b: Any) -> bool:
    return bool(a == pytest.approx(b, rel=1e-12) if isinstance(a, float) else a == b)


GIVEN = {"sources-near-targets": {"catalog": "2mass-psc"}, "unlikely-chance": {"most_chance": 0.9}}


@pytest.mark.parametrize("name", sorted(studies()))
def test_a_study_says_the_same_on_both(both: tuple[Path, str], name: str) -> None:
    one = studies()[name]
    # "now" is told, because the two are asked one after the other
    when = {"as_of": "2099-01-01"} if name == "age-of-answers" else {}
    first, second = (answer(where, one.sql, filled(one, GIVEN.get(name, {})), **when) for where in both)
    assert len(first) == len(second)
    for left, right in zip(first, second, strict=True):
        assert all(map(close, left, right)), (left, right)


def test_functions_say_the_same_on_both(both: tuple[Path, str]) -> None:
    calls = [
        "separation_arcsec(264.5, -33.8, 264.51, -33.79)", "separation_arcsec(0, 90, 180, -90)",
        "in_cone(359.9999, 0, 0.0001, 0, 1)", "jy_from_ab_mag(20.5)", "ab_mag_from_jy(1e-5)", "ab_mag_from_jy(-1)",
        "jy_from_mag(5, 1594)", "luminosity_erg_s(1e-13, 5000)", "flux_erg_s_cm2(1e33, 5000)", "flux_erg_s_cm2(1, 0)",
        "hz_from_kev(2.5)", "hz_from_um(2.2)", "hz_from_um(0)", "jy_from_ab_mag(NULL)",
        "days_between('2026-01-01T00:00:00Z', '2026-03-02T12:00:00.5Z')",
    ]  # fmt: skip
    told = {name for call in calls for name in [call.partition("(")[0]]}
    assert told == {name for name, function in functions.FUNCTIONS.items() if function.on_postgresql}
    left, right = (answer(where, f"SELECT {', '.join(calls)}")[0] for where in both)
    for call, a, b in zip(calls, left, right, strict=True):
        assert close(a, b), call


@pytest.mark.parametrize("name", [n for n, f in functions.FUNCTIONS.items() if not f.on_postgresql])
def test_a_function_that_is_missing_is_named(both: tuple[Path, str], name: str) -> None:
    with pytest.raises(ConfigurationError, match=f"{name} exists on SQLite stores only"):
        answer(both[1], f"SELECT {name}(1, 2, 3)")


@pytest.mark.parametrize(
    "statement",
    [
        "DELETE FROM run", "DROP TABLE run", "SELECT 1; DROP TABLE class_test", "SELECT 1; COMMIT; DELETE FROM standing",
        "WITH gone AS (DELETE FROM standing RETURNING 1) SELECT * FROM gone", "SET TRANSACTION READ WRITE",
        "SELECT set_config('transaction_read_only', 'off', false)", "SELECT nextval('run_run_id_seq')",
        "CREATE TEMP TABLE a (b int)", "COPY run TO STDOUT", "VACUUM", "EXPLAIN ANALYZE DELETE FROM run",
    ],
)  # fmt: skip
def test_a_statement_that_is_no_question_is_refused(both: tuple[Path, str], statement: str) -> None:
    with pytest.raises((ConfigurationError, StoreError)):
        answer(both[1], statement)
    assert answer(both[1], "SELECT count(*) FROM run") == [(1,)]
    assert answer(both[1], "SELECT count(*) FROM standing") == [(4,)]
    assert answer(both[1], "SELECT count(*) > 0 FROM class_test") == [(1,)]


def test_what_a_function_does_on_the_side_is_undone(both: tuple[Path, str]) -> None:
    answer(both[1], "SELECT lo_create(7)")
    assert answer(both[1], "SELECT count(*) FROM pg_largeobject_metadata WHERE oid = 7") == [(0,)]


def test_a_question_ends_at_its_limits(both: tuple[Path, str]) -> None:
    endless = "WITH RECURSIVE n(i) AS (SELECT 1 UNION ALL SELECT i + 1 FROM n) SELECT count(*) FROM n"
    with pytest.raises(StoreError, match=r"stopped after 0\.2 s"):
        answer(both[1], endless, time_limit_s=0.2)
    with ask("SELECT generate_series(1, 1000000) AS i", where=both[1], row_limit=3) as got:
        assert list(got) == [(1,), (2,), (3,)] and got.more


def test_the_past_of_a_database(both: tuple[Path, str]) -> None:
    for when, n in (("2020-01-01", 0), ("2099-01-01", 9)):
        for where in both:
            counts = answer(
                where,
                "SELECT (SELECT count(*) FROM current_search), (SELECT count(*) FROM current_finding)",
                as_of=when,
            )
            assert counts == [(n, n)]
    with pytest.raises((ConfigurationError, StoreError)):
        answer(both[1], "DROP VIEW run", as_of="2020-01-01")


def test_marks_leave_quotes_comments_and_casts_alone() -> None:
    sql = "SELECT ':a', \":b\", a::text, :c -- :d %\n, '5%' /* :e */ || ?, x LIKE 'a%'"
    assert marks(sql) == "SELECT ':a', \":b\", a::text, %(c)s -- :d %%\n, '5%%' /* :e */ || %s, x LIKE 'a%%'"


def test_parameters_and_percent_signs_reach_the_server(both: tuple[Path, str]) -> None:
    assert answer(both[1], "SELECT CAST(:x AS float8) + 1, 'a%', CAST(:t AS text)", {"x": 1.5, "t": "%s"}) == [
        (2.5, "a%", "%s")
    ]
    with pytest.raises(ConfigurationError, match="missing"):
        answer(both[1], "SELECT CAST(:missing AS text)")


def test_the_commands_take_a_url(both: tuple[Path, str], empty_schema: Any) -> None:
    path, url = both
    run = CliRunner().invoke
    done = run(sql_command.command, ["--study", "infrared-blank", "--store", url, "--format", "csv"])
    assert done.stdout == "target_name,catalogs,not_looked\n"
    assert "is sound: 9 searches" in run(store_command.command, ["check", "--store", url]).output
    status = run(store_command.command, ["--store", url, "--json"]).output
    assert '"searches": 9' in status and "host=" not in status
    copied = run(store_command.command, ["copy", "--store", str(path), empty_schema()])
    assert copied.exit_code == 0 and "every table is the same on both sides" in copied.output
    assert "already" in run(store_command.command, ["upgrade", "--store", url]).output


def test_a_backup_of_a_database_is_a_file(both: tuple[Path, str], tmp_path: Path) -> None:
    to = tmp_path / "b.sqlite"
    assert CliRunner().invoke(store_command.command, ["backup", "--store", both[1], str(to)]).exit_code == 0
    assert answer(to, "SELECT count(*) FROM search") == [(9,)]


# --- opening -------------------------------------------------------------------------------------
def test_an_earlier_database_is_upgraded(server: Any, empty_schema: Any, build: Any) -> None:
    url = empty_schema()
    with open_store(url) as store:
        store.put_target(build.TARGET)
    (name,) = re.findall(r"search_path%3D(\w+)", url)
    server.run(
        f"UPDATE {name}.schema_revision SET version_num = '0002'", f"DROP INDEX {name}.search_asked_at",
        f"DROP VIEW {name}.standing_history",
    )  # fmt: skip
    with pytest.raises(StoreVersionError, match="store upgrade"):
        open_store(url, read_only=True)
    with pytest.raises(StoreVersionError, match="store upgrade"):
        answer(url, "SELECT 1")
    with open_store(url) as store:
        assert f"from schema version 2 to {schema.SCHEMA_VERSION}" in store.remarks[0]
        assert store.frame("SELECT count(*) AS n FROM standing_history")["n"].tolist() == [0]
        assert store.status()["targets"] == 1
    server.run(f"UPDATE {name}.schema_revision SET version_num = '0077'")
    with pytest.raises(StoreVersionError, match="0077"):
        open_store(url)


def test_what_is_no_store_is_left_alone(server: Any, empty_schema: Any) -> None:
    url = empty_schema()
    for call in (lambda: open_store(url, read_only=True), lambda: answer(url, "SELECT 1")):
        with pytest.raises(StoreError, match="no store"):
            call()
    (name,) = re.findall(r"search_path%3D(\w+)", url)
    server.run(f"CREATE TABLE {name}.target (bird text)")
    with pytest.raises(StoreError, match="somebody else"):
        open_store(url)


def test_a_server_that_is_not_there_is_named_without_the_password(tmp_path: Path) -> None:
    url = f"postgresql+psycopg://reader:hunter2@/db?host={tmp_path}"
    for call in (lambda: open_store(url), lambda: answer(url, "SELECT 1")):
        with pytest.raises(StoreError, match="check that the server runs") as caught:
            call()
        assert "hunter2" not in str(caught.value)
    assert shown(str(locate("postgres://u:p@h:5/d?sslmode=require"))) == "postgresql+psycopg://u@h:5/d"


def test_history_cannot_be_rewritten(server: Any, empty_schema: Any, build: Any) -> None:
    url = empty_schema()
    with open_store(url) as store:
        build.register(store)
        target = store.put_target(build.TARGET)
        store.put_search(store.begin_run(target, "0.1"), target, build.reply(2), build.rows(2))
        for statement in ("UPDATE search SET n_rows = 0", "DELETE FROM flux", "DELETE FROM row"):
            with pytest.raises(StoreError, match="append-only"), store.writing() as connection:
                connection.exec_driver_sql(statement)
        assert store.status()["rows"] == 2


def test_the_cone_uses_the_key(both: tuple[Path, str]) -> None:
    with open_store(both[1], read_only=True) as store, store._driver_cursor() as (cursor, dialect):
        # few rows fit into few pages, where the planner would read them all
        cursor.execute("SET enable_seqscan = off")
        values = {"ra": 1.0, "dec": 2.0, "cos_dec": 1.0, "stretches": "[[1,2]]", "wanted": "[[1, 1.0]]", "h": 1.0}
        for statement in (dialect.within, dialect.pairs):
            cursor.execute("EXPLAIN " + statement, values)
            plan = "\n".join(line for (line,) in cursor.fetchall())
            assert "row_pkey" in plan and "hpx29 >=" in plan
    assert near.DIALECTS["postgresql"] is dialect


def test_two_writers_at_once_lose_nothing(empty_schema: Any, child_environment: dict[str, str]) -> None:
    url, n = empty_schema(), 20
    both = [
        subprocess.Popen(
            [sys.executable, "-W", "error", str(WRITERS), "write", url, tag, str(n)],
            stdout=subprocess.PIPE, text=True, env=child_environment,
        )
        for tag in ("one", "two")
    ]  # fmt: skip
    told = [set(re.findall(r"\d+", process.communicate(timeout=100)[0])) for process in both]
    assert [process.returncode for process in both] == [0, 0]
    assert [len(keys) for keys in told] == [n, n] and not told[0] & told[1]
    with open_store(url) as store:
        assert store.status()["searches"] == 2 * n
        assert len(store.frame("SELECT * FROM catalog")) == 1


def test_another_writer_is_waited_for_and_then_named(empty_schema: Any, build: Any) -> None:
    url = empty_schema()
    with open_store(url) as first, open_store(url, wait_s=0.05) as second, first.writing():
        with pytest.raises(StoreBusyError, match="locked by another writer"):
            second.put_target(build.TARGET)
        # readers are not held up
        assert second.status()["targets"] == 0
