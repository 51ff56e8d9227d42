"""The stated confidence holds over simulated skies, empty ones included."""

from __future__ import annotations

import numpy as np
import pytest
from scipy.stats import poisson

from xmatch.errors import RangeError
from xmatch.limits import bounds, counts, hiding, pointed

SKIES = 10_000


def shortfall(level: float) -> float:
    """Three Monte-Carlo errors of a fraction."""
    return 3.0 * float(np.sqrt(level * (1.0 - level) / SKIES))


@pytest.mark.parametrize("level", [0.9, 0.95, 0.99])
def test_bayesian_bounds_hold_over_skies_drawn_from_their_prior(level: float) -> None:
    """Credible bounds are exact on average over the prior: sources uniform from 0, seen counts as drawn."""
    rng = np.random.default_rng(20)
    source, back = rng.uniform(0.0, 60.0, SKIES * 6), 2.0
    seen = rng.poisson(source + back)
    few = seen <= 20  # well below the end of the simulated prior
    held = source[few] <= counts.bayesian_upper(seen[few], back, level)
    low, high = counts.kraft_interval(seen[few], back, level)
    inside = (source[few] >= low) & (source[few] <= high)
    assert few.sum() > SKIES
    assert (seen[few] == 0).sum() > 50
    assert [held.mean(), inside.mean()] == pytest.approx([level, level], abs=shortfall(level))


@pytest.mark.parametrize("mean", [0.3, 1.0, 4.5, 30.0])
def test_classical_bounds_never_fall_short(mean: float) -> None:
    seen = np.random.default_rng(21).poisson(mean, SKIES)
    held = (counts.gehrels_upper(seen, 0.95) >= mean).mean()
    assert held >= 0.95 - shortfall(0.95)
    # and holds exactly as often as the counts themselves say
    expected = poisson.pmf(np.arange(200), mean)[counts.gehrels_upper(np.arange(200), 0.95) >= mean].sum()
    assert held == pytest.approx(expected, abs=shortfall(0.95))


def test_gaussian_bounds_hold_over_a_flat_prior() -> None:
    rng = np.random.default_rng(22)
    source = rng.uniform(0.0, 20.0, SKIES * 4)
    seen = source + rng.normal(size=len(source))
    few = seen < 10.0
    held = (source[few] <= bounds.gaussian_bound(seen[few], 1.0, 0.95)).mean()
    assert held == pytest.approx(0.95, abs=shortfall(0.95))


def test_many_whole_counts_are_read_off_the_same_bounds() -> None:
    seen = np.random.default_rng(23).poisson(3.0, 5000)
    one_by_one = [float(counts.gehrels_upper(n, 0.9)) for n in seen[:50]]
    assert counts.gehrels_upper(seen, 0.9)[:50].tolist() == one_by_one


def test_detection_limit_finds_what_it_promises() -> None:
    exposure, rate, enclosed, vignetting, ecf = 2.0e4, 1.0e-4, 0.8, 0.5, 1.0e11
    flux = float(pointed.pointed_limit(exposure, rate, enclosed, vignetting, ecf, 0.003, 0.9))
    threshold = counts.kashyap_threshold(exposure * rate, 0.003)
    drawn = np.random.default_rng(24).poisson(flux * exposure * enclosed * vignetting * ecf + exposure * rate, SKIES)
    assert (drawn > threshold).mean() == pytest.approx(0.9, abs=shortfall(0.9))
    with pytest.raises(RangeError, match="not allowed"):
        pointed.pointed_limit(exposure, rate, enclosed, 0.0, ecf, 0.003, 0.9)


def test_radio_floor_and_confusion() -> None:
    assert hiding.radio_floor([2.0, 0.5], 1000.0).tolist() == [0.002, 0.0005]
    # solid angle of a 45 arcsec Gaussian beam, pi FWHM^2 / (4 ln 2) = 1.770453e-4 deg2
    assert float(hiding.beams_per_source(45.0, 50.0)) == pytest.approx(1.0 / (1.770453e-4 * 50.0), rel=1e-6)
    with pytest.raises(RangeError, match="above 1"):
        hiding.radio_floor(1.0, 0.5)
