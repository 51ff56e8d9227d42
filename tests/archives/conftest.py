"""A small invented table across RA 0, served by the embedded archive through both protocols."""

from __future__ import annotations

from collections.abc import Callable, Iterator
from dataclasses import replace
from typing import Any

import numpy as np
import pytest

from xmatch.archives.transport import Politeness, Transport
from xmatch.demo.server import DemoColumn, DemoTable, EmbeddedArchive
from xmatch.records import Question, WantedColumn

HOST = "vizier.cds.unistra.fr"
REMOTE = "I/999/main"
FIRST_ID = 5973000000000000001
"""Above 2**53: a float would change it."""
N_ROWS = 12

UNITS = {"RA_ICRS": "deg", "DE_ICRS": "deg", "Gmag": "mag"}
SHAPES: dict[str, tuple[str, str, dict[str, Any]]] = {
    "cone": (f"/viz-bin/conesearch/{REMOTE}", REMOTE, {}),
    "vizier": ("/viz-bin/votable", REMOTE, {}),
    "tap": ("/tap", "invented.objects", {}),
    "tap box": ("/tap", "invented.objects", {"geometry": "box"}),
    "tap async": ("/tap", "invented.objects", {"mode": "async"}),
    "simbad": ("/sim-tap", "basic", {}),
    "file votable": ("/list", "", {"format": "votable"}),
    "file csv": ("/list.csv", "", {"format": "csv", "units": UNITS, "rows_at_least": N_ROWS}),
    "file fits": ("/list.fits", "", {"format": "fits", "rows_at_least": N_ROWS}),
    "file ecsv": ("/list.ecsv", "", {"format": "ecsv", "rows_at_least": N_ROWS}),
}
"""Adapter and how it is asked: path, remote table, further facts of the question."""
SPOILT = {"simbad": "basic", "file csv": "csv", "file fits": "fits", "file ecsv": "ecsv"}
"""Which table misbehaves, where it is not the main one."""

Ask = Callable[..., Question]


@pytest.fixture(scope="session")
def table() -> DemoTable:
    """Twelve rows within 2 arcmin of RA 0, Dec -20; three without a magnitude."""
    rng = np.random.default_rng(20261201)
    columns = (
        DemoColumn("Source", "long", None, "meta.id;meta.main"),
        DemoColumn("RA_ICRS", "double", "deg", "pos.eq.ra;meta.main"),
        DemoColumn("DE_ICRS", "double", "deg", "pos.eq.dec;meta.main"),
        DemoColumn("Gmag", "double", "mag", "phot.mag"),
        DemoColumn("Qflg", "char", None, "meta.code", "*"),
        DemoColumn("Nobs", "short", None, "meta.number"),
    )
    magnitudes = rng.uniform(10.0, 20.0, N_ROWS)
    magnitudes[[1, 4, 7]] = np.nan
    rows = {
        "Source": FIRST_ID + np.arange(N_ROWS, dtype=np.int64),
        "RA_ICRS": rng.uniform(-0.03, 0.03, N_ROWS) % 360.0,
        "DE_ICRS": -20.0 + rng.uniform(-0.03, 0.03, N_ROWS),
        "Gmag": magnitudes,
        "Qflg": np.array(["A & B", "", "<C>"] * 4),
        "Nobs": np.ma.array(np.arange(N_ROWS, dtype=np.int16), mask=[False, False, True] * 4),
    }
    return DemoTable(
        REMOTE, columns, rows, "RA_ICRS", "DE_ICRS", HOST, f"/viz-bin/conesearch/{REMOTE}", "Invented.",
        tap_path="/tap", tap_table="invented.objects", file_path="/list", file_format="votable",
    )  # fmt: skip


@pytest.fixture(scope="session")
def shapes(table: DemoTable) -> list[DemoTable]:
    """The same rows as SIMBAD's main table and as files of every format; faults are keyed by their own names."""
    others = [replace(table, remote_table="basic", tap_path="/sim-tap", tap_table="basic", cone_path="", file_path="")]
    for form in ("csv", "fits", "ecsv"):
        others.append(
            replace(table, remote_table=form, cone_path="", tap_path="", file_path=f"/list.{form}", file_format=form)
        )
    return others


@pytest.fixture(scope="session")
def question() -> Ask:
    """Makes a question that the table answers whole, with changes."""

    def make(protocol: str = "cone", **changes: object) -> Question:
        path, remote, how = SHAPES.get(protocol, SHAPES["cone"])
        wanted = (
            WantedColumn("Source"),
            WantedColumn("RA_ICRS", "deg", low=0.0, high=360.0),
            WantedColumn("DE_ICRS", "deg", low=-90.0, high=90.0),
            WantedColumn("Gmag", "mag", low=-2.0, high=25.0),
            WantedColumn("Qflg"),
            WantedColumn("Nobs"),
        )
        plain = Question(
            catalog_id="invented", release="1", table="main", protocol=protocol.split()[0], address=f"https://{HOST}{path}",
            remote_table=remote, ra_deg=0.0, dec_deg=-20.0, radius_arcsec=300.0, columns=wanted, row_limit=100, **how,
        )  # fmt: skip
        return replace(plain, **changes)  # type: ignore[arg-type]

    return make


@pytest.fixture(scope="session")
def spoilt() -> Callable[[str], str]:
    """The table whose faults an adapter meets."""
    return lambda protocol: SPOILT.get(protocol, REMOTE)


@pytest.fixture(scope="session")
def running(table: DemoTable, shapes: list[DemoTable]) -> Iterator[EmbeddedArchive]:
    with EmbeddedArchive([table, *shapes]) as archive:
        yield archive


@pytest.fixture
def archive(running: EmbeddedArchive) -> EmbeddedArchive:
    """The archive, on its best behaviour and with an empty log."""
    running.behave()
    running.requests.clear()
    return running


@pytest.fixture
def waits() -> list[float]:
    """Every wait between tries, in seconds; nothing really waits."""
    return []


@pytest.fixture
def transport(archive: EmbeddedArchive, waits: list[float]) -> Iterator[Transport]:
    transport = Transport(
        addresses=archive.address,
        politeness=Politeness(connect_s=2.0, read_s=5.0, deadline_s=10.0),
        sleep=waits.append,
        jitter=lambda: 1.0,
    )
    yield transport
    transport.close_session()
