"""Targets of all kinds go through the whole street: with little known, with much, with extreme values."""

from __future__ import annotations

import io
import json
from dataclasses import replace
from pathlib import Path
from typing import Any

import pytest
from rich.console import Console

from xmatch.archives.transport import Transport
from xmatch.assumptions import Assumptions
from xmatch.catalogs import load_catalogs
from xmatch.demo.scene import demo_target
from xmatch.pipeline import LookOptions, look
from xmatch.records import Distance, Pulse, Spin, StandingWord, Target
from xmatch.report.asjson import to_json
from xmatch.report.terminal import render
from xmatch.store.store import open_store

DEMO = demo_target()
PLACE = DEMO.position
KINDS: dict[str, Target] = {
    "only a position": Target("p", PLACE),
    "no epoch": replace(DEMO, position=replace(PLACE, epoch_yr=None)),
    "old epoch": replace(DEMO, position=replace(PLACE, epoch_yr=1950.0)),
    "milliarcsecond": replace(DEMO, position=replace(PLACE, sigma_major_arcsec=1e-3, sigma_minor_arcsec=1e-3)),
    "a beam": replace(DEMO, position=replace(PLACE, sigma_major_arcsec=45.0, sigma_minor_arcsec=30.0)),
    "no distance": replace(DEMO, distance=None),
    "one distance": replace(DEMO, distance=Distance(2000.0, 2000.0)),
    "next door": replace(DEMO, distance=Distance(1.3, 2.0)),
    "another galaxy": replace(DEMO, distance=Distance(1.0e6, 2.0e6)),
    "no dispersion": replace(DEMO, dm_pc_cm3=None),
    "dispersion of zero": replace(DEMO, dm_pc_cm3=0.0),
    "an opaque column": replace(DEMO, column_cm2=3.0e24),
    "extinction only": replace(DEMO, dm_pc_cm3=None, av_mag=30.0),
    "no spin": replace(DEMO, spin=None),
    "period only": replace(DEMO, spin=Spin(2711.4)),
    "measured derivative": replace(DEMO, spin=Spin(75.885547, derivative=2.25e-13)),
    "spin-up": replace(DEMO, spin=Spin(841.2, derivative=-9e-12)),
    "a derivative of zero": replace(DEMO, spin=Spin(841.2, derivative=0.0)),
    "maybe an orbit": replace(DEMO, spin=Spin(7531.8, derivative_limit=1.7e-11, may_be_orbital=True)),
    "no pulses": replace(DEMO, pulses=()),
    "many pulses": replace(DEMO, pulses=(Pulse(1.5e8, 1e-9, 1e4), Pulse(1.4e9, 1e3, 1e-3))),
    "everything unknown and far": replace(Target("q", PLACE), distance=Distance(1.0, 3.0e4)),
}


@pytest.fixture(scope="module")
def asked(tmp_path_factory: pytest.TempPathFactory) -> Path:
    """A store in which the archives have answered once for each width of cone."""
    from xmatch.demo.scene import demo_archive

    path = tmp_path_factory.mktemp("kinds") / "kinds.sqlite"
    with demo_archive() as archive, open_store(path) as store:
        for name in ("only a position", "a beam"):
            look(
                KINDS[name], store=store, catalogs=load_catalogs(), transport=Transport(addresses=archive.address),
                options=LookOptions(assumptions=Assumptions(draws=1000)),
            )  # fmt: skip
    return path


@pytest.mark.parametrize("name", KINDS)
def test_the_whole_street(asked: Path, name: str) -> None:
    target = KINDS[name]
    with open_store(asked) as store:
        answer = look(
            target, store=store, catalogs=load_catalogs(),
            options=LookOptions(offline=True, assumptions=Assumptions(draws=1000)),
        )  # fmt: skip
        assert store.status()["findings"]
    body: Any = json.loads(json.dumps(to_json(answer), allow_nan=False))
    assert body["target"]["name"] == target.name
    shown = io.StringIO()
    render(answer, Console(file=shown, width=100))
    for word in ("nan", "None", "inf "):
        assert f" {word}" not in shown.getvalue(), name
    for standing in answer.standings:
        assert standing.survival is None or 0.0 < standing.survival <= 1.0
    words = {standing.class_id: standing.word for standing in answer.standings}
    assert words["none-of-these"] is not StandingWord.RULED_OUT
    if target.distance is None:
        assert StandingWord.RULED_OUT not in words.values()


@pytest.mark.parametrize(
    "changes",
    [
        {"confidence": 0.5}, {"confidence": 0.9987}, {"photon_index": 0.0}, {"photon_index": 4.0}, {"distance_prior": "volume"},
        {"radio_index": -1.0}, {"radio_index": 2.0}, {"column_scatter_dex": 0.0}, {"target_speed_km_s": 1000.0},
        {"listed_fraction": 0.999}, {"r_v": 5.5}, {"halo_residual": 1.0}, {"beam_fraction": 1e-3}, {"depth_min_rows": 1000},
    ],
    ids=str,
)  # fmt: skip
def test_other_assumptions(asked: Path, changes: dict[str, Any]) -> None:
    with open_store(asked) as store:
        answer = look(
            DEMO, store=store, catalogs=load_catalogs(),
            options=LookOptions(offline=True, assumptions=replace(Assumptions(draws=1000), **changes)),
        )  # fmt: skip
    assert answer.limits
    json.dumps(to_json(answer), allow_nan=False)
