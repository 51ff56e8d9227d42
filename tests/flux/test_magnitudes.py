"""Flux densities: ST both ways, units of columns, errors."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest

from xmatch.catalogs import load_catalogs
from xmatch.errors import RangeError
from xmatch.flux.magnitudes import flux_density_error_jy, jy_to_st, st_to_jy, to_flux_density_jy
from xmatch.records import Band

BANDS: dict[str, Band] = {c.band.label: c.band for catalog in load_catalogs().values() for c in catalog.bands}
KS, NVSS = BANDS["2mass-psc Ks"], BANDS["nvss 1.4 GHz"]


@pytest.mark.parametrize("mag", [-2.0, 0.0, 17.3, 30.0])
def test_st_magnitudes_come_back(mag: float) -> None:
    assert float(jy_to_st(st_to_jy(mag, 5500.0), 5500.0)) == pytest.approx(mag, abs=1e-9)
    assert np.isnan(jy_to_st(-1.0, 5500.0))


@pytest.mark.parametrize(("unit", "jy"), [("Jy", 2.5), ("mJy", 2.5e-3), ("uJy", 2.5e-6), ("mJy/beam", 2.5e-3)])
def test_the_unit_of_the_column_decides(unit: str, jy: float) -> None:
    assert float(to_flux_density_jy(2.5, replace(NVSS, unit=unit))) == pytest.approx(jy)


def test_an_unknown_unit_is_not_guessed() -> None:
    with pytest.raises(RangeError, match="not a flux density"):
        to_flux_density_jy(2.5, replace(NVSS, unit="W"))


def test_a_magnitude_error_is_that_of_the_flux_it_stands_for() -> None:
    exact = replace(KS, flux_scale_error=0.0)
    step = 1e-4
    rise = float(to_flux_density_jy(14.0 - step, exact) - to_flux_density_jy(14.0 + step, exact)) / 2.0
    assert float(flux_density_error_jy(14.0, step, exact)) == pytest.approx(rise, rel=1e-6)


def test_the_error_of_the_flux_scale_adds_in_quadrature() -> None:
    band = replace(NVSS, flux_scale_error=0.03)
    assert float(flux_density_error_jy(100.0, 4.0, band)) == pytest.approx(5.0e-3)
    assert np.isnan(flux_density_error_jy(100.0, np.nan, band))
