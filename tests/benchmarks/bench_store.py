"""Ratios of the store against what a user would script, measured in one run: ``python tests/benchmarks/bench_store.py``.

``--rows 1e6`` rows in the store (1e7 by ``--large``, which takes some minutes and 2 GB), every number the median of
interleaved repetitions. The layout of the scripts is the store's own; they leave out what the store does beside it.
"""

from __future__ import annotations

import argparse
import json
import math
import os
import sqlite3
import statistics
import subprocess
import sys
import tempfile
import time
from collections.abc import Callable
from contextlib import closing
from pathlib import Path
from typing import Any

import numpy as np

sys.path[:0] = [str(Path(__file__).parents[2]), str(Path(__file__).parents[1] / "store")]

import builders  # noqa: E402

from xmatch.records import Rows  # noqa: E402
from xmatch.store import cone, cones  # noqa: E402
from xmatch.store.store import open_store  # noqa: E402

FIELD_DEG = 20.0
"""Rows lie in a square of this side, so that an arcminute holds some of them as in a deep catalog."""
SMALL_ARCSEC, LARGE_ARCSEC = 5.0, 120.0
NAMES = (
    "hpx29", "search_id", "ordinal", "source_key", "ra_deg", "dec_deg", "sigma_major_arcsec", "sigma_minor_arcsec",
    "angle_deg", "epoch_yr", "pm_ra_mas_yr", "pm_dec_mas_yr", "pm_ra_error_mas_yr", "pm_dec_error_mas_yr", "raw",
)  # fmt: skip


def say(name: str, ratio: float, goal: str, note: str = "") -> None:
    print(f"{name:<66} {ratio:10.2f}   goal {goal:<12} {note}", flush=True)


def timed(call: Callable[[], Any]) -> float:
    start = time.perf_counter()
    call()
    return time.perf_counter() - start


def rows_of(n: int, seed: int) -> Rows:
    random = np.random.default_rng(seed)
    nothing = np.full(n, np.nan)
    ra = 100.0 + random.uniform(0.0, FIELD_DEG, n)
    dec = np.degrees(
        np.arcsin(random.uniform(math.sin(math.radians(-30.0)), math.sin(math.radians(-30.0 + FIELD_DEG)), n))
    )
    return Rows(
        key=tuple(map(str, range(n))), ra_deg=ra, dec_deg=dec, sigma_major_arcsec=np.full(n, 0.1),
        sigma_minor_arcsec=np.full(n, 0.1), angle_deg=np.zeros(n), epoch_yr=np.full(n, 2016.0), pm_ra_mas_yr=nothing,
        pm_dec_mas_yr=nothing, pm_ra_error_mas_yr=nothing, pm_dec_error_mas_yr=nothing, flux={}, raw=(),
    )  # fmt: skip


def fill(path: Path, n: int, catalogs: int = 36) -> None:
    """A store of n rows of 36 catalogs, through our own API."""
    with open_store(path) as store:
        target = store.put_target(builders.TARGET)
        run = store.begin_run(target, "0.1")
        for number in range(catalogs):
            name = f"catalog-{number}"
            builders.register(store, bands=(), catalog_id=name)
            part = n // catalogs + (number < n % catalogs)
            store.put_search(run, target, builders.reply(part, catalog_id=name), rows_of(part, number))
        with store.writing() as connection:
            connection.exec_driver_sql("ANALYZE")


def positions(n: int, seed: int) -> tuple[Any, Any]:
    random = np.random.default_rng(seed)
    return 101.0 + random.uniform(0.0, FIELD_DEG - 2.0, n), -29.0 + random.uniform(0.0, FIELD_DEG - 2.0, n)


def cone_times(store: Any, radius: Any, n: int = 400) -> Any:
    ra, dec = positions(n, 3)
    return np.array([timed(lambda a=a, d=d: store.near(a, d, radius)) for a, d in zip(ra, dec, strict=True)]) * 1e3


def bench_cones(path: Path, n: int) -> float:
    from astropy import units as u
    from astropy.coordinates import SkyCoord

    with open_store(path, read_only=True) as store:
        cone_times(store, SMALL_ARCSEC, 50)
        small, large = cone_times(store, SMALL_ARCSEC), cone_times(store, LARGE_ARCSEC)
        say(
            f"cone 5 arcsec in {n:.0e} rows: p95, ms",
            float(np.percentile(small, 95)),
            "< 1",
            f"p50 {np.median(small):.3f}",
        )
        say(
            f"cone 2 arcmin in {n:.0e} rows: p95, ms",
            float(np.percentile(large, 95)),
            "-",
            f"p50 {np.median(large):.3f}",
        )
        each = {f"catalog-{i}": SMALL_ARCSEC + i for i in range(36)}
        many = cone_times(store, each, 100)
        say(
            "36 catalogs, a radius each, one query: p50, ms",
            float(np.median(many)),
            "< 2",
            f"p95 {np.percentile(many, 95):.2f}",
        )
        with store.reading() as connection:
            listed = connection.exec_driver_sql("SELECT ra_deg, dec_deg FROM row").fetchall()
    loaded = np.array(listed)
    sky = SkyCoord(loaded[:, 0], loaded[:, 1], unit="deg")
    ra, dec = positions(3, 5)
    script = statistics.median(
        timed(lambda a=a, d=d: sky.separation(SkyCoord(a, d, unit="deg")) < SMALL_ARCSEC * u.arcsec)
        for a, d in zip(ra, dec, strict=True)
    )
    say(
        "astropy separation over the loaded table / our cone",
        script * 1e3 / float(np.median(small)),
        "> 1000",
        f"{script:.2f} s",
    )
    return float(np.median(small))


RAW_PAIRS = """
    SELECT row.search_id, row.ordinal,
        power(sin(radians(row.dec_deg - ?2) / 2.0), 2) + ?3 * cos(radians(row.dec_deg)) * power(sin(radians(row.ra_deg - ?1) / 2.0), 2) AS h
    FROM json_each(?5) AS stretch CROSS JOIN row
    WHERE row.hpx29 BETWEEN json_extract(stretch.value, '$[0]') AND json_extract(stretch.value, '$[1]') AND h <= ?4"""


def bench_many(path: Path, n: int, count: int = 10_000) -> None:
    ra, dec = positions(count, 9)
    with open_store(path, read_only=True) as store, closing(sqlite3.connect(path)) as raw:

        def script(radius: float) -> int:
            limit = math.sin(math.radians(radius / 7200.0)) ** 2
            stretches = cones.as_lists(*cones.covers(ra, dec, np.full(count, radius)), count)
            found = 0
            for a, d, listed in zip(ra.tolist(), dec.tolist(), stretches, strict=True):
                found += len(raw.execute(RAW_PAIRS, (a, d, math.cos(math.radians(d)), limit, str(listed))).fetchall())
            return found

        for radius in (SMALL_ARCSEC, LARGE_ARCSEC):
            assert script(radius) == len(store.near_many(ra, dec, radius).position)
            ours, theirs = [], []
            for _ in range(3):
                ours.append(timed(lambda r=radius: store.near_many(ra, dec, r)))
                theirs.append(timed(lambda r=radius: script(r)))
            say(
                f"{count:.0e} positions x {n:.0e} rows, {radius:g} arcsec / bare loop",
                statistics.median(ours) / statistics.median(theirs), "< 2", f"{statistics.median(ours):.2f} s",
            )  # fmt: skip


def bench_write(folder: Path, n: int) -> None:
    rows = rows_of(n, 1)
    ours, script = [], []
    for number in range(3):
        with open_store(folder / f"ours-{number}.sqlite") as store:
            builders.register(store, bands=())
            target = store.put_target(builders.TARGET)
            run = store.begin_run(target, "0.1")
            ours.append(timed(lambda s=store, r=run, t=target: s.put_search(r, t, builders.reply(n), rows)))
        with open_store(folder / f"raw-{number}.sqlite") as store:
            builders.register(store, bands=())
            target = store.put_target(builders.TARGET)
            run = store.begin_run(target, "0.1")
            store.put_search(run, target, builders.reply(0), builders.rows(0))
        with closing(sqlite3.connect(folder / f"raw-{number}.sqlite", isolation_level=None)) as raw:
            raw.execute("PRAGMA foreign_keys = ON")
            script.append(timed(lambda c=raw: _script_write(c, rows)))
        for left in folder.glob("raw-*"):
            left.unlink()
    say(f"writing {n:.0e} rows / executemany into the same table", statistics.median(ours) / statistics.median(script), "< 1.5", f"{statistics.median(ours):.1f} s")  # fmt: skip

    ours, script = [], []
    with (
        open_store(folder / "ours-0.sqlite", read_only=True) as store,
        closing(sqlite3.connect(folder / "ours-0.sqlite")) as raw,
    ):
        for _ in range(3):
            ours.append(timed(lambda: store.rows_of([1], [])))
            script.append(timed(lambda: _script_read(raw)))
    say(f"reading {n:.0e} rows as arrays / fetchall and numpy", statistics.median(ours) / statistics.median(script), "< 1.3", f"{statistics.median(ours):.1f} s")  # fmt: skip


def _script_write(raw: sqlite3.Connection, rows: Rows) -> None:
    n = len(rows)
    index = cones.index(rows.ra_deg, rows.dec_deg).tolist()
    columns = [index, [1] * n, list(range(n)), list(rows.key)]
    for name in NAMES[4:-1]:
        values = np.asarray(getattr(rows, name)).tolist()
        columns.append([None if value != value else value for value in values])
    columns.append([None] * n)
    lines = sorted(zip(*columns, strict=True))
    raw.execute("BEGIN IMMEDIATE")
    raw.executemany(f"INSERT INTO row ({', '.join(NAMES)}) VALUES ({', '.join('?' * len(NAMES))})", lines)
    raw.execute("COMMIT")


def _script_read(raw: sqlite3.Connection) -> list[Any]:
    lines = raw.execute(f"SELECT {', '.join(NAMES[2:-1])} FROM row WHERE search_id = 1 ORDER BY ordinal").fetchall()
    columns = list(zip(*lines, strict=True))
    return [list(columns[1]), *(np.array(column, dtype=np.float64) for column in columns[2:])]


COLD = """
import json, sqlite3, sys, time
path, table = sys.argv[1], sys.argv[2]
values = json.loads(sys.argv[3])
c = sqlite3.connect(f"file:{path}?mode=ro", uri=True)
c.execute("SELECT 1").fetchone()
start = time.perf_counter()
found = 0
for low, high in values:
    found += len(c.execute(f"SELECT * FROM {table} WHERE hpx29 BETWEEN ? AND ?", (low, high)).fetchall())
print(time.perf_counter() - start, found)
"""


def bench_cold(path: Path, folder: Path) -> None:
    """Rows of a cone from a file of which no page is resident: clustered against a heap with an index."""
    other = folder / "heap.sqlite"
    with closing(sqlite3.connect(other)) as heap:
        heap.execute("ATTACH ? AS store", (str(path),))
        # in the order in which they were fetched, as a table that grows search by search lies
        heap.execute("CREATE TABLE heap AS SELECT * FROM store.row ORDER BY search_id, ordinal")
        heap.execute("CREATE INDEX heap_hpx29 ON heap (hpx29)")
        heap.commit()
    with closing(sqlite3.connect(path)) as settled:
        settled.execute("PRAGMA wal_checkpoint(TRUNCATE)").fetchone()
    times: dict[str, list[float]] = {"row": [], "heap": []}
    ra, dec = positions(12, 21)
    for a, d in zip(ra, dec, strict=True):
        stretches = json.dumps(cone.ranges(a, d, LARGE_ARCSEC))
        counts = set()
        for table, where in (("row", path), ("heap", other)):
            with where.open("rb") as file:
                os.fsync(file.fileno())
                os.posix_fadvise(file.fileno(), 0, 0, os.POSIX_FADV_DONTNEED)
            done = subprocess.run(
                [sys.executable, "-c", COLD, str(where), table, stretches], capture_output=True, text=True, check=True
            )
            seconds, found = done.stdout.split()
            times[table].append(float(seconds))
            counts.add(found)
        assert len(counts) == 1
    ratio = statistics.median(times["heap"]) / statistics.median(times["row"])
    say(
        "cold file, 2 arcmin: heap with an index / our table",
        ratio,
        "> 10",
        f"{statistics.median(times['row']) * 1e3:.1f} ms",
    )


def bench_start(path: Path) -> None:
    environment = os.environ | {"PYTHONPATH": str(Path(__file__).parents[2])}
    call = [sys.executable, "-m", "xmatch", "sql", "SELECT * FROM row LIMIT 1", "--store", str(path), "--format", "csv"]
    times = [timed(lambda: subprocess.run(call, check=True, capture_output=True, env=environment)) for _ in range(9)]
    say("blankfield sql: start to first row, s", statistics.median(times), "< 0.3")


def main() -> None:
    reading = argparse.ArgumentParser(description=__doc__)
    reading.add_argument("--rows", type=float, default=1e6)
    reading.add_argument("--large", action="store_true", help="also 1e7 rows")
    asked = reading.parse_args()
    n = int(asked.rows)
    with tempfile.TemporaryDirectory(prefix="bench-store-", dir=os.environ.get("BENCH_FOLDER")) as name:
        folder = Path(name)
        bench_write(folder, n)
        for left in folder.glob("ours-*"):
            left.unlink()
        path = folder / "store.sqlite"
        fill(path, n)
        small = bench_cones(path, n)
        bench_many(path, n)
        bench_start(path)
        bench_cold(path, folder)
        if asked.large:
            for left in folder.iterdir():
                left.unlink()
            fill(path, 10 * n)
            with open_store(path, read_only=True) as store:
                cone_times(store, SMALL_ARCSEC, 50)
                larger = float(np.median(cone_times(store, SMALL_ARCSEC)))
            say(f"cone 5 arcsec: {10 * n:.0e} rows / {n:.0e} rows", larger / small, "< 3", f"{larger:.3f} ms")
            bench_many(path, 10 * n)
            bench_cold(path, folder)


if __name__ == "__main__":
    main()
