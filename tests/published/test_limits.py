"""Bounds, counts and pulses against published values and reference libraries."""

from __future__ import annotations

from typing import Any

import numpy as np
import pytest
from astropy.coordinates import SkyCoord
from astropy.stats import poisson_conf_interval
from checking import rows, tolerance
from scipy.integrate import quad
from scipy.stats import poisson

from xmatch.limits import bounds, counts, coverage, pulses

FUNCTIONS = {name: getattr(module, name) for module in (bounds, counts, pulses) for name in dir(module)}


@pytest.mark.parametrize("row", rows("limits"), ids=lambda row: str(row["id"]))
def test_published_value(row: dict[str, Any]) -> None:
    found = np.asarray(FUNCTIONS[row["quantity"]](**row["inputs"]), dtype=float)
    assert found.tolist() == pytest.approx(row["expected"], **tolerance(row["tolerance"])), row["source"]


# astropy 8.0.2 poisson_conf_interval('frequentist-confidence'), after Gehrels 1986
@pytest.mark.parametrize("n", [1, 2, 5, 10, 40, 300])
def test_gehrels_agrees_with_astropy(n: int) -> None:
    low, high = poisson_conf_interval(n, interval="frequentist-confidence", sigma=1)
    level = bounds.one_sided_confidence(1.0)
    assert float(counts.gehrels_lower(n, level)) == pytest.approx(low, rel=1e-9)
    assert float(counts.gehrels_upper(n, level)) == pytest.approx(high, rel=1e-9)


# astropy 8.0.2 poisson_conf_interval('kraft-burrows-nousek'), where it works: counts and background above 0
@pytest.mark.parametrize(("n", "background"), [(1, 1.0), (2, 1.0), (3, 1.0), (5, 2.5), (10, 3.0), (25, 20.0)])
@pytest.mark.parametrize("level", [0.68, 0.9, 0.99])
def test_kraft_agrees_with_astropy(n: int, background: float, level: float) -> None:
    expected = poisson_conf_interval(n, "kraft-burrows-nousek", background=background, confidence_level=level)
    mine = counts.kraft_interval(n, background, level)
    assert [float(v) for v in mine] == pytest.approx(np.ravel(expected).tolist(), abs=2e-4)


# Kraft, Burrows & Nousek 1991, ApJ 374, 344: the interval holds the level, and its ends are equally probable
@pytest.mark.parametrize(("n", "background"), [(0, 0.0), (0, 4.0), (1, 0.0), (4, 0.3), (12, 9.0)])
def test_kraft_holds_its_level_by_direct_integration(n: int, background: float) -> None:
    low, high = (float(v) for v in counts.kraft_interval(n, background, 0.9))

    def density(s: float) -> float:
        return float(poisson.pmf(n, s + background))

    inside = quad(density, low, high)[0] / quad(density, 0.0, 80.0, points=[max(n - background, 0.1)])[0]
    assert inside == pytest.approx(0.9, abs=1e-6)
    if low > 0.0:
        assert density(low) == pytest.approx(density(high), rel=1e-5)


# Kashyap et al. 2010, ApJ 719, 900, by direct sums of the Poisson distribution
@pytest.mark.parametrize("background", [0.0, 0.5, 1.0, 7.0, 40.0])
def test_kashyap_by_direct_sums(background: float) -> None:
    threshold = float(counts.kashyap_threshold(background, 0.003))
    assert poisson.sf(threshold, background) <= 0.003
    assert threshold == 0.0 or poisson.sf(threshold - 1, background) > 0.003
    limit = float(counts.kashyap_limit(background, 0.003, 0.9))
    assert poisson.sf(threshold, limit + background) == pytest.approx(0.9, abs=1e-9)


# astropy 8 takes its Galactic pole from FK5, whose axes lie 23 mas off ICRS; the Hipparcos matrix (ESA SP-1200) from ICRS
def test_galactic_coordinates_agree_with_astropy() -> None:
    rng = np.random.default_rng(3)
    ra, dec = rng.uniform(0, 360, 300), np.degrees(np.arcsin(rng.uniform(-1, 1, 300)))
    expected = SkyCoord(ra, dec, unit="deg").galactic
    mine = SkyCoord(*coverage.icrs_to_galactic(ra, dec), unit="deg", frame="galactic")
    assert mine.separation(expected).mas == pytest.approx(np.zeros(300), abs=30.0)
