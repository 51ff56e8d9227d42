"""Inside a remnant or beside it, and how often by chance."""

from __future__ import annotations

import numpy as np
import pytest
from scipy.stats import ncx2

from xmatch.errors import RangeError
from xmatch.match.chance import chance_within
from xmatch.match.extended import contained_probability, expected_containing

ROUND = (4.0, 4.0, 0.0)


def test_well_inside_and_well_outside() -> None:
    inside, outside = contained_probability([5.0, 500.0], [0.0, 0.0], [100.0, 100.0], [80.0, 80.0], [10.0, 10.0], ROUND)
    assert inside == 1.0
    assert outside == 0.0


@pytest.mark.parametrize(("centre", "radius"), [(0.0, 3.0), (5.0, 5.0), (8.0, 6.0), (20.0, 19.0)])
def test_a_round_outline_agrees_with_the_noncentral_chi_square(centre: float, radius: float) -> None:
    # the squared distance of a round Gaussian from a point is noncentral chi-square with two degrees (scipy)
    found = contained_probability([centre], [0.0], [radius], [radius], [0.0], ROUND)
    assert float(found[0]) == pytest.approx(ncx2.cdf((radius / 2.0) ** 2, 2, (centre / 2.0) ** 2), abs=0.02)


def test_a_long_error_ellipse_reaches_into_an_object_on_its_axis_only() -> None:
    along = (1.0, 400.0, 0.0)  # north-south
    north, east = contained_probability([0.0, 25.0], [25.0, 0.0], [10.0, 10.0], [10.0, 10.0], [0.0, 0.0], along)
    assert north > 0.1
    assert east == 0.0
    tilted = contained_probability([25.0], [0.0], [24.0], [2.0], [90.0], ROUND)  # major axis east-west
    assert tilted[0] > contained_probability([25.0], [0.0], [24.0], [2.0], [0.0], ROUND)[0]


def test_the_chance_of_containment_is_that_of_random_places() -> None:
    rng = np.random.default_rng(1)
    side = 3600.0 * 10
    centres = rng.uniform(0, side, (60, 2))
    size = rng.uniform(200, 1500, 60)
    places = rng.uniform(2000, side - 2000, (20_000, 2))
    inside = (np.hypot(*(places[:, None, :] - centres).transpose(2, 0, 1)) < size).sum(axis=1)
    expected = expected_containing(size, size, 100.0)
    assert inside.mean() == pytest.approx(expected, rel=0.15)
    assert (inside > 0).mean() == pytest.approx(float(chance_within(expected)), rel=0.2)
    assert expected_containing(size, size, 100.0, margin_arcsec=60.0) > expected


def test_what_is_refused_and_what_is_missing() -> None:
    with pytest.raises(RangeError, match="point"):
        contained_probability([0.0], [0.0], [0.0], [1.0], [0.0], ROUND)
    with pytest.raises(RangeError, match="above 0"):
        expected_containing([1.0], [1.0], 0.0)
    assert np.isnan(contained_probability([0.0], [0.0], [np.nan], [1.0], [0.0], ROUND)[0])
    assert expected_containing([np.nan], [1.0], 1.0) == 0.0
