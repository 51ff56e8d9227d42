"""What goes in comes out, whole or not at all; and "current" means current."""

from __future__ import annotations

import math
import subprocess
import sys
from dataclasses import replace
from pathlib import Path
from typing import Any

import numpy as np
import pytest

from xmatch.errors import RangeError, StoreError
from xmatch.records import MagnitudeSystem, Position, Quantity, ReplyStatus, Spin
from xmatch.store import cones
from xmatch.store.store import open_store

ARRAYS = (
    "ra_deg", "dec_deg", "sigma_major_arcsec", "sigma_minor_arcsec", "angle_deg", "epoch_yr", "pm_ra_mas_yr",
    "pm_dec_mas_yr", "pm_ra_error_mas_yr", "pm_dec_error_mas_yr",
)  # fmt: skip


def assert_same(got: Any, wanted: Any, bands: Any) -> None:
    assert got.key == wanted.key
    for name in ARRAYS:
        np.testing.assert_array_equal(getattr(got, name), getattr(wanted, name), err_msg=name)
    for band in bands:
        for part in ("value", "error", "is_limit"):
            np.testing.assert_array_equal(
                getattr(got.flux[band.name], part), getattr(wanted.flux[band.name], part), err_msg=f"{band.name} {part}"
            )


# --- targets and catalogs ------------------------------------------------------------------------
def test_the_same_target_has_one_key_and_a_change_makes_a_version(scene: Any, build: Any) -> None:
    store = scene.store
    assert store.put_target(build.TARGET) == scene.target_id
    farther = store.put_target(replace(build.TARGET, dm_pc_cm3=300.0))
    assert farther != scene.target_id
    other = store.put_target(replace(build.TARGET, name="Godwit-1"))
    listed = store.frame("SELECT target_id, name, version, dm_pc_cm3 FROM target ORDER BY target_id")
    assert listed["target_id"].tolist() == [scene.target_id, farther, other]
    assert listed["version"].tolist() == [1, 2, 1]
    assert math.isnan(listed["dm_pc_cm3"][0]) and listed["dm_pc_cm3"][1] == 300.0


def test_numpy_numbers_in_a_target_are_numbers_in_the_store(scene: Any, build: Any) -> None:
    position = Position(np.float32(10.5), np.float64(-20.25), np.int16(2), np.float32(1.5))  # type: ignore[arg-type]
    key = scene.store.put_target(replace(build.TARGET, position=position, spin=Spin(np.float32(1318.5))))  # type: ignore[arg-type]
    line = scene.store.frame(
        "SELECT typeof(ra_deg), typeof(sigma_major_arcsec), ra_deg, period_s FROM target WHERE target_id = :key",
        {"key": np.int64(key)},
    ).iloc[0]
    assert line.tolist() == ["real", "real", 10.5, 1318.5]


@pytest.mark.parametrize("bad", [math.nan, math.inf, None])
def test_a_target_without_a_position_is_refused(scene: Any, build: Any, bad: Any) -> None:
    with pytest.raises(RangeError, match="declination of the target"):
        scene.store.put_target(replace(build.TARGET, position=replace(build.TARGET.position, dec_deg=bad)))


def test_a_target_outside_the_sky_is_refused_by_the_file_itself(scene: Any, build: Any) -> None:
    with pytest.raises(StoreError, match="refused what was to be stored"):
        scene.store.put_target(replace(build.TARGET, position=replace(build.TARGET.position, ra_deg=360.5)))


def test_a_changed_catalog_file_leaves_the_old_facts_in_place(scene: Any, build: Any) -> None:
    deeper = (build.band("J", depth=17.0), build.BANDS[1])
    first, again = build.register(scene.store), build.register(scene.store)
    changed = build.register(scene.store, deeper, fingerprint="e" * 64)
    assert first == again != changed
    bands = scene.store.frame("SELECT name, depth FROM band ORDER BY band_id")
    assert bands.values.tolist() == [["J", 15.8], ["H", 15.8], ["J", 17.0]]
    linked = scene.store.frame("SELECT catalog_key, band_id FROM catalog_band ORDER BY 1, 2")
    assert linked.values.tolist() == [[first, 1], [first, 2], [changed, 2], [changed, 3]]


# --- searches ------------------------------------------------------------------------------------
@pytest.mark.parametrize("n", [0, 1, 37, 1203])
def test_rows_come_back_bit_for_bit_in_the_order_of_the_reply(scene: Any, build: Any, n: int) -> None:
    wanted = build.rows(n)
    search = scene.store.put_search(scene.run_id, scene.target_id, build.reply(n), wanted)
    assert search.n_rows == n
    assert_same(scene.store.rows_of([search.search_id], build.BANDS), wanted, build.BANDS)


def test_rows_as_served_come_back_when_asked_for(scene: Any, build: Any) -> None:
    wanted = build.rows(5)
    search = scene.store.put_search(scene.run_id, scene.target_id, build.reply(5), wanted)
    assert scene.store.rows_of([search.search_id], build.BANDS).raw == ()
    assert scene.store.rows_of([search.search_id], build.BANDS, raw=True).raw == wanted.raw


def test_rows_of_several_searches_stand_in_the_order_asked(scene: Any, build: Any) -> None:
    parts = [build.rows(n, seed=n) for n in (3, 0, 5)]
    keys = [
        scene.store.put_search(scene.run_id, scene.target_id, build.reply(len(part), table=f"t{i}"), part).search_id
        for i, part in enumerate(parts)
    ]
    got = scene.store.rows_of([keys[2], keys[1], keys[0]], build.BANDS)
    assert got.key == parts[2].key + parts[0].key
    np.testing.assert_array_equal(
        got.flux["H"].value, np.concatenate([parts[2].flux["H"].value, parts[0].flux["H"].value])
    )
    assert len(scene.store.rows_of([], build.BANDS)) == 0


def test_values_that_are_missing_or_infinite_are_null(scene: Any, build: Any) -> None:
    rows = build.rows(3)
    rows.flux["J"].value[:] = [np.inf, 14.0, np.nan]
    rows.flux["J"].error[:] = np.nan
    rows.flux["J"].is_limit[:] = [False, False, True]
    search = scene.store.put_search(scene.run_id, scene.target_id, build.reply(3), rows)
    stored = scene.store.frame(
        "SELECT ordinal, typeof(value), is_limit FROM flux JOIN band USING (band_id) WHERE name = 'J' ORDER BY 1"
    )
    # a band of a row of which the catalog says nothing has no line at all
    assert stored.values.tolist() == [[1, "real", 0], [2, "null", 1]]
    got = scene.store.rows_of([search.search_id], build.BANDS).flux["J"]
    np.testing.assert_array_equal(got.value, [np.nan, 14.0, np.nan])
    np.testing.assert_array_equal(got.is_limit, [False, False, True])


@pytest.mark.parametrize(
    ("name", "value"), [("ra_deg", np.nan), ("dec_deg", np.inf), ("dec_deg", 90.5), ("ra_deg", -1.0)]
)
def test_a_row_without_a_position_is_refused_and_nothing_of_its_search_is_kept(
    scene: Any, build: Any, name: str, value: float
) -> None:
    rows = build.rows(4)
    getattr(rows, name)[2] = value
    with pytest.raises(RangeError, match=rf"row '{rows.key[2]}' lies at"):
        scene.store.put_search(scene.run_id, scene.target_id, build.reply(4), rows)
    assert scene.store.status()["searches"] == 0


def test_arrays_of_unequal_length_are_refused_and_nothing_is_kept(scene: Any, build: Any) -> None:
    with pytest.raises(RangeError, match=r"angle_deg.: 3"):
        scene.store.put_search(
            scene.run_id, scene.target_id, build.reply(4), replace(build.rows(4), angle_deg=np.zeros(3))
        )
    assert scene.store.status()["searches"] == 0


def test_a_band_nobody_described_is_refused_and_nothing_is_kept(scene: Any, build: Any) -> None:
    rows = build.rows(4)
    with pytest.raises(StoreError, match="no band 'K'"):
        scene.store.put_search(
            scene.run_id, scene.target_id, build.reply(4), replace(rows, flux={**rows.flux, "K": rows.flux["J"]})
        )
    assert scene.store.status()["searches"] == scene.store.status()["rows"] == 0


def test_a_catalog_nobody_described_is_refused(scene: Any, build: Any) -> None:
    with pytest.raises(StoreError, match="no catalog 'curlew' release '3'"):
        scene.store.put_search(scene.run_id, scene.target_id, build.reply(0, release="3"), build.rows(0))


def test_a_whole_reply_without_rows_is_not_an_empty_sky(scene: Any, build: Any) -> None:
    with pytest.raises(StoreError, match="empty sky"):
        scene.store.put_search(scene.run_id, scene.target_id, build.reply(4), None)


@pytest.mark.parametrize("status", [ReplyStatus.MISREAD, ReplyStatus.UNANSWERED])
def test_rows_of_a_reply_that_must_not_be_read_are_refused(scene: Any, build: Any, status: ReplyStatus) -> None:
    with pytest.raises(StoreError, match=f"is {status}"):
        scene.store.put_search(scene.run_id, scene.target_id, build.reply(4, status), build.rows(4))


def test_a_search_keeps_every_word_of_its_reply(scene: Any, build: Any) -> None:
    reply = build.reply(
        0, ReplyStatus.UNANSWERED, detail="HTTP 429 after 3 tries\x00", http_status=np.int16(429), retry_after_s=30,
        asked_at="2026-12-01T14:00:00+02:00", tries=3, remote_table="I/1/x",
    )  # fmt: skip
    search = scene.store.put_search(scene.run_id, scene.target_id, reply, None)
    line = scene.store.frame("SELECT * FROM search").iloc[0]
    assert search.asked_at == line["asked_at"] == "2026-12-01T12:00:00Z"
    assert search.detail == line["detail"] == "HTTP 429 after 3 tries\\x00"
    assert (search.http_status, line["http_status"]) == (429, 429)
    assert (search.retry_after_s, line["retry_after_s"]) == (30.0, 30.0)
    kept = {"tries": 3, "reply_bytes": 512, "client": "test", "sha256": "0" * 64, "remote_table": "I/1/x"}
    kept |= {"address": "http://127.0.0.1/cone", "protocol": "cone", "row_limit": 1000}
    assert {name: line[name] for name in kept} == kept
    assert scene.store.last_attempts(scene.target_id) == [search]


def test_rows_left_out_at_the_door_are_counted(scene: Any, build: Any) -> None:
    search = scene.store.put_search(scene.run_id, scene.target_id, build.reply(9), build.rows(7))
    assert search.n_rows == 7
    assert scene.store.frame("SELECT n_rows, n_rows_served FROM search").values.tolist() == [[7, 9]]


def test_the_index_on_the_sky_is_that_of_gorski() -> None:
    # Base pixels of the nested scheme: 0 holds (45, +41.8) deg, 4 holds (0, 0), 8 holds (45, -41.8), 3 and 11 the
    # last quarters in the north and south (Gorski et al. 2005, ApJ 622, 759, section 4 and fig. 4).
    ra = np.array([45.0, 0.0, 45.0, 315.0, 315.0, 180.0])
    dec = np.array([41.8, 0.0, -41.8, 41.8, -41.8, 0.0])
    index = cones.index(ra, dec)
    assert index.dtype == np.int64
    np.testing.assert_array_equal(index >> 58, [0, 4, 8, 3, 11, 6])
    assert index.min() >= 0 and index.max() < 12 * 4**29


# --- what is current -----------------------------------------------------------------------------
def test_a_later_failure_does_not_hide_the_last_whole_search(scene: Any, build: Any) -> None:
    store = scene.store
    old = store.put_search(scene.run_id, scene.target_id, build.reply(2), build.rows(2))
    whole = store.put_search(scene.run_id, scene.target_id, build.reply(3), build.rows(3))
    failed = store.put_search(scene.run_id, scene.target_id, build.reply(0, ReplyStatus.UNANSWERED), None)
    cut = store.put_search(scene.run_id, scene.target_id, build.reply(5, ReplyStatus.TRUNCATED, table="b"), None)
    assert store.current_searches(scene.target_id) == [whole]
    assert store.last_attempts(scene.target_id) == [failed, cut]
    assert store.frame("SELECT search_id FROM current_search")["search_id"].tolist() == [whole.search_id]
    assert len(store.rows_of([old.search_id], build.BANDS)) == 2


def test_releases_tables_and_cones_are_kept_apart(scene: Any, build: Any) -> None:
    store = scene.store
    build.register(store, release="3", fingerprint="3" * 64)
    kept = [
        store.put_search(scene.run_id, scene.target_id, build.reply(0, **about), build.rows(0))
        for about in ({}, {"table": "other"}, {"release": "3"}, {"radius_arcsec": 30.0}, {"ra_deg": 264.5})
    ]
    assert store.current_searches(scene.target_id) == kept


def test_what_is_learnt_of_a_target_does_not_lose_its_searches(scene: Any, build: Any) -> None:
    store = scene.store
    whole = store.put_search(scene.run_id, scene.target_id, build.reply(0), build.rows(0))
    farther = store.put_target(replace(build.TARGET, dm_pc_cm3=300.0))
    assert store.current_searches(farther) == [whole]
    assert store.find_target(build.TARGET) == farther
    moved = replace(build.TARGET.position, dec_deg=-33.9)
    assert store.find_target(replace(build.TARGET, position=moved)) is None
    assert store.current_searches(store.put_target(replace(build.TARGET, position=moved))) == []


def test_an_unknown_target_or_search_or_run_is_said(scene: Any, build: Any) -> None:
    with pytest.raises(StoreError, match="no target 99"):
        scene.store.current_searches(99)
    with pytest.raises(StoreError, match="no search 98"):
        scene.store.rows_of([98], build.BANDS)
    with pytest.raises(StoreError, match="no run 97"):
        scene.store.finish_run(97)
    with pytest.raises(StoreError, match="refused"):
        scene.store.put_search(96, scene.target_id, build.reply(0), build.rows(0))


@pytest.mark.parametrize(
    "change",
    [{"unit": "mJy", "quantity": Quantity.FLUX_DENSITY, "system": None}, {"system": MagnitudeSystem.AB}],
    ids=["unit", "magnitude system"],
)
def test_values_stored_in_another_unit_are_not_handed_out(scene: Any, build: Any, change: dict[str, Any]) -> None:
    rows = build.rows(6)
    search = scene.store.put_search(scene.run_id, scene.target_id, build.reply(6), rows)
    got = scene.store.rows_of([search.search_id], (build.band("J", **change), build.BANDS[1]))
    assert np.isnan(got.flux["J"].value).all() and not got.flux["J"].is_limit.any()
    np.testing.assert_array_equal(got.flux["H"].value, rows.flux["H"].value)
    scene.store.rows_of([search.search_id], (build.band("J", **change),))
    assert len(scene.store.remarks) == 1 and "curlew J" in scene.store.remarks[0]


def test_a_band_whose_depth_was_corrected_keeps_its_values(scene: Any, build: Any) -> None:
    rows = build.rows(6)
    search = scene.store.put_search(scene.run_id, scene.target_id, build.reply(6), rows)
    bands = (build.band("J", depth=16.5), build.band("K"))
    got = scene.store.rows_of([search.search_id], bands)
    np.testing.assert_array_equal(got.flux["J"].value, rows.flux["J"].value)
    assert np.isnan(got.flux["K"].value).all() and len(got.flux["K"].value) == 6
    assert scene.store.remarks == ()


def test_a_search_that_lost_rows_is_never_read(scene: Any, build: Any, path: Path) -> None:
    import sqlite3

    search = scene.store.put_search(scene.run_id, scene.target_id, build.reply(6), build.rows(6))
    stranger = sqlite3.connect(path)
    stranger.execute("DROP TRIGGER row_no_delete")
    stranger.execute("DELETE FROM row WHERE ordinal = 5")
    stranger.commit()
    stranger.close()
    with pytest.raises(StoreError, match="should have 6 rows but 5"):
        scene.store.rows_of([search.search_id], build.BANDS)


WARM = """
import sys
from xmatch.store.store import open_store
with open_store(sys.argv[1]) as store:
    searches = store.current_searches(1)
    store.rows_of([search.search_id for search in searches], ())
print(*sorted(sys.modules))
"""


def test_a_warm_answer_imports_nothing_heavy(
    scene: Any, build: Any, path: Path, child_environment: dict[str, str]
) -> None:
    scene.store.put_search(scene.run_id, scene.target_id, build.reply(3), build.rows(3))
    done = subprocess.run(
        [sys.executable, "-W", "error", "-c", WARM, str(path)],
        check=True, capture_output=True, text=True, env=child_environment,
    )  # fmt: skip
    loaded = set(done.stdout.split())
    assert "sqlalchemy" in loaded and "xmatch.store.store" in loaded
    assert not loaded & {"pandas", "astropy", "sqlalchemy.orm", "cdshealpix", "scipy", "requests"}


def test_a_store_made_by_one_process_is_read_by_another(path: Path, scene: Any, build: Any) -> None:
    wanted = build.rows(12)
    search = scene.store.put_search(scene.run_id, scene.target_id, build.reply(12), wanted)
    with open_store(path, read_only=True) as reader:
        assert reader.current_searches(scene.target_id) == [search]
        assert_same(reader.rows_of([search.search_id], build.BANDS), wanted, build.BANDS)
