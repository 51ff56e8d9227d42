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
