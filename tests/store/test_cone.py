"""The cone index: no position inside a cone is ever missed, anywhere on the sphere, and covers stay tight."""

from __future__ import annotations

import math
from itertools import pairwise
from typing import Any

import numpy as np
import pytest
from hypothesis import example, given, settings
from hypothesis import strategies as st

from xmatch.errors import RangeError
from xmatch.store import cone, cones

Arrays = tuple[Any, Any]
RADII = st.floats(math.log(0.1), math.log(5 * 3600.0)).map(math.exp)
"""From 0.1 arcsec to 5 degrees, every decade alike."""
NEAR_POLE = st.floats(-7.0, 1.0).map(lambda power: 90.0 - 10.0**power)
DECS = st.one_of(st.floats(-90.0, 90.0), NEAR_POLE, NEAR_POLE.map(lambda dec: -dec), st.just(41.8103149))
RAS = st.one_of(
    st.floats(0.0, 360.0, exclude_max=True),
    st.tuples(st.sampled_from([0.0, 45.0, 90.0, 180.0, 270.0, 360.0]), st.floats(-1e-3, 1e-3)).map(sum),
)


def around(ra_deg: float, dec_deg: float, distance_rad: Any, angle: Any) -> Arrays:
    """Positions at distances and position angles from a centre, through unit vectors: no formula of ours."""
    ra, dec = np.radians(ra_deg), np.radians(dec_deg)
    centre = np.array([np.cos(dec) * np.cos(ra), np.cos(dec) * np.sin(ra), np.sin(dec)])
    north = np.array([-np.sin(dec) * np.cos(ra), -np.sin(dec) * np.sin(ra), np.cos(dec)])
    east = np.array([-np.sin(ra), np.cos(ra), 0.0])
    way = np.outer(np.cos(angle), north) + np.outer(np.sin(angle), east)
    x, y, z = (np.cos(distance_rad)[:, None] * centre + np.sin(distance_rad)[:, None] * way).T
    return np.degrees(np.arctan2(y, x)) % 360.0, np.degrees(np.arctan2(z, np.hypot(x, y)))


def separations(ra_deg: float, dec_deg: float, ra: Any, dec: Any) -> Any:
    """Brute force on the sphere: the angle between unit vectors, arcsec."""
    a, d = np.radians(ra_deg), np.radians(dec_deg)
    one = np.array([np.cos(d) * np.cos(a), np.cos(d) * np.sin(a), np.sin(d)])
    other = np.array([np.cos(np.radians(dec)) * np.cos(np.radians(ra)),
                      np.cos(np.radians(dec)) * np.sin(np.radians(ra)), np.sin(np.radians(dec))])  # fmt: skip
    chord = np.linalg.norm(other - one[:, None], axis=0)
    return np.degrees(2.0 * np.arcsin(np.minimum(1.0, chord / 2.0))) * 3600.0


def held(ranges: Any, index: Any) -> Any:
    low, high = np.array(ranges, dtype=np.int64).T
    place = np.searchsorted(low, index, side="right") - 1
    return (place >= 0) & (index <= high[np.maximum(place, 0)])


@settings(max_examples=300, deadline=None)
@given(ra=RAS, dec=DECS, radius=RADII, seed=st.integers(0, 2**32 - 1))
@example(ra=0.0, dec=90.0, radius=0.1, seed=1)
@example(ra=123.0, dec=-90.0, radius=18000.0, seed=1)
@example(ra=359.9999999, dec=0.0, radius=5.0, seed=1)
@example(ra=45.0, dec=89.99999, radius=120.0, seed=1)
def test_a_cover_holds_all_of_its_cone(ra: float, dec: float, radius: float, seed: int) -> None:
    random = np.random.default_rng(seed)
    # half of the positions lie at the inner rim, where a careless cover loses them
    inner = np.concatenate((np.ones(32) - 1e-9, np.sqrt(random.uniform(0, 1, 32))))
    points = around(ra, dec, np.radians(radius / 3600.0) * inner, random.uniform(0, 2 * np.pi, 64))
    inside = separations(ra, dec, *points) <= radius
    assert inside.sum() > 32
    ranges = cone.ranges(ra, dec, radius)
    assert held(ranges, cones.index(*points))[inside].all()


@settings(max_examples=60, deadline=None)
@given(ra=RAS, dec=DECS, radius=RADII, seed=st.integers(0, 2**32 - 1))
def test_ranges_and_the_exact_test_find_what_brute_force_finds(ra: float, dec: float, radius: float, seed: int) -> None:
    random = np.random.default_rng(seed)
    distance = np.radians(radius / 3600.0) * random.uniform(0.0, 3.0, 400)
    points = around(ra, dec, distance, random.uniform(0, 2 * np.pi, 400))
    away = separations(ra, dec, *points)
    clear = np.abs(away - radius) > 1e-6 * radius + 1e-8  # rounding may call the rim itself either way
    mine = np.array([cone.separation_arcsec(ra, dec, a, d) for a, d in zip(*points, strict=True)])
    found = held(cone.ranges(ra, dec, radius), cones.index(*points)) & (mine <= radius)
    assert (found == (away <= radius))[clear].all()


@given(ra=RAS, dec=DECS, radius=RADII)
@settings(max_examples=200, deadline=None)
def test_a_cover_is_rising_disjoint_short_and_tight(ra: float, dec: float, radius: float) -> None:
    ranges = cone.ranges(ra, dec, radius)
    edges = [edge for pair in ranges for edge in pair]
    assert edges == sorted(edges) and all(b[0] > a[1] + 1 for a, b in pairwise(ranges))
    assert len(ranges) <= 64
    cell_deg2 = 41252.96 / (12 * 4**29)
    area = sum(high - low + 1 for low, high in ranges) * cell_deg2
    # the cover of a hand-made box would be 30 times the cone
    assert area <= 12 * math.pi * (max(radius, 0.1) / 3600.0) ** 2


@settings(max_examples=40, deadline=None)
@given(cases=st.lists(st.tuples(RAS, DECS, RADII), min_size=1, max_size=12))
def test_many_cones_at_once_are_covered_as_each_alone(cases: list[tuple[float, float, float]]) -> None:
    ra, dec, radius = (np.array(part) for part in zip(*cases, strict=True))
    together = cones.as_lists(*cones.covers(ra, dec, radius), len(cases))
    random = np.random.default_rng(1)
    for one, listed in zip(cases, together, strict=True):
        alone = cone.ranges(*one)
        # a cell that touches the rim to the last digit may be called either way: compare by what they hold
        points = around(one[0], one[1], np.radians(one[2] / 3600.0) * np.ones(50), random.uniform(0, 6.28, 50))
        inside = separations(one[0], one[1], *points) <= one[2]
        assert held(listed, cones.index(*points))[inside].all()
        assert abs(len(listed) - len(alone)) <= 2


def test_no_cones_have_no_cover() -> None:
    none = np.zeros(0)
    assert [len(part) for part in cones.covers(none, none, none)] == [0, 0, 0]


@given(ra=RAS, dec=DECS, order=st.integers(0, 29))
@settings(max_examples=300, deadline=None)
def test_the_index_of_one_is_that_of_many(ra: float, dec: float, order: int) -> None:
    assert [cone.index(ra, dec, order)] == cones.index(np.array([ra]), np.array([dec]), order).tolist()


@pytest.mark.parametrize("order", [0, 1, 2, 3, 5])
def test_no_corner_is_farther_from_its_centre_than_we_think(order: int) -> None:
    from astropy.coordinates import angular_separation
    from cdshealpix.nested import healpix_to_lonlat, vertices

    number = np.arange(12 * 4**order, dtype=np.uint64)
    lon, lat = healpix_to_lonlat(number, order)
    corner_lon, corner_lat = vertices(number, order)
    away = angular_separation(lon[:, None], lat[:, None], corner_lon, corner_lat).to_value("rad").max()
    assert away <= cone.reach_rad(order) <= 1.01 * away


@pytest.mark.parametrize("order", [0, 1, 6, 14, 29])
def test_the_index_is_that_of_the_reference_library(order: int) -> None:
    import astropy.units as u
    from astropy.coordinates import Latitude, Longitude
    from cdshealpix.nested import lonlat_to_healpix

    random = np.random.default_rng(3)
    ra, dec = random.uniform(0, 360, 20000), np.degrees(np.arcsin(random.uniform(-1, 1, 20000)))
    dec[:2000] = 90.0 - 10.0 ** random.uniform(-8, 1, 2000)
    dec[2000:4000] = -90.0 + 10.0 ** random.uniform(-8, 1, 2000)
    ra[4000:5000] = random.choice([0.0, 90.0, 180.0, 270.0], 1000)
    reference = lonlat_to_healpix(Longitude(ra, u.deg), Latitude(dec, u.deg), order).astype(np.int64)
    differing = cones.index(ra, dec, order) != reference
    # a position on the edge of two base cells belongs to either; a cover that touches it holds both
    on_edge = (ra % 90.0 == 0.0) & (np.abs(np.sin(np.radians(dec))) > cone.EQUATOR_Z)
    assert 0 < on_edge.sum() < 2000
    # the pad of every cover is five cells of order 29, so the last digit may differ
    assert (differing & ~on_edge).mean() < 1e-4


@pytest.mark.parametrize(
    "centre", [(math.nan, 0.0, 1.0), (0.0, 90.1, 1.0), (0.0, math.nan, 1.0), (0.0, 0.0, -1.0), (0.0, 0.0, 7e5),
               (0.0, 0.0, math.inf), (math.inf, 0.0, 1.0)],
)  # fmt: skip
def test_a_cone_that_is_none_is_refused(centre: tuple[float, float, float]) -> None:
    with pytest.raises(RangeError, match="cone"):
        cone.ranges(*centre)
    with pytest.raises(RangeError, match="cone 1: "):
        cones.covers(*(np.array([1.0, value]) for value in centre))


def test_the_whole_sky_is_a_cone() -> None:
    assert cone.ranges(10.0, 20.0, 648000.0) == [(0, 12 * 4**29 - 1)]


@pytest.mark.parametrize(
    "pair, away",
    [((0.0, 0.0, 180.0, 0.0), 648000.0), ((359.9999, 0.0, 0.0001, 0.0), 0.72), ((0.0, 90.0, 77.0, 90.0), 0.0),
     ((10.0, 89.0, 190.0, 89.0), 7200.0), ((5.0, 5.0, 5.0, 5.0 + 1e-7), 3.6e-4)],
)  # fmt: skip
def test_separations_by_hand(pair: tuple[float, float, float, float], away: float) -> None:
    assert cone.separation_arcsec(*pair) == pytest.approx(away, rel=1e-7, abs=1e-7)
