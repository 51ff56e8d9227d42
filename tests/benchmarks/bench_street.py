"""Ratios of the main street, all measured in one run.

    python tests/benchmarks/bench_street.py [--rounds N]

- start-up: ``blankfield --help`` against ``python -c "import astropy.coordinates, pandas"`` (goal: under 0.5)
- warm look: a whole process that answers from the store, for the nine catalogs of the first street (goal: under 1.5 s)
  and for all 49 (our own mark, to see it grow: 3 s)
- concurrent asking against the slowest single answer (goal: under 1.3)
- the whole demo (goal: under 10 s)

Exit code 1 when a goal is missed by more than the noise of a busy machine allows (factor 1.5).
"""

from __future__ import annotations

import argparse
import os
import subprocess
import sys
import tempfile
import time
from pathlib import Path

NOISE = 1.5
NINE = ("erass1-main", "gaia-dr3", "ps1-dr1", "2mass-psc", "catwise2020", "nvss", "racs-low", "vlass-ql1", "atnf-psr")


def best(command: list[str], rounds: int, env: dict[str, str]) -> float:
    """Shortest of some cold processes, seconds."""
    times = []
    for _ in range(rounds):
        start = time.perf_counter()
        subprocess.run(command, check=True, capture_output=True, env=env)
        times.append(time.perf_counter() - start)
    return min(times)


def asking(delay_s: float) -> float:
    """Time of asking every catalog of the demo after one delay each, over the slowest answer to one of them alone."""
    from xmatch.archives.fleet import ask, ask_all
    from xmatch.archives.transport import Transport
    from xmatch.catalogs import load_catalogs
    from xmatch.demo.faults import Fault
    from xmatch.demo.scene import demo_archive, demo_target

    target = demo_target()
    position = target.position
    questions = [
        catalog.question(catalog.tables[-1], position.ra_deg, position.dec_deg, catalog.neighbourhood_arcsec)
        for catalog in load_catalogs().values()
        if not catalog.needs_check and not catalog.is_mirrored
    ]
    with demo_archive() as archive:
        transport = Transport(addresses=archive.address)
        largest = max(questions, key=lambda question: ask(question, transport).n_rows)
        archive.misbehave("*", Fault("delay", seconds=delay_s))
        start = time.perf_counter()
        ask(largest, transport)
        slowest = time.perf_counter() - start
        start = time.perf_counter()
        replies = list(ask_all(questions, transport, bundling=False))
        whole = time.perf_counter() - start
    assert len(replies) == len(questions)
    return whole / slowest


def main() -> int:
    parser = argparse.ArgumentParser()
    parser.add_argument("--rounds", type=int, default=3)
    rounds = parser.parse_args().rounds
    python = sys.executable
    missed = 0

    def report(what: str, value: float, goal: float, unit: str) -> None:
        nonlocal missed
        missed += value > goal * NOISE
        print(f"{what:<46} {value:7.2f} {unit:<6} goal {goal:g}{'' if value <= goal else '   MISSED'}")

    with tempfile.TemporaryDirectory() as folder:
        env = os.environ | {"BLANKFIELD_STORE": str(Path(folder) / "bench.sqlite")}
        eager = best([python, "-c", "import astropy.coordinates, pandas"], rounds, env)
        help_ = best([python, "-m", "xmatch", "--help"], rounds, env)
        report("start-up of --help / eager imports", help_ / eager, 0.5, "x")
        start = time.perf_counter()
        demo = [python, "-m", "xmatch", "demo", "--store", env["BLANKFIELD_STORE"], "--write-target", folder]
        subprocess.run(demo, check=True, capture_output=True, env=env)
        report("demo, whole process", time.perf_counter() - start, 10.0, "s")
        warm = [python, "-m", "xmatch", "look", str(Path(folder) / "tern-4.toml"), "--offline"]
        nine = [word for name in NINE for word in ("--only", name)]
        report("warm look, nine catalogs, whole process", best([*warm, *nine], rounds, env), 1.5, "s")
        report("warm look, 49 catalogs, whole process", best(warm, rounds, env), 3.0, "s")
    report("asking all catalogs / slowest single answer", asking(2.0), 1.3, "x")
    return 1 if missed else 0


if __name__ == "__main__":
    sys.exit(main())
