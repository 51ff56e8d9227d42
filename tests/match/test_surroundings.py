"""The field around a target: brightness, gradients, the search made beside it."""

from __future__ import annotations

import numpy as np
import pytest
from scipy.stats import binomtest

from xmatch.errors import RangeError
from xmatch.match.surroundings import (
    beside,
    binomial_two_sided,
    density_at_least_as_bright,
    gradient,
    ring_area_deg2,
    search_beside,
)
from xmatch.records import Floats


def disc(n: int, radius: float, seed: int) -> tuple[Floats, Floats]:
    rng = np.random.default_rng(seed)
    r, phi = radius * np.sqrt(rng.uniform(size=n)), rng.uniform(0, 2 * np.pi, n)
    return r * np.sin(phi), r * np.cos(phi)


def test_density_counts_what_is_at_least_as_bright() -> None:
    around = np.array([True, True, True, True, False])
    magnitude = density_at_least_as_bright(np.array([18.0, 12.0, 15.0, np.nan, 15.0]), around, 2.0, True)
    # the row without a magnitude may be bright: it counts for everyone
    assert magnitude.tolist() == [2.0, 1.0, 1.5, 2.0, 1.5]
    flux = density_at_least_as_bright(np.array([1.0, 9.0, 3.0, 4.0, 100.0]), around, 1.0, False)
    assert flux.tolist() == [4.0, 1.0, 3.0, 2.0, 1.0]
    with pytest.raises(RangeError, match="above 0"):
        density_at_least_as_bright(np.array([1.0]), np.array([True]), 0.0, True)


def test_an_even_field_has_no_gradient_and_a_lopsided_one_points_where_the_rows_are() -> None:
    p = [gradient(*disc(300, 100.0, seed), np.ones(300, dtype=bool)).p for seed in range(200)]
    assert 0.0 < np.mean(np.array(p) < 0.1) < 0.2
    east, north = disc(600, 100.0, 3)
    kept = east > -60.0
    found = gradient(east[kept], north[kept], np.ones(int(kept.sum()), dtype=bool))
    assert found.p < 0.01
    assert abs(found.angle_deg - 90.0) < 30.0
    assert gradient([], [], np.empty(0, dtype=bool)).p == 1.0


def test_positions_beside_are_even_and_stay_between_the_radii() -> None:
    east, north = beside(10.0, 50.0, 500)
    r = np.hypot(east, north)
    assert r.min() >= 10.0 and r.max() <= 50.0
    half = np.sqrt((10.0**2 + 50.0**2) / 2.0)  # half of the area inside
    assert np.count_nonzero(r < half) == 250
    assert abs(east.mean()) < 0.5 and abs(north.mean()) < 0.5
    assert len(beside(10.0, 5.0, 50)[0]) == 0


@pytest.mark.parametrize("n", [60, 600, 6000])
def test_the_search_beside_agrees_with_the_density_in_an_even_field(n: int) -> None:
    p = []
    for seed in range(40):
        east, north = disc(n, 120.0, seed)
        one = np.ones(n)
        mu = n / (np.pi * 120.0**2) * np.pi * 3.4393**2
        found = search_beside(
            east, north, one, one, 0.0 * one, k=3.4393, outer_arcsec=120.0, expected=mu, n_positions=200, least=50
        )
        assert found is not None
        p.append(found.p)
    assert np.mean(np.array(p) < 0.003) <= 0.05


def test_a_field_of_clumps_disagrees_with_the_density() -> None:
    rng = np.random.default_rng(2)
    at_e, at_n = disc(60, 115.0, 5)
    east, north = np.repeat(at_e, 20) + rng.normal(0, 1, 1200), np.repeat(at_n, 20) + rng.normal(0, 1, 1200)
    one = np.ones(1200)
    mu = 1200 / 120.0**2 * 3.4393**2
    found = search_beside(
        east, north, one, one, 0.0 * one, k=3.4393, outer_arcsec=120.0, expected=mu, n_positions=200, least=50
    )
    assert found is not None and found.p < 1e-3
    assert found.hit_fraction < found.expected_fraction
    assert found.expected == pytest.approx(-np.log(1.0 - found.hit_fraction))


def test_a_cone_without_room_gives_no_check() -> None:
    one = np.ones(5)
    arguments = {"k": 3.4, "outer_arcsec": 12.0, "expected": 0.1, "n_positions": 200, "least": 50}
    assert search_beside(one, one, one, one, 0.0 * one, **arguments) is None  # type: ignore[arg-type]
    assert search_beside([], [], [], [], [], **arguments | {"outer_arcsec": 900.0}) is None  # type: ignore[arg-type]


@pytest.mark.parametrize(("seen", "n", "share"), [(0, 200, 0.1), (20, 200, 0.1), (50, 200, 0.1), (200, 200, 0.97)])
def test_binomial_tails_are_scipys(seen: int, n: int, share: float) -> None:
    low = binomtest(seen, n, share, "less").pvalue
    high = binomtest(seen, n, share, "greater").pvalue
    assert binomial_two_sided(seen, n, share) == pytest.approx(min(1.0, 2 * min(low, high)), rel=1e-9)


def test_no_chance_at_all_and_certainty() -> None:
    assert binomial_two_sided(0, 50, 0.0) == 1.0
    assert binomial_two_sided(3, 50, 0.0) == 0.0
    assert ring_area_deg2(3.0, 2.0) == 0.0
