"""Positions at another epoch, and what unknown motions add to their errors."""

from __future__ import annotations

import numpy as np
from numpy.typing import ArrayLike

from xmatch.constants import ARCSEC_RAD, KM_S_KPC_MAS_YR
from xmatch.errors import RangeError
from xmatch.records import Floats

OBLIQUITY_RAD = 84381.406 * ARCSEC_RAD
"""Obliquity of the ecliptic at J2000.0 (IAU 2006 resolution B1)."""


def move(
    ra_deg: ArrayLike, dec_deg: ArrayLike, pm_ra_mas_yr: ArrayLike, pm_dec_mas_yr: ArrayLike, dt_yr: ArrayLike
) -> tuple[Floats, Floats]:
    """Positions after ``dt_yr`` of straight motion.

    Parameters
    ----------
    ra_deg, dec_deg : array_like
        Positions, degrees.
    pm_ra_mas_yr, pm_dec_mas_yr : array_like
        Proper motion with the factor cos(dec) in RA; ``nan`` means unknown and moves nothing.
    dt_yr : array_like
        Time step in Julian years, either sign.

    Returns
    -------
    ra_deg, dec_deg : ndarray
        RA in [0, 360).

    Notes
    -----
    Space motion without radial velocity (Hipparcos and Tycho Catalogues, ESA SP-1200, vol. 1, 1.5.5).
    """
    a, d = np.radians(np.asarray(ra_deg, dtype=float)), np.radians(np.asarray(dec_deg, dtype=float))
    step = np.asarray(dt_yr, dtype=float) * 1.0e-3 * ARCSEC_RAD
    east = np.nan_to_num(np.asarray(pm_ra_mas_yr, dtype=float)) * step
    north = np.nan_to_num(np.asarray(pm_dec_mas_yr, dtype=float)) * step
    x = np.cos(d) * np.cos(a) - east * np.sin(a) - north * np.sin(d) * np.cos(a)
    y = np.cos(d) * np.sin(a) + east * np.cos(a) - north * np.sin(d) * np.sin(a)
    z = np.sin(d) + north * np.cos(d)
    moved = np.degrees(np.arctan2(y, x)) % 360.0, np.degrees(np.arctan2(z, np.hypot(x, y)))
    still = (east == 0.0) & (north == 0.0)
    return np.where(still, np.asarray(ra_deg, dtype=float), moved[0]), np.where(
        still, np.asarray(dec_deg, dtype=float), moved[1]
    )


def motion_sigma_arcsec(pm_error_mas_yr: ArrayLike, dt_yr: ArrayLike, population_mas_yr: float) -> Floats:
    """What the error of the proper motion, or its absence, adds per axis, arcsec.

    ``nan`` errors (no motion listed) get the population's spread instead (linear error propagation).
    """
    error = np.asarray(pm_error_mas_yr, dtype=float)
    return np.abs(np.asarray(dt_yr, dtype=float)) * np.where(np.isfinite(error), error, population_mas_yr) / 1.0e3


def target_motion_sigma_arcsec(speed_km_s: ArrayLike, dist_pc: ArrayLike, dt_yr: ArrayLike) -> Floats:
    """Shift of the target itself for a transverse speed, arcsec.

    Raises
    ------
    RangeError
        When a distance is not positive.

    Notes
    -----
    theta = v dt / d, with 4.74047 km/s per au/yr (definition of proper motion).
    """
    dist = np.asarray(dist_pc, dtype=float)
    if np.any(dist <= 0.0):
        raise RangeError(f"distance {dist_pc} pc is not allowed; it must be above 0")
    return np.asarray(speed_km_s, dtype=float) * np.abs(np.asarray(dt_yr, dtype=float)) / (KM_S_KPC_MAS_YR * dist)


def covariance_at(
    cxx: ArrayLike,
    cyy: ArrayLike,
    cxy: ArrayLike,
    dt_yr: ArrayLike,
    pm_ra_error_mas_yr: ArrayLike,
    pm_dec_error_mas_yr: ArrayLike,
    pm_correlation: ArrayLike = 0.0,
    cross_arcsec_mas_yr: tuple[ArrayLike, ArrayLike, ArrayLike, ArrayLike] = (0.0, 0.0, 0.0, 0.0),
) -> tuple[Floats, Floats, Floats]:
    """Covariance of a position moved by ``dt_yr`` with a measured proper motion.

    Parameters
    ----------
    cxx, cyy, cxy : array_like
        Covariance at the catalog's epoch, arcsec^2.
    dt_yr : array_like
        Time step in Julian years, either sign.
    pm_ra_error_mas_yr, pm_dec_error_mas_yr : array_like
        One-sigma errors of the motion per axis, RA with cos(dec); ``nan`` passes through.
    pm_correlation : array_like
        Correlation of the two components of the motion, -1 to 1.
    cross_arcsec_mas_yr : four array_like
        Covariances of position and motion in arcsec mas/yr: east with the motion east, east with the motion
        north, north with the motion east, north with the motion north. Zero where none is listed.

    Returns
    -------
    cxx, cyy, cxy : ndarray
        arcsec^2.

    Notes
    -----
    C(t) = C + dt (X + X^T) + dt^2 M with X the cross and M the motion's covariance: linear error propagation
    (Hipparcos and Tycho Catalogues, ESA SP-1200, vol. 1, 1.5.5, without its second-order terms).
    """
    step = np.asarray(dt_yr, dtype=float) * 1.0e-3
    ee, en, ne, nn = (np.asarray(v, dtype=float) for v in cross_arcsec_mas_yr)
    ra, dec = np.asarray(pm_ra_error_mas_yr, dtype=float), np.asarray(pm_dec_error_mas_yr, dtype=float)
    xx = np.asarray(cxx, dtype=float) + 2.0 * step * ee + np.square(step * ra)
    yy = np.asarray(cyy, dtype=float) + 2.0 * step * nn + np.square(step * dec)
    xy = np.asarray(cxy, dtype=float) + step * (en + ne) + np.square(step) * np.asarray(pm_correlation) * ra * dec
    return xx, yy, xy


def parallax_covariance(
    parallax_mas: ArrayLike, ra_deg: ArrayLike, dec_deg: ArrayLike
) -> tuple[Floats, Floats, Floats]:
    """What an annual parallax adds to a position taken at an unknown time of the year, arcsec^2.

    Parameters
    ----------
    parallax_mas : array_like
        Parallax, or the largest one allowed for, milliarcseconds.
    ra_deg, dec_deg : array_like
        Position, degrees.

    Returns
    -------
    cxx, cyy, cxy : ndarray
        Covariance averaged over the year: half the square of the parallax along the ecliptic, less by
        sin^2 of the ecliptic latitude across it.

    Notes
    -----
    The Earth on a circle of 1 au in the ecliptic (IAU 2006 obliquity), projected on east and north; the
    eccentricity of its orbit changes this by 3 per cent of the parallax at most (definition of parallax).
    """
    a, d = np.radians(np.asarray(ra_deg, dtype=float)), np.radians(np.asarray(dec_deg, dtype=float))
    cos_e, sin_e = np.cos(OBLIQUITY_RAD), np.sin(OBLIQUITY_RAD)
    east_u, east_v = -np.sin(a), np.cos(a) * cos_e
    north_u, north_v = -np.sin(d) * np.cos(a), -np.sin(d) * np.sin(a) * cos_e + np.cos(d) * sin_e
    half = 0.5 * np.square(np.asarray(parallax_mas, dtype=float) * 1.0e-3)
    return (
        half * (east_u**2 + east_v**2),
        half * (north_u**2 + north_v**2),
        half * (east_u * north_u + east_v * north_v),
    )
