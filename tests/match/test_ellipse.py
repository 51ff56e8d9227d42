"""Error ellipses: back and forth, and what is refused."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from xmatch.errors import RangeError
from xmatch.match.chance import crowding_tail, local_density
from xmatch.match.ellipse import axes, covariance, radius_factor, sigma_from_radial, sigma_from_radius
from xmatch.match.odds import bayes_n_way, reliability


@given(st.floats(0.01, 100.0), st.floats(0.01, 1.0), st.floats(0.0, 179.0))
def test_axes_undo_covariance(major: float, ratio: float, angle: float) -> None:
    back = axes(*covariance(major, major * ratio, angle))
    assert float(back[0]) == pytest.approx(major, rel=1e-9)
    assert float(back[1]) == pytest.approx(major * ratio, rel=1e-6)
    if ratio < 0.99:
        assert abs((float(back[2]) - angle + 90.0) % 180.0 - 90.0) < 1e-4


def test_angle_runs_east_of_north() -> None:
    cxx, cyy, cxy = covariance(2.0, 1.0, 90.0)
    assert (float(cxx), float(cyy)) == pytest.approx((4.0, 1.0))
    assert float(covariance(2.0, 1.0, 45.0)[2]) > 0.0
    assert abs(float(cxy)) < 1e-12


@pytest.mark.parametrize("level", [0.0, 1.0, -0.1, 1.5, np.nan])
def test_a_level_outside_zero_to_one_is_refused(level: float) -> None:
    with pytest.raises(RangeError, match="between 0 and 1"):
        radius_factor(level)


def test_meanings_of_a_quoted_error() -> None:
    assert float(sigma_from_radius(2.145966, 0.9)) == pytest.approx(1.0, rel=1e-6)
    assert float(sigma_from_radial(np.sqrt(2.0))) == pytest.approx(1.0)


def test_crowding_tail_is_the_poisson_tail() -> None:
    from scipy.stats import poisson

    for n, mu in ((1, 0.06), (3, 0.7), (10, 4.0), (0, 2.0)):
        assert crowding_tail(n, mu) == pytest.approx(poisson.sf(n - 1, mu), rel=1e-9)


def test_an_empty_ring_gives_a_cautious_density() -> None:
    density, _, n = local_density(np.array([]), 5.0, 60.0)
    assert n == 0 and density > 0.0


def test_refusals() -> None:
    with pytest.raises(RangeError, match="at least two"):
        bayes_n_way([1.0], [0.0], [0.0])
    with pytest.raises(RangeError, match="prior between 0 and 1"):
        reliability([1.0], 1.0)
