"""Bent, curved, tabulated and redshifted spectra; filter curves, photons and counts."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from xmatch.errors import RangeError
from xmatch.flux.absorption import transmitted_fraction
from xmatch.flux.bands import AreaCurve, CountFactor, FilterCurve, flux_of_photons_cgs, photon_flux
from xmatch.flux.shapes import BrokenPowerLaw, LogParabola, Redshifted, Tabulated, photon_integral
from xmatch.flux.spectra import Blackbody, PowerLaw, Spectrum, ThermalBremsstrahlung

GRID = tuple(np.geomspace(0.05, 100.0, 60))
SPECTRA: list[Spectrum] = [
    PowerLaw(1.7),
    PowerLaw(2.0),
    Blackbody(0.3),
    ThermalBremsstrahlung(5.0),
    BrokenPowerLaw(1.4, 2.6, 2.0),
    BrokenPowerLaw(2.0, 2.0, 3.0),
    LogParabola(1.9, 0.4, 1.0),
    Tabulated(GRID, tuple(np.asarray(GRID) ** -0.6)),
    Redshifted(Blackbody(0.3), 0.25),
    Redshifted(BrokenPowerLaw(1.4, 2.6, 2.0), 1.0),
]
shapes = pytest.mark.parametrize("spectrum", SPECTRA, ids=lambda s: str(s)[:40])
cut = st.floats(0.35, 9.5)


def summed(spectrum: Spectrum, low: float, high: float, power: float) -> float:
    """The integral as a plain sum of 2e5 points: knows nothing of pieces and nodes."""
    edges = np.geomspace(low, high, 200_001)
    e = np.sqrt(edges[1:] * edges[:-1])
    return float(np.sum(np.diff(edges) * e**power * spectrum.energy_flux(e)))


@shapes
def test_band_integrals_against_a_plain_sum(spectrum: Spectrum) -> None:
    assert float(spectrum.band_integral(0.3, 10.0)) == pytest.approx(summed(spectrum, 0.3, 10.0, 0.0), rel=1e-6)
    assert photon_integral(spectrum, 0.3, 10.0) == pytest.approx(summed(spectrum, 0.3, 10.0, -1.0), rel=1e-6)


@shapes
@settings(max_examples=30, deadline=None)
@given(middle=cut)
def test_sub_bands_add_up(spectrum: Spectrum, middle: float) -> None:
    parts = spectrum.band_integral(0.3, middle) + spectrum.band_integral(middle, 10.0)
    assert float(parts) == pytest.approx(float(spectrum.band_integral(0.3, 10.0)), rel=1e-9)


@shapes
def test_more_column_lets_less_through(spectrum: Spectrum) -> None:
    through = transmitted_fraction(spectrum, 0.3, 10.0, np.concatenate([[0.0], np.geomspace(1e16, 1e24, 60)]))
    assert through[0] == pytest.approx(1.0, abs=1e-12)
    assert through[1] == pytest.approx(1.0, abs=1e-3)
    assert np.all(np.diff(through) < 0.0)


@settings(max_examples=40, deadline=None)
@given(delta=st.floats(-1e-5, 1e-5), low=st.floats(0.2, 2.0), ratio=st.floats(1.1, 50.0))
def test_a_bent_power_law_is_smooth_through_index_two(delta: float, low: float, ratio: float) -> None:
    near = BrokenPowerLaw(2.0 + delta, 2.0 + delta, 1.0).band_integral(low, low * ratio)
    assert float(near) == pytest.approx(np.log(ratio), rel=1e-4)


def test_bent_and_curved_laws_become_straight_ones() -> None:
    straight = PowerLaw(1.8)
    ratio = straight.band_integral(0.5, 2.0) / straight.band_integral(2.0, 10.0)
    for other in (BrokenPowerLaw(1.8, 1.8, 3.0), LogParabola(1.8, 0.0, 5.0), Redshifted(straight, 3.0)):
        assert other.band_integral(0.5, 2.0) / other.band_integral(2.0, 10.0) == pytest.approx(ratio, rel=1e-9)


def test_a_redshifted_blackbody_is_a_cooler_one() -> None:
    seen, cooler = Redshifted(Blackbody(0.3), 0.25), Blackbody(0.24)
    ratio = [float(s.band_integral(0.3, 1.0) / s.band_integral(1.0, 10.0)) for s in (seen, cooler)]
    assert ratio[0] == pytest.approx(ratio[1], rel=1e-9)


@pytest.mark.parametrize(
    "wrong",
    [
        lambda: BrokenPowerLaw(1.0, np.nan, 2.0),
        lambda: BrokenPowerLaw(1.0, 2.0, 0.0),
        lambda: LogParabola(2.0, 0.1, -1.0),
        lambda: Tabulated((1.0,), (1.0,)),
        lambda: Tabulated((2.0, 1.0), (1.0, 1.0)),
        lambda: Tabulated((1.0, 2.0), (1.0, 0.0)),
        lambda: Tabulated((1.0, 2.0), (1.0, 1.0)).band_integral(0.5, 1.5),
        lambda: Redshifted(PowerLaw(2.0), -1.0),
        lambda: photon_integral(LogParabola(2.0, 0.1, 1.0), 2.0, 1.0),
        lambda: FilterCurve((1.0, 0.9), (1.0, 1.0)),
        lambda: FilterCurve((1.0, 2.0), (0.0, 0.0)),
        lambda: FilterCurve((1.0, 2.0), (1.0, 1.0), "quanta"),
        lambda: AreaCurve((1.0,), (1.0,)),
        lambda: AreaCurve((1.0, 2.0), (-1.0, 1.0)),
        lambda: CountFactor(0.0, (0.5, 2.0), PowerLaw(2.0), 0.0),
        lambda: FilterCurve((1.0, 2.0), (1.0, 1.0)).extinction_mag(PowerLaw(1.0), -1.0),
    ],
)
def test_what_is_no_spectrum_or_curve_is_refused(wrong: object) -> None:
    with pytest.raises(RangeError):
        wrong()  # type: ignore[operator]


@shapes
def test_photons_and_energy_go_round(spectrum: Spectrum) -> None:
    photons = photon_flux(spectrum, 3e-14, (0.5, 7.0))
    assert float(flux_of_photons_cgs(spectrum, photons, (0.5, 7.0))) == pytest.approx(3e-14, rel=1e-12)
    mean_erg = 3e-14 / float(photons)
    assert 0.5 < mean_erg / 1.602176634e-9 < 7.0


def test_the_pivot_of_a_box() -> None:
    """Of a photon-counting box from a to b: sqrt((b^2 - a^2) / 2 / ln(b/a)) by hand."""
    assert FilterCurve((0.5, 0.9), (1.0, 1.0)).pivot_um == pytest.approx(
        np.sqrt((0.81 - 0.25) / 2 / np.log(0.9 / 0.5)), rel=1e-9
    )
    assert FilterCurve((0.5, 0.9), (1.0, 1.0), "energy").pivot_um == pytest.approx(np.sqrt(0.45), rel=1e-5)


def test_a_flat_spectrum_needs_no_colour_correction() -> None:
    curve = FilterCurve((0.4, 0.55, 0.7, 1.0), (0.0, 0.8, 0.6, 0.0))
    assert curve.density_over_pivot(PowerLaw(1.0)) == pytest.approx(1.0, rel=1e-12)  # index 1: F_nu constant
    assert curve.density_over_pivot(PowerLaw(3.0)) == pytest.approx(1.0, rel=1e-12)  # index 3: F_lambda constant
    assert abs(curve.density_over_pivot(PowerLaw(-2.0)) - 1.0) > 0.02


def test_a_broad_band_saturates_and_a_red_source_suffers_less() -> None:
    broad = FilterCurve((0.35, 0.6, 1.0), (0.0, 1.0, 0.0))
    hot, cool = Blackbody(20000.0 / 1.160452e7), Blackbody(3500.0 / 1.160452e7)
    av = np.array([0.0, 0.1, 1.0, 3.0, 10.0, 30.0])
    mine, red = broad.extinction_mag(hot, av), broad.extinction_mag(cool, av)
    assert mine[0] == pytest.approx(0.0, abs=1e-12)
    assert np.all(np.diff(mine) > 0.0)
    assert np.all(np.diff(mine[1:] / av[1:]) < 0.0)  # the coefficient falls: never one constant
    assert np.all(red[1:] < mine[1:])


def test_a_count_factor_belongs_to_its_spectrum() -> None:
    area = AreaCurve((0.3, 0.6, 1.5, 2.0, 5.0, 10.0), (100.0, 400.0, 600.0, 400.0, 300.0, 50.0))
    hard = PowerLaw(1.7)
    factor = CountFactor(area.cgs_per_count(hard, (0.3, 10.0), 3e20), (0.3, 10.0), hard, 3e20, "invented")
    same = factor.for_another(area, hard, 3e20)
    assert same.cgs_per_count == pytest.approx(factor.cgs_per_count, rel=1e-12)
    soft = factor.for_another(area, Blackbody(0.1), 3e21)
    assert abs(soft.cgs_per_count / factor.cgs_per_count - 1.0) > 0.2
    assert float(soft.corrected_flux_cgs(1e-3)) > 5.0 * float(soft.flux_cgs(1e-3))
    # twice the area, same factor after the transfer: the scale of the curve drops out
    twice = AreaCurve(area.e_kev, tuple(2.0 * a for a in area.cm2))
    assert factor.for_another(twice, Blackbody(0.1), 3e21).cgs_per_count == pytest.approx(soft.cgs_per_count, rel=1e-12)
