"""Weighing rows: compatibility, density, chance, odds, and what the best row may be called."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from xmatch.assumptions import Assumptions
from xmatch.match.decide import Weighed, candidates, outcome, weigh
from xmatch.match.motion import motion_sigma_arcsec, move, target_motion_sigma_arcsec
from xmatch.records import Floats, Outcome, Photometry, Position, Rows

A = Assumptions()
HERE = Position(264.5, -33.8, 1.0, 1.0, epoch_yr=2026.0)


def rows(east: Floats, north: Floats, sigma: float = 0.3, position: Position = HERE, **changes: object) -> Rows:
    """Rows at offsets (arcsec) from the position."""
    n = len(east)
    ra, dec = move(position.ra_deg, position.dec_deg, 1e3 * np.asarray(east), 1e3 * np.asarray(north), 1.0)
    nan = np.full(n, np.nan)
    facts: dict[str, object] = {
        "key": tuple(str(i) for i in range(n)), "ra_deg": ra, "dec_deg": dec,
        "sigma_major_arcsec": np.full(n, sigma), "sigma_minor_arcsec": np.full(n, sigma), "angle_deg": np.zeros(n),
        "epoch_yr": np.full(n, 2026.0), "pm_ra_mas_yr": nan, "pm_dec_mas_yr": nan,
        "pm_ra_error_mas_yr": nan, "pm_dec_error_mas_yr": nan,
        "flux": {"b": Photometry(np.arange(n, dtype=float), np.ones(n), np.zeros(n, dtype=bool))},
    }  # fmt: skip
    return Rows(**(facts | changes))  # type: ignore[arg-type]


def field(n: int, radius: float, hole: float, seed: int = 1) -> tuple[Floats, Floats]:
    rng = np.random.default_rng(seed)
    r, phi = np.sqrt(rng.uniform(hole**2, radius**2, n)), rng.uniform(0, 2 * np.pi, n)
    return r * np.sin(phi), r * np.cos(phi)


def with_one(n: int, radius: float, east: float) -> Weighed:
    e, nn = field(n, radius, 10.0)
    return weigh(HERE, rows(np.append(e, east), np.append(nn, 0.0)), radius_arcsec=radius, assumptions=A)


def test_no_rows_at_all() -> None:
    weighed = weigh(HERE, rows(np.empty(0), np.empty(0)), radius_arcsec=60.0, assumptions=A)
    assert len(weighed.odds) == 0
    assert weighed.none_listed == pytest.approx(1.0)
    assert outcome(weighed, global_chance=0.0, assumptions=A) == (None, "")
    assert np.isfinite(weighed.density_per_deg2)  # one row's worth, as a cautious bound


def test_a_lone_row_in_a_sparse_field_is_a_counterpart() -> None:
    weighed = with_one(40, 2000.0, 0.5)
    word, why = outcome(weighed, global_chance=0.001, assumptions=A)
    assert word is Outcome.COUNTERPART
    assert "sigma" in why and "0.50 arcsec" in why


def test_the_same_row_is_only_ambiguous_when_many_catalogs_make_chance_likely() -> None:
    word, _ = outcome(with_one(40, 2000.0, 0.5), global_chance=0.05, assumptions=A)
    assert word is Outcome.AMBIGUOUS


def test_a_far_row_in_a_crowd_is_chance() -> None:
    weighed = with_one(4000, 120.0, 3.2)
    assert weighed.expected_chance > 1.0
    word, why = outcome(weighed, global_chance=0.9, assumptions=A)
    assert word is Outcome.CHANCE
    assert "crowding" in why


def test_a_row_outside_the_region_is_not_compatible() -> None:
    weighed = with_one(40, 2000.0, 4.5)
    assert outcome(weighed, global_chance=0.0, assumptions=A)[0] is None


def test_density_is_that_of_the_ring() -> None:
    weighed = with_one(2000, 600.0, 0.1)
    area_deg2 = np.pi * 600.0**2 / 3600.0**2
    assert weighed.density_per_deg2 == pytest.approx(2000 / area_deg2, rel=0.08)
    assert "density from only" in with_one(5, 600.0, 0.1).density_note


def test_a_fast_star_is_found_where_it_is_now_and_not_where_it_was() -> None:
    # 10 arcsec/yr for 10 yr: listed 100 arcsec west at 2016, on the position at 2026
    moved = rows(np.array([-100.0]), np.array([0.0]), epoch_yr=np.array([2016.0]), pm_ra_mas_yr=np.array([10000.0]),
                 pm_dec_mas_yr=np.array([0.0]), pm_ra_error_mas_yr=np.array([0.1]), pm_dec_error_mas_yr=np.array([0.1]))  # fmt: skip
    weighed = weigh(HERE, moved, radius_arcsec=120.0, assumptions=A)
    assert weighed.separation_arcsec[0] == pytest.approx(0.0, abs=0.05)  # east turns by 0.03 arcsec over the way
    assert weighed.compatible[0]
    still = Position(264.5, -33.8, 1.0, 1.0, epoch_yr=None)
    assert not weigh(still, moved, radius_arcsec=120.0, assumptions=A).compatible[0]


def test_missing_motion_never_becomes_a_missing_position_and_widens_the_error() -> None:
    old = rows(np.array([3.0]), np.array([0.0]), epoch_yr=np.array([1950.0]))
    weighed = weigh(HERE, old, radius_arcsec=60.0, assumptions=A)
    assert np.isfinite(weighed.separation_arcsec).all() and np.isfinite(weighed.normalised).all()
    fresh = weigh(HERE, rows(np.array([3.0]), np.array([0.0])), radius_arcsec=60.0, assumptions=A)
    assert weighed.normalised[0] < fresh.normalised[0]
    assert float(motion_sigma_arcsec(np.nan, 76.0, 30.0)) == pytest.approx(2.28)


def test_the_targets_own_speed_widens_the_region_when_it_is_asked_for() -> None:
    old = rows(np.array([4.0]), np.array([0.0]), epoch_yr=np.array([1996.0]))
    fast = weigh(HERE, old, radius_arcsec=60.0, assumptions=A.but(target_speed_km_s=500.0), distance_pc=1000.0)
    assert fast.normalised[0] < weigh(HERE, old, radius_arcsec=60.0, assumptions=A).normalised[0]
    assert float(target_motion_sigma_arcsec(500.0, 1000.0, 30.0)) == pytest.approx(3.164, rel=1e-3)


def test_candidates_are_sorted_and_carry_what_the_catalog_lists() -> None:
    weighed_rows = rows(np.array([2.0, 0.2, 50.0]), np.zeros(3))
    weighed = weigh(HERE, weighed_rows, radius_arcsec=60.0, assumptions=A)
    found = candidates(weighed, weighed_rows, "cat", [])
    assert [candidate.key for candidate in found] == ["1", "0"]
    assert found[0].odds > found[1].odds


@given(st.floats(0.0, 359.999), st.floats(-89.9999, 89.9999), st.floats(0.0, 360.0), st.floats(0.0, 30.0))
def test_weighing_does_not_depend_on_where_on_the_sky_it_happens(ra: float, dec: float, angle: float, r: float) -> None:
    position = Position(ra, dec, 1.0, 1.0, epoch_yr=2026.0)
    east, north = np.array([r * np.sin(np.radians(angle))]), np.array([r * np.cos(np.radians(angle))])
    weighed = weigh(position, rows(east, north, position=position), radius_arcsec=60.0, assumptions=A)
    assert weighed.separation_arcsec[0] == pytest.approx(r, rel=1e-6, abs=1e-6)
    assert weighed.normalised[0] == pytest.approx(r / np.sqrt(1.0 + 0.09 + 0.0025), rel=1e-5, abs=1e-6)


@given(st.integers(0, 400), st.integers(0, 10_000))
def test_odds_and_none_listed_add_up_to_one(n: int, seed: int) -> None:
    e, nn = field(n, 60.0, 0.0, seed)
    weighed = weigh(HERE, rows(e, nn), radius_arcsec=60.0, assumptions=A)
    assert float(weighed.odds.sum()) + weighed.none_listed == pytest.approx(1.0, abs=1e-9)
    assert ((weighed.odds >= 0.0) & (weighed.odds <= 1.0)).all()


def test_the_posterior_is_calibrated_in_simulated_fields() -> None:
    """Sutherland & Saunders 1992: of rows with reliability R, a fraction R are true, at the density and prior assumed."""
    rng = np.random.default_rng(4)
    said, true = [], []
    for _ in range(1500):
        n = int(rng.poisson(2000 * np.pi * 60.0**2 / 1e6))
        r, phi = 60.0 * np.sqrt(rng.uniform(size=n)), rng.uniform(0, 2 * np.pi, n)
        east, north = r * np.sin(phi), r * np.cos(phi)
        listed = rng.uniform() < A.listed_fraction
        if listed:
            sigma = np.sqrt(1.0 + 0.09 + 0.0025)
            east, north = (
                np.append(east, sigma * rng.standard_normal()),
                np.append(north, sigma * rng.standard_normal()),
            )
        if not len(east):
            continue
        odds = weigh(HERE, rows(east, north), radius_arcsec=60.0, assumptions=A).odds
        said.extend(odds)
        true.extend([False] * (len(odds) - 1) + [listed])
    chosen, truth = np.array(said), np.array(true)
    for low, high in ((0.05, 0.3), (0.3, 0.6), (0.6, 0.99)):
        inside = (chosen >= low) & (chosen < high)
        n = int(inside.sum())
        assert n > 30
        expected = float(chosen[inside].mean())
        assert abs(float(truth[inside].mean()) - expected) < 4.0 * np.sqrt(expected * (1 - expected) / n)
