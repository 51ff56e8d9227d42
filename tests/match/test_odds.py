"""Bayes factors of many positions with ellipses, likelihood ratios, the heavy tail."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from xmatch.constants import ARCSEC_RAD
from xmatch.errors import RangeError
from xmatch.match.ellipse import covariance
from xmatch.match.odds import (
    bayes_elliptical,
    bayes_n_way,
    bayes_n_way_elliptical,
    likelihood_ratio,
    n_way_prior,
    posterior,
    reliability,
    with_heavy_tail,
)
from xmatch.match.separation import normalised


@given(st.lists(st.tuples(st.floats(0.05, 3.0), st.floats(-2.0, 2.0), st.floats(-2.0, 2.0)), min_size=2, max_size=6))
def test_many_round_positions_agree_with_the_round_formula(listed: list[tuple[float, float, float]]) -> None:
    sigma, east, north = (np.array(v) for v in zip(*listed, strict=True))
    log, _, _ = bayes_n_way_elliptical(east, north, sigma**2, sigma**2, 0 * sigma)
    w = 1.0 / (sigma * ARCSEC_RAD) ** 2
    if log > -250.0:
        assert log == pytest.approx(np.log10(bayes_n_way(sigma, east, north)), abs=1e-8)
    assert log < (len(sigma) - 1) * np.log10(2.0) + np.log10(w).sum() - np.log10(w.sum()) + 1e-9


@given(st.floats(0.1, 3.0), st.floats(0.1, 3.0), st.floats(0.0, 180.0), st.floats(-3.0, 3.0), st.floats(-3.0, 3.0))
def test_two_ellipses_agree_with_the_two_way_formula(a: float, b: float, angle: float, e: float, n: float) -> None:
    cxx, cyy, cxy = (np.array([one, other]) for one, other in zip(covariance(a, b, angle), covariance(0.3, 0.2, 40.0), strict=True))  # fmt: skip
    log, _, _ = bayes_n_way_elliptical([0.0, e], [0.0, n], cxx, cyy, cxy)
    d = normalised(e, n, cxx.sum(), cyy.sum(), cxy.sum())
    if d < 20.0:
        assert log == pytest.approx(float(np.log10(bayes_elliptical(d, cxx.sum(), cyy.sum(), cxy.sum()))), abs=1e-7)


def test_the_mean_place_lies_at_the_better_position_and_is_better_than_both() -> None:
    _, place, cov = bayes_n_way_elliptical([0.0, 1.0], [0.0, 0.0], [0.01, 1.0], [0.01, 1.0], [0.0, 0.0])
    assert place == pytest.approx((1.0 * 0.01 / 1.01, 0.0))
    assert cov[0] < 0.01


def test_order_does_not_matter() -> None:
    rng = np.random.default_rng(0)
    e, n, s = rng.normal(size=5), rng.normal(size=5), rng.uniform(0.5, 2.0, 5)
    turn = rng.permutation(5)
    assert bayes_n_way_elliptical(e, n, s, s, 0 * s)[0] == pytest.approx(
        bayes_n_way_elliptical(e[turn], n[turn], s[turn], s[turn], 0 * s)[0], abs=1e-9
    )


def test_what_cannot_be_weighed_is_refused() -> None:
    with pytest.raises(RangeError, match="at least two"):
        bayes_n_way_elliptical([0.0], [0.0], [1.0], [1.0], [0.0])
    with pytest.raises(RangeError, match="without an error"):
        bayes_n_way_elliptical([0.0, 1.0], [0.0, 0.0], [0.0, 1.0], [0.0, 1.0], [0.0, 0.0])
    with pytest.raises(RangeError, match="one row"):
        likelihood_ratio(0.5, 1.0, [0.0])
    with pytest.raises(RangeError, match="heavy tail"):
        with_heavy_tail(1.0, 1.0, 60.0)


def test_a_prior_of_two_catalogs_is_the_pairwise_one() -> None:
    # Budavari & Szalay 2008, ApJ 679, 301: objects in common over the product of the numbers
    assert n_way_prior([10.0, 12.0], 9.0) == pytest.approx(-13.0)
    assert float(posterior(1e13, 10 ** n_way_prior([10.0, 12.0], 9.0))) == pytest.approx(0.5)


def test_the_heavy_tail_keeps_a_far_row_possible_and_takes_no_more_than_its_share() -> None:
    radius, share = 60.0, 1e-3
    r = np.linspace(0.0, radius, 20_001)
    f = with_heavy_tail(np.exp(-0.5 * r**2) / (2 * np.pi), share, radius)
    assert np.trapezoid(f * 2 * np.pi * r, r) == pytest.approx(1.0, abs=1e-4)
    assert f[-1] > 0.0
    far, none = reliability(likelihood_ratio(0.5, f[-1:], 1e-9), 0.5)
    assert far[0] > 0.9 and none < 0.1  # in an all but empty sky even a far row is rather the counterpart than none
