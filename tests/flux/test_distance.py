"""Distances as distributions, columns along the line, the grid, and laws that must hold for any number."""

from __future__ import annotations

import time
from collections.abc import Callable

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from xmatch.assumptions import Assumptions
from xmatch.errors import RangeError
from xmatch.flux import sightline
from xmatch.flux.absorption import transmitted_fraction
from xmatch.flux.distance import (
    AS_GIVEN,
    at_redshift,
    from_density,
    from_models,
    from_parallax,
    from_samples,
    k_factor_band,
    k_factor_shape,
    parallax_mode_pc,
    quantiles_of,
    tabulated,
    with_errors,
)
from xmatch.flux.extinction import LAWS, extinction_ratio, law_range
from xmatch.flux.grid import LimitGrid, band_luminosities, density_luminosities, limit_grid, pulsar_luminosity_erg_s
from xmatch.flux.luminosity import luminosity_erg_s
from xmatch.flux.physical import resolve
from xmatch.flux.radio import dispersion_delay_s, free_free_depth, scatter_broadening_s
from xmatch.flux.shapes import BrokenPowerLaw
from xmatch.flux.spectra import PowerLaw, Spectrum
from xmatch.records import Distance, Position, Target

Q = np.linspace(0.0, 1.0, 101)
some_pc = st.floats(1.0, 1e5)


@settings(max_examples=60, deadline=None)
@given(value=some_pc, plus=st.floats(0.01, 2.0), minus=st.floats(0.01, 0.95))
def test_errors_give_their_quantiles_and_nothing_below_zero(value: float, plus: float, minus: float) -> None:
    d = with_errors(value, plus * value, minus * value, "x")
    found = quantiles_of(d, "uniform", np.array([0.0, 0.158655, 0.5, 0.841345, 1.0]))
    assert np.all(found > 0.0)
    assert np.all(np.diff(found) > 0.0)
    assert found[1:4] == pytest.approx([value * (1 - minus), value, value * (1 + plus)], rel=5e-3)


@settings(max_examples=40, deadline=None)
@given(parallax=st.floats(-0.5, 20.0), error=st.floats(0.1, 1.0))
def test_a_parallax_posterior_is_finite_and_rises(parallax: float, error: float) -> None:
    found = quantiles_of(from_parallax(parallax, error), "uniform", Q)
    assert np.isfinite(found).all()
    assert np.all(np.diff(found) >= 0.0)
    assert found[0] < parallax_mode_pc(parallax, error) < found[-1]


def test_a_good_parallax_is_its_inverse_and_a_bad_one_is_the_prior() -> None:
    assert float(quantiles_of(from_parallax(10.0, 0.01), "x", 0.5)) == pytest.approx(100.0, rel=1e-3)
    one, other = (float(quantiles_of(from_parallax(w, 50.0), "x", 0.5)) for w in (1.0, -1.0))
    assert one == pytest.approx(other, rel=0.02)
    assert one == pytest.approx(2.674 * 1350.0, rel=0.02)  # median of the gamma distribution of shape 3


def test_models_with_little_scatter_are_what_they_say() -> None:
    d = from_models([1000.0, 4000.0], ["a", "b"], 0.01)
    found = quantiles_of(d, "x", np.array([0.25, 0.75]))
    assert found == pytest.approx([1000.0, 4000.0], rel=0.01)


def test_samples_keep_their_order() -> None:
    d = from_samples(np.linspace(100.0, 200.0, 1001), "x")
    assert quantiles_of(d, "volume", Q[1:-1]) == pytest.approx(100.0 + 100.0 * Q[1:-1], rel=1e-4)


def test_a_posterior_needs_no_prior_and_a_target_may_bring_its_own() -> None:
    place = Position(10.0, 10.0, 1.0, 1.0)
    own = Target("t", place, distance=with_errors(5000.0, 500.0, 500.0, "x"))
    assert resolve(own, Assumptions()).distance_prior == AS_GIVEN
    ranged = Target("t", place, distance=Distance(1.0, 2.0, prior="volume"))
    assert resolve(ranged, Assumptions()).distance_prior == "volume"
    assert resolve(Target("t", place), Assumptions()).distance_prior == "log-uniform"


def test_a_total_of_one_kind_caps_both() -> None:
    target = Target("t", Position(10.0, 10.0, 1.0, 1.0), dm_pc_cm3=1000.0, av_total_mag=1.0)
    settled = resolve(target, Assumptions())
    assert settled.column_cm2 == pytest.approx(2.87e21)
    assert settled.av_mag == pytest.approx(1.0)
    assert "total" in settled.column_origin


@settings(max_examples=60, deadline=None)
@given(latitude=st.floats(-90.0, 90.0), near=some_pc, far=some_pc)
def test_dust_grows_with_distance_and_never_beyond_its_total(latitude: float, near: float, far: float) -> None:
    a, b = sorted((near, far))
    one, two = sightline.growth_pc(np.array([a, b]), latitude)
    assert 0.0 < one <= two <= b * (1 + 1e-12)
    if abs(latitude) > 1e-3:
        whole = float(sightline.at_distance(np.inf, 3.0, np.inf, latitude))
        assert whole == pytest.approx(3.0)
        assert float(sightline.at_distance(b, 3.0, np.inf, latitude)) <= 3.0 * (1 + 1e-12)


def test_in_the_plane_dust_grows_as_the_distance() -> None:
    assert float(sightline.plane_extinction_mag(3000.0, 0.0)) == pytest.approx(3.0)
    assert float(sightline.at_distance(6000.0, 2.0, 3000.0, 0.0)) == pytest.approx(4.0)


def test_scatter_keeps_its_median_and_its_cap() -> None:
    sigma = np.random.default_rng(4).standard_normal(20_000)
    free, capped = (sightline.scattered(1e21, 0.3, sigma, cap) for cap in (None, 1.5e21))
    assert np.median(free) == pytest.approx(1e21, rel=0.02)
    assert np.std(np.log10(free)) == pytest.approx(0.3, rel=0.02)
    assert capped.max() == 1.5e21
    pick = np.random.default_rng(5).uniform(size=20_000)
    both = sightline.mixture([(1e20, 0.01), (1e22, 0.01)], pick, sigma, 5e21)
    assert np.mean(both < 1e21) == pytest.approx(0.5, abs=0.02)
    assert both.max() == 5e21


def test_the_grid_is_its_factors() -> None:
    flux, dist, columns = np.array([1e-14, 3e-14]), np.array([500.0, 5000.0, 9000.0]), np.array([1e20, 1e22])
    found = limit_grid(flux, dist, columns, PowerLaw(2.0), (0.5, 2.0), 0.01)
    full = found.expanded()
    assert full.shape == found.shape == (2, 3, 2)
    through = transmitted_fraction(PowerLaw(2.0), 0.5, 2.0, columns)
    assert full[1, 2, 1] == pytest.approx(float(luminosity_erg_s(3e-14 / through[1], 9000.0)), rel=1e-12)
    assert found.at([0, 1], [1, 2], [0, 1]) == pytest.approx([full[0, 1, 0], full[1, 2, 1]], rel=1e-12)
    out = np.empty((1, 3, 2))
    assert found.expanded(slice(1, 2), out=out) is out
    assert out[0] == pytest.approx(full[1], rel=1e-12)
    assert np.all(np.diff(full, axis=1) > 0.0)
    assert np.all(np.diff(full, axis=2) > 0.0)
    kept = found.flux_cgs.size + found.sphere_cm2.size + found.through.size
    assert kept < full.size


def test_a_blind_column_has_no_luminosity() -> None:
    found: LimitGrid = limit_grid(1e-14, 1000.0, [0.0, 1e24], PowerLaw(2.0), (0.5, 2.0), 0.01)
    assert np.isfinite(found.expanded()[0, 0]).tolist() == [True, False]


@pytest.mark.parametrize("spectrum", [PowerLaw(1.4), PowerLaw(2.0), BrokenPowerLaw(1.5, 1.5, 1.0)], ids=str)
def test_k_corrections_agree_where_both_hold(spectrum: Spectrum) -> None:
    index = spectrum.photon_index if isinstance(spectrum, PowerLaw) else 1.5
    assert k_factor_shape(0.7, spectrum, (0.5, 2.0)) == pytest.approx(float(k_factor_band(0.7, index)), rel=1e-9)


def test_laws_by_name_disagree_where_they_are_known_to() -> None:
    low, high = law_range(2.159)
    assert high / low > 1.4  # Ks: 0.117 against 0.076
    assert law_range(0.55)[1] / law_range(0.55)[0] < 1.05
    assert np.isnan(law_range(0.01)[0])
    for law in LAWS[1:]:
        with pytest.raises(RangeError, match="R_V"):
            extinction_ratio(0.55, law=law, r_v=4.0)


@pytest.mark.parametrize(
    "wrong",
    [
        lambda: tabulated([1.0, 2.0], "x"),
        lambda: from_samples([1.0] * 19, "x"),
        lambda: from_samples([1.0] * 19 + [-1.0], "x"),
        lambda: from_density(np.array([1.0, 2.0]), np.zeros(2), "x"),
        lambda: from_models([], []),
        lambda: from_models([1.0], ["a"], 0.0),
        lambda: from_parallax(1.0, 1.0, scale_pc=0.0),
        lambda: parallax_mode_pc(1.0, 0.0),
        lambda: from_parallax(-1.0, 0.1),
        lambda: at_redshift(0.1, error=0.2),
        lambda: k_factor_band(-1.0, 2.0),
        lambda: sightline.growth_pc(-1.0, 0.0),
        lambda: sightline.at_distance(1.0, 1.0, np.inf, 0.0),
        lambda: sightline.at_distance(1.0, -1.0, 1.0, 0.0),
        lambda: sightline.scattered(1.0, -0.1, 0.0),
        lambda: sightline.mixture([], 0.5, 0.0),
        lambda: limit_grid(1.0, 1.0, 0.0, PowerLaw(2.0), (0.5, 2.0), 0.0),
        lambda: band_luminosities(1.0, 1.0, beam_fraction=2.0),
        lambda: density_luminosities(1.0, 1e9, 1.0, index=-1.0, duty_cycle=0.0),
        lambda: pulsar_luminosity_erg_s(1, 1e9, 1, index=-1.0, band_hz=(1e7, 1e9), duty_cycle=0.0, cone_rad=0.1),
        lambda: dispersion_delay_s(1.0, 0.0),
        lambda: scatter_broadening_s(0.0, 1e9),
        lambda: free_free_depth(1e9, 0.0, 1.0),
    ],
)
def test_what_lies_outside_a_range_is_refused(wrong: object) -> None:
    with pytest.raises(RangeError):
        wrong()  # type: ignore[operator]


def test_the_grid_costs_little_more_than_writing_it() -> None:
    """A loose form of the benchmark: within 6 of a numpy outer product into the same buffer (it measures about 1.2)."""
    flux, out, factor = np.linspace(1e-15, 1e-13, 3000), np.zeros((3000, 60, 20)), np.full((60, 20), 2.0)
    dist, columns = np.geomspace(500.0, 9000.0, 60), np.geomspace(1e20, 1e22, 20)

    def best(function: Callable[[], object]) -> float:
        times = []
        for _ in range(7):
            start = time.perf_counter()
            function()
            times.append(time.perf_counter() - start)
        return min(times)

    floor = best(lambda: np.multiply(flux[:, None, None], factor, out=out))
    mine = best(lambda: limit_grid(flux, dist, columns, PowerLaw(2.0), (0.5, 2.0), 0.01).expanded(out=out))
    assert mine < 6.0 * floor
