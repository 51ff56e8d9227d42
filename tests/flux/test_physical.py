"""The front door of the flux room: what is corrected, what is blind, what the luminosity rests on."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from xmatch.assumptions import Assumptions
from xmatch.catalogs import load_catalogs
from xmatch.constants import KEV_HZ
from xmatch.errors import RangeError
from xmatch.flux.absorption import cross_section_cm2, cross_section_morrison_cm2, transmitted_fraction
from xmatch.flux.column import column_per_av_cm2
from xmatch.flux.extinction import band_extinction_mag, extinction_ratio
from xmatch.flux.luminosity import distance_quantiles_pc, draw_distances_pc, light_years_to_pc, sphere_cm2
from xmatch.flux.magnitudes import (
    ab_to_jy,
    asinh_to_ratio,
    jy_to_ab,
    jy_to_vega,
    ratio_to_asinh,
    to_flux_density_jy,
    vega_to_jy,
)
from xmatch.flux.physical import NO_COLUMN, ZERO_COLUMN, band_transmission, physical_limit, resolve
from xmatch.flux.spectra import Blackbody, PowerLaw, ThermalBremsstrahlung, power_integral, radio_band_flux_cgs
from xmatch.limits.depth import limit_for_band
from xmatch.records import Band, Distance, Limit, Position, Target, Waveband

BANDS = {columns.band.label: columns.band for catalog in load_catalogs().values() for columns in catalog.bands}
XRAY = BANDS["erass1-main 0.2-2.3 keV"]
TARGET = Target("t", Position(264.5, -33.8, 1.0, 1.0), distance=Distance(1600.0, 4100.0), dm_pc_cm3=148.0)
A = resolve(TARGET, Assumptions())


def limit_of(band: Band) -> Limit:
    found = limit_for_band(band, None, assumptions=A)
    assert found is not None
    return found


def test_the_column_comes_from_the_dispersion_measure_and_says_so() -> None:
    assert A.column_cm2 == pytest.approx(4.44e21)
    assert "He, Ng & Kaspi 2013" in A.column_origin
    assert A.av_mag == pytest.approx(4.44e21 / 2.87e21)


def test_the_users_own_values_win() -> None:
    own = resolve(replace(TARGET, column_cm2=1.0e22, column_origin="mine", av_mag=0.3), Assumptions())
    assert (own.column_cm2, own.column_origin, own.av_mag) == (1.0e22, "mine", 0.3)
    set_ = resolve(TARGET, Assumptions(column_cm2=5.0e20))
    assert set_.column_cm2 == 5.0e20


def test_an_extinction_alone_gives_the_column() -> None:
    only = resolve(replace(TARGET, dm_pc_cm3=None, av_mag=2.0), Assumptions())
    assert only.column_cm2 == pytest.approx(2.0 * 2.87e21)


def test_no_column_at_all_is_said() -> None:
    none = resolve(replace(TARGET, dm_pc_cm3=None), Assumptions())
    assert (none.column_cm2, none.column_origin, none.av_mag) == (0.0, NO_COLUMN, 0.0)


def test_a_column_given_as_zero_is_not_called_missing() -> None:
    none = resolve(replace(TARGET, dm_pc_cm3=None, column_cm2=0.0, column_origin="mine"), Assumptions())
    assert (none.column_cm2, none.column_origin, none.av_mag, none.av_origin) == (0.0, "mine", 0.0, ZERO_COLUMN)


def xray_band(low_kev: float, high_kev: float, waveband: Waveband) -> Band:
    low, high = low_kev * KEV_HZ, high_kev * KEV_HZ
    return replace(XRAY, nu_low_hz=low, nu_high_hz=high, nu_hz=(low * high) ** 0.5, waveband=waveband)


def test_a_hard_band_past_the_table_is_hardly_absorbed_and_says_how() -> None:
    band = xray_band(14.0, 195.0, Waveband.HARD_XRAY)
    p = physical_limit(replace(limit_of(XRAY), band=band), TARGET, A)
    assert 0.99 < p.transmitted < 1.0
    assert "held at its 20 keV cross-section" in p.note
    assert len(p.luminosity_erg_s) == 3


def test_gamma_rays_get_through() -> None:
    p = physical_limit(replace(limit_of(XRAY), band=xray_band(1e5, 1e8, Waveband.GAMMA)), TARGET, A)
    assert p.transmitted == 1.0 and p.corrected_flux_cgs == p.flux_cgs
    assert "gamma rays" in p.note


def test_a_band_below_the_table_is_left_uncorrected() -> None:
    p = physical_limit(replace(limit_of(XRAY), band=xray_band(0.05, 2.0, Waveband.SOFT_XRAY)), TARGET, A)
    assert np.isnan(p.transmitted) and p.corrected_flux_cgs is None and p.luminosity_erg_s == ()
    assert "starts at 0.1 keV" in p.note


def test_a_list_of_objects_is_absorbed_as_its_band_is() -> None:
    xray = xray_band(0.3, 10.0, Waveband.SOFT_XRAY)
    assert band_transmission(replace(xray, waveband=Waveband.OBJECT_LIST), A) == band_transmission(xray, A)
    ks = BANDS["2mass-psc Ks"]
    assert band_transmission(replace(ks, waveband=Waveband.OBJECT_LIST), A) == band_transmission(ks, A)
    assert band_transmission(BANDS["atnf-psr 1.4 GHz"], A)[0] == 1.0


def test_an_xray_limit_is_corrected_and_says_by_what() -> None:
    p = physical_limit(limit_of(XRAY), TARGET, A)
    assert p.flux_cgs == limit_of(XRAY).value
    assert p.corrected_flux_cgs == pytest.approx(p.flux_cgs / p.transmitted)
    assert "photon index 2" in p.note and "4.4e+21" in p.note and "its flux is taken as the observed one" in p.note
    assert p.luminosity_erg_s == pytest.approx(
        [p.corrected_flux_cgs * float(sphere_cm2(d)) for d in (1600.0, (1600 * 4100) ** 0.5, 4100.0)]
    )


def test_a_blind_band_gives_no_corrected_flux() -> None:
    p = physical_limit(limit_of(XRAY), TARGET, A.but(column_cm2=3.0e23))
    assert p.transmitted < 0.01
    assert p.corrected_flux_cgs is None and p.luminosity_erg_s == ()
    assert "blind" in p.note


def test_without_a_distance_there_is_no_luminosity() -> None:
    p = physical_limit(limit_of(XRAY), replace(TARGET, distance=None), A)
    assert p.luminosity_erg_s == () and p.distance_pc == ()


def test_radio_is_not_absorbed_and_optical_is() -> None:
    assert physical_limit(limit_of(BANDS["nvss 1.4 GHz"]), TARGET, A).transmitted == 1.0
    g, ks = (physical_limit(limit_of(BANDS[name]), TARGET, A).transmitted for name in ("ps1-dr1 g", "2mass-psc Ks"))
    assert 0.1 < g < ks < 1.0


def test_magnitude_systems_never_mix() -> None:
    vega, ab = BANDS["2mass-psc Ks"], BANDS["ps1-dr1 g"]
    assert float(to_flux_density_jy(0.0, vega)) == pytest.approx(666.7)
    assert float(to_flux_density_jy(0.0, ab)) == pytest.approx(3630.78, rel=1e-6)
    with pytest.raises(RangeError, match="zero point"):
        vega_to_jy(15.0, None)
    with pytest.raises(RangeError, match="not a flux density"):
        to_flux_density_jy(1e-13, XRAY)


@pytest.mark.parametrize("flux", [0.0, -1.0e-3, np.nan])
def test_a_flux_of_zero_or_less_has_no_magnitude(flux: float) -> None:
    assert np.isnan(jy_to_ab(flux)) and np.isnan(jy_to_vega(flux, 666.7))


@given(st.floats(-5.0, 35.0))
def test_magnitudes_come_back(mag: float) -> None:
    assert float(jy_to_ab(ab_to_jy(mag))) == pytest.approx(mag, abs=1e-9)
    assert float(jy_to_vega(vega_to_jy(mag, 1594.0), 1594.0)) == pytest.approx(mag, abs=1e-9)


@given(st.floats(-1.0e-8, 1.0e-6))
def test_asinh_magnitudes_hold_through_zero(ratio: float) -> None:
    assert float(asinh_to_ratio(ratio_to_asinh(ratio, 1.2e-10), 1.2e-10)) == pytest.approx(ratio, rel=1e-6, abs=1e-16)


SPECTRA = [PowerLaw(1.0), PowerLaw(2.0), PowerLaw(2.4), Blackbody(0.1), Blackbody(0.6), ThermalBremsstrahlung(5.0)]


@pytest.mark.parametrize("spectrum", SPECTRA, ids=str)
def test_sub_bands_add_up(spectrum: PowerLaw) -> None:
    parts = spectrum.band_integral(0.3, 1.1) + spectrum.band_integral(1.1, 7.0)
    assert float(parts) == pytest.approx(float(spectrum.band_integral(0.3, 7.0)), rel=1e-9)


@given(st.floats(1.0e-9, 1.0e-3))
def test_the_integral_is_smooth_through_photon_index_two(step: float) -> None:
    exact = float(PowerLaw(2.0).band_integral(0.5, 8.0))
    below, above = (float(PowerLaw(2.0 + s).band_integral(0.5, 8.0)) for s in (-step, step))
    # the mean of both sides differs from the middle only by the second order
    assert 0.5 * (below + above) == pytest.approx(exact, rel=3.0 * step * step + 1e-12)
    assert float(power_integral(1.0, 4.0, 0.0)) == pytest.approx(np.log(4.0))


@pytest.mark.parametrize("spectrum", SPECTRA, ids=str)
def test_more_column_lets_less_through(spectrum: PowerLaw) -> None:
    column = np.concatenate([[0.0], np.geomspace(1e18, 1e24, 60)])
    through = transmitted_fraction(spectrum, 0.3, 8.0, column)
    assert through[0] == pytest.approx(1.0)
    assert (np.diff(through) < 0.0).all() and (through >= 0.0).all()
    assert float(transmitted_fraction(spectrum, 0.3, 8.0, 1.0)) == pytest.approx(1.0, abs=1e-9)


@pytest.mark.parametrize(
    "call",
    [
        lambda: cross_section_cm2(0.05),
        lambda: cross_section_cm2(25.0),
        lambda: cross_section_cm2(np.nan),
        lambda: cross_section_morrison_cm2(11.0),
        lambda: transmitted_fraction(PowerLaw(2.0), 0.5, 2.0, -1.0),
        lambda: transmitted_fraction(PowerLaw(2.0), 2.0, 0.5, 1e21),
        lambda: extinction_ratio(1.0, law="somebody's"),
        lambda: extinction_ratio(1.0, r_v=9.0),
        lambda: band_extinction_mag(XRAY, -1.0),
        lambda: distance_quantiles_pc(2000.0, 1000.0, "uniform", 0.5),
        lambda: distance_quantiles_pc(1.0, 2.0, "flat", 0.5),
        lambda: sphere_cm2(0.0),
        lambda: column_per_av_cm2("Guver & Ozel 2009"),
    ],
)
def test_values_outside_validity_are_refused(call: object) -> None:
    with pytest.raises(RangeError):
        call()  # type: ignore[operator]


def test_an_abundance_set_and_its_relation_belong_together() -> None:
    with pytest.raises(RangeError, match="belongs to the abundances of Anders"):
        column_per_av_cm2("Guver & Ozel 2009")
    assert column_per_av_cm2("Guver & Ozel 2009", "Anders & Grevesse 1989") == 2.21e21


def test_a_broad_band_saturates_where_a_constant_coefficient_would_not() -> None:
    g = BANDS["gaia-dr3 G"]
    small, large = (float(band_extinction_mag(g, av)) / av for av in (0.01, 15.0))
    assert large < 0.85 * small


def test_hundreds_of_magnitudes_do_not_underflow() -> None:
    values = band_extinction_mag(BANDS["gaia-dr3 G"], np.array([10.0, 300.0, 3000.0]))
    assert np.isfinite(values).all() and (np.diff(values) > 0.0).all()


def test_extinction_is_zero_in_the_radio_and_undefined_in_xrays() -> None:
    assert float(band_extinction_mag(BANDS["nvss 1.4 GHz"], 10.0)) == 0.0
    assert np.isnan(band_extinction_mag(XRAY, 1.0))


@pytest.mark.parametrize("prior", ["log-uniform", "uniform", "volume"])
def test_drawn_distances_follow_their_prior(prior: str) -> None:
    draws = draw_distances_pc(np.random.default_rng(1), 20_000, 1000.0, 4000.0, prior)
    for q in (0.1, 0.5, 0.9):
        expected = float(distance_quantiles_pc(1000.0, 4000.0, prior, q))
        assert np.mean(draws < expected) == pytest.approx(q, abs=0.015)


def test_eighteen_thousand_light_years() -> None:
    # IAU definitions of light-year and parsec
    assert float(light_years_to_pc(18_000.0)) == pytest.approx(5520.0, abs=2.0)


@given(st.floats(-3.0, 2.0))
def test_the_radio_integral_is_smooth_through_index_minus_one(index: float) -> None:
    from scipy.integrate import quad

    nu, low, high = 2.0e8, 1.0e7, 1.0e10
    expected = quad(lambda x: np.exp(x) ** (index + 1.0), np.log(low / nu), np.log(high / nu), epsrel=1e-11)[0]
    mine = float(radio_band_flux_cgs(1.0, nu, index, low, high))
    assert mine == pytest.approx(1.0e-23 * nu * expected, rel=1e-8)
    assert float(radio_band_flux_cgs(1.0, nu, -1.0, low, high)) == pytest.approx(1.0e-23 * nu * np.log(1000.0))


def test_the_whole_set_of_limits_is_quick() -> None:
    import time

    limits = [limit_of(band) for band in BANDS.values() if band.depth is not None]
    physical_limit(limits[0], TARGET, A)
    start = time.perf_counter()
    for limit in limits * 3:
        physical_limit(limit, TARGET, A)
    assert time.perf_counter() - start < 0.5
