"""A look killed at any moment leaves a store that opens and holds only whole searches; the next look goes on from it."""

from __future__ import annotations

import json
import os
import signal
import sqlite3
import subprocess
import sys
from pathlib import Path
from typing import Any

import pytest

from xmatch.catalogs import load_catalogs
from xmatch.demo.faults import Fault
from xmatch.demo.sky import BUILT_TO_SHOW
from xmatch.resources import fixture_path
from xmatch.store.store import open_store

CONFIRMED = {name: str(BUILT_TO_SHOW[name]) for name, catalog in load_catalogs().items() if not catalog.needs_check}
TARGET = str(fixture_path("demo/tern-4.toml"))


def killed_look(archive: Any, store: Path, after: int, spin: int) -> None:
    """Start a look and kill it after some searches were told whole, and a little later still."""
    process = subprocess.Popen(
        [sys.executable, "-m", "xmatch", "look", TARGET, "--store", str(store)],
        stdout=subprocess.DEVNULL, stderr=subprocess.PIPE, text=True,
        env=os.environ | {"BLANKFIELD_ARCHIVES": archive.address},
    )  # fmt: skip
    assert process.stderr is not None
    seen = 0
    while seen < after and (line := process.stderr.readline()):
        seen += ": whole" in line
    for _ in range(spin):  # somewhere inside the next search's transaction, or in the conclusions after the last
        os.sched_yield()
    process.send_signal(signal.SIGKILL)
    process.communicate(timeout=20)


def check(store: Path) -> int:
    """The file is sound and every search in it whole; returns how many there are."""
    if not store.exists():
        return 0
    with sqlite3.connect(store) as raw:
        assert raw.execute("PRAGMA integrity_check").fetchone() == ("ok",)
        assert raw.execute("PRAGMA foreign_key_check").fetchall() == []
        tables = {name for (name,) in raw.execute("SELECT name FROM sqlite_master WHERE type = 'table'")}
        if "search" not in tables:
            return 0
        uneven = raw.execute(
            "SELECT s.search_id FROM search s WHERE s.n_rows <> (SELECT count(*) FROM row r WHERE r.search_id = s.search_id)"
        ).fetchall()
        assert uneven == []
        whole: int = raw.execute("SELECT count(*) FROM search WHERE status = 'whole'").fetchone()[0]
    raw.close()
    with open_store(store, read_only=True) as opened:
        assert opened.status()
    return whole


def rounds(archive: Any, store: Path, plan: list[tuple[int, int]]) -> None:
    archive.misbehave("*", Fault("delay", seconds=0.02))
    kept = 0
    for after, spin in plan:
        killed_look(archive, store, after, spin)
        now = check(store)
        assert now >= kept
        kept = now
    done = subprocess.run(
        [sys.executable, "-m", "xmatch", "look", TARGET, "--json", "--store", str(store)],
        capture_output=True, text=True, check=True, env=os.environ | {"BLANKFIELD_ARCHIVES": archive.address},
    )  # fmt: skip
    answer = json.loads(done.stdout)
    assert {f["catalog_id"]: f["outcome"] for f in answer["findings"]} == CONFIRMED
    n_logs = sum(catalog.log is not None and not catalog.needs_check for catalog in load_catalogs().values())
    assert answer["n_from_store"] + answer["n_asked"] == len(CONFIRMED) + n_logs
    check(store)


def test_a_killed_look_keeps_what_was_whole_and_the_next_goes_on(archive: Any, tmp_path: Path) -> None:
    rounds(archive, tmp_path / "killed.sqlite", [(0, 0), (1, 0), (2, 500), (1, 3000)])


@pytest.mark.long
@pytest.mark.timeout(900)
def test_a_look_killed_many_times(archive: Any, tmp_path: Path) -> None:
    for number in range(12):
        plan = [((number + i) % 4, (137 * number + 1709 * i) % 20000) for i in range(5)]
        rounds(archive, tmp_path / f"killed-{number}.sqlite", plan)
