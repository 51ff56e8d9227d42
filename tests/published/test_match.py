"""Positions, chance and odds against published values and reference libraries."""

from __future__ import annotations

import warnings
from typing import Any

import numpy as np
import pytest
from astropy.coordinates import SkyCoord
from checking import rows, tolerance
from scipy.stats import rayleigh

from xmatch.match import chance, ellipse, motion, odds, separation

FUNCTIONS = {
    name: getattr(module, name) for module in (chance, ellipse, motion, odds, separation) for name in dir(module)
}


def value(quantity: str, inputs: dict[str, Any]) -> Any:
    if quantity == "covariance plus round 0.5":
        cxx, cyy, cxy = ellipse.covariance(**inputs)
        return [cxx + 0.25, cyy + 0.25, cxy]
    if quantity == "chance in circle":
        return chance.chance_within(chance.expected_in_circle(**inputs))
    if quantity == "reliability":
        each, none = odds.reliability(**inputs)
        return [*each, none]
    if quantity == "bayes n-way with ellipses":
        return odds.bayes_n_way_elliptical(**inputs)[0]
    if quantity == "odds of one ellipse":
        f = odds.density_at(np.sqrt(1.5210864), 2.0, 3.5, 1.2990381)  # the ellipse of POS-05 and POS-06
        q = inputs["listed_fraction"]
        ratio = odds.likelihood_ratio(q, f, inputs["density_per_deg2"] / 3600.0**2)
        return odds.reliability([float(ratio)], q)[0][0]
    if quantity == "expected over catalogs":
        mu = float(np.sum(chance.expected_in_circle(**inputs)))
        return [mu, float(chance.chance_within(mu))]
    return FUNCTIONS[quantity](**inputs)


@pytest.mark.parametrize("row", rows("match"), ids=lambda row: str(row["id"]))
def test_published_value(row: dict[str, Any]) -> None:
    found = np.asarray(value(row["quantity"], row["inputs"]), dtype=float)
    expected = list(row["expected"]) if isinstance(row["expected"], list) else row["expected"]
    assert found.tolist() == pytest.approx(expected, **tolerance(row["tolerance"])), row["source"]


# Rayleigh distribution, scipy
@pytest.mark.parametrize("level", [0.1, 0.5, 0.68, 0.9, 0.95, 0.9973, 0.999999])
def test_radius_factor_is_the_rayleigh_quantile(level: float) -> None:
    assert float(ellipse.radius_factor(level)) == pytest.approx(rayleigh.ppf(level), rel=1e-12)


# astropy 8: SkyCoord.separation and SkyCoord.spherical_offsets_to's great-circle length
@pytest.mark.parametrize(
    ("ra0", "dec0"), [(0.0, 0.0), (359.9999, 45.0), (10.0, 89.9995), (200.0, -90.0), (264.5, -33.8)]
)
def test_offsets_have_the_length_and_angle_of_the_great_circle(ra0: float, dec0: float) -> None:
    rng = np.random.default_rng(5)
    centre = SkyCoord(ra0, dec0, unit="deg")
    others = centre.directional_offset_by(rng.uniform(0, 360, 50) * _deg(), rng.uniform(0.01, 600, 50) * _arcsec())
    east, north = separation.offsets_arcsec(ra0, dec0, others.ra.deg, others.dec.deg)
    assert np.hypot(east, north) == pytest.approx(centre.separation(others).arcsec, rel=1e-7)
    found = separation.separation_arcsec(ra0, dec0, others.ra.deg, others.dec.deg)
    assert found == pytest.approx(centre.separation(others).arcsec, rel=1e-7)
    if abs(dec0) < 89.0:
        angle = np.degrees(np.arctan2(east, north)) % 360.0
        assert np.cos(np.radians(angle - centre.position_angle(others).deg)) == pytest.approx(np.ones(50), abs=1e-9)


# astropy 8: SkyCoord.apply_space_motion
def test_motion_agrees_with_astropy_also_near_a_pole_and_across_ra_zero() -> None:
    import astropy.units as u
    from astropy.time import Time

    ra, dec = np.array([0.0001, 359.9999, 120.0, 33.0]), np.array([10.0, -10.0, 89.999, -75.0])
    pm_ra, pm_dec = np.array([-900.0, 1200.0, 300.0, 50.0]), np.array([50.0, -20.0, 800.0, -700.0])
    start = SkyCoord(
        ra * u.deg, dec * u.deg, pm_ra_cosdec=pm_ra * u.mas / u.yr, pm_dec=pm_dec * u.mas / u.yr,
        distance=np.full(4, 1.0e3) * u.pc, obstime=Time(2000.0, format="jyear"),
    )  # fmt: skip
    with warnings.catch_warnings():
        warnings.simplefilter("ignore")  # it warns that such a small parallax is set to its own floor
        moved = start.apply_space_motion(new_obstime=Time(2026.0, format="jyear"))
    mine = motion.move(ra, dec, pm_ra, pm_dec, 26.0)
    assert SkyCoord(*mine, unit="deg").separation(SkyCoord(moved.ra, moved.dec)).mas == pytest.approx(
        np.zeros(4), abs=1.0
    )


def test_elliptical_factor_is_the_circular_one_for_round_errors() -> None:
    # Budavari & Szalay 2008, ApJ 679, 301
    total = 0.3**2 + 0.7**2
    mine = odds.bayes_elliptical(0.9 / np.sqrt(total), total, total, 0.0)
    assert float(mine) == pytest.approx(float(odds.bayes_two_way(0.3, 0.7, 0.9)), rel=1e-12)


def test_likelihood_ratio_and_multi_hypothesis_posterior_are_one() -> None:
    # Sutherland & Saunders 1992, MNRAS 259, 413, against Budavari & Szalay 2008 with prior Q/(4 pi rho)
    density, q = 5.0e4, 0.5
    d, cxx, cyy, cxy = np.sqrt(1.5210864), 2.0, 3.5, 1.2990381
    ratio = q * odds.density_at(d, cxx, cyy, cxy) * 3600.0**2 / density
    each, none = odds.reliability([float(ratio)], q)
    per_sr = density * (180.0 / np.pi) ** 2
    bayes = q * odds.bayes_elliptical(d, cxx, cyy, cxy) / (4.0 * np.pi * per_sr)
    assert float(each[0]) == pytest.approx(float(bayes / (bayes + 1.0 - q)), rel=1e-12)
    assert float(each[0]) == pytest.approx(0.893228, abs=1e-6)  # computed with numpy from the same formula
    assert float(each[0]) + none == pytest.approx(1.0, abs=1e-12)


# astropy 8: Earth's place from the built-in ephemeris (ERFA epv00), over one year
@pytest.mark.parametrize(("ra", "dec"), [(0.0, 0.0), (269.4, 4.7), (100.0, -66.0), (200.0, 89.0)])
def test_parallax_spread_is_that_of_a_year_of_the_earth(ra: float, dec: float) -> None:
    from astropy.coordinates import get_body_barycentric
    from astropy.time import Time

    earth = get_body_barycentric("earth", Time(2016.0 + np.arange(400) / 400.0, format="jyear"), ephemeris="builtin")
    a, d = np.radians([ra, dec])
    place = np.stack([axis.to_value("au") for axis in (earth.x, earth.y, earth.z)])
    east = -np.array([-np.sin(a), np.cos(a), 0.0]) @ place
    north = -np.array([-np.sin(d) * np.cos(a), -np.sin(d) * np.sin(a), np.cos(d)]) @ place
    cxx, cyy, cxy = (float(v) for v in motion.parallax_covariance(1000.0, ra, dec))
    found = np.cov(east, north)
    assert [cxx, cyy, cxy] == pytest.approx([found[0, 0], found[1, 1], found[0, 1]], abs=0.02)


# astropy 8: SkyOffsetFrame; its longitude and latitude are not zenithal equidistant, but agree to third order
def test_offsets_agree_with_astropys_offset_frame() -> None:
    rng = np.random.default_rng(9)
    centre = SkyCoord(264.5, -33.8, unit="deg")
    others = centre.directional_offset_by(rng.uniform(0, 360, 50) * _deg(), rng.uniform(0.01, 60, 50) * _arcsec())
    framed = others.transform_to(centre.skyoffset_frame())
    east, north = separation.offsets_arcsec(264.5, -33.8, others.ra.deg, others.dec.deg)
    lon = framed.lon.wrap_at(180 * _deg()).arcsec
    assert east == pytest.approx(lon, abs=1e-5)
    assert north == pytest.approx(framed.lat.arcsec, abs=1e-5)


def _deg() -> Any:
    import astropy.units as u

    return u.deg


def _arcsec() -> Any:
    import astropy.units as u

    return u.arcsec
