"""Questions in SQL: nothing can be changed, nothing runs for ever, every format says the same, the past can be asked."""

from __future__ import annotations

import csv
import io
import json
import math
import os
import signal
import sqlite3
import subprocess
import sys
from collections.abc import Iterator
from contextlib import closing
from dataclasses import replace
from pathlib import Path
from typing import Any

import pytest
from click.testing import CliRunner
from nine import make_store

from xmatch.cli.sql import command
from xmatch.constants import PC_CM
from xmatch.errors import ConfigurationError, RangeError, StoreError, StoreVersionError
from xmatch.records import Outcome, ReplyStatus, StandingWord
from xmatch.resources import db_path
from xmatch.store import functions, schema
from xmatch.store.asking import ask
from xmatch.store.asof import UNDATED, WAS_THERE, moment_of
from xmatch.store.printing import FORMATS, unit_of
from xmatch.store.studies import filled, read_study, studies, value_of

BIG = 2**63 - 1


@pytest.fixture(scope="module")
def demo(tmp_path_factory: pytest.TempPathFactory) -> Path:
    """The store of a demo, made once."""
    path = tmp_path_factory.mktemp("demo") / "demo.sqlite"
    return make_store(path)


def answer(path: Path, sql: str, params: Any = None, **options: Any) -> list[tuple[Any, ...]]:
    with ask(sql, params, where=path, **options) as got:
        return list(got)


def run(*args: str, **options: Any) -> Any:
    return CliRunner().invoke(command, list(args), env={"BLANKFIELD_STORE": None}, **options)


# --- nothing can be changed ----------------------------------------------------------------------
@pytest.mark.parametrize(
    "statement",
    [
        "DELETE FROM run", "DROP TABLE run", "INSERT INTO assumptions VALUES ('a', '{}') RETURNING 1",
        "CREATE TEMP TABLE a (b)", "ATTACH 'other.sqlite' AS other", "PRAGMA query_only = OFF", "PRAGMA user_version = 9",
        "BEGIN IMMEDIATE", "VACUUM INTO 'copy.sqlite'", "SELECT load_extension('x')", "SELECT 1; SELECT 2", "REINDEX",
        "WITH a AS (SELECT 1) UPDATE run SET version = 'x'", "",
    ],
)  # fmt: skip
def test_a_statement_that_is_no_question_is_refused(scene: Any, path: Path, statement: str) -> None:
    before = list(path.parent.iterdir())
    with pytest.raises(ConfigurationError):
        answer(path, statement)
    assert list(path.parent.iterdir()) == before
    assert scene.store.status()["runs"] == 1


def test_a_question_that_is_wrong_says_where_to_look(path: Path, scene: Any) -> None:
    for sql, told in (
        ("SELECT * FROM birds", r"no such table: birds; .*db/README\.md"),
        ("SELECT wingspan(1)", "no such function: wingspan"),
        ("SELECT :speed", "speed.*--param"),
        ("SELEC 1", "syntax error"),
    ):
        with pytest.raises(ConfigurationError, match=told):
            answer(path, sql)


ENDLESS = "WITH RECURSIVE n(i) AS (SELECT 1 UNION ALL SELECT i + 1 FROM n) SELECT {} FROM n"


def test_a_question_without_end_ends_at_its_time_limit(path: Path, scene: Any) -> None:
    for what in ("count(*)", "i"):  # one that never gives a row, and one that never stops giving
        with pytest.raises(StoreError, match=r"stopped after 0\.1 s.*--seconds"):
            answer(path, ENDLESS.format(what), time_limit_s=0.1, row_limit=0)


def test_the_row_limit_is_told(path: Path, scene: Any) -> None:
    done = run(ENDLESS.format("i"), "--store", str(path), "--rows", "3", "--format", "csv")
    assert done.stdout == "i\n1\n2\n3\n"
    assert "only the first 3 rows" in done.stderr
    exact = run("SELECT 1 AS i UNION ALL SELECT 2", "--store", str(path), "--rows", "2", "--format", "csv")
    assert exact.stderr == ""


def test_an_interrupt_ends_it_cleanly(path: Path, scene: Any, child_environment: dict[str, str]) -> None:
    # an unbounded answer: when its first rows have come, it certainly runs
    child = subprocess.Popen(
        [sys.executable, "-m", "xmatch", "sql", ENDLESS.format("i"), "--store", str(path), "--format", "csv", "--rows", "0"],
        stdout=subprocess.PIPE, stderr=subprocess.PIPE, text=True, env=child_environment,
    )  # fmt: skip
    assert child.stdout is not None
    assert child.stdout.readline() == "i\n"
    child.send_signal(signal.SIGINT)
    _, said = child.communicate(timeout=60)
    assert (child.returncode, said.strip()) == (130, "blankfield: stopped; every complete search is kept")


def test_a_reader_that_leaves_is_no_error(path: Path, scene: Any, child_environment: dict[str, str]) -> None:
    call = f"{sys.executable} -m xmatch sql '{ENDLESS.format('i')}' --store {path} --format csv --rows 0 | head -n 2"
    done = subprocess.run(call, shell=True, capture_output=True, text=True, env=child_environment, timeout=60)
    assert (done.stdout, done.stderr) == ("i\n1\n", "")


def test_a_question_imports_nothing_heavy(path: Path, scene: Any, child_environment: dict[str, str]) -> None:
    code = (
        f"import sys\nfrom xmatch.cli import main\ntry:\n    main(['sql', 'SELECT in_cone(1, 2, 1, 2, 3)', '--store', {str(path)!r}])\n"
        "except SystemExit as stop:\n    assert not stop.code\n"
        "heavy = {'numpy', 'sqlalchemy', 'pandas', 'astropy', 'alembic', 'psycopg', 'pyarrow', 'rich'} & set(sys.modules)\n"
        "sys.exit(str(heavy) if heavy else 0)"
    )
    done = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, env=child_environment)
    assert (done.returncode, done.stderr) == (0, "")


def test_what_is_no_store_of_ours_is_said(tmp_path: Path) -> None:
    with pytest.raises(StoreError, match="no store at"):
        answer(tmp_path / "none.sqlite", "SELECT 1")
    other = tmp_path / "other.sqlite"
    with closing(sqlite3.connect(other)) as connection:
        connection.execute("CREATE TABLE birds (name TEXT)")
    with pytest.raises(StoreError, match="not a store of blankfield"):
        answer(other, "SELECT 1")
    (tmp_path / "text").write_text("my thesis " * 200)
    with pytest.raises(StoreError, match="cannot be read"):
        answer(tmp_path / "text", "SELECT 1")
    with closing(sqlite3.connect(other)) as connection:
        connection.execute(f"PRAGMA application_id = {schema.APPLICATION_ID}")
        connection.execute("PRAGMA user_version = 1")
    with pytest.raises(StoreVersionError, match="store upgrade"):
        answer(other, "SELECT 1")


# --- formats -------------------------------------------------------------------------------------
MIXED = f"SELECT {BIG} AS id, 0.1 + 0.2 AS flux_jy, 'Größe, \"x\"' AS word, NULL AS nil UNION ALL SELECT NULL, 9e999, 'b', NULL"


def test_text_formats_are_exact(path: Path, scene: Any) -> None:
    listed = json.loads(run(MIXED, "--store", str(path), "--format", "json").stdout)
    assert listed[0] == {"id": BIG, "flux_jy": 0.1 + 0.2, "word": 'Größe, "x"', "nil": None}
    assert listed[1]["flux_jy"] == "inf"
    lines = list(csv.reader(io.StringIO(run(MIXED, "--store", str(path), "--format", "csv").stdout)))
    assert lines == [
        ["id", "flux_jy", "word", "nil"], [str(BIG), "0.30000000000000004", 'Größe, "x"', ""], ["", "inf", "b", ""],
    ]  # fmt: skip
    table = run(MIXED, "--store", str(path)).stdout.splitlines()
    assert table[0].split() == ["id", "flux_jy", "word", "nil"] and str(BIG) in table[2]


def test_files_keep_ids_units_and_gaps(path: Path, scene: Any, tmp_path: Path) -> None:
    import pyarrow.parquet as pq
    from astropy.table import Table

    sql = MIXED.replace("9e999", "1.5")
    for name in ("a.parquet", "a.ecsv", "a.vot"):
        assert run(sql, "--store", str(path), "--output", str(tmp_path / name)).exit_code == 0
    parquet = pq.read_table(tmp_path / "a.parquet")
    assert parquet.column("id").to_pylist() == [BIG, None]
    assert parquet.column("flux_jy").to_pylist() == [0.1 + 0.2, 1.5]
    assert parquet.schema.field("flux_jy").metadata == {b"unit": b"Jy"}
    assert parquet.schema.metadata[b"question"].decode() == sql
    for name, kind in (("a.ecsv", "ascii.ecsv"), ("a.vot", "votable")):
        table = Table.read(tmp_path / name, format=kind)
        assert table["id"][0] == BIG and table["id"].mask.tolist() == [False, True]
        assert table["flux_jy"].unit == "Jy" and table["flux_jy"][0] == 0.1 + 0.2
        assert table["word"][0] == 'Größe, "x"'
    assert sorted(one.name for one in tmp_path.iterdir() if one.name.startswith(".")) == []


@pytest.mark.parametrize("kind", FORMATS)
def test_no_rows_and_repeated_names_are_written_in_every_format(
    path: Path, scene: Any, kind: str, tmp_path: Path
) -> None:
    for sql in ("SELECT 1 AS a, 2 AS a", "SELECT 1 AS a WHERE 0"):
        out = tmp_path / "out"
        done = run(sql, "--store", str(path), "--format", kind, "--output", str(out))
        assert done.exit_code == 0, done.exception
        assert out.stat().st_size > 0


def test_a_file_that_cannot_be_written_leaves_the_old_one(path: Path, scene: Any, tmp_path: Path) -> None:
    out = tmp_path / "out.csv"
    out.write_text("old")
    assert isinstance(run("SELEC", "--store", str(path), "--output", str(out)).exception, ConfigurationError)
    assert out.read_text() == "old"
    done = run("SELECT 1", "--store", str(path), "--output", str(tmp_path / "none" / "out.csv"))
    assert isinstance(done.exception, StoreError)


def test_a_terminal_is_not_steered_by_what_an_archive_sent(path: Path, scene: Any) -> None:
    table = run("SELECT char(27) || '[31mred' || char(10) || 'x' AS word", "--store", str(path)).stdout
    assert "\x1b" not in table and "\\x1b[31mred\\nx" in table


@pytest.mark.parametrize(
    ("name", "unit"),
    [("flux_erg_s_cm2", "erg / (s cm2)"), ("luminosity_erg_s", "erg / s"), ("age_days", "d"), ("word", ""),
     ("pm_ra_mas_yr", "mas / yr"), ("dm_pc_cm3", "pc / cm3"), ("period_s", "s"), ("n_rows", "")],
)  # fmt: skip
def test_units_stand_in_the_names(name: str, unit: str) -> None:
    from astropy.units import Unit

    assert unit_of(name) == unit
    Unit(unit)


def test_the_question_may_stand_in_a_file(path: Path, scene: Any, tmp_path: Path) -> None:
    file = tmp_path / "mine.sql"
    file.write_text("-- mine\nSELECT :a + 1 AS b;\n")
    for args, given in ((["--file", str(file)], None), (["--file", "-"], file.read_text())):
        done = run(*args, "--param", "a=2", "--store", str(path), "--format", "csv", input=given)
        assert done.stdout == "b\n3\n"
    for wrong in (
        ["--file", str(tmp_path / "none")],
        ["SELECT 1", "--file", str(file)],
        [],
        ["SELECT 1", "--param", "a"],
    ):
        assert isinstance(run(*wrong, "--store", str(path)).exception, ConfigurationError)


# --- functions -----------------------------------------------------------------------------------
@pytest.mark.parametrize(
    ("call", "value"),
    [
        ("separation_arcsec(0, 0, 0, 1)", 3600.0),
        ("in_cone(359.9999, 0, 0.0001, 0, 1)", 1), ("in_cone(0, 0, 0, 1, 3599)", 0),
        ("jy_from_ab_mag(0.0)", 3631.0), ("ab_mag_from_jy(3631e-8)", 20.0), ("ab_mag_from_jy(-1.0)", None),
        ("jy_from_mag(5.0, 1594.0)", 15.94),
        ("luminosity_erg_s(1e-13, 1000.0)", 4 * math.pi * (1e3 * PC_CM) ** 2 * 1e-13),
        ("flux_erg_s_cm2(luminosity_erg_s(1e-13, 10.0), 10.0)", 1e-13), ("flux_erg_s_cm2(1.0, 0.0)", None),
        ("hz_from_kev(1.0)", 2.417989242e17), ("hz_from_um(1.0)", 2.99792458e14),
        ("days_between('2026-01-01T00:00:00Z', '2026-01-02T12:00:00Z')", 1.5),
        ("jy_from_ab_mag(NULL)", None), ("separation_arcsec(NULL, 0, 0, 0)", None),
    ],
)  # fmt: skip
def test_functions_by_hand(path: Path, scene: Any, call: str, value: float | None) -> None:
    ((got,),) = answer(path, f"SELECT {call}")
    assert got == (None if value is None else pytest.approx(value, rel=1e-9))


def test_functions_are_told_in_the_contract() -> None:
    readme = db_path("README.md").read_text(encoding="utf-8")
    postgres = db_path("functions-postgresql.sql").read_text(encoding="utf-8")
    for name, function in functions.FUNCTIONS.items():
        assert f"| {name}({function.arguments}) | {function.unit} | {function.meaning} |" in readme
        assert (f"FUNCTION {name}(" in postgres) == function.on_postgresql


def test_the_fast_way_into_a_cone_finds_what_the_slow_one_finds(path: Path, scene: Any, build: Any) -> None:
    scene.store.put_search(scene.run_id, scene.target_id, build.reply(400), build.rows(400))
    centre = {"ra": 264.50625, "dec": -33.81583, "radius": 60.0}
    fast = """
        SELECT ordinal FROM json_each(cone_stretches(:ra, :dec, :radius)) AS stretch
        CROSS JOIN row ON hpx29 BETWEEN json_extract(stretch.value, '$[0]') AND json_extract(stretch.value, '$[1]')
        WHERE in_cone(ra_deg, dec_deg, :ra, :dec, :radius) ORDER BY ordinal"""
    slow = "SELECT ordinal FROM row WHERE in_cone(ra_deg, dec_deg, :ra, :dec, :radius) ORDER BY ordinal"
    assert answer(path, fast, centre) == answer(path, slow, centre) != []
    plan = "; ".join(line[3] for line in answer(path, "EXPLAIN QUERY PLAN " + fast, centre))
    assert "SEARCH row USING PRIMARY KEY (hpx29>? AND hpx29<?)" in plan


def test_without_sqlites_mathematics_ours_serve() -> None:
    class Poor:
        def __init__(self) -> None:
            self.made: dict[str, Any] = {}

        def create_function(self, name: str, n: int, call: Any, deterministic: bool) -> None:
            self.made[name] = call

        def execute(self, sql: str) -> None:
            raise sqlite3.OperationalError("no such function: power")

    poor = Poor()
    functions.register(poor)  # type: ignore[arg-type]
    assert poor.made["power"](2.0, 3) == 8.0 and poor.made["radians"](180.0) == math.pi
    assert poor.made["asin"](2.0) is None and poor.made["cos"](None) is None


# --- the past ------------------------------------------------------------------------------------
@pytest.fixture
def two_answers(scene: Any, build: Any, path: Path, monkeypatch: pytest.MonkeyPatch) -> Iterator[Path]:
    """One answer of 1 December and another of 5 December, with a search that failed between them."""
    import xmatch.store.store as module

    monkeypatch.setattr(module, "_now", lambda: "2026-12-01T12:00:05Z")
    store, rows = scene.store, build.rows(3)
    with closing(sqlite3.connect(path)) as connection:  # the scene was made by the clock of this machine
        for sql in (
            "UPDATE target SET first_seen_at = :t",
            "UPDATE catalog SET first_seen_at = :t",
            "UPDATE run SET started_at = :t",
        ):
            connection.execute(sql, {"t": "2026-12-01T11:59:00Z"})
        connection.commit()
    found = store.put_search(scene.run_id, scene.target_id, build.reply(3), rows)
    first = build.look(scene.run_id, found, rows)
    store.put_answer(scene.run_id, scene.target_id, first)
    store.finish_run(scene.run_id)
    monkeypatch.setattr(module, "_now", lambda: "2026-12-05T08:00:00Z")
    run_id = store.begin_run(scene.target_id, "0.1")
    store.put_search(
        run_id, scene.target_id,
        build.reply(0, ReplyStatus.UNANSWERED, asked_at="2026-12-03T00:00:00Z", address="http://127.0.0.1/slow"), None,
    )  # fmt: skip
    later = store.put_search(run_id, scene.target_id, build.reply(3, asked_at="2026-12-05T08:00:00Z"), rows)
    again = build.look(run_id, later, rows)
    findings = (again.findings[0], replace(again.findings[1], outcome=Outcome.BLANK))
    standing = replace(again.standings[0], word=StandingWord.RULED_OUT, survival=0.001)
    store.put_answer(run_id, scene.target_id, replace(again, findings=findings, standings=(standing,)))
    yield path


def test_the_store_can_be_asked_as_it_was(two_answers: Path) -> None:
    outcome = "SELECT catalog_id, outcome FROM current_finding ORDER BY catalog_id"
    before = [("curlew", "ambiguous"), ("stilt", "unanswered")]
    now = [("curlew", "ambiguous"), ("stilt", "blank")]
    assert answer(two_answers, outcome) == answer(two_answers, outcome, as_of="2026-12-05") == now
    assert answer(two_answers, outcome, as_of="2026-12-01") == before
    assert answer(two_answers, outcome, as_of="2026-12-05T09:59:59+02:00") == before
    assert answer(two_answers, outcome, as_of="2026-12-05T08:00:00Z") == now
    assert answer(two_answers, outcome, as_of="2026-11-30") == []
    counts = "SELECT (SELECT count(*) FROM search), (SELECT count(*) FROM row), (SELECT count(*) FROM flux_limit), (SELECT count(*) FROM class_test)"
    assert [answer(two_answers, counts, as_of=day) for day in ("2026-11-30", "2026-12-01", "2026-12-03", "2026-12-05")] == [
        [(0, 0, 0, 0)], [(1, 3, 2, 1)], [(2, 3, 2, 1)], [(3, 6, 4, 2)],
    ]  # fmt: skip
    # a run that had begun and not ended was so then
    assert answer(two_answers, "SELECT run_id, finished_at FROM run", as_of="2026-12-01T12:00:00Z") == [(1, None)]
    assert answer(two_answers, "SELECT now_utc()", as_of="2026-12-01") == [("2026-12-01T23:59:59.999999Z",)]


def test_the_past_cannot_be_changed_either(two_answers: Path) -> None:
    with pytest.raises(ConfigurationError):
        answer(two_answers, "DROP VIEW run", as_of="2026-12-01")


def test_the_past_keeps_the_clustered_key(two_answers: Path) -> None:
    plan = answer(two_answers, "EXPLAIN QUERY PLAN SELECT * FROM row WHERE hpx29 BETWEEN 1 AND 2", as_of="2026-12-01")
    assert any("row USING PRIMARY KEY (hpx29>? AND hpx29<?)" in line[3] for line in plan), plan


@pytest.mark.parametrize("text", ["yesterday", "2026-13-01", "2026-12-01T12:00:00", "", "2026-12-01'; --"])
def test_a_date_that_is_none_is_refused(text: str) -> None:
    with pytest.raises(ConfigurationError, match="2026-12-01"):
        moment_of(text)


def test_every_table_has_its_past() -> None:
    assert set(WAS_THERE) | UNDATED == set(schema.metadata.tables)
    assert not set(WAS_THERE) & UNDATED


# --- studies -------------------------------------------------------------------------------------
def ask_study(path: Path, name: str, **given: Any) -> list[dict[str, Any]]:
    one = studies()[name]
    with ask(one.sql, filled(one, given), where=path) as got:
        assert got.columns == [column.name for column in one.columns], name
        return [dict(zip(got.columns, row, strict=True)) for row in got]


def test_there_are_studies_and_each_says_what_it_asks() -> None:
    known = studies()
    assert len(known) >= 12
    listed = run("--list").stdout
    for one in known.values():
        assert f"{one.name} " in listed and one.title in listed
        assert one.question.endswith("?") or one.question.endswith(".")
        assert all(column.meaning for column in one.columns)
        told = run("--list", "--study", one.name).stdout
        assert one.question in told and all(f"--param {p.name}=" in told for p in one.parameters)


def rounded(lines: list[dict[str, Any]], *names: str) -> list[tuple[Any, ...]]:
    return [tuple(float(f"{line[n]:.4g}") if isinstance(line[n], float) else line[n] for n in names) for line in lines]


# What the demo is built to show, and what follows by hand: 4 pi (5 kpc)^2 = 2.9912e45 cm^2, so 2.8901e-13 becomes
# 8.645e32; the middle of 1.6 to 4.1 kpc is sqrt(1.6 x 4.1) = 2.5612 kpc, so 3.5849 mJy becomes 23.52 mJy kpc^2.
ON_THE_DEMO: dict[str, tuple[dict[str, Any], tuple[str, ...], list[tuple[Any, ...]]]] = {
    "deepest-xray-limit": ({}, ("target_name", "catalog_id", "flux_erg_s_cm2"), [("Tern-4", "erass1-main", 9.1e-14)]),
    # the mid-infrared one is hidden by a neighbour, so not all are blank
    "infrared-blank": ({}, ("target_name",), []),
    "luminosity-at-distance": (
        {"distance_kpc": 5.0}, ("band_name", "luminosity_erg_s"),
        [("887.5 MHz", 8.388e28), ("1.4 GHz", 1.501e29), ("3 GHz", 1.073e29), ("W2", 4.891e33), ("W1", 1.361e34),
         ("Ks", 5.596e33), ("H", 7.006e33), ("J", 6.92e33), ("RP", 2.074e33), ("G", 4.125e33), ("BP", 1.347e33),
         ("0.2-2.3 keV", 8.645e32)],
    ),
    "standings-changed": ({}, ("class_id",), []),
    # invented rows at 9.84, 10.84 and 17.97 arcsec: two of them within 0.2 arcmin
    "sources-near-targets": (
        {"catalog": "2mass-psc", "radius_arcmin": 0.2}, ("target_name", "separation_arcsec"),
        [("Tern-4", 9.835), ("Tern-4", 10.84)],
    ),
    "unverified-depth": ({}, ("catalog_id",), []),
    "coverage-gaps": (
        {}, ("waveband", "looked", "not_covered", "unknown", "no_answer"),
        [("object list", 0, 0, 1, 0), ("mid-infrared", 1, 0, 0, 0), ("near-infrared", 1, 0, 0, 0),
         ("optical", 1, 1, 0, 0), ("soft X-ray", 1, 0, 0, 0), ("radio", 3, 0, 0, 0)],
    ),
    "radio-limits-by-period": (
        {}, ("period_s", "band_name", "pseudo_luminosity_mjy_kpc2"),
        [(2711.0, "887.5 MHz", 20.73), (2711.0, "1.4 GHz", 23.52), (2711.0, "3 GHz", 7.846)],
    ),
    "unlikely-chance": ({"most_chance": 0.05}, ("catalog_id", "chance"), [("erass1-main", 0.04978)]),
    "failing-archives": ({}, ("address",), []),
    "age-of-answers": ({"at_least_days": 1.0}, ("catalog_id",), []),
    "one-observation-away": (
        {}, ("class_id", "word", "test", "survival"), [("magnetar-quiescent", "open", "x-ray luminosity", 0.1923)],
    ),
    "behind-a-limit": ({}, ("catalog_id", "band_name"), [
        ("2mass-psc", "H"), ("2mass-psc", "J"), ("2mass-psc", "Ks"), ("catwise2020", "W1"), ("catwise2020", "W2"),
        ("erass1-main", "0.2-2.3 keV"), ("gaia-dr3", "BP"), ("gaia-dr3", "G"), ("gaia-dr3", "RP"), ("nvss", "1.4 GHz"),
        ("racs-low", "887.5 MHz"), ("vlass-ql1", "3 GHz")]),
    "raised-by-neighbours": (
        {}, ("catalog_id", "band_name"), [("catwise2020", "W1"), ("catwise2020", "W2"), ("erass1-main", "0.2-2.3 keV")],
    ),
}  # fmt: skip


@pytest.mark.parametrize("name", sorted(path.stem for path in db_path("studies").glob("*.sql")))
def test_a_study_answers_as_by_hand_on_the_demo(demo: Path, name: str) -> None:
    given, names, wanted = ON_THE_DEMO[name]
    got = rounded(ask_study(demo, name, **given), *names)
    key = str if name != "coverage-gaps" else None
    assert got == wanted if key is None or len(wanted) < 2 else sorted(got, key=key) == sorted(wanted, key=key)


def test_studies_find_what_they_look_for_when_it_is_there(two_answers: Path) -> None:
    (changed,) = ask_study(two_answers, "standings-changed")
    assert [changed[n] for n in ("class_id", "word_before", "word_now", "survival_now")] == [
        "godwit", "strained", "ruled out", 0.001,
    ]  # fmt: skip
    (failing,) = ask_study(two_answers, "failing-archives")
    assert [failing[n] for n in ("address", "searches", "failed", "last_failed_at")] == [
        "http://127.0.0.1/slow", 1, 1, "2026-12-03T00:00:00Z",
    ]  # fmt: skip
    unverified = ask_study(two_answers, "unverified-depth")
    assert [line["band_name"] for line in unverified] == ["H", "J"]
    (old,) = ask_study(two_answers, "age-of-answers", at_least_days=-1e6)
    assert old["asked_at"] == "2026-12-05T08:00:00Z"


def test_a_target_that_is_blank_in_every_infrared_catalog_is_found(demo: Path, tmp_path: Path) -> None:
    copy = tmp_path / "copy.sqlite"
    copy.write_bytes(demo.read_bytes())
    with closing(sqlite3.connect(copy)) as connection:
        connection.execute("UPDATE finding SET outcome = 'blank' WHERE catalog_id = 'catwise2020'")
        connection.commit()
    assert rounded(ask_study(copy, "infrared-blank"), "target_name", "catalogs", "not_looked") == [("Tern-4", 2, 0)]


def test_parameters_of_a_study_are_checked(demo: Path) -> None:
    for args, told in (
        (["--study", "sources-near-targets"], "needs --param catalog"),
        (["--study", "unlikely-chance", "--param", "p=1"], "no parameter 'p'"),
        (["--study", "../views"], "no study"),
        (["--study", "birds"], "there are age-of-answers"),
    ):
        done = run(*args, "--store", str(demo))
        assert isinstance(done.exception, ConfigurationError) and told in str(done.exception)


def test_values_are_read_as_they_look() -> None:
    assert [value_of(text) for text in ("5", "5.5", "1e-3", "'5'", "2mass-psc", " x ")] == [
        5,
        5.5,
        1e-3,
        "5",
        "2mass-psc",
        "x",
    ]


@pytest.mark.parametrize(
    "header",
    ["SELECT 1", "-- Title: a\n-- Question: b\nSELECT 1", "-- Title: a\n-- Question: b\n-- Column: c\nSELECT 1 AS c",
     "-- Title: a\n-- Question: b\n-- Parameter: x\n-- Column: c | | d\nSELECT 1 AS c"],
)  # fmt: skip
def test_a_study_without_its_header_is_refused(tmp_path: Path, header: str) -> None:
    from xmatch.errors import FactError

    path = tmp_path / "mine.sql"
    path.write_text(header)
    with pytest.raises(FactError, match="-- "):
        read_study(path)


def test_a_cone_that_is_none_gives_no_answer_in_sql(path: Path, scene: Any) -> None:
    assert answer(path, "SELECT cone_stretches(0, 91, 1)") == [(None,)]
    with pytest.raises(RangeError):
        functions.cone.ranges(0, 91, 1)


def test_a_store_on_a_read_only_medium_can_be_asked(path: Path, scene: Any, monkeypatch: pytest.MonkeyPatch) -> None:
    scene.store.close()
    allowed = os.access
    monkeypatch.setattr("xmatch.store.asking.os.access", lambda p, mode: allowed(p, mode) and not mode & os.W_OK)
    assert answer(path, "SELECT count(*) FROM run") == [(1,)]
