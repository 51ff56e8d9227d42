"""Rows of all catalogs as physical objects: their spectrum, and where they are missing."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest
from test_weigh import REGISTRY, SOUTH, A, rows, search

from xmatch.catalogs import Catalog
from xmatch.objects import Source
from xmatch.records import Measured, Outcome, Rows
from xmatch.sources import distinct_expected, foretold_flux_cgs
from xmatch.weigh import Evidence, findings, physical_objects, weigh_all

GAIA, TWOMASS, VLASS = (REGISTRY[name] for name in ("gaia-dr3", "2mass-psc", "vlass-ql1"))


def evidence(found: dict[str, Rows]) -> list[Evidence]:
    return [Evidence(REGISTRY[name], (search(REGISTRY[name]),), one, None, 1.0) for name, one in found.items()]


def sources(found: dict[str, Rows]) -> tuple[tuple[Source, ...], float | None]:
    listed = evidence(found)
    weighed = weigh_all(SOUTH, listed, A)
    return physical_objects(SOUTH, listed, weighed, findings(SOUTH, listed, A, weighed), A)


def measured(catalog: Catalog, band: int, flux: float, limit: bool = False) -> Measured:
    return Measured(catalog.bands[band].band, 1.0, 0.1, limit, flux)


def test_a_star_in_two_catalogs_is_one_object_with_its_spectrum() -> None:
    found, none = sources({"gaia-dr3": rows(GAIA, 60, at=0.4, near=14.0), "2mass-psc": rows(TWOMASS, 60, at=0.5, near=12.0)})  # fmt: skip
    assert none is not None and none < 0.1
    best = found[0]
    assert [catalog for catalog, _ in best.members] == ["gaia-dr3", "2mass-psc"]
    assert best.odds > 0.9 and best.together > 0.9 and best.log10_bayes > 5
    assert len(best.photometry) == len(GAIA.bands) + len(TWOMASS.bands)
    nu = [m.band.nu_hz for m in best.photometry]
    assert nu == sorted(nu)
    assert all(m.flux_cgs is not None and m.flux_cgs > 0.0 for m in best.photometry)


def test_no_compatible_row_is_no_object_and_no_probability() -> None:
    assert sources({"gaia-dr3": rows(GAIA, 60)}) == ((), None)
    assert sources({}) == ((), None)


def test_an_object_says_where_it_should_have_been_seen_and_was_not() -> None:
    # bright in two of its own catalogs' bands, absent from one between them: the depth there is far below
    found, _ = sources({"gaia-dr3": rows(GAIA, 60, at=0.4, near=10.0), "2mass-psc": rows(TWOMASS, 60, at=0.4, near=8.0), "vvv-virac2": rows(REGISTRY["vvv-virac2"], 60)})  # fmt: skip
    missing = {(one.catalog_id, one.band_name) for one in found[0].unseen if one.should_be_seen}
    assert missing and {catalog for catalog, _ in missing} == {"vvv-virac2"}
    # a faint one is no surprise in a shallow radio survey: nothing near foretells it
    radio, _ = sources({"gaia-dr3": rows(GAIA, 60, at=0.4, near=18.0), "vlass-ql1": rows(VLASS, 60)})
    assert {one.should_be_seen for one in radio[0].unseen} == {None}


def test_what_neighbouring_bands_foretell() -> None:
    j, h, ks = (TWOMASS.bands[i].band for i in range(3))
    two = [measured(TWOMASS, 0, 1e-12), measured(TWOMASS, 2, 4e-12)]
    between = foretold_flux_cgs(two, h)
    assert between is not None
    slope = np.log(4.0) / np.log(ks.nu_hz / j.nu_hz)
    assert between == pytest.approx(1e-12 * (h.nu_hz / j.nu_hz) ** slope)
    assert foretold_flux_cgs(two, j) == pytest.approx(1e-12)
    assert foretold_flux_cgs(two, VLASS.bands[0].band) is None
    assert foretold_flux_cgs([measured(TWOMASS, 0, 1e-12, limit=True)], j) is None
    assert foretold_flux_cgs([measured(REGISTRY["erass1-main"], 0, 1e-12)], h) is None
    assert foretold_flux_cgs([], h) is None


def test_the_finding_keeps_the_numbers_that_decided_and_their_thresholds() -> None:
    listed = evidence({"gaia-dr3": rows(GAIA, 60, at=0.4, near=14.0)})
    finding = findings(SOUTH, listed, A)[0]
    assert finding.decided["odds"] >= finding.decided["odds_threshold"] == A.counterpart_odds
    assert finding.decided["global_chance_threshold"] == A.counterpart_global_chance
    assert finding.outcome is (Outcome.COUNTERPART if finding.decided["global_chance"] <= 0.01 else Outcome.AMBIGUOUS)
    assert "rows in the ring" in finding.density_note
    assert findings(SOUTH, evidence({"gaia-dr3": rows(GAIA, 60)}), A)[0].decided == {}


def test_one_crowd_in_two_catalogs_is_one_trial() -> None:
    crowd = rows(GAIA, 300)
    same = distinct_expected(SOUTH.position, weigh_all(SOUTH, evidence({"gaia-dr3": crowd, "2mass-psc": replace(crowd, flux=rows(TWOMASS, 300).flux)}), A), A)  # fmt: skip
    assert same[1] == pytest.approx(1.0, abs=0.1)
    assert distinct_expected(SOUTH.position, {}, A) == (0.0, 1.0)
