"""Coverage: bounds, edges, wraps, and cones that may touch a region."""

from __future__ import annotations

import pytest
from hypothesis import given
from hypothesis import strategies as st

from xmatch.limits.coverage import Region, covered_fraction, icrs_to_galactic, touches
from xmatch.match.motion import move
from xmatch.records import Position

NORTH = Region("declination", dec_deg=(-40.0, 90.0))
PLANE = Region("galactic box", b_deg=(-5.0, 5.0))
OFF_PLANE = Region("galactic box", b_deg=(-5.0, 5.0), outside=True)
WEST = Region("galactic box", l_deg=(179.94, 359.94), b_deg=(-90.0, 90.0))
WRAP = Region("galactic box", l_deg=(350.0, 10.0), b_deg=(-5.0, 5.0))
K = 3.44


@pytest.mark.parametrize(
    ("dec", "expected"), [(-39.0, 1.0), (-41.0, 0.0), (-40.0, 0.5)], ids=["inside", "outside", "on the edge"]
)
def test_declination_bound(dec: float, expected: float) -> None:
    fraction = covered_fraction(Position(120.0, dec, 2.0, 2.0), NORTH, K)
    assert fraction == pytest.approx(expected, abs=0.01)


def test_part_of_an_ellipse_by_probability() -> None:
    # one sigma inside the edge of a Gaussian: Phi(1) = 0.8413 (normal distribution), cut at K sigma
    fraction = covered_fraction(Position(120.0, -40.0 + 2.0 / 3600.0, 2.0, 2.0), NORTH, K)
    assert fraction == pytest.approx(0.8413, abs=0.01)


def test_a_compilation_never_covers() -> None:
    assert covered_fraction(Position(1.0, 1.0, 1.0, 1.0), Region("compilation"), K) is None


def test_galactic_boxes_and_their_inverse_share_the_sky() -> None:
    here = Position(264.50625, -33.81583, 1.0, 1.0)  # b = -1.2
    assert covered_fraction(here, PLANE, K) == 1.0
    assert covered_fraction(here, OFF_PLANE, K) == 0.0
    assert covered_fraction(here, WRAP, K) == 1.0  # l = 355
    assert covered_fraction(here, WEST, K) == 1.0


@given(st.floats(0.0, 359.99), st.floats(-89.9, 89.9), st.floats(0.1, 3600.0), st.floats(0.0, 360.0))
def test_a_cone_that_holds_a_point_of_the_region_touches_it(ra: float, dec: float, radius: float, angle: float) -> None:
    import numpy as np

    east, north = radius * np.sin(np.radians(angle)), radius * np.cos(np.radians(angle))
    rim = move(ra, dec, 0.999e3 * east, 0.999e3 * north, 1.0)
    for region in (NORTH, PLANE, OFF_PLANE, WEST, WRAP):
        if region.contains(*rim) or region.contains(ra, dec):
            assert touches(ra, dec, radius, region)


def test_touching_is_not_everything() -> None:
    assert not touches(120.0, -50.0, 3600.0, NORTH)
    assert not touches(150.0, 20.0, 60.0, PLANE)
    assert not touches(264.5, -33.8, 60.0, OFF_PLANE)


@given(st.floats(0.0, 359.99), st.floats(-90.0, 90.0))
def test_galactic_latitude_is_in_range(ra: float, dec: float) -> None:
    gal_l, gal_b = (float(v) for v in icrs_to_galactic(ra, dec))
    assert 0.0 <= gal_l < 360.0 or gal_l == pytest.approx(360.0)
    assert -90.0 <= gal_b <= 90.0
