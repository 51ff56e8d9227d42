"""What was concluded can be read back number by number, walked to its origin, and not changed."""

from __future__ import annotations

import math
from dataclasses import replace
from typing import Any

import pytest

from xmatch.assumptions import Assumptions
from xmatch.errors import RangeError, StoreError
from xmatch.records import Outcome, ReplyStatus


def answered(scene: Any, build: Any, **changes: Any) -> Any:
    rows = build.rows(4)
    search = scene.store.put_search(scene.run_id, scene.target_id, build.reply(4), rows)
    answer = build.look(scene.run_id, search, rows, **changes)
    scene.store.put_answer(scene.run_id, scene.target_id, answer)
    scene.store.finish_run(scene.run_id)
    return answer


def test_every_number_of_an_answer_is_found_in_the_views(scene: Any, build: Any) -> None:
    answer = answered(scene, build)
    frame = scene.store.frame
    found = frame("SELECT catalog_id, outcome, coverage_fraction FROM current_finding ORDER BY finding_id")
    assert found["outcome"].tolist() == ["ambiguous", "unanswered"]
    assert found["coverage_fraction"][0] == 1.0 and math.isnan(found["coverage_fraction"][1])
    limits = frame("SELECT * FROM current_limit ORDER BY limit_id")
    for line, physical in zip(limits.to_dict("records"), answer.limits, strict=True):
        limit = physical.limit
        assert (line["band_name"], line["value"], line["unit"], line["system"]) == (
            limit.band.name,
            limit.value,
            "mag",
            "Vega",
        )
        assert (line["kind"], line["method"], line["flag"]) == (limit.kind, limit.method, limit.flag)
        assert (line["confidence"], line["n_sigma"], line["verified_depth"]) == (0.95, 5.0, 0)
        assert line["flux_erg_s_cm2"] == physical.flux_cgs
        assert line["assumptions_digest"] == answer.digest
    # a blind band has no corrected flux
    assert limits["corrected_flux_erg_s_cm2"].isna().tolist() == [False, True]
    luminosity = frame(
        "SELECT place, distance_pc, luminosity_erg_s FROM current_luminosity_limit WHERE band_name = 'J'"
    )
    assert luminosity.values.tolist() == [["low", 2e3, 1e33], ["median", 4e3, 4e33], ["high", 8e3, 1.1e34]]
    standing = frame("SELECT * FROM current_standing").iloc[0]
    assert (standing["word"], standing["survival"], standing["would_overturn"]) == ("strained", 0.01, "J to 18 mag")
    assert frame("SELECT sentence, source FROM class_test").values.tolist() == [["16.1 against 14.0 mag", "invented"]]


def test_a_limit_can_be_walked_back_to_its_request_and_assumptions(scene: Any, build: Any) -> None:
    answered(scene, build)
    walked = scene.store.frame(
        """
        SELECT DISTINCT search.request, catalog.fingerprint, json_extract(assumptions.content, '$.confidence')
        FROM current_luminosity_limit
        JOIN limit_search USING (limit_id)
        JOIN search USING (search_id)
        JOIN catalog USING (catalog_key)
        JOIN assumptions USING (assumptions_digest)
        """
    )
    assert walked.values.tolist() == [["GET http://127.0.0.1/cone", "f" * 64, Assumptions().confidence]]


def test_a_candidate_points_at_its_row(scene: Any, build: Any) -> None:
    answer = answered(scene, build)
    candidate = answer.findings[0].candidates[0]
    line = scene.store.frame(
        "SELECT c.source_key, c.odds, row.ra_deg FROM current_candidate AS c JOIN row USING (search_id, ordinal)"
    ).iloc[0]
    assert line.tolist() == [candidate.key, candidate.odds, candidate.ra_deg]


def test_the_current_answer_is_that_of_the_latest_run_of_the_name(scene: Any, build: Any) -> None:
    answer = answered(scene, build)
    store = scene.store
    # a new version of the target, a run that answers, and a run that was stopped
    farther = store.put_target(replace(build.TARGET, dm_pc_cm3=300.0))
    second = store.begin_run(farther, "0.2")
    blank = replace(answer.findings[1], outcome=Outcome.BLANK)
    store.put_answer(second, farther, replace(answer, findings=(blank,), limits=(), standings=()))
    store.begin_run(farther, "0.3")
    assert store.frame("SELECT run_id FROM current_run")["run_id"].tolist() == [second]
    assert store.frame("SELECT catalog_id, outcome FROM current_finding").values.tolist() == [["stilt", "blank"]]
    assert len(store.frame("SELECT * FROM current_limit")) == 0
    # history stays
    assert len(store.frame("SELECT * FROM flux_limit")) == 2


def test_a_run_is_answered_once_and_by_its_own_target(scene: Any, build: Any) -> None:
    answer = answered(scene, build)
    with pytest.raises(StoreError, match="never changed"):
        scene.store.put_answer(scene.run_id, scene.target_id, answer)
    other = scene.store.put_target(replace(build.TARGET, name="Godwit-1"))
    with pytest.raises(StoreError, match="not a look at target"):
        scene.store.put_answer(scene.run_id, other, answer)


@pytest.mark.parametrize("bad", [math.inf, math.nan])
def test_a_number_that_is_none_stops_the_whole_answer(scene: Any, build: Any, bad: float) -> None:
    rows = build.rows(4)
    search = scene.store.put_search(scene.run_id, scene.target_id, build.reply(4), rows)
    answer = build.look(scene.run_id, search, rows)
    broken = replace(answer.limits[1], luminosity_erg_s=(1.0, bad, 2.0))
    with pytest.raises(RangeError, match="luminosity limit of curlew H"):
        scene.store.put_answer(scene.run_id, scene.target_id, replace(answer, limits=(answer.limits[0], broken)))
    counts = scene.store.status()
    assert counts["findings"] == counts["limits"] == 0
    assert len(scene.store.frame("SELECT * FROM assumptions")) == 0


def test_a_limit_without_a_finding_is_a_fault(scene: Any, build: Any) -> None:
    rows = build.rows(4)
    search = scene.store.put_search(scene.run_id, scene.target_id, build.reply(4), rows)
    answer = build.look(scene.run_id, search, rows)
    with pytest.raises(StoreError, match="curlew J, curlew H belong to no finding"):
        scene.store.put_answer(scene.run_id, scene.target_id, replace(answer, findings=answer.findings[1:]))


def test_assumptions_are_kept_once_under_their_hash(scene: Any) -> None:
    other = Assumptions().but(confidence=0.9)
    kept = [scene.store.put_assumptions(item) for item in (Assumptions(), other, Assumptions())]
    assert kept == [Assumptions().digest, other.digest, Assumptions().digest]
    assert len(scene.store.frame("SELECT * FROM assumptions")) == 2


# --- work of one's own ---------------------------------------------------------------------------
def test_whole_numbers_stay_exact_beside_null(scene: Any, build: Any) -> None:
    big = build.ABOVE_DOUBLES
    got = scene.store.frame(f"SELECT {big} AS id, 1.5 AS x, 'a' AS word UNION ALL SELECT NULL, NULL, NULL")
    assert str(got["id"].dtype) == "Int64" and got["id"][0] == big
    assert got["id"].isna().tolist() == got["x"].isna().tolist() == got["word"].isna().tolist() == [False, True]
    hpx = scene.store.frame("SELECT hpx29 FROM row")
    assert hpx.columns.tolist() == ["hpx29"] and len(hpx) == 0


def test_a_frame_cannot_change_anything(scene: Any) -> None:
    for statement in (
        "INSERT INTO assumptions VALUES ('a', '{}') RETURNING 1",
        "DROP VIEW current_run",
        "DELETE FROM run",
    ):
        with pytest.raises(StoreError):
            scene.store.frame(statement)
    assert scene.store.status()["runs"] == 1
    # and the connection is as good as before
    assert scene.store.put_assumptions(Assumptions()) == Assumptions().digest


def test_a_wrong_statement_points_to_the_contract(scene: Any) -> None:
    with pytest.raises(StoreError, match=r"(no such table: birds|\"birds\" does not exist); .*db/README\.md"):
        scene.store.frame("SELECT * FROM birds")


def test_two_columns_of_one_name_both_come_back(scene: Any) -> None:
    assert scene.store.frame("SELECT 1 AS a, 2 AS a").values.tolist() == [[1, 2]]


def test_a_closed_store_says_so(scene: Any) -> None:
    scene.store.close()
    scene.store.close()
    with pytest.raises(StoreError, match="was closed"):
        scene.store.status()


def test_status_counts(scene: Any, build: Any) -> None:
    answered(scene, build)
    scene.store.put_search(scene.run_id, scene.target_id, build.reply(0, ReplyStatus.MISREAD), None)
    facts = scene.store.status()
    counts = {"targets": 1, "runs": 1, "searches": 2, "whole_searches": 1, "rows": 4, "findings": 2, "limits": 2}
    assert {name: facts[name] for name in counts} == counts
    assert facts["last_asked_at"] == "2026-12-01T12:00:00Z"
