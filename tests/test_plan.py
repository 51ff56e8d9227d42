"""The plan: which searches are due, and which the store answers."""

from __future__ import annotations

from dataclasses import replace
from datetime import UTC, datetime, timedelta

import pytest

from xmatch.assumptions import Assumptions
from xmatch.catalogs import load_catalogs
from xmatch.plan import FASTEST_STAR_ARCSEC_YR, Step, fast_star_arcsec, least_radius_arcsec, make_plan, smaller
from xmatch.records import Distance, Position, ReplyStatus, Search, Target

NOW = datetime(2026, 12, 1, tzinfo=UTC)
PLANE = Target("t", Position(264.50625, -33.81583, 1.8, 1.2, 20.0, epoch_yr=2026.0))
HIGH = Target("h", Position(150.0, -20.0, 1.8, 1.2, 20.0, epoch_yr=2026.0))
REGISTRY = load_catalogs()


def plan(target: Target, stored: list[Search] | None = None, **how: object) -> tuple[Step, ...]:
    return make_plan(target, REGISTRY, stored or [], assumptions=Assumptions(), now=NOW, **how)  # type: ignore[arg-type]


def answered(step: Step, age: timedelta, **changes: object) -> Search:
    question = step.question
    search = Search(
        search_id=1, catalog_id=question.catalog_id, release=question.release, table=question.table,
        asked_at=(NOW - age).strftime("%Y-%m-%dT%H:%M:%SZ"), status=ReplyStatus.WHOLE, detail="whole", request="",
        ra_deg=question.ra_deg, dec_deg=question.dec_deg, radius_arcsec=question.radius_arcsec, n_rows=5,
    )  # fmt: skip
    return replace(search, **changes)  # type: ignore[arg-type]


def test_every_catalog_is_asked() -> None:
    assert {step.catalog.id for step in plan(PLANE)} == set(REGISTRY)
    assert all(step.ask for step in plan(PLANE))


@pytest.mark.parametrize(("target", "table"), [(PLANE, "plane"), (HIGH, "away from the plane")])
def test_racs_low_asks_the_table_that_holds_the_position(target: Target, table: str) -> None:
    assert [step.table.name for step in plan(target) if step.catalog.id == "racs-low"] == [table]


def test_near_the_edge_of_the_plane_both_tables_are_asked() -> None:
    edge = Target("e", Position(0.0, 0.0, 1.0, 1.0))
    from astropy.coordinates import SkyCoord

    icrs = SkyCoord(l=350.0, b=4.99, unit="deg", frame="galactic").icrs
    edge = replace(edge, position=replace(edge.position, ra_deg=icrs.ra.deg, dec_deg=icrs.dec.deg))
    assert len([step for step in plan(edge) if step.catalog.id == "racs-low"]) == 2


def test_a_fresh_answer_is_not_asked_again() -> None:
    step = next(step for step in plan(PLANE) if step.catalog.id == "nvss")
    again = next(s for s in plan(PLANE, [answered(step, timedelta(days=100))]) if s.catalog.id == "nvss")
    assert not again.ask and again.known is not None


@pytest.mark.parametrize(
    "changes",
    [
        {"release": "another"},
        {"status": ReplyStatus.UNANSWERED},
        {"radius_arcsec": 3.0},
        {"ra_deg": PLANE.position.ra_deg + 0.2 / 3600.0},
        {"table": "another"},
        {"asked_at": "2026-05-01T00:00:00Z"},
    ],
    ids=lambda value: next(iter(value)),
)
def test_an_answer_to_another_question_does_not_count(changes: dict[str, object]) -> None:
    step = next(step for step in plan(PLANE) if step.catalog.id == "nvss")
    again = next(s for s in plan(PLANE, [answered(step, timedelta(days=1), **changes)]) if s.catalog.id == "nvss")
    assert again.ask


def test_options_offline_again_and_age() -> None:
    step = next(step for step in plan(PLANE) if step.catalog.id == "nvss")
    stored = [answered(step, timedelta(days=2))]
    assert not any(s.ask for s in plan(PLANE, stored, offline=True))
    assert all(s.ask for s in plan(PLANE, stored, again=True))
    assert all(s.ask for s in plan(PLANE, stored, age_limit_days=1.0))


def test_offline_takes_an_answer_of_any_age() -> None:
    step = next(step for step in plan(PLANE) if step.catalog.id == "nvss")
    old = plan(PLANE, [answered(step, timedelta(days=4000))], offline=True)
    assert next(s for s in old if s.catalog.id == "nvss").known is not None


def test_the_cone_finds_the_fastest_star() -> None:
    radius = {step.catalog.id: step.question.radius_arcsec for step in plan(PLANE)}
    assert radius["gaia-dr3"] > FASTEST_STAR_ARCSEC_YR * 10.0
    assert radius["catwise2020"] > FASTEST_STAR_ARCSEC_YR * 10.6
    assert fast_star_arcsec(PLANE, REGISTRY["nvss"]) == 0.0
    assert (
        fast_star_arcsec(replace(PLANE, position=replace(PLANE.position, epoch_yr=None)), REGISTRY["gaia-dr3"]) == 0.0
    )


def test_a_moving_target_widens_the_cone() -> None:
    moving = replace(PLANE, distance=Distance(500.0, 1000.0))
    still = least_radius_arcsec(moving, REGISTRY["nvss"], Assumptions())
    assert least_radius_arcsec(moving, REGISTRY["nvss"], Assumptions(target_speed_km_s=300.0)) > still + 5.0


def test_smaller_never_loses_the_error_region() -> None:
    step = next(step for step in plan(PLANE) if step.catalog.id == "nvss")
    question = step.question
    while (narrower := smaller(question, step.least_radius_arcsec)) is not None:
        assert step.least_radius_arcsec <= narrower.radius_arcsec < question.radius_arcsec
        question = narrower
    assert question.radius_arcsec / 2.0 < step.least_radius_arcsec
