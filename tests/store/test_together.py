"""Two processes write and ten read at once: no search is lost, no reader is told of it, every reader sees whole searches."""

from __future__ import annotations

import json
import subprocess
import sys
from pathlib import Path

import pytest

from xmatch.store.store import open_store

WRITERS = Path(__file__).parent / "writers.py"
READER = """
import json, sys
from xmatch.store.asking import ask
from xmatch.store.store import open_store
path, rounds = sys.argv[1], int(sys.argv[2])
uneven = "SELECT search_id FROM search WHERE n_rows <> (SELECT count(*) FROM row WHERE row.search_id = search.search_id)"
seen = []
with open_store(path, read_only=True) as store:
    for _ in range(rounds):
        seen.append(store.status()["searches"])
        with ask(uneven, where=path) as answer:
            assert list(answer) == []
        store.near(264.50625, -33.81583, 30.0)
print(json.dumps(seen))
"""


def together(path: Path, writers: int, readers: int, searches: int, rounds: int, environment: dict[str, str]) -> None:
    open_store(path).close()

    def start(*args: str) -> subprocess.Popen[str]:
        return subprocess.Popen(
            [sys.executable, "-W", "error", *args],
            stdout=subprocess.PIPE,
            stderr=subprocess.PIPE,
            text=True,
            env=environment,
        )

    writing = [start(str(WRITERS), "write", str(path), f"writer {n}", str(searches)) for n in range(writers)]
    reading = [start("-c", READER, str(path), str(rounds)) for _ in range(readers)]
    told = []
    for process in reading + writing:
        out, said = process.communicate(timeout=400)
        assert (process.returncode, said) == (0, "")
        told.append(json.loads(out))
    for seen in told[:readers]:
        assert seen == sorted(seen)
    keys = [key for listed in told[readers:] for key in listed]
    assert len(set(keys)) == len(keys) == writers * searches
    with open_store(path) as store:
        assert store.status()["searches"] == writers * searches
        from xmatch.store import checking

        with store.reading() as connection:
            assert checking.faults(connection) == []


def test_writers_and_readers_at_once(tmp_path: Path, child_environment: dict[str, str]) -> None:
    together(tmp_path / "s.sqlite", 2, 3, searches=20, rounds=10, environment=child_environment)


@pytest.mark.long
@pytest.mark.timeout(900)
def test_two_write_and_ten_read_for_long(tmp_path: Path, child_environment: dict[str, str]) -> None:
    together(tmp_path / "s.sqlite", 2, 10, searches=300, rounds=100, environment=child_environment)
