"""Rows near a position: all of them, exactly, each source once, and through the clustered key."""

from __future__ import annotations

from dataclasses import replace
from pathlib import Path
from typing import Any

import numpy as np
import pytest

from xmatch.errors import RangeError
from xmatch.store import near
from xmatch.store.cone import separation_arcsec

RADII = (0.1, 5.0, 60.0, 600.0, 18000.0)
CENTRES = [(264.50625, -33.81583), (0.0, 10.0), (359.9999, -5.0), (77.0, 90.0), (3.0, -89.999), (90.0, 41.81)]


def scattered(build: Any, ra_deg: float, dec_deg: float, n: int = 300, seed: int = 5) -> Any:
    """Rows at all distances from 0.01 arcsec to 10 degrees around a place, also over a pole and RA 0."""
    random = np.random.default_rng(seed)
    away, angle = np.radians(10.0 ** random.uniform(-5.5, 1.0, n)), random.uniform(0, 2 * np.pi, n)
    dec0 = np.radians(dec_deg)
    sine = np.clip(np.sin(dec0) * np.cos(away) + np.cos(dec0) * np.sin(away) * np.cos(angle), -1, 1)
    east = np.arctan2(np.sin(angle) * np.sin(away) * np.cos(dec0), np.cos(away) - np.sin(dec0) * sine)
    return replace(
        build.rows(n, seed=seed, raw=False),
        ra_deg=(ra_deg + np.degrees(east)) % 360.0,
        dec_deg=np.degrees(np.arcsin(sine)),
    )


@pytest.mark.parametrize("centre", CENTRES, ids=str)
def test_near_finds_what_a_look_at_every_row_finds(scene: Any, build: Any, centre: tuple[float, float]) -> None:
    rows = scattered(build, *centre)
    scene.store.put_search(scene.run_id, scene.target_id, build.reply(len(rows)), rows)
    away = np.array([separation_arcsec(*centre, a, d) for a, d in zip(rows.ra_deg, rows.dec_deg, strict=True)])
    for radius in RADII:
        found = scene.store.near(*centre, radius)
        assert sorted(line.ordinal for line in found) == np.flatnonzero(away <= radius).tolist()
        np.testing.assert_allclose([line.separation_arcsec for line in found], np.sort(away[away <= radius]), atol=1e-6)
        pairs = scene.store.near_many(np.array([centre[0]]), np.array([centre[1]]), radius)
        assert sorted(pairs.ordinal.tolist()) == np.flatnonzero(away <= radius).tolist()


def test_each_source_is_there_once_from_its_latest_search(scene: Any, build: Any) -> None:
    rows = build.rows(5)
    first, second = (
        scene.store.put_search(scene.run_id, scene.target_id, build.reply(5), rows).search_id for _ in range(2)
    )
    centre = float(rows.ra_deg[0]), float(rows.dec_deg[0])
    assert {line.search_id for line in scene.store.near(*centre, 3600.0)} == {second}
    every = scene.store.near(*centre, 3600.0, history=True)
    assert sorted(line.search_id for line in every) == [first] * 5 + [second] * 5
    nearest = every[0]
    assert (nearest.catalog_id, nearest.release, nearest.table, nearest.source_key) == (
        "curlew",
        "2",
        "main",
        rows.key[0],
    )
    assert nearest.separation_arcsec == pytest.approx(0.0, abs=1e-6)


def test_every_catalog_may_have_its_own_radius(scene: Any, build: Any) -> None:
    store, rows = scene.store, build.rows(50)
    build.register(store, catalog_id="stilt")
    for catalog_id in ("curlew", "stilt"):
        store.put_search(scene.run_id, scene.target_id, build.reply(50, catalog_id=catalog_id), rows)
    centre = 264.50625, -33.81583
    both = store.near(*centre, {"curlew": 30.0, "stilt": 90.0, "unknown": 5.0})
    for name, radius in (("curlew", 30.0), ("stilt", 90.0)):
        alone = [line for line in store.near(*centre, radius) if line.catalog_id == name]
        assert alone and [line for line in both if line.catalog_id == name] == alone
    assert store.near(*centre, {"unknown": 5.0}) == store.near(*centre, {}) == []


def test_many_positions_come_back_in_their_order(scene: Any, build: Any) -> None:
    rows = build.rows(40)
    scene.store.put_search(scene.run_id, scene.target_id, build.reply(40), rows)
    pairs = scene.store.near_many(rows.ra_deg[::-1], rows.dec_deg[::-1], 20.0)
    wanted = []
    for number, (a, d) in enumerate(zip(rows.ra_deg[::-1], rows.dec_deg[::-1], strict=True)):
        wanted += [(number, line.ordinal) for line in scene.store.near(a, d, 20.0)]
    assert sorted(zip(pairs.position.tolist(), pairs.ordinal.tolist(), strict=True)) == sorted(wanted)
    assert (np.diff(pairs.position) >= 0).all()
    assert [len(part) for part in scene.store.near_many(np.zeros(0), np.zeros(0), 5.0)] == [0, 0, 0, 0]


def test_the_plan_uses_the_clustered_key(scene: Any, path: Path) -> None:
    values = {"ra": 1.0, "dec": 2.0, "cos_dec": 1.0, "stretches": "[[1,2]]", "wanted": "[]", "h": 1.0}
    for statement in (near.DIALECTS["sqlite"].within, near.DIALECTS["sqlite"].pairs):
        plan = scene.store.frame("EXPLAIN QUERY PLAN " + statement, values)["detail"].tolist()
        assert any("SEARCH row USING PRIMARY KEY (hpx29>? AND hpx29<?)" in line for line in plan), plan
        assert not any("SCAN row" in line for line in plan), plan


@pytest.mark.parametrize("radius", [-1.0, float("nan"), {"curlew": 1e9}])
def test_a_radius_that_is_none_is_refused(scene: Any, radius: Any) -> None:
    with pytest.raises(RangeError, match="radius"):
        scene.store.near(1.0, 2.0, radius)
