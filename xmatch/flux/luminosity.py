"""Luminosities and distances."""

from __future__ import annotations

import numpy as np
from numpy.typing import ArrayLike

from xmatch.constants import JY_CGS, KPC_CM, LY_CM, PC_CM
from xmatch.errors import RangeError
from xmatch.records import Floats

PRIORS = ("log-uniform", "uniform", "volume")


def sphere_cm2(dist_pc: ArrayLike) -> Floats:
    """4 pi d^2, cm^2 (definition). Distance in pc, above 0."""
    d = np.asarray(dist_pc, dtype=float)
    if np.any(~(d > 0.0)):
        raise RangeError(f"distance {dist_pc} pc is not allowed; it must be above 0")
    return 4.0 * np.pi * np.square(d * PC_CM)


def luminosity_erg_s(flux_cgs: ArrayLike, dist_pc: ArrayLike) -> Floats:
    """Isotropic luminosity of a flux in erg s^-1 cm^-2 (definition)."""
    return np.asarray(flux_cgs, dtype=float) * sphere_cm2(dist_pc)


def luminosity_density_erg_s_hz(flux_jy: ArrayLike, dist_pc: ArrayLike) -> Floats:
    """Isotropic L_nu, erg s^-1 Hz^-1, of a flux density in Jy (definition, with 4 pi)."""
    return np.asarray(flux_jy, dtype=float) * JY_CGS * sphere_cm2(dist_pc)


def pseudo_luminosity_mjy_kpc2(flux_jy: ArrayLike, dist_pc: ArrayLike) -> Floats:
    """S d^2 in mJy kpc^2, as pulsar lists give it: without 4 pi (definition)."""
    return np.asarray(flux_jy, dtype=float) * 1.0e3 * np.square(np.asarray(dist_pc, dtype=float) / 1.0e3)


def light_years_to_pc(distance_ly: ArrayLike) -> Floats:
    """Light-years to parsec (IAU 2015 B2)."""
    return np.asarray(distance_ly, dtype=float) * LY_CM / PC_CM


def absolute_magnitude(mag: ArrayLike, dist_pc: ArrayLike, extinction_mag: ArrayLike = 0.0) -> Floats:
    """M = m - 5 log10(d / 10 pc) - A (definition)."""
    d = np.asarray(dist_pc, dtype=float)
    return np.asarray(mag, dtype=float) - 5.0 * np.log10(d / 10.0) - np.asarray(extinction_mag, dtype=float)


def exclusion_distance_pc(limit_mag: ArrayLike, absolute_mag: ArrayLike, extinction_mag: ArrayLike = 0.0) -> Floats:
    """Distance within which a star of this absolute magnitude would be brighter than the limit (definition)."""
    return 10.0 ** (
        (
            np.asarray(limit_mag, dtype=float)
            - np.asarray(absolute_mag, dtype=float)
            - np.asarray(extinction_mag, dtype=float)
            + 5.0
        )
        / 5.0
    )


def _range(low_pc: float, high_pc: float, prior: str) -> None:
    if not 0.0 < low_pc <= high_pc:
        raise RangeError(f"distance range {low_pc} to {high_pc} pc is not allowed; 0 < low <= high is needed")
    if prior not in PRIORS:
        raise RangeError(f"distance prior {prior!r} is not known; there are {', '.join(PRIORS)}")


def distance_quantiles_pc(low_pc: float, high_pc: float, prior: str, quantiles: ArrayLike) -> Floats:
    """Distances at the given quantiles of a range under a prior.

    Parameters
    ----------
    low_pc, high_pc : float
        Range, pc.
    prior : str
        ``log-uniform``, ``uniform`` or ``volume`` (density ~ d^2).
    quantiles : array_like
        In [0, 1].

    Notes
    -----
    Inverse cumulative distributions (definition).
    """
    _range(low_pc, high_pc, prior)
    q = np.asarray(quantiles, dtype=float)
    if prior == "log-uniform":
        return low_pc * (high_pc / low_pc) ** q
    if prior == "uniform":
        return low_pc + q * (high_pc - low_pc)
    return np.cbrt(low_pc**3 + q * (high_pc**3 - low_pc**3))


def draw_distances_pc(rng: np.random.Generator, n: int, low_pc: float, high_pc: float, prior: str) -> Floats:
    """Draws from :func:`distance_quantiles_pc` (inverse transform)."""
    return distance_quantiles_pc(low_pc, high_pc, prior, rng.uniform(size=n))


KPC2_MJY_ERG_S_HZ = 4.0 * np.pi * KPC_CM**2 * 1.0e-3 * JY_CGS
"""L_nu (with 4 pi) of 1 mJy kpc^2, erg s^-1 Hz^-1."""
