"""Positions at another epoch, and what unknown motions add to their errors."""

from __future__ import annotations

import numpy as np
from numpy.typing import ArrayLike

from xmatch.constants import ARCSEC_RAD, KM_S_KPC_MAS_YR
from xmatch.errors import RangeError
from xmatch.records import Floats


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
