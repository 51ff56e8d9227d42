"""Every outcome through every adapter: the embedded archive serves the scene, and the look calls it by its name."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass, replace
from pathlib import Path
from typing import Any

import numpy as np
import pytest

from xmatch.archives.transport import Transport
from xmatch.assumptions import Assumptions
from xmatch.catalogs.loader import read_catalog
from xmatch.catalogs.model import Catalog
from xmatch.catalogs.template import TEMPLATE
from xmatch.demo.faults import Fault
from xmatch.demo.server import DemoColumn, DemoTable, EmbeddedArchive
from xmatch.limits.coverage import Region
from xmatch.pipeline import LookOptions, look
from xmatch.records import Floats, Outcome, Position, Target
from xmatch.store.store import open_store

HOST = "archive.example"
RA, DEC = 180.0, 0.0
SIGMA = 2.0
TARGET = Target("scene", Position(RA, DEC, SIGMA, SIGMA))
COVERED = Region("declination", dec_deg=(-40.0, 90.0), source="here")
ADAPTERS = {
    "cone": ("cone", "/scs", {}),
    "vizier": ("vizier", "/viz-bin/votable", {}),
    "tap": ("tap", "/tap", {}),
    "tap without geometry": ("tap", "/tap", {"geometry": "box"}),
    "tap by job": ("tap", "/tap", {"mode": "async"}),
    "simbad": ("simbad", "/tap", {}),
    "file": ("file", "/list.xml", {"format": "votable"}),
}


@dataclass(frozen=True)
class Scene:
    """Rows by offset in arcsec and flux, and what the catalog file says."""

    outcome: Outcome
    near: tuple[tuple[float, float], ...] = ()
    """Separation and flux of rows near the target."""
    n_around: int = 60
    coverage: Region = COVERED
    fault: Fault | None = None


SCENES = [
    Scene(Outcome.COUNTERPART, near=((0.5, 30.0),)),
    Scene(Outcome.AMBIGUOUS, near=((3.0, 30.0), (4.4, 30.0))),
    Scene(Outcome.CHANCE, near=((5.5, 3.0),), n_around=90_000),
    Scene(Outcome.BLANK),
    Scene(Outcome.HIDDEN, near=((40.0, 9000.0),)),
    Scene(Outcome.PARTLY_COVERED, coverage=Region("declination", dec_deg=(0.0, 90.0), source="here")),
    Scene(Outcome.NOT_COVERED, coverage=Region("declination", dec_deg=(10.0, 90.0), source="here"), n_around=0),
    Scene(Outcome.COVERAGE_UNKNOWN, coverage=Region("unstated", source="here"), n_around=0),
    Scene(Outcome.COVERAGE_UNKNOWN, n_around=0),
    Scene(Outcome.TRUNCATED, fault=Fault("overflow")),
    Scene(Outcome.UNANSWERED, fault=Fault("unavailable")),
    Scene(Outcome.MISREAD, fault=Fault("html")),
    Scene(Outcome.MISREAD, fault=Fault("error status", place="end")),
]
FAILED = {Outcome.TRUNCATED, Outcome.UNANSWERED, Outcome.MISREAD}


def rows(scene: Scene) -> dict[str, Floats]:
    """The scene's rows. The crowd of ``chance`` lies in the inner tenth, or there would be a million of them."""
    rng = np.random.default_rng(5)
    reach = 2600.0 if scene.n_around < 1000 else 250.0
    n = min(scene.n_around, 3000)
    r, phi = np.sqrt(rng.uniform(60.0**2 if reach > 1000 else 12.0**2, reach**2, n)), rng.uniform(0.0, 2.0 * np.pi, n)
    near = np.array(scene.near).reshape(-1, 2)
    angle = np.linspace(0.3, 2.9, len(near))
    east = np.concatenate([r * np.sin(phi), near[:, 0] * np.sin(angle)])
    north = np.concatenate([r * np.cos(phi), near[:, 0] * np.cos(angle)])
    flux = np.concatenate([2.6 * (1.0 + rng.pareto(1.5, n)), near[:, 1]])
    return {
        "RAJ2000": RA + east / 3600.0, "DEJ2000": DEC + north / 3600.0, "S1.4": flux, "e_S1.4": np.full(len(flux), 0.5),
        "e_RAJ2000": np.full(len(flux), 0.6), "e_DEJ2000": np.full(len(flux), 0.6),
    }  # fmt: skip


@pytest.fixture
def make(tmp_path: Path) -> Callable[[str, Scene], tuple[Catalog, DemoTable]]:
    """A catalog for an adapter and the table behind it."""

    def made(adapter: str, scene: Scene) -> tuple[Catalog, DemoTable]:
        protocol, path, how = ADAPTERS[adapter]
        file = tmp_path / "scene.toml"
        file.write_text(TEMPLATE.format(id="scene").replace('state = "needs check"', "# "))
        catalog = read_catalog(file)
        radius = 2700.0 if scene.n_around < 1000 else 240.0
        table = replace(
            catalog.tables[0], protocol=protocol, address=f"https://{HOST}{path}", remote_table="basic", **how
        )
        catalog = replace(
            catalog, tables=(table,), key=None, coverage=scene.coverage, neighbourhood_arcsec=radius, row_limit=3500,
            rows_at_least=0 if protocol == "file" else None,
        )  # fmt: skip
        values = rows(scene)
        units = {"S1.4": "mJy", "e_S1.4": "mJy", "e_RAJ2000": "arcsec", "e_DEJ2000": "arcsec"}
        columns = [DemoColumn(name, "double", units.get(name, "deg")) for name in values]
        return catalog, DemoTable(
            "basic", columns, values, "RAJ2000", "DEJ2000", HOST, "/scs", "Invented.", tap_path="/tap", tap_table="basic",
            file_path="/list.xml", file_format="votable",
        )  # fmt: skip

    return made


@pytest.mark.parametrize("scene", SCENES, ids=lambda scene: f"{scene.outcome}{'' if scene.n_around else ' empty'}")
@pytest.mark.parametrize("adapter", ADAPTERS)
def test_each_outcome_through_each_adapter(adapter: str, scene: Scene, make: Callable, tmp_path: Path) -> None:
    catalog, table = make(adapter, scene)
    with EmbeddedArchive([table]) as archive, open_store(tmp_path / "scene.sqlite") as store:
        if scene.fault is not None:
            archive.misbehave("*", scene.fault)
        transport = Transport(addresses=archive.address, sleep=lambda seconds: None)
        answer = look(
            TARGET, store=store, catalogs={"scene": catalog}, transport=transport,
            options=LookOptions(assumptions=Assumptions(draws=1000)),
        )  # fmt: skip
        transport.close_session()
    (finding,) = answer.findings
    assert finding.outcome is scene.outcome, finding.why
    if scene.outcome in FAILED or scene.outcome in (Outcome.NOT_COVERED, Outcome.COUNTERPART):
        assert finding.limits == ()
    else:
        assert finding.limits
    if scene.outcome is Outcome.COVERAGE_UNKNOWN:
        assert all("coverage unproven" in limit.flag for limit in finding.limits)


@pytest.mark.parametrize(
    "fault", [None, Fault("html"), Fault("unavailable")], ids=["answered", "misread", "unanswered"]
)
def test_too_few_rows_are_asked_for_over_a_wider_cone(make: Callable, tmp_path: Path, fault: Fault | None) -> None:
    catalog, table = make("vizier", Scene(Outcome.BLANK, n_around=600))
    catalog = replace(catalog, neighbourhood_arcsec=300.0)
    with EmbeddedArchive([table]) as archive, open_store(tmp_path / "scene.sqlite") as store:
        transport = Transport(addresses=archive.address, sleep=lambda seconds: None)
        log = archive.log

        def fail_from_the_second(request: Any) -> None:
            log(request)
            if fault is not None and len(archive.requests) == 2:
                archive.misbehave("basic", fault)

        archive.log = fail_from_the_second  # type: ignore[method-assign]
        options = LookOptions(assumptions=Assumptions(draws=1000))
        how = {"store": store, "catalogs": {"scene": catalog}, "transport": transport, "options": options}
        first = look(TARGET, **how)
        asked = len(archive.requests)
        second = look(TARGET, **how)
        assert len(archive.requests) == asked
        transport.close_session()
    least = Assumptions().density_min_rows
    for answer in (first, second):
        (finding,) = answer.findings
        assert finding.outcome is Outcome.BLANK
        (search,) = finding.searches
        # 13 rows came first: twice the least number is expected within sqrt(40 / 13) times the radius
        assert search.radius_arcsec == pytest.approx(300.0 * (40.0 / 13.0) ** 0.5 if fault is None else 300.0)
        assert (finding.n_rows >= least) == (fault is None)
