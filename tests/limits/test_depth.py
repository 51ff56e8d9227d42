"""Depth: the local estimators recover simulated catalogs, and say so when they cannot."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest

from xmatch.assumptions import Assumptions
from xmatch.catalogs import load_catalogs
from xmatch.limits.depth import limit_for_band
from xmatch.limits.hiding import hidden_flux, profile, raise_limit
from xmatch.records import Band, Floats, LimitKind, LimitMethod, Photometry

A = Assumptions()
KS = load_catalogs()["2mass-psc"].bands[2].band
NVSS = load_catalogs()["nvss"].bands[0].band


def photometry(value: Floats, error: Floats | None = None) -> Photometry:
    n = len(value)
    return Photometry(value, np.full(n, np.nan) if error is None else error, np.zeros(n, dtype=bool))


def stars(depth5: float, n: int, seed: int = 2) -> Photometry:
    """Stars whose counts rise as 10^(0.35 m), with photon-limited errors, listed above 5 sigma."""
    rng = np.random.default_rng(seed)
    u = rng.uniform(size=20 * n)
    m = np.log10(10.0 ** (0.35 * 8.0) + u * (10.0 ** (0.35 * 17.0) - 10.0 ** (0.35 * 8.0))) / 0.35
    sigma = 0.2171 * 10.0 ** (0.4 * (m - depth5))
    listed = m + sigma * rng.standard_normal(len(m)) < depth5
    return photometry(m[listed][:n], np.hypot(0.02, sigma[listed][:n]))


@pytest.mark.parametrize("depth5", [13.9, 14.6, 15.1])
def test_quoted_errors_recover_the_depth_within_a_tenth_of_a_magnitude(depth5: float) -> None:
    limit = limit_for_band(KS, stars(depth5, 200), assumptions=A)
    assert limit is not None and limit.method is LimitMethod.LOCAL_ERRORS
    # 95 % of sources at (5 + 1.645) sigma: 0.309 mag brighter than the 5 sigma depth
    assert limit.value == pytest.approx(depth5 - 2.5 * np.log10(6.644854 / 5.0), abs=0.1)
    assert limit.kind is LimitKind.COMPLETENESS and limit.n_sigma == pytest.approx(6.644854, abs=1e-5)


def test_radio_depth_from_quoted_errors() -> None:
    rng = np.random.default_rng(3)
    flux = 2.5 * (1.0 + rng.pareto(1.3, 120))
    limit = limit_for_band(NVSS, photometry(flux, np.full(120, 0.5)), assumptions=A)
    assert limit is not None and limit.method is LimitMethod.LOCAL_ERRORS
    assert limit.value == pytest.approx(0.5 * 6.644854, rel=1e-6)


def test_the_faint_end_of_fluxes_without_errors() -> None:
    rng = np.random.default_rng(4)
    flux = 3.0 * (1.0 + rng.pareto(1.4, 400))
    limit = limit_for_band(NVSS, photometry(flux), assumptions=A)
    assert limit is not None and limit.method is LimitMethod.LOCAL_FAINT_END
    assert limit.value == pytest.approx(3.0 * 6.644854 / 5.0, rel=0.02)
    assert "passed over: too few neighbours quote an error" in limit.note


def test_too_few_neighbours_fall_back_to_the_nominal_depth_and_say_why() -> None:
    limit = limit_for_band(KS, stars(14.6, 12), assumptions=A)
    assert limit is not None and limit.method is LimitMethod.NOMINAL
    assert "needs 30 neighbours, 12 are listed" in limit.note
    # 10 sigma at 14.3 is (10 + 1.645)/10 brighter at 95 %
    assert limit.value == pytest.approx(14.3 - 2.5 * np.log10(11.644854 / 10.0), abs=1e-6)
    assert not limit.verified_depth  # the file says that the digits come from memory


def test_quoted_errors_that_end_before_five_sigma_are_not_extrapolated() -> None:
    rng = np.random.default_rng(6)
    m = rng.uniform(12.0, 17.0, 200)
    limit = limit_for_band(
        replace(KS, depth=None, depth_n_sigma=None), photometry(m, 0.002 * 10 ** (0.2 * (m - 12))), assumptions=A
    )
    assert limit is not None and limit.method is LimitMethod.LOCAL_FAINT_END
    assert "beyond the faintest neighbours" in limit.note


def test_a_local_depth_far_beyond_the_nominal_one_is_not_believed() -> None:
    limit = limit_for_band(KS, stars(16.8, 300), assumptions=A)
    assert limit is not None and limit.method is LimitMethod.NOMINAL
    assert "beyond the nominal depth" in limit.note


def test_listed_limits_are_no_neighbours() -> None:
    good = stars(14.6, 100)
    flagged = replace(good, is_limit=np.ones(100, dtype=bool))
    limit = limit_for_band(KS, flagged, assumptions=A)
    assert limit is not None and limit.method is LimitMethod.NOMINAL


def test_nothing_known_gives_nothing() -> None:
    assert limit_for_band(replace(KS, depth=None), None, assumptions=A) is None


@pytest.mark.parametrize("band", [KS, NVSS], ids=["magnitude", "flux"])
def test_a_higher_confidence_gives_a_brighter_limit(band: Band) -> None:
    values = [limit_for_band(band, None, assumptions=A.but(confidence=c)) for c in (0.5, 0.9, 0.95, 0.999)]
    numbers = [limit.value for limit in values if limit is not None]
    assert len(numbers) == 4
    assert numbers == sorted(numbers, reverse=band is KS)


def test_half_the_sources_at_the_threshold_itself() -> None:
    limit = limit_for_band(KS, None, assumptions=A.but(confidence=0.5))
    assert limit is not None and limit.value == pytest.approx(14.3, abs=1e-9)


# Moffat 1969, A&A 3, 455: half the peak at half the full width
def test_the_profile_is_half_at_half_the_width() -> None:
    assert float(profile(3.05, 6.1)) == pytest.approx(0.5, rel=1e-12)


def test_a_neighbour_inside_the_deblending_radius_hides_up_to_its_own_flux() -> None:
    hidden = hidden_flux([100.0, 100.0], [1.0, 30.0], 6.0, residual=0.1, deblend=0.8)
    assert hidden[0] == 100.0
    assert 0.0 < hidden[1] < 0.1


def test_a_bright_star_raises_a_limit_and_a_faint_one_does_not() -> None:
    limit = limit_for_band(KS, None, assumptions=A)
    assert limit is not None
    raised, was = raise_limit(limit, np.array([2.0, 13.0]), np.array([9.0, 40.0]), 2.5, A)
    assert was and raised.value < limit.value and "raised" in raised.flag and "2 mag" in raised.note
    same, was = raise_limit(limit, np.array([13.0, np.nan]), np.array([40.0, 1.0]), 2.5, A)
    assert not was and same == limit
    assert raise_limit(limit, np.array([2.0]), np.array([9.0]), 0.0, A) == (limit, False)
