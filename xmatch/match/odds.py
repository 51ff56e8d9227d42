"""Odds that a row is the counterpart: Bayes factors, likelihood ratios, reliability."""

from __future__ import annotations

import numpy as np
from numpy.typing import ArrayLike

from xmatch.constants import ARCSEC_RAD
from xmatch.errors import RangeError
from xmatch.records import Floats


def bayes_two_way(sigma1_arcsec: ArrayLike, sigma2_arcsec: ArrayLike, separation_arcsec: ArrayLike) -> Floats:
    """Bayes factor of two positions being one source, round errors, small angles.

    Notes
    -----
    Budavari & Szalay 2008, ApJ 679, 301: B = 2/(s1^2 + s2^2) exp(-psi^2 / 2(s1^2 + s2^2)), s and psi in radian.
    """
    s2 = (np.square(sigma1_arcsec) + np.square(sigma2_arcsec)) * ARCSEC_RAD**2
    return 2.0 / s2 * np.exp(-np.square(np.asarray(separation_arcsec, dtype=float) * ARCSEC_RAD) / (2.0 * s2))


def bayes_n_way(sigma_arcsec: ArrayLike, east_arcsec: ArrayLike, north_arcsec: ArrayLike) -> float:
    """Bayes factor of n positions being one source (Budavari & Szalay 2008, small angles). Arrays of length n >= 2."""
    w = 1.0 / np.square(np.asarray(sigma_arcsec, dtype=float) * ARCSEC_RAD)
    x, y = (np.asarray(v, dtype=float) * ARCSEC_RAD for v in (east_arcsec, north_arcsec))
    n = len(w)
    if n < 2:
        raise RangeError(f"{n} positions are not enough for a Bayes factor; give at least two")
    psi2 = np.square(x[:, None] - x) + np.square(y[:, None] - y)
    exponent = 0.5 * np.sum(np.outer(w, w) * psi2) / (2.0 * w.sum())
    return float(np.exp((n - 1) * np.log(2.0) + np.log(w).sum() - np.log(w.sum()) - exponent))


def density_at(normalised: ArrayLike, cxx: ArrayLike, cyy: ArrayLike, cxy: ArrayLike) -> Floats:
    """Two-dimensional Gaussian at a normalised separation, per square arcsec (definition)."""
    xx, yy, xy = (np.asarray(v, dtype=float) for v in (cxx, cyy, cxy))
    return np.exp(-0.5 * np.square(normalised)) / (2.0 * np.pi * np.sqrt(xx * yy - xy**2))


def bayes_elliptical(normalised: ArrayLike, cxx: ArrayLike, cyy: ArrayLike, cxy: ArrayLike) -> Floats:
    """Bayes factor for a combined elliptical covariance (arcsec^2): 4 pi N2(d; 0, C), C in radian^2.

    Notes
    -----
    Reduces to Budavari & Szalay 2008 for round errors.
    """
    return 4.0 * np.pi * density_at(normalised, cxx, cyy, cxy) / ARCSEC_RAD**2


def bayes_n_way_elliptical(
    east_arcsec: ArrayLike, north_arcsec: ArrayLike, cxx: ArrayLike, cyy: ArrayLike, cxy: ArrayLike
) -> tuple[float, tuple[float, float], tuple[float, float, float]]:
    """Bayes factor of n positions with error ellipses being one source, and where that source is.

    Parameters
    ----------
    east_arcsec, north_arcsec : array_like, shape (n,)
        Positions on one tangent plane, n >= 2.
    cxx, cyy, cxy : array_like, shape (n,)
        Their covariances, arcsec^2.

    Returns
    -------
    log10_bayes : float
    place : (east, north)
        Weighted mean position, arcsec.
    covariance : (cxx, cyy, cxy)
        Of that mean, arcsec^2.

    Raises
    ------
    RangeError
        With fewer than two positions, or a covariance that is not positive.

    Notes
    -----
    (4 pi)^(n-1) times the integral of the product of n two-dimensional Gaussians over the true position: reduces to
    Budavari & Szalay 2008, ApJ 679, 301 for round errors.
    """
    e, n, xx, yy, xy = (np.atleast_1d(np.asarray(v, dtype=float)) for v in (east_arcsec, north_arcsec, cxx, cyy, cxy))
    if len(e) < 2:
        raise RangeError(f"{len(e)} positions are not enough for a Bayes factor; give at least two")
    place, cov, exponent = mean_place(e, n, xx, yy, xy)
    count = len(e)
    log = (count - 1) * np.log(2.0) - 2.0 * (count - 1) * np.log(ARCSEC_RAD) - 0.5 * exponent
    log += 0.5 * np.log(cov[0] * cov[1] - cov[2] ** 2) - 0.5 * np.log(xx * yy - xy**2).sum()
    return float(log / np.log(10.0)), place, cov


def mean_place(
    east: Floats, north: Floats, cxx: Floats, cyy: Floats, cxy: Floats
) -> tuple[tuple[float, float], tuple[float, float, float], float]:
    """Weighted mean of positions with error ellipses, its covariance, and the chi-square about it (2n - 2 degrees).

    Raises
    ------
    RangeError
        When a covariance is not positive (generalised least squares; definition).
    """
    det = cxx * cyy - cxy**2
    if not np.all(det > 0.0):
        raise RangeError("a position without an error cannot be weighed; give every catalog a floor above 0")
    wxx, wyy, wxy = cyy / det, cxx / det, -cxy / det
    sxx, syy, sxy = float(wxx.sum()), float(wyy.sum()), float(wxy.sum())
    be, bn = float((wxx * east + wxy * north).sum()), float((wxy * east + wyy * north).sum())
    s_det = sxx * syy - sxy**2
    cov = (syy / s_det, sxx / s_det, -sxy / s_det)
    place = (cov[0] * be + cov[2] * bn, cov[2] * be + cov[1] * bn)
    de, dn = east - place[0], north - place[1]
    exponent = float((wxx * de**2 + 2.0 * wxy * de * dn + wyy * dn**2).sum())
    return place, cov, exponent


def n_way_prior(log10_all_sky_numbers: ArrayLike, log10_in_common: float) -> float:
    """Log10 of the prior that one row of each catalog, picked at random, are one object.

    Notes
    -----
    Budavari & Szalay 2008, ApJ 679, 301: objects in common over the product of the all-sky numbers; local densities
    times the whole sky stand for the numbers.
    """
    return float(log10_in_common - np.sum(np.asarray(log10_all_sky_numbers, dtype=float)))


def likelihood_ratio(q_m: ArrayLike, f_per_arcsec2: ArrayLike, n_m_per_arcsec2: ArrayLike) -> Floats:
    """Likelihood ratio of a row: q(m) f / n(m).

    Parameters
    ----------
    q_m : array_like
        Counterparts expected at the row's brightness, per magnitude (or in all: the listed fraction).
    f_per_arcsec2 : array_like
        Density of true matches at its offset.
    n_m_per_arcsec2 : array_like
        Unrelated rows at its brightness, per magnitude (or in all) and square arcsec, above 0.

    Notes
    -----
    Sutherland & Saunders 1992, MNRAS 259, 413, eq. 1.
    """
    n = np.asarray(n_m_per_arcsec2, dtype=float)
    if np.any(~(n > 0.0)):
        raise RangeError(f"density {n_m_per_arcsec2} is not allowed; an empty field still has that of one row")
    return np.asarray(q_m, dtype=float) * np.asarray(f_per_arcsec2, dtype=float) / n


def with_heavy_tail(f_per_arcsec2: ArrayLike, share: float, radius_arcsec: float) -> Floats:
    """Density of true matches with a share spread evenly over the cone: no row is ever impossible (mixture; definition)."""
    if not 0.0 <= share < 1.0:
        raise RangeError(f"heavy tail {share} is not allowed; give a share of 0 or more and below 1")
    return (1.0 - share) * np.asarray(f_per_arcsec2, dtype=float) + share / (np.pi * radius_arcsec**2)


def posterior(bayes: ArrayLike, prior: ArrayLike) -> Floats:
    """Posterior probability from a Bayes factor and a prior probability in (0, 1) (Bayes' rule)."""
    p0 = np.asarray(prior, dtype=float)
    return 1.0 / (1.0 + (1.0 - p0) / (np.asarray(bayes, dtype=float) * p0))


def reliability(likelihood_ratios: ArrayLike, listed_fraction: float) -> tuple[Floats, float]:
    """Probability of each row being the counterpart, and of none being it.

    Parameters
    ----------
    likelihood_ratios : array_like, shape (n,)
        Q f / rho per row: density of true matches over density of unrelated rows, with the listed fraction in it.
    listed_fraction : float
        Prior chance Q that the catalog would list the counterpart, 0 < Q < 1.

    Notes
    -----
    Sutherland & Saunders 1992, MNRAS 259, 413, eq. 5.
    """
    if not 0.0 < listed_fraction < 1.0:
        raise RangeError(f"listed fraction {listed_fraction} is not allowed; give a prior between 0 and 1")
    lr = np.asarray(likelihood_ratios, dtype=float)
    total = float(lr.sum()) + 1.0 - listed_fraction
    return lr / total, (1.0 - listed_fraction) / total
