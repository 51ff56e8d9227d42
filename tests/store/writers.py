"""Processes that write, for the tests that kill them or let two of them write at once.

``writers.py nursery``: reads ``path seconds from_first`` lines; for each one starts a writer on that store, kills it
with SIGKILL so many seconds after its start or after its first search, and prints the keys of the searches that the writer had been told are stored.
``writers.py write path tag n``: stores n searches under its own target and prints their keys.
``writers.py race folder files n``: n processes at once make each of so many stores; prints what went wrong.
"""

from __future__ import annotations

import json
import multiprocessing
import sys
from collections.abc import Iterator
from multiprocessing.connection import Connection
from multiprocessing.synchronize import Barrier

import builders

from xmatch.records import ReplyStatus, Search
from xmatch.store.store import open_store

WAIT_S = 60.0
SIZES = (0, 3, 40, 400, 1)


def searches(path: str, tag: str) -> Iterator[Search]:
    """Store searches of many sizes without end; every fifth one failed."""
    parts = [builders.rows(n, seed=n) for n in SIZES]
    with open_store(path) as store:
        target_id = store.put_target(builders.replace(builders.TARGET, name=tag))
        builders.register(store)
        run_id = store.begin_run(target_id, "0.1")
        while True:
            for rows in parts:
                yield store.put_search(run_id, target_id, builders.reply(len(rows)), rows)
            yield store.put_search(run_id, target_id, builders.reply(0, ReplyStatus.MISREAD), None)


def say(what: object) -> None:
    sys.stdout.write(json.dumps(what) + "\n")
    sys.stdout.flush()


def tell(path: str, there: Connection) -> None:
    for search in searches(path, "killed"):
        there.send(search.search_id)


def nursery() -> None:
    fork = multiprocessing.get_context("fork")
    say("ready")
    for line in sys.stdin:
        path, seconds, from_first = json.loads(line)
        here, there = fork.Pipe(duplex=False)
        writer = fork.Process(target=tell, args=(path, there))
        writer.start()
        there.close()
        if from_first:
            here.poll(WAIT_S)  # on a busy machine the first search may take its time
        writer.join(seconds)
        writer.kill()
        writer.join()
        told = []
        try:
            while here.poll():
                told.append(here.recv())
        except EOFError:
            pass
        here.close()
        say({"exit": writer.exitcode, "told": told})


def write(path: str, tag: str, n: int) -> None:
    stored = searches(path, tag)
    say([next(stored).search_id for _ in range(n)])
    stored.close()  # type: ignore[attr-defined]


def make(path: str, start: Barrier, there: Connection) -> None:
    start.wait()
    try:
        with open_store(path) as store:
            there.send("" if store.status()["targets"] == 0 else "not empty")
    except Exception as fault:
        there.send(repr(fault))


def race(folder: str, files: int, n: int) -> None:
    fork = multiprocessing.get_context("fork")
    wrong = []
    for number in range(files):
        start = fork.Barrier(n)
        pipes = [fork.Pipe(duplex=False) for _ in range(n)]
        makers = [fork.Process(target=make, args=(f"{folder}/{number}.sqlite", start, there)) for _, there in pipes]
        for maker in makers:
            maker.start()
        wrong += [here.recv() for here, _ in pipes]
        for maker in makers:
            maker.join()
    say([fault for fault in wrong if fault])


if __name__ == "__main__":
    if sys.argv[1] == "nursery":
        nursery()
    elif sys.argv[1] == "race":
        race(sys.argv[2], int(sys.argv[3]), int(sys.argv[4]))
    else:
        write(sys.argv[2], sys.argv[3], int(sys.argv[4]))
