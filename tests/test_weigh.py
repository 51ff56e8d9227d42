"""From rows to findings: coverage, evidence of the neighbourhood, failures, hiding, pulses."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest

from xmatch.assumptions import Assumptions
from xmatch.catalogs import Catalog, load_catalogs
from xmatch.catalogs.door import join
from xmatch.match.motion import move
from xmatch.records import Finding, Outcome, Photometry, Position, Pulse, ReplyStatus, Rows, Search, Spin, Target
from xmatch.weigh import Evidence, chance_of_any, expected_chance_total, findings

REGISTRY = load_catalogs()
A = Assumptions()
SOUTH = Target(
    "s", Position(264.50625, -33.81583, 1.5, 1.5, epoch_yr=2026.0), spin=Spin(2711.4), pulses=(Pulse(2e8, 2.1, 35.0),)
)


def search(catalog: Catalog, status: ReplyStatus = ReplyStatus.WHOLE, radius: float | None = None) -> Search:
    return Search(
        search_id=7, catalog_id=catalog.id, release=catalog.release, table="main", asked_at="2026-12-01T00:00:00Z", status=status,
        detail="what was seen", request="", ra_deg=264.5, dec_deg=-33.8, radius_arcsec=radius or catalog.neighbourhood_arcsec, n_rows=0,
    )  # fmt: skip


def rows(
    catalog: Catalog,
    n: int,
    position: Position = SOUTH.position,
    at: float | None = None,
    value: float = 20.0,
    near: float | None = None,
) -> Rows:
    """A ring of rows well away from the position, and one at a distance if asked."""
    rng = np.random.default_rng(0)
    r, phi = catalog.neighbourhood_arcsec * rng.uniform(0.3, 0.99, n), rng.uniform(0, 2 * np.pi, n)
    east, north, values = r * np.sin(phi), r * np.cos(phi), np.full(n, value)
    if at is not None:
        east, north, values = (
            np.append(east, at),
            np.append(north, 0.0),
            np.append(values, value if near is None else near),
        )
    ra, dec = move(position.ra_deg, position.dec_deg, 1e3 * east, 1e3 * north, 1.0)
    n = len(ra)
    nan, half = np.full(n, np.nan), np.full(n, 0.3)
    return Rows(
        tuple(map(str, range(n))), ra, dec, half, half, np.zeros(n), np.full(n, 2020.0), nan, nan, nan, nan,
        {c.band.name: Photometry(values, np.full(n, np.nan), np.zeros(n, dtype=bool)) for c in catalog.bands},
    )  # fmt: skip


def one(catalog_id: str, found: Rows | None, target: Target = SOUTH, **facts: object) -> Finding:
    catalog = REGISTRY[catalog_id]
    base: dict[str, object] = {
        "searches": (search(catalog),) if found is not None else (),
        "failed": None,
        "age_s": 10.0,
    }
    return findings(target, [Evidence(catalog=catalog, rows=found, **(base | facts))], A)[0]  # type: ignore[arg-type]


def test_blank_needs_rows_around() -> None:
    nvss = REGISTRY["nvss"]
    assert one("nvss", rows(nvss, 40)).outcome is Outcome.BLANK
    empty = one("nvss", rows(nvss, 0))
    assert empty.outcome is Outcome.COVERAGE_UNKNOWN
    assert all("coverage unproven" in limit.flag for limit in empty.limits)


def test_outside_the_footprint_is_not_covered_and_gives_no_limit() -> None:
    finding = one("ps1-dr1", join([]))
    assert finding.outcome is Outcome.NOT_COVERED
    assert finding.limits == () and finding.coverage_fraction == 0.0


def test_a_failure_outside_the_footprint_takes_nothing_away_and_is_told() -> None:
    finding = one("ps1-dr1", None, failed=search(REGISTRY["ps1-dr1"], ReplyStatus.MISREAD))
    assert finding.outcome is Outcome.NOT_COVERED
    assert "no usable answer either (what was seen)" in finding.why and finding.limits == ()
    assert one("ps1-dr1", None).outcome is Outcome.NOT_COVERED


def test_rows_outside_the_stated_footprint_cast_doubt_on_it() -> None:
    finding = one("ps1-dr1", rows(REGISTRY["ps1-dr1"], 50))
    assert finding.outcome is Outcome.NOT_COVERED
    assert "footprint in the catalog file needs a check" in finding.why


def test_an_edge_through_the_error_region_is_partly_covered_and_the_limit_says_so() -> None:
    edge = replace(SOUTH, position=replace(SOUTH.position, dec_deg=-40.0))
    finding = one("nvss", rows(REGISTRY["nvss"], 40, edge.position), edge)
    assert finding.outcome is Outcome.PARTLY_COVERED
    assert finding.limits and all("covers 5" in limit.flag or "covers 4" in limit.flag for limit in finding.limits)


def test_an_object_list_never_gives_a_limit() -> None:
    finding = one("atnf-psr", rows(REGISTRY["atnf-psr"], 5))
    assert finding.outcome is Outcome.COVERAGE_UNKNOWN and finding.limits == ()
    assert "nearest" in finding.why and "proves nothing" in finding.why


@pytest.mark.parametrize(
    ("status", "expected"),
    [
        (ReplyStatus.UNANSWERED, Outcome.UNANSWERED),
        (ReplyStatus.MISREAD, Outcome.MISREAD),
        (ReplyStatus.TRUNCATED, Outcome.TRUNCATED),
    ],
)
def test_a_failure_without_an_older_answer_is_a_failure(status: ReplyStatus, expected: Outcome) -> None:
    finding = one("nvss", None, failed=search(REGISTRY["nvss"], status))
    assert finding.outcome is expected
    assert finding.why == "what was seen" and finding.limits == ()


def test_a_failure_with_an_older_answer_keeps_it_and_says_so() -> None:
    finding = one("nvss", rows(REGISTRY["nvss"], 40), failed=search(REGISTRY["nvss"], ReplyStatus.UNANSWERED))
    assert finding.outcome is Outcome.BLANK
    assert "did not give a usable answer now (what was seen)" in finding.why


def test_one_missing_table_of_two_is_no_answer() -> None:
    assert one("racs-low", rows(REGISTRY["racs-low"], 40), complete=False).outcome is Outcome.UNANSWERED


def test_a_bright_neighbour_hides() -> None:
    catwise = REGISTRY["catwise2020"]
    faint = one("catwise2020", rows(catwise, 60, at=14.0, value=14.0))
    bright = one("catwise2020", rows(catwise, 60, at=14.0, value=14.0, near=3.0))
    assert faint.outcome is Outcome.BLANK and bright.outcome is Outcome.HIDDEN
    assert bright.limits[0].value < faint.limits[0].value - 1.0
    assert "hides the position" in bright.why


def test_a_row_at_the_position_is_a_counterpart_in_an_empty_field() -> None:
    finding = one("nvss", rows(REGISTRY["nvss"], 40, at=0.3))
    assert finding.outcome is Outcome.COUNTERPART
    assert finding.limits == () and finding.candidates[0].odds > 0.99


def test_the_same_row_is_less_sure_among_many_catalogs() -> None:
    found = rows(REGISTRY["2mass-psc"], 800, at=2.0)
    alone = one("2mass-psc", found)
    many = findings(SOUTH, [Evidence(REGISTRY[name], (search(REGISTRY[name]),), rows(REGISTRY[name], 60), None, 1.0) for name in ("nvss", "gaia-dr3", "catwise2020")]
                    + [Evidence(REGISTRY["2mass-psc"], (search(REGISTRY["2mass-psc"]),), found, None, 1.0)], A)  # fmt: skip
    assert many[-1].candidates[0].odds == alone.candidates[0].odds
    assert expected_chance_total(many) > (alone.expected_chance or 0.0)
    assert 0.0 < chance_of_any(many) < 1.0


def test_a_radio_image_limit_says_what_it_means_for_a_pulse() -> None:
    long_, short = (one(name, rows(REGISTRY[name], 60)).limits[0].note for name in ("racs-low", "vlass-ql1"))
    assert "as the peak of one 35 s pulse in 900 s" in long_ and "whole pulse fell inside: 32%" in long_
    assert "shorter than a 35 s pulse" in short and "caught any of one: 1%" in short
    no_pulse = replace(SOUTH, pulses=())
    assert "pulse" not in one("racs-low", rows(REGISTRY["racs-low"], 60), no_pulse).limits[0].note


def test_a_cone_that_had_to_shrink_says_which_stars_it_could_miss() -> None:
    gaia = REGISTRY["gaia-dr3"]
    small = rows(gaia, 200)
    finding = one("gaia-dr3", small, searches=(search(gaia, radius=20.0),))
    assert "could be missed" in finding.why
