"""Absorption: how exact the integral is, what happens past the table, ratios behind a column."""

from __future__ import annotations

import numpy as np
import pytest

from xmatch.errors import RangeError
from xmatch.flux.absorption import (
    HIGH_KEV,
    LOW_KEV,
    absorbed_band_ratio,
    cross_section_cm2,
    transmitted_fraction,
    transmitted_through_all,
)
from xmatch.flux.spectra import Blackbody, PowerLaw, Spectrum, ThermalBremsstrahlung, band_ratio

COLUMNS = np.geomspace(1e19, 1e24, 11)


def finely(spectrum: Spectrum, low: float, high: float, columns: np.ndarray) -> np.ndarray:
    """The same integral by brute force: 12 nodes in each of the table's cells, found here by reading the table again."""
    from importlib import resources

    text = resources.files("xmatch.flux").joinpath("data", "photoelectric_wilms2000.csv").read_text(encoding="utf-8")
    grid = np.array([float(line.split(",")[0]) for line in text.splitlines() if line[0].isdigit()])
    borders = np.log(np.unique(np.concatenate([[low, high, 10.0], grid])))
    borders = borders[(borders >= np.log(low)) & (borders <= np.log(high))]
    x, w = np.polynomial.legendre.leggauss(12)
    half, middle = np.diff(borders)[:, None] / 2.0, ((borders[1:] + borders[:-1]) / 2.0)[:, None]
    e = np.exp(middle + half * x).ravel()
    weight = (half * w).ravel() * e * spectrum.energy_flux(e)
    return np.exp(-np.multiply.outer(columns, cross_section_cm2(e))) @ weight / weight.sum()


@pytest.mark.parametrize("band", [(0.1, 20.0), (0.2, 2.3), (0.3, 10.0), (2.0, 10.0), (9.0, 12.0)], ids=str)
@pytest.mark.parametrize(
    "spectrum", [PowerLaw(1.0), PowerLaw(2.0), Blackbody(0.05), Blackbody(0.3), ThermalBremsstrahlung(0.3)], ids=str
)
def test_the_integral_is_good_to_a_millionth(spectrum: Spectrum, band: tuple[float, float]) -> None:
    fine = finely(spectrum, *band, COLUMNS)
    seen = fine > 1e-4
    assert seen.any()
    assert transmitted_fraction(spectrum, *band, COLUMNS)[seen] == pytest.approx(fine[seen], rel=1e-6)


def test_inside_the_table_both_ways_agree() -> None:
    for band in ((0.2, 2.3), (LOW_KEV, HIGH_KEV)):
        inside = float(transmitted_fraction(PowerLaw(2.0), *band, 1e22))
        assert transmitted_through_all(PowerLaw(2.0), *band, 1e22) == inside


def test_a_hard_band_is_attenuated_by_scattering_alone() -> None:
    # optical depth at 20 keV: 1e24 x (1.2 Thomson cross-sections, CODATA 2018, and some absorption)
    through = transmitted_through_all(PowerLaw(2.0), 20.0, 60.0, 1e24)
    assert 0.8 * np.exp(-1.2 * 0.66524587) < through < np.exp(-1.2 * 0.66524587)
    assert transmitted_through_all(PowerLaw(2.0), 14.0, 195.0, 0.0) == pytest.approx(1.0)


def test_a_band_across_the_end_of_the_table_is_the_mean_of_its_parts() -> None:
    spectrum, column = PowerLaw(1.8), 3e23
    soft, hard = (float(spectrum.band_integral(*b)) for b in ((3.0, 20.0), (20.0, 79.0)))
    parts = (
        soft * transmitted_through_all(spectrum, 3.0, 20.0, column)
        + hard * transmitted_through_all(spectrum, 20.0, 79.0, column)
    ) / (soft + hard)
    assert transmitted_through_all(spectrum, 3.0, 79.0, column) == pytest.approx(parts, rel=1e-9)
    # nothing jumps where the band's end passes the end of the table
    ends = [transmitted_through_all(spectrum, 3.0, end, column) for end in (19.99999, 20.0, 20.00001)]
    assert ends == pytest.approx([ends[1]] * 3, rel=1e-5)


def test_below_the_table_nothing_is_claimed() -> None:
    assert np.isnan(transmitted_through_all(PowerLaw(2.0), 0.05, 2.0, 1e20))


@pytest.mark.parametrize("column", [-1.0, np.nan])
def test_a_column_below_zero_is_refused_in_hard_bands_too(column: float) -> None:
    with pytest.raises(RangeError, match="column"):
        transmitted_through_all(PowerLaw(2.0), 14.0, 195.0, column)


def test_a_refusal_of_many_energies_stays_one_line() -> None:
    with pytest.raises(RangeError, match=r"0\.05 to 30 keV") as caught:
        cross_section_cm2(np.linspace(0.05, 30.0, 1000))
    assert len(str(caught.value)) < 200


def test_band_ratios_behind_a_column() -> None:
    spectrum, soft, hard = PowerLaw(2.0), (0.5, 2.0), (2.0, 10.0)
    assert float(absorbed_band_ratio(spectrum, hard, soft, 0.0)) == pytest.approx(band_ratio(spectrum, hard, soft))
    there = absorbed_band_ratio(spectrum, hard, soft, COLUMNS[:8])
    back = absorbed_band_ratio(spectrum, soft, hard, COLUMNS[:8])
    assert there * back == pytest.approx(np.ones(8))
    assert (np.diff(there) < 0.0).all()
    assert np.isnan(absorbed_band_ratio(Blackbody(0.05), (0.1, 0.3), hard, 1e26))


@pytest.mark.parametrize(
    "call",
    [
        lambda: Blackbody(0.0),
        lambda: Blackbody(np.nan),
        lambda: ThermalBremsstrahlung(-1.0),
        lambda: PowerLaw(np.nan),
        lambda: PowerLaw(np.inf),
    ],
)
def test_impossible_spectra_are_refused(call: object) -> None:
    with pytest.raises(RangeError, match="not allowed"):
        call()  # type: ignore[operator]
