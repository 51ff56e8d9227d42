"""How long 36 catalogs take together, over what they must take: the slowest answer, or the busiest host.

    python tests/benchmarks/bench_fleet.py [--fastest S] [--slowest S] [--rows N]

The embedded archive answers each table after its own delay, from ``--fastest`` to ``--slowest``; several tables in one
request take the sum of theirs. Half of the tables lie at one host, as most of the real ones do; the others at six. A host
works on six requests at a time. The bound is the larger of the slowest answer and the busiest host's own
(the sum of its delays over six); the goal is 1.3 times the bound, with bundling and without. Also: how often a host is
asked, and the slowest answer against many where no host is busy. Every number comes from the same run.
"""

from __future__ import annotations

import argparse
import sys
import time

import numpy as np

from xmatch.archives.fleet import ask, ask_all
from xmatch.archives.transport import Transport
from xmatch.demo.faults import Fault
from xmatch.demo.server import DemoColumn, DemoTable, EmbeddedArchive
from xmatch.records import Question, ReplyStatus, WantedColumn

GOAL = 1.3
NOISE = 1.2
"""A goal counts as missed only beyond what a busy machine adds."""
PER_HOST = 6
N_BUSY, N_OTHERS, N_HOSTS = 18, 18, 6
WANTED = (
    WantedColumn("ID"),
    WantedColumn("RA", "deg", low=0.0, high=360.0),
    WantedColumn("DE", "deg", low=-90.0, high=90.0),
)


class Polite(Transport):
    """Polite to this machine too, where none is owed."""

    @property
    def per_host(self) -> int:
        return PER_HOST


def table(name: str, n_rows: int, host: str) -> DemoTable:
    """Rows around RA 10, Dec -20 with a few columns."""
    rng = np.random.default_rng(1)
    columns = [DemoColumn("ID", "long"), DemoColumn("RA", "double", "deg"), DemoColumn("DE", "double", "deg")]
    columns += [DemoColumn(f"m{i}", "double", "mag") for i in range(8)]
    rows = {"ID": np.arange(n_rows), "RA": rng.uniform(9.9, 10.1, n_rows), "DE": rng.uniform(-20.1, -19.9, n_rows)}
    rows |= {f"m{i}": rng.uniform(10.0, 20.0, n_rows) for i in range(8)}
    return DemoTable(name, columns, rows, "RA", "DE", host, tap_path="/tap", tap_table=name)


def question(name: str, host: str, protocol: str) -> Question:
    """A cone that holds every row."""
    path = "viz-bin/votable" if protocol == "vizier" else "tap"
    return Question(name, "1", "main", protocol, f"https://{host}/{path}", name, 10.0, -20.0, 3600.0, WANTED, 10**6)


def timed(questions: list[Question], transport: Transport, n_rows: int, bundling: bool) -> float:
    """Seconds until every question is answered whole."""
    begin = time.perf_counter()
    replies = list(ask_all(questions, transport, bundling=bundling))
    seconds = time.perf_counter() - begin
    assert len(replies) == len(questions)
    assert all(reply.status is ReplyStatus.WHOLE and reply.n_rows == n_rows for reply in replies)
    return seconds


def main() -> int:
    parser = argparse.ArgumentParser()
    parser.add_argument("--fastest", type=float, default=0.2)
    parser.add_argument("--slowest", type=float, default=3.0)
    parser.add_argument("--rows", type=int, default=50)
    given = parser.parse_args()
    busy = [f"B/{i}/t" for i in range(N_BUSY)]
    others = [(f"t{i}", f"host{i % N_HOSTS}.example") for i in range(N_OTHERS)]
    questions = [question(name, "busy.example", "vizier") for name in busy]
    questions += [question(name, host, "tap") for name, host in others]
    tables = [table(name, given.rows, "busy.example") for name in busy]
    tables += [table(name, given.rows, host) for name, host in others]
    delays = np.random.default_rng(7).permutation(np.linspace(given.fastest, given.slowest, len(questions)))
    missed = 0
    with EmbeddedArchive(tables) as archive:
        polite, plain = Polite(addresses=archive.address), Transport(addresses=archive.address)
        ask(questions[0], plain)  # first imports are start-up, not asking
        for one, delay_s in zip(questions, delays, strict=True):
            archive.misbehave(one.remote_table, Fault("delay", seconds=float(delay_s)))
        bound = max(float(delays.max()), float(delays[:N_BUSY].sum()) / PER_HOST)
        print(
            f"bound {bound:.2f} s: slowest answer {delays.max():.2f} s, busiest host {delays[:N_BUSY].sum() / PER_HOST:.2f} s"
        )
        for what, transport, bundling in (
            ("bundled, six at a time", polite, True),
            ("one by one, six at a time", polite, False),
        ):
            archive.requests.clear()
            seconds = timed(questions, transport, given.rows, bundling)
            missed += seconds > GOAL * NOISE * bound
            print(f"{what:<28} {seconds / bound:5.2f} x the bound, {len(archive.requests)} requests (goal {GOAL})")
        apart = questions[N_BUSY:]
        slowest = float(delays[N_BUSY:].max())
        seconds = timed(apart, plain, given.rows, bundling=True)
        missed += seconds > GOAL * NOISE * slowest
        print(f"{'no host busy':<28} {seconds / slowest:5.2f} x the slowest answer (goal {GOAL})")
    return int(missed > 0)


if __name__ == "__main__":
    sys.exit(main())
