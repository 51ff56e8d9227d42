"""Whole lists, footprints, pointings and checks: kept as they came, the newest one handed out, never changed."""

from __future__ import annotations

import sqlite3
from contextlib import closing
from dataclasses import replace
from typing import Any

import numpy as np
import pytest

from xmatch.errors import StoreError
from xmatch.records import Pointings
from xmatch.store.schema_lists import CheckVerdict


def whole(build: Any, n: int, **changes: Any) -> Any:
    return replace(build.reply(n), **({"body": b"<VOTABLE/>" * 100} | changes))


def test_a_list_is_kept_with_its_bytes_and_rows_and_the_newest_is_handed_out(scene: Any, build: Any) -> None:
    store = scene.store
    first = whole(build, 3, asked_at="2026-11-01T00:00:00Z")
    store.put_list(first, build.rows(3))
    second = whole(build, 2, asked_at="2026-12-01T00:00:00Z", body=b"other")
    key = store.put_list(second, build.rows(2))
    question = first.question
    copy = store.latest_list(question.catalog_id, question.release, question.table)
    assert (copy.list_id, copy.n_rows, copy.body, copy.asked_at) == (key, 2, b"other", "2026-12-01T00:00:00Z")
    assert store.latest_list(question.catalog_id, "another", question.table) is None
    counts = store.frame("SELECT list_id, count(*) AS n FROM list_row GROUP BY list_id ORDER BY list_id")
    assert counts["n"].tolist() == [3, 2]


def test_a_list_without_its_bytes_is_refused_whole(scene: Any, build: Any) -> None:
    with pytest.raises(StoreError, match="without its bytes"):
        scene.store.put_list(build.reply(1), build.rows(1))
    assert scene.store.frame("SELECT count(*) AS n FROM list_copy")["n"].tolist() == [0]


def test_pointings_come_back_with_their_search(scene: Any, build: Any) -> None:
    log = Pointings(
        key=("0001", "0002"), ra_deg=np.array([10.0, 10.4]), dec_deg=np.array([-5.0, -5.0]),
        exposure_s=np.array([2.0e4, 5.0e3]), field_radius_arcmin=np.array([15.0, 15.0]),
        start=("55555.1", ""), instrument=("EPIC", ""),
    )  # fmt: skip
    search = scene.store.put_search(
        scene.run_id, scene.target_id, build.reply(0), build.rows(0), (log, np.array([1.0, 24.0]))
    )
    back = scene.store.pointings_of(search.search_id)
    assert (back.key, back.start, back.instrument) == (log.key, log.start, log.instrument)
    assert back.exposure_s.tolist() == [2.0e4, 5.0e3]
    held = scene.store.frame("SELECT name, holds_target FROM pointing ORDER BY ordinal")
    assert held["holds_target"].tolist() == [1, 0]


def test_the_latest_answered_check_stands(scene: Any) -> None:
    store = scene.store
    store.put_check("a", "1", "f" * 64, CheckVerdict.GOOD, "good", {"ucd:x": "X"}, {})
    store.put_check("a", "1", "f" * 64, CheckVerdict.UNANSWERED, "down", {}, {})
    checked = store.latest_checks()["a"]
    assert (checked.verdict, checked.resolved) == (CheckVerdict.GOOD, {"ucd:x": "X"})
    store.put_check("a", "1", "f" * 64, CheckVerdict.DRIFT, "column gone", {}, {})
    assert store.latest_checks()["a"].verdict is CheckVerdict.DRIFT


def test_the_newest_footprint_is_handed_out(scene: Any) -> None:
    for body in (b"one", b"two"):
        scene.store.put_footprint("a", "1", "https://a.example/moc", "2026-12-01T00:00:00Z", "0" * 64, 0.5, body)
    assert scene.store.footprints() == {("a", "https://a.example/moc"): b"two"}


@pytest.mark.parametrize("table", ["list_copy", "list_row", "footprint", "pointing", "catalog_check"])
def test_history_is_not_rewritten(scene: Any, build: Any, path: Any, table: str) -> None:
    scene.store.put_list(whole(build, 3), build.rows(3))
    scene.store.put_footprint("a", "1", "https://a.example/moc", "2026-12-01T00:00:00Z", "0" * 64, 0.5, b"x")
    scene.store.put_check("a", "1", "f" * 64, CheckVerdict.GOOD, "good", {}, {})
    log = Pointings(("1",), np.array([1.0]), np.array([1.0]), np.array([1.0]), np.array([1.0]), ("",), ("",))
    scene.store.put_search(scene.run_id, scene.target_id, build.reply(0), build.rows(0), (log, np.array([0.0])))
    with closing(sqlite3.connect(path)) as raw, pytest.raises(sqlite3.IntegrityError, match="append-only"):
        raw.execute(f"DELETE FROM {table}")
