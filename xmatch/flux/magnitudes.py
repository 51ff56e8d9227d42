"""Magnitudes and flux densities. Vega, AB and ST never mix: each has its own function and its own zero."""

from __future__ import annotations

import numpy as np
from numpy.typing import ArrayLike

from xmatch.constants import C_CM_S, JY_CGS
from xmatch.errors import RangeError
from xmatch.records import Band, Floats, MagnitudeSystem, Quantity

AB_ZERO_JY = 10.0 ** (-0.4 * 48.60) / JY_CGS
"""Flux density of AB magnitude 0: 3630.78 Jy (Oke & Gunn 1983, ApJ 266, 713)."""
ST_ZERO_CGS_A = 10.0 ** (-0.4 * 21.10)
"""f_lambda of ST magnitude 0, erg s^-1 cm^-2 A^-1 (Koornneef et al. 1986, Highlights of Astronomy 7, 833)."""
ANGSTROM_CM = 1.0e-8
JY_PER_UNIT = {"Jy": 1.0, "mJy": 1.0e-3, "uJy": 1.0e-6, "Jy/beam": 1.0, "mJy/beam": 1.0e-3}
"""Units of flux-density columns. A peak per beam is the flux density of a point source, which is what is looked for."""
MAG_PER_RELATIVE = 2.5 / np.log(10.0)
"""Magnitudes per relative flux error, 1.0857 (definition)."""


def _to_mag(ratio: Floats) -> Floats:
    """-2.5 log10 of a ratio; ``nan`` for zero and below, which have no magnitude."""
    with np.errstate(divide="ignore", invalid="ignore"):
        return np.where(ratio > 0.0, -2.5 * np.log10(np.where(ratio > 0.0, ratio, 1.0)), np.nan)


def _zero(zero_point_jy: float | None) -> float:
    if zero_point_jy is None or not zero_point_jy > 0.0:
        raise RangeError(f"zero point {zero_point_jy} Jy is not allowed; a Vega magnitude needs one above 0")
    return zero_point_jy


def ab_to_jy(mag: ArrayLike) -> Floats:
    """AB magnitude to Jy (Oke & Gunn 1983, ApJ 266, 713). ``nan`` passes through."""
    return AB_ZERO_JY * 10.0 ** (-0.4 * np.asarray(mag, dtype=float))


def jy_to_ab(flux_jy: ArrayLike) -> Floats:
    """Jy to AB magnitude; ``nan`` for a flux of zero or less (Oke & Gunn 1983)."""
    return _to_mag(np.asarray(flux_jy, dtype=float) / AB_ZERO_JY)


def vega_to_jy(mag: ArrayLike, zero_point_jy: float | None) -> Floats:
    """Vega magnitude to Jy with the band's zero point in Jy (definition)."""
    return _zero(zero_point_jy) * 10.0 ** (-0.4 * np.asarray(mag, dtype=float))


def jy_to_vega(flux_jy: ArrayLike, zero_point_jy: float | None) -> Floats:
    """Jy to Vega magnitude; ``nan`` for a flux of zero or less (definition)."""
    return _to_mag(np.asarray(flux_jy, dtype=float) / _zero(zero_point_jy))


def st_to_jy(mag: ArrayLike, pivot_angstrom: ArrayLike) -> Floats:
    """ST magnitude to Jy at the pivot wavelength: f_nu = f_lambda lambda^2 / c (Koornneef et al. 1986)."""
    lam_cm = np.asarray(pivot_angstrom, dtype=float) * ANGSTROM_CM
    f_lambda = ST_ZERO_CGS_A * 10.0 ** (-0.4 * np.asarray(mag, dtype=float)) / ANGSTROM_CM
    return f_lambda * lam_cm**2 / C_CM_S / JY_CGS


def jy_to_st(flux_jy: ArrayLike, pivot_angstrom: ArrayLike) -> Floats:
    """Jy to ST magnitude; ``nan`` for a flux of zero or less (Koornneef et al. 1986)."""
    return _to_mag(np.asarray(flux_jy, dtype=float) / st_to_jy(0.0, pivot_angstrom))


def asinh_to_ratio(mag: ArrayLike, softening: ArrayLike) -> Floats:
    """Asinh magnitude to flux over the zero flux, of either sign (Lupton, Gunn & Szalay 1999, AJ 118, 1406)."""
    b = np.asarray(softening, dtype=float)
    return 2.0 * b * np.sinh(-np.asarray(mag, dtype=float) * np.log(10.0) / 2.5 - np.log(b))


def ratio_to_asinh(ratio: ArrayLike, softening: ArrayLike) -> Floats:
    """Flux over the zero flux to asinh magnitude; defined at zero and below (Lupton, Gunn & Szalay 1999)."""
    b = np.asarray(softening, dtype=float)
    return -2.5 / np.log(10.0) * (np.arcsinh(np.asarray(ratio, dtype=float) / (2.0 * b)) + np.log(b))


def to_flux_density_jy(value: ArrayLike, band: Band) -> Floats:
    """Value of a band's column as a flux density, Jy.

    Raises
    ------
    RangeError
        For a band flux, which is no flux density without a spectrum.
    """
    if band.quantity is Quantity.MAGNITUDE:
        if band.system is MagnitudeSystem.AB:
            return ab_to_jy(value)
        if band.system is MagnitudeSystem.ST:
            return st_to_jy(value, C_CM_S / band.nu_hz / ANGSTROM_CM)
        return vega_to_jy(value, band.zero_point_jy)
    if band.quantity is Quantity.FLUX_DENSITY and band.unit in JY_PER_UNIT:
        return np.asarray(value, dtype=float) * JY_PER_UNIT[band.unit]
    raise RangeError(f"{band.label}: a {band.quantity} in {band.unit} is not a flux density; give it a spectrum first")


def flux_density_error_jy(value: ArrayLike, error: ArrayLike, band: Band) -> Floats:
    """One-sigma error of :func:`to_flux_density_jy`, Jy, to first order.

    Parameters
    ----------
    value, error : array_like
        In the band's unit; ``nan`` passes through.

    Notes
    -----
    A magnitude error is a relative flux error (definition), and the flux scale's own error is added in quadrature.
    """
    flux = to_flux_density_jy(value, band)
    sigma = np.abs(np.asarray(error, dtype=float))
    own = flux * sigma / MAG_PER_RELATIVE if band.quantity is Quantity.MAGNITUDE else sigma * JY_PER_UNIT[band.unit]
    return np.hypot(own, band.flux_scale_error * flux)


def nu_f_nu_cgs(flux_jy: ArrayLike, nu_hz: ArrayLike) -> Floats:
    """nu F_nu in erg s^-1 cm^-2 (definition)."""
    return np.asarray(flux_jy, dtype=float) * JY_CGS * np.asarray(nu_hz, dtype=float)
