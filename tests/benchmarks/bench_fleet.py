"""How long many questions take together, over the slowest one alone.

    python tests/benchmarks/bench_fleet.py [--questions K] [--delay SECONDS] [--rows N]

The embedded archive answers each question after its own delay, the slowest after ``--delay``; the goal is a ratio of
at most 1.3 where no cap per host holds questions back. Both numbers come from the same run.
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
HOST = "archive.example"


def table(name: str, n_rows: int) -> DemoTable:
    """Rows around RA 10, Dec -20 with a few columns."""
    rng = np.random.default_rng(1)
    columns = [DemoColumn("ID", "long"), DemoColumn("RA", "double", "deg"), DemoColumn("DE", "double", "deg")]
    columns += [DemoColumn(f"m{i}", "double", "mag") for i in range(8)]
    rows = {"ID": np.arange(n_rows), "RA": rng.uniform(9.9, 10.1, n_rows), "DE": rng.uniform(-20.1, -19.9, n_rows)}
    rows |= {f"m{i}": rng.uniform(10.0, 20.0, n_rows) for i in range(8)}
    return DemoTable(name, columns, rows, "RA", "DE", HOST, f"/{name}")


def question(name: str) -> Question:
    """A cone that holds every row."""
    wanted = (WantedColumn("ID"), WantedColumn("RA", "deg"), WantedColumn("DE", "deg"))
    return Question(name, "1", "main", "cone", f"https://{HOST}/{name}", "", 10.0, -20.0, 3600.0, wanted, 10**6)


def measure(n_questions: int, delay_s: float, n_rows: int) -> tuple[float, float]:
    """Seconds of the slowest question alone, and of all together."""
    names = [f"t{i}" for i in range(n_questions)]
    with EmbeddedArchive([table(name, n_rows) for name in names]) as archive:
        transport = Transport(addresses=archive.address)
        ask(question(names[0]), transport)  # first imports are start-up, not asking
        for i, name in enumerate(names):
            archive.misbehave(name, Fault("delay", seconds=delay_s * (i + 1) / n_questions))
        begin = time.perf_counter()
        slowest_alone = ask(question(names[-1]), transport)
        alone_s = time.perf_counter() - begin
        begin = time.perf_counter()
        replies = list(ask_all([question(name) for name in names], transport))
        together_s = time.perf_counter() - begin
    assert all(reply.status is ReplyStatus.WHOLE and reply.n_rows == n_rows for reply in [slowest_alone, *replies])
    return alone_s, together_s


def main() -> int:
    parser = argparse.ArgumentParser()
    parser.add_argument("--questions", type=int, default=12)
    parser.add_argument("--delay", type=float, default=1.0)
    parser.add_argument("--rows", type=int, default=300)
    given = parser.parse_args()
    alone_s, together_s = measure(given.questions, given.delay, given.rows)
    ratio = together_s / alone_s
    print(f"slowest of {given.questions} questions alone: {alone_s:.3f} s; all together: {together_s:.3f} s")
    print(f"ratio {ratio:.2f} (goal {GOAL}){'' if ratio <= GOAL else '   MISSED'}")
    return 0 if ratio <= GOAL else 1


if __name__ == "__main__":
    sys.exit(main())
