"""A search is in the store whole or not at all: also when the writer is killed, also when two write at once."""

from __future__ import annotations

import json
import random
import signal
import sqlite3
import subprocess
import sys
from collections.abc import Iterator
from pathlib import Path
from typing import Any

import pytest

from xmatch.store.store import open_store

WRITERS = Path(__file__).parent / "writers.py"
LONGEST_S = 0.25
"""A writer lives up to so long after its first search: some tens of searches on an idle machine."""


@pytest.fixture
def nursery(child_environment: dict[str, str]) -> Iterator[Any]:
    """Starts writers and kills them: call it with a store and a time to live."""
    process = subprocess.Popen(
        [sys.executable, str(WRITERS), "nursery"],
        stdin=subprocess.PIPE, stdout=subprocess.PIPE, text=True, env=child_environment,
    )  # fmt: skip
    assert process.stdin is not None and process.stdout is not None
    to, back = process.stdin, process.stdout
    assert json.loads(back.readline()) == "ready"

    def kill_a_writer(path: Path, seconds: float, from_first: bool) -> list[int]:
        to.write(json.dumps([str(path), seconds, from_first]) + "\n")
        to.flush()
        answer = json.loads(back.readline())
        assert answer["exit"] == -signal.SIGKILL
        told: list[int] = answer["told"]
        return told

    yield kill_a_writer
    to.close()
    process.wait()
    back.close()


def assert_whole(path: Path) -> set[int]:
    """The file is sound and every search has its rows and their fluxes; return the keys of the searches."""
    # seen by plain SQLite first, not through our own code
    stranger = sqlite3.connect(path)
    try:
        assert stranger.execute("PRAGMA integrity_check").fetchall() == [("ok",)]
        assert stranger.execute("PRAGMA foreign_key_check").fetchall() == []
        if stranger.execute("PRAGMA user_version").fetchone() == (0,):
            # killed before the schema was there: then nothing of it is there
            assert stranger.execute("SELECT count(*) FROM sqlite_master").fetchone() == (0,)
            return set()
        counted = stranger.execute(
            """
            SELECT search_id, status, n_rows,
                (SELECT count(*) FROM row WHERE row.search_id = search.search_id),
                (SELECT count(*) FROM flux WHERE flux.search_id = search.search_id)
            FROM search
            """
        ).fetchall()
    finally:
        stranger.close()
    for search_id, status, n_rows, rows, fluxes in counted:
        assert rows == n_rows, search_id
        assert fluxes == FLUXES[n_rows], search_id
        assert status == "whole" or n_rows == 0
    return {line[0] for line in counted}


@pytest.fixture(autouse=True)
def expected_fluxes(build: Any) -> None:
    """How many lines of flux a search of each size has when it is whole."""
    for n in (0, 1, 3, 40, 400):
        rows = build.rows(n, seed=n)
        FLUXES[n] = sum(
            int(((part.value == part.value) | (part.error == part.error) | part.is_limit).sum())
            for part in rows.flux.values()
        )


FLUXES: dict[int, int] = {}


def kill_rounds(tmp_path: Path, nursery: Any, rounds: int, seed: int) -> None:
    chance = random.Random(seed)
    stored = 0
    path, before = tmp_path / "0.sqlite", set[int]()
    for number in range(rounds):
        if number % 4 == 3:
            # a new file, and a short life: killed while it makes the store
            path, before = tmp_path / f"{number}.sqlite", set()
            told = nursery(path, chance.uniform(0.0, 0.03), False)
        else:
            told = nursery(path, chance.uniform(0.02, LONGEST_S), True)
        if not path.exists():
            assert told == []
            continue
        after = assert_whole(path)
        # what the writer was told is stored is there, and so is all that was there before
        assert after >= before | set(told)
        # at most the one search that was complete but not yet told
        assert len(after) <= len(before) + len(told) + 1
        with open_store(path) as store:
            assert store.status()["searches"] == len(after)
        stored += len(after) - len(before)
        before = after
    assert stored >= rounds * 3 // 4, "the writers hardly wrote: these rounds show nothing"


def test_a_killed_writer_leaves_whole_searches_only(tmp_path: Path, nursery: Any) -> None:
    kill_rounds(tmp_path, nursery, rounds=12, seed=1)


@pytest.mark.long
@pytest.mark.timeout(900)
def test_two_hundred_killed_writers_leave_whole_searches_only(tmp_path: Path, nursery: Any) -> None:
    kill_rounds(tmp_path, nursery, rounds=200, seed=2)


def test_processes_that_make_one_store_at_once_all_get_it(tmp_path: Path, child_environment: dict[str, str]) -> None:
    # SQLite refuses some of the makers at once, without waiting: about one in fifty
    done = subprocess.run(
        [sys.executable, str(WRITERS), "race", str(tmp_path), "30", "4"],
        check=True, capture_output=True, text=True, timeout=100, env=child_environment,
    )  # fmt: skip
    assert json.loads(done.stdout) == []


def test_two_writers_at_once_lose_nothing(tmp_path: Path, child_environment: dict[str, str]) -> None:
    path, n = tmp_path / "shared.sqlite", 40
    # both find no file: making the store is part of the race
    both = [
        subprocess.Popen(
            [sys.executable, "-W", "error", str(WRITERS), "write", str(path), tag, str(n)],
            stdout=subprocess.PIPE, text=True, env=child_environment,
        )
        for tag in ("one", "two")
    ]  # fmt: skip
    told = [set(json.loads(process.communicate(timeout=100)[0])) for process in both]
    assert [process.returncode for process in both] == [0, 0]
    assert [len(keys) for keys in told] == [n, n]
    assert not told[0] & told[1]
    assert assert_whole(path) == told[0] | told[1]
    with open_store(path) as store:
        counted = store.frame(
            "SELECT name, count(*) AS n FROM search JOIN target USING (target_id) GROUP BY 1 ORDER BY 1"
        )
        assert counted.values.tolist() == [["one", n], ["two", n]]
        # one catalog, told by both, is one catalog
        assert len(store.frame("SELECT * FROM catalog")) == 1
