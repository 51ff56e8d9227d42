"""Every catalog of the registry on the street: checks, whole lists, observation logs, footprints."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import replace
from datetime import UTC, datetime, timedelta
from pathlib import Path
from typing import Any

import pytest
from mocpy import MOC

from xmatch.archives.transport import Transport
from xmatch.assumptions import Assumptions
from xmatch.catalogs import load_catalogs
from xmatch.catalogs.resolving import ready
from xmatch.demo.faults import Fault
from xmatch.demo.scene import demo_target
from xmatch.demo.server import EmbeddedArchive
from xmatch.demo.sky import BUILT_TO_SHOW
from xmatch.inspection import check_catalogs, mirror_catalogs
from xmatch.pipeline import LookOptions, look
from xmatch.records import Finding, Look, Outcome, Position, ReplyStatus
from xmatch.report import words
from xmatch.store.schema_lists import CheckVerdict
from xmatch.store.store import Store, open_store

REGISTRY = load_catalogs()
DRAWS = Assumptions(draws=2000)


@pytest.fixture
def store(tmp_path: Path) -> Iterator[Store]:
    with open_store(tmp_path / "registry.sqlite") as opened:
        yield opened


@pytest.fixture
def transport(archive: Any) -> Iterator[Transport]:
    transport = Transport(addresses=archive.address)
    yield transport
    transport.close_session()


def at(store: Store, transport: Transport, *names: str, target: Any = None, **how: Any) -> Look:
    clock = {"now": how.pop("now")} if "now" in how else {}
    return look(
        target or demo_target(), store=store, catalogs={name: REGISTRY[name] for name in names} if names else REGISTRY,
        transport=transport, options=LookOptions(assumptions=DRAWS, **how), **clock,
    )  # fmt: skip


def finding(answer: Look, name: str) -> Finding:
    return next(f for f in answer.findings if f.catalog_id == name)


def elsewhere(east_deg: float = 3.0) -> Any:
    """The demo's target, moved."""
    target = demo_target()
    position = target.position
    moved = Position(
        position.ra_deg + east_deg, position.dec_deg, position.sigma_major_arcsec, position.sigma_minor_arcsec
    )
    return replace(target, name="Tern-5", position=moved)


# ------------------------------------------------------------------------------------------------
# the whole registry
# ------------------------------------------------------------------------------------------------
def test_every_catalog_is_checked_then_asked_and_shows_what_the_sky_was_built_to_contain(
    store: Store, transport: Transport
) -> None:
    results = check_catalogs(list(REGISTRY.values()), store=store, transport=transport)
    assert {
        r.catalog_id: (str(r.verdict), r.detail if r.verdict is not CheckVerdict.GOOD else "") for r in results
    } == {name: ("good", "") for name in REGISTRY}
    answer = at(store, transport)
    assert {f.catalog_id: f.outcome for f in answer.findings} == BUILT_TO_SHOW
    assert not answer.remarks
    warm = at(store, transport)
    assert (warm.n_asked, warm.n_from_store) == (0, answer.n_asked)
    assert {f.catalog_id: (f.outcome, f.why) for f in warm.findings} == {
        f.catalog_id: (f.outcome, f.why) for f in answer.findings
    }
    assert warm.limits == answer.limits


def test_what_nobody_confirmed_is_not_asked_and_said(store: Store, transport: Transport) -> None:
    answer = at(store, transport, "glostar", "nvss", "lotss-dr3")
    assert [f.catalog_id for f in answer.findings] == ["nvss"]
    assert answer.waiting == ("glostar", "lotss-dr3")
    assert any("2 catalogs were not asked" in remark and "glostar, lotss-dr3" in remark for remark in answer.remarks)
    assert "2 catalogs wait for a check and were not asked." in words.answer(answer)


def test_a_check_of_another_state_of_the_file_unlocks_nothing(store: Store, transport: Transport) -> None:
    check_catalogs([REGISTRY["glostar"]], store=store, transport=transport)
    checks = store.latest_checks()
    assert ready({"glostar": REGISTRY["glostar"]}, checks)[1] == ()
    changed = replace(REGISTRY["glostar"], fingerprint="0" * 64)
    assert ready({"glostar": changed}, checks) == ({}, ("glostar",))


@pytest.mark.parametrize(
    ("fault", "verdict", "words"),
    [
        (Fault("renamed column", column="Fint", to="Flux"), CheckVerdict.GOOD, ""),
        (Fault("renamed column", column="RAJ2000", to="RA"), CheckVerdict.DRIFT, "column 'RAJ2000' is not served"),
        (
            Fault("changed unit", column="Speak1", to="mag"),
            CheckVerdict.DRIFT,
            "comes in mag, which cannot be converted to mJy",
        ),
        (Fault("no table"), CheckVerdict.DRIFT, "no table in the reply"),
        (Fault("html"), CheckVerdict.DRIFT, "a web page came"),
        (Fault("unavailable"), CheckVerdict.UNANSWERED, "HTTP 503"),
        (Fault("out of range", column="Speak1", factor=1.0e9), CheckVerdict.DRIFT, "the archive changed its meaning"),
    ],
    ids=lambda value: getattr(value, "kind", None),
)
def test_a_check_says_what_it_saw(
    store: Store, transport: Transport, archive: Any, fault: Fault, verdict: CheckVerdict, words: str
) -> None:
    archive.misbehave("J/A+A/627/A175/table7", fault)
    (result,) = check_catalogs([REGISTRY["glostar"]], store=store, transport=transport)
    assert (result.verdict, words in result.detail) == (verdict, True), result.detail
    assert (ready({"glostar": REGISTRY["glostar"]}, store.latest_checks())[1] == ()) == (verdict is CheckVerdict.GOOD)


def test_a_silent_archive_takes_no_earlier_check_back(store: Store, transport: Transport, archive: Any) -> None:
    check_catalogs([REGISTRY["glostar"]], store=store, transport=transport)
    archive.misbehave("*", Fault("unavailable"))
    (result,) = check_catalogs([REGISTRY["glostar"]], store=store, transport=transport)
    assert result.verdict is CheckVerdict.UNANSWERED
    assert ready({"glostar": REGISTRY["glostar"]}, store.latest_checks())[1] == ()


def test_a_ucd_that_fits_two_columns_is_not_guessed(store: Store, transport: Transport, archive: Any) -> None:
    catalog = replace(REGISTRY["glostar"], ra="ucd:pos.eq", dec="ucd:pos.eq")
    (result,) = check_catalogs([catalog], store=store, transport=transport)
    assert result.verdict is CheckVerdict.DRIFT
    assert "UCD 'pos.eq' fits 0 columns (none)" in result.detail


def test_a_control_without_rows_is_no_good_check(store: Store, transport: Transport) -> None:
    control = REGISTRY["nvss"].control
    assert control is not None
    catalog = replace(REGISTRY["nvss"], control=replace(control, ra_deg=10.0))
    (result,) = check_catalogs([catalog], store=store, transport=transport)
    assert (result.verdict, result.n_rows) == (CheckVerdict.NO_ROWS, 0)
    assert "is it the right table?" in result.detail


# ------------------------------------------------------------------------------------------------
# whole lists
# ------------------------------------------------------------------------------------------------
def test_a_list_is_fetched_once_and_searched_here(store: Store, transport: Transport, archive: Any) -> None:
    first = at(store, transport, "ultracool-sheet", "atnf-psr")
    assert len(archive.requests) == 2
    second = at(store, transport, "ultracool-sheet", "atnf-psr", target=elsewhere())
    assert len(archive.requests) == 2
    assert second.n_asked == 2  # searches, answered by the lists in the store
    for answer in (first, second):
        for name in ("ultracool-sheet", "atnf-psr"):
            one = finding(answer, name)
            assert one.outcome is Outcome.COVERAGE_UNKNOWN
            assert "cut from the whole list of" in one.searches[0].detail
            assert one.searches[0].request.startswith(
                ("GET https://docs.google.com/", "POST https://vizier.cds.unistra.fr/")
            )


def test_a_list_is_cut_to_the_cone(store: Store, transport: Transport) -> None:
    answer = at(store, transport, "atnf-psr")
    pulsars = finding(answer, "atnf-psr")
    assert pulsars.n_rows == 3  # of 2500; the others fill the northern cap
    assert store.frame("SELECT count(*) AS n FROM list_row")["n"].tolist() == [2500]


def test_an_old_list_is_fetched_again_and_a_failure_leaves_the_old_one(
    store: Store, transport: Transport, archive: Any
) -> None:
    at(store, transport, "atnf-psr")
    archive.misbehave("*", Fault("html"))
    later = datetime.now(UTC) + timedelta(days=20)
    answer = at(store, transport, "atnf-psr", now=lambda: later)
    assert len(archive.requests) == 2
    pulsars = finding(answer, "atnf-psr")
    assert pulsars.outcome is Outcome.COVERAGE_UNKNOWN
    assert "did not give a usable answer now" in pulsars.why
    assert store.frame("SELECT count(*) AS n FROM list_copy")["n"].tolist() == [1]


def test_a_list_cut_short_is_no_list(store: Store, transport: Transport, archive: Any) -> None:
    archive.misbehave("mcgill-magnetars", Fault("cut list", size=12))
    answer = at(store, transport, "mcgill-magnetars")
    assert finding(answer, "mcgill-magnetars").outcome is Outcome.MISREAD
    assert "holds 11 rows where at least 25 are known" in finding(answer, "mcgill-magnetars").why
    assert store.frame("SELECT count(*) AS n FROM list_copy")["n"].tolist() == [0]


def test_a_mirrored_list_answers_the_first_look(store: Store, transport: Transport, archive: Any) -> None:
    (done,) = mirror_catalogs([REGISTRY["atnf-psr"], REGISTRY["nvss"]], store=store, transport=transport)
    assert (done.catalog_id, done.good, done.detail) == ("atnf-psr", True, "2500 rows kept")
    asked = len(archive.requests)
    at(store, transport, "atnf-psr")
    assert len(archive.requests) == asked


# ------------------------------------------------------------------------------------------------
# where a mission pointed
# ------------------------------------------------------------------------------------------------
def test_blank_for_a_pointing_mission_rests_on_an_exposure(store: Store, transport: Transport) -> None:
    swift = finding(at(store, transport, "swift-2sxps"), "swift-2sxps")
    assert swift.outcome is Outcome.BLANK
    assert "one pointing holds the position: 1.93 ks at 10.2 arcmin off axis (00099001001)" in swift.why
    held = store.frame("SELECT name, off_axis_arcmin, holds_target FROM pointing ORDER BY off_axis_arcmin")
    assert held["holds_target"].tolist() == [1]  # the other is beyond the reach that was asked for
    assert held["off_axis_arcmin"].tolist() == pytest.approx([10.2], abs=0.01)
    assert {search.table for search in swift.searches} == {"main", "observation log"}
    (limit,) = swift.limits
    # 1.93 ks x (1 - 0.5 x 10.2 / 11.8) = 1.096 ks of 2 ks: 1.825 times the flux of the stated depth
    assert "worth 1.1 ks: 1.82 times the flux" in limit.note
    on_axis = 2.0e-13 * (3.0 + 1.645) / 3.0  # the 95 % limit of a 3 sigma list
    assert limit.value == pytest.approx(on_axis * 1.825, rel=0.01)


def test_where_it_never_pointed_nothing_follows(store: Store, transport: Transport) -> None:
    answer = at(store, transport, "swift-2sxps", target=elsewhere())
    swift = finding(answer, "swift-2sxps")
    assert swift.outcome is Outcome.NOT_COVERED
    assert "no pointing holds the position" in swift.why
    assert not [limit for limit in answer.limits if limit.limit.band.catalog_id == "swift-2sxps"]


@pytest.mark.parametrize(
    "fault",
    [Fault("html"), Fault("unavailable"), Fault("renamed column", column="xrt_exposure", to="exp")],
    ids=lambda f: f.kind,
)
def test_a_log_that_does_not_answer_proves_nothing(
    store: Store, transport: Transport, archive: Any, fault: Fault
) -> None:
    archive.misbehave("swiftmastr", fault)
    answer = at(store, transport, "swift-2sxps")
    swift = finding(answer, "swift-2sxps")
    assert swift.outcome is Outcome.COVERAGE_UNKNOWN
    assert "its observation log did not answer" in swift.why
    assert all("coverage unproven" in limit.limit.flag for limit in answer.limits)


# ------------------------------------------------------------------------------------------------
# footprints
# ------------------------------------------------------------------------------------------------
def footprint_of(centre_ra_deg: float, centre_dec_deg: float, tmp_path: Path) -> bytes:
    """One degree around a place, as a MOC in FITS."""
    import astropy.units as u

    path = tmp_path / "moc.fits"
    moc = MOC.from_cone(lon=centre_ra_deg * u.deg, lat=centre_dec_deg * u.deg, radius=1.0 * u.deg, max_depth=10)
    moc.save(str(path), format="fits", overwrite=True)
    return path.read_bytes()


@pytest.mark.parametrize(("offset_deg", "outcome"), [(0.0, Outcome.BLANK), (2.5, Outcome.NOT_COVERED)])
def test_a_fetched_footprint_decides(
    archive: Any, store: Store, transport: Transport, tmp_path: Path, offset_deg: float, outcome: Outcome
) -> None:
    catalog = REGISTRY["vphas-dr2"]
    body = footprint_of(264.50625, -33.81583 + offset_deg, tmp_path)
    archive.documents[catalog.coverage.moc.removeprefix("https://").replace("%2F", "/")] = body
    (done,) = mirror_catalogs([catalog], store=store, transport=transport)
    archive.documents.clear()
    assert done.good and done.detail == "covers 0.0% of the sky"
    answer = at(store, transport, "vphas-dr2")
    # the faint star of the crowd lies inside the error region whatever the footprint says
    seen = finding(answer, "vphas-dr2")
    assert seen.coverage_fraction == (1.0 if outcome is Outcome.BLANK else 0.0)


@pytest.mark.parametrize("fault", [Fault("html"), Fault("unavailable"), Fault("empty body")], ids=lambda f: f.kind)
def test_a_footprint_that_cannot_be_read_is_not_kept(
    archive: Any, store: Store, transport: Transport, tmp_path: Path, fault: Fault
) -> None:
    catalog = REGISTRY["vphas-dr2"]
    archive.documents[catalog.coverage.moc.removeprefix("https://").replace("%2F", "/")] = footprint_of(
        10.0, 10.0, tmp_path
    )
    archive.misbehave("documents", fault)
    (done,) = mirror_catalogs([catalog], store=store, transport=transport)
    archive.documents.clear()
    assert not done.good
    assert store.footprints() == {}


def test_without_a_footprint_rows_on_all_sides_are_evidence_and_none_are_none(
    store: Store, transport: Transport
) -> None:
    check_catalogs([REGISTRY["galex-guvcat-ais"]], store=store, transport=transport)
    answer = at(store, transport, "galex-guvcat-ais", "gleam-x-dr2")
    assert {f.outcome for f in answer.findings} == {Outcome.COVERAGE_UNKNOWN}


def test_one_dead_archive_stops_and_delays_nobody(store: Store, transport: Transport, archive: EmbeddedArchive) -> None:
    archive.misbehave("fermilpsc", Fault("closed"))
    answer = at(store, transport, "fermi-4fgl-dr4", "nvss", "swift-2sxps", "tgss-adr1")
    assert {f.catalog_id: f.outcome for f in answer.findings} == {
        "fermi-4fgl-dr4": Outcome.UNANSWERED, "nvss": Outcome.BLANK, "swift-2sxps": Outcome.BLANK, "tgss-adr1": Outcome.BLANK,
    }  # fmt: skip
    assert finding(answer, "fermi-4fgl-dr4").searches[0].status is ReplyStatus.UNANSWERED
