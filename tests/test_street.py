"""The street, end to end, against the embedded archive: the outcomes equal what the sky was built to contain."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import replace
from datetime import UTC, datetime, timedelta
from pathlib import Path
from typing import Any

import pytest
from nine import STREET, nine_catalogs

from xmatch.archives.transport import Transport
from xmatch.assumptions import Assumptions
from xmatch.catalogs import load_catalogs
from xmatch.demo.faults import Fault
from xmatch.demo.scene import demo_target
from xmatch.demo.sky import BUILT_TO_SHOW
from xmatch.pipeline import LookOptions, look
from xmatch.records import Look, Outcome, StandingWord
from xmatch.store.store import Store, open_store

SHOWN = {name: BUILT_TO_SHOW[name] for name in STREET}
REMOTE = {
    "gaia-dr3": "I/355/gaiadr3",
    "nvss": "VIII/65/nvss",
    "vlass-ql1": "J/ApJS/255/30/comp",
}


@pytest.fixture
def store(tmp_path: Path) -> Iterator[Store]:
    with open_store(tmp_path / "street.sqlite") as opened:
        yield opened


def ask(store: Store, archive: Any, **how: Any) -> Look:
    now = how.pop("now", None)
    how.setdefault("assumptions", Assumptions(draws=5000))  # enough here; the engine's own tests use its default
    clock = {} if now is None else {"now": lambda: now}
    return look(
        demo_target(),
        store=store,
        catalogs=nine_catalogs(),
        transport=Transport(addresses=archive.address),
        options=LookOptions(**how),
        **clock,
    )


def outcomes(answer: Look) -> dict[str, Outcome]:
    return {finding.catalog_id: finding.outcome for finding in answer.findings}


def test_each_catalog_shows_what_the_sky_was_built_to_contain(store: Store, archive: Any) -> None:
    assert outcomes(ask(store, archive)) == SHOWN


def test_only_the_table_that_holds_the_plane_is_asked(store: Store, archive: Any) -> None:
    ask(store, archive)
    bodies = " ".join(str(request) for request in archive.requests)
    assert "38.58/galreg" in bodies
    assert "38.58/galcut" not in bodies


def test_a_second_look_answers_from_the_store_without_the_network(store: Store, archive: Any) -> None:
    first = ask(store, archive)
    asked = len(archive.requests)
    second = ask(store, archive)
    assert len(archive.requests) == asked
    assert (second.n_asked, second.n_from_store) == (0, first.n_asked)
    assert outcomes(second) == outcomes(first)
    assert all(search.from_store for finding in second.findings for search in finding.searches)
    assert second.limits == first.limits
    assert second.standings == first.standings


def test_an_answer_that_did_not_change_is_kept_once(store: Store, archive: Any) -> None:
    first = ask(store, archive)
    before = store.status()
    second = ask(store, archive)
    assert second.run_id == first.run_id
    assert store.status() == before
    other = ask(store, archive, assumptions=Assumptions(draws=5000, photon_index=1.7))
    assert other.run_id != first.run_id and other.digest != first.digest


def test_a_look_at_some_catalogs_keeps_its_searches_and_not_its_answer(store: Store, archive: Any) -> None:
    some = {name: catalog for name, catalog in load_catalogs().items() if name in ("nvss", "gaia-dr3")}
    answer = look(
        demo_target(), store=store, catalogs=some, transport=Transport(addresses=archive.address),
        options=LookOptions(partial=True, assumptions=Assumptions(draws=5000)),
    )  # fmt: skip
    assert outcomes(answer) == {name: BUILT_TO_SHOW[name] for name in some}
    assert any("only some catalogs" in remark for remark in answer.remarks)
    assert store.status()["searches"] == 2 and store.status()["findings"] == 0
    assert ask(store, archive).n_from_store == 2


def test_candidates_carry_their_flux(store: Store, archive: Any) -> None:
    gaia = next(f for f in ask(store, archive).findings if f.catalog_id == "gaia-dr3")
    g = gaia.candidates[0].photometry[0]
    # Vega zero point 3228.75 Jy at 0.5822 um: nu F_nu = 10^(-0.4 x 19.7) x 3228.75e-23 x c / 0.5822 um
    assert g.flux_cgs == pytest.approx(10 ** (-0.4 * 19.7) * 3228.75e-23 * 2.99792458e10 / 0.5822e-4, rel=1e-9)


def test_an_old_answer_is_asked_again_and_again_forces_it(store: Store, archive: Any) -> None:
    ask(store, archive)
    later = datetime.now(UTC) + timedelta(days=20)
    # only the monthly list is due after twenty days
    assert ask(store, archive, now=later).n_asked == 1
    assert ask(store, archive, again=True).n_asked == 9


def test_offline_never_asks_and_a_blank_store_answers_nothing(store: Store, archive: Any) -> None:
    answer = ask(store, archive, offline=True)
    assert not archive.requests
    said = outcomes(answer)
    assert said.pop("ps1-dr1") is Outcome.NOT_COVERED  # by its footprint alone
    assert set(said.values()) == {Outcome.UNANSWERED}
    assert answer.limits == ()


@pytest.mark.parametrize(
    ("fault", "expected"),
    [
        (Fault("unavailable"), Outcome.UNANSWERED),
        (Fault("closed"), Outcome.UNANSWERED),
        (Fault("html"), Outcome.MISREAD),
        (Fault("cut stream"), Outcome.MISREAD),
        (Fault("cut file"), Outcome.MISREAD),
        (Fault("error status"), Outcome.MISREAD),
        (Fault("empty body"), Outcome.MISREAD),
        (Fault("no table"), Outcome.MISREAD),
    ],
    ids=lambda value: getattr(value, "kind", str(value)),
)
@pytest.mark.parametrize("catalog_id", ["nvss", "vlass-ql1"])
def test_a_failing_archive_is_never_a_blank_sky(
    store: Store, archive: Any, catalog_id: str, fault: Fault, expected: Outcome
) -> None:
    archive.misbehave(REMOTE[catalog_id], fault)
    answer = ask(store, archive)
    seen = outcomes(answer)
    assert seen[catalog_id] is expected
    assert not [limit for limit in answer.limits if limit.limit.band.catalog_id == catalog_id]
    rest = {name: word for name, word in SHOWN.items() if name != catalog_id}
    assert {name: seen[name] for name in rest} == rest


@pytest.mark.parametrize(("catalog_id", "column"), [("nvss", "S1.4"), ("vlass-ql1", "Ftot")])
@pytest.mark.parametrize(
    "fault",
    [Fault("renamed column", to="S14new"), Fault("changed unit", to="mag"), Fault("changed unit", to="K")],
    ids=lambda fault: f"{fault.kind} {fault.to}",
)
def test_a_changed_column_is_misread(store: Store, archive: Any, catalog_id: str, column: str, fault: Fault) -> None:
    archive.misbehave(REMOTE[catalog_id], replace(fault, column=column))
    finding = next(f for f in ask(store, archive).findings if f.catalog_id == catalog_id)
    assert finding.outcome is Outcome.MISREAD
    assert column in finding.why


def test_when_an_archive_fails_later_the_stored_answer_stands_with_its_age(store: Store, archive: Any) -> None:
    ask(store, archive)
    archive.misbehave(REMOTE["nvss"], Fault("html"))
    answer = ask(store, archive, again=True)
    nvss = next(finding for finding in answer.findings if finding.catalog_id == "nvss")
    assert nvss.outcome is Outcome.BLANK
    assert "did not give a usable answer now" in nvss.why
    assert nvss.age_s is not None


def test_a_truncated_reply_is_asked_again_smaller_until_whole(store: Store, archive: Any) -> None:
    archive.misbehave(REMOTE["gaia-dr3"], Fault("overflow"), times=1)
    answer = ask(store, archive)
    gaia = next(finding for finding in answer.findings if finding.catalog_id == "gaia-dr3")
    assert gaia.outcome is BUILT_TO_SHOW["gaia-dr3"]
    assert gaia.searches[0].radius_arcsec < load_catalogs()["gaia-dr3"].neighbourhood_arcsec


def test_a_reply_that_stays_truncated_is_truncated(store: Store, archive: Any) -> None:
    archive.misbehave(REMOTE["gaia-dr3"], Fault("overflow"))
    assert outcomes(ask(store, archive))["gaia-dr3"] is Outcome.TRUNCATED


def test_limits_carry_what_a_referee_asks_for(store: Store, archive: Any) -> None:
    answer = ask(store, archive)
    assert answer.limits
    for physical in answer.limits:
        limit = physical.limit
        assert 0.5 < limit.confidence < 1.0
        assert limit.note
        assert limit.search_ids
        assert physical.flux_cgs > 0.0
        assert physical.note
        low, middle, high = physical.luminosity_erg_s
        assert low < middle < high


def test_rotation_cannot_pay_for_the_invented_transient(store: Store, archive: Any) -> None:
    standings = {standing.class_id: standing for standing in ask(store, archive).standings}
    pulsar = standings["rotation-powered-pulsar"]
    assert pulsar.word is StandingWord.RULED_OUT
    assert pulsar.survival_high is not None and pulsar.survival_high > 0.0
    assert all(test.source for test in pulsar.tests)
    assert standings["none-of-these"].word is not StandingWord.RULED_OUT


def test_the_same_seed_gives_the_same_standings(tmp_path: Path, archive: Any) -> None:
    answers = []
    for name in ("one", "two"):
        with open_store(tmp_path / f"{name}.sqlite") as opened:
            answers.append(ask(opened, archive).standings)
    assert answers[0] == answers[1]


def test_a_law_that_ends_before_a_band_leaves_it_uncorrected_and_the_answer_is_kept(store: Store, archive: Any) -> None:
    law = "Cardelli, Clayton & Mathis 1989"  # ends at 3.3 um, short of W1
    answer = ask(store, archive, assumptions=Assumptions(draws=5000, extinction_law=law))
    w2 = next(limit for limit in answer.limits if limit.limit.band.name == "W2")
    assert w2.corrected_flux_cgs is None and "not corrected" in w2.note
    assert store.status()["limits"] == len(answer.limits)


def test_a_blind_band_is_said_and_the_answer_is_kept(store: Store, archive: Any) -> None:
    answer = ask(store, archive, assumptions=Assumptions(draws=5000, column_cm2=5.0e23))
    xray = next(limit for limit in answer.limits if limit.limit.band.is_xray)
    assert xray.corrected_flux_cgs is None and xray.luminosity_erg_s == () and "blind" in xray.note
    assert store.status()["limits"] == len(answer.limits)
