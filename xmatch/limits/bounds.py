"""Bounds and thresholds under Gaussian errors."""

from __future__ import annotations

from statistics import NormalDist

import numpy as np
from numpy.typing import ArrayLike

from xmatch.errors import RangeError
from xmatch.records import Floats, Quantity


def _fraction(name: str, value: ArrayLike) -> Floats:
    p = np.asarray(value, dtype=float)
    if not np.all((p > 0.0) & (p < 1.0)):
        raise RangeError(f"{name} {value} is not allowed; give a fraction between 0 and 1, such as 0.95")
    return p


def one_sided_confidence(n_sigma: ArrayLike) -> Floats:
    """Probability below +n sigma of a Gaussian (definition)."""
    from scipy.special import ndtr

    return np.asarray(ndtr(np.asarray(n_sigma, dtype=float)))


def two_sided_confidence(n_sigma: ArrayLike) -> Floats:
    """Probability within +-n sigma of a Gaussian (definition)."""
    from scipy.special import erf

    return np.asarray(erf(np.asarray(n_sigma, dtype=float) / np.sqrt(2.0)))


def z_one_sided(confidence: ArrayLike) -> Floats:
    """Number of sigma of a one-sided confidence in (0, 1) (definition)."""
    p = _fraction("confidence", confidence)
    if p.ndim == 0:  # the common case does without scipy, whose import costs a quarter of a warm answer
        return np.asarray(NormalDist().inv_cdf(float(p)))
    from scipy.special import ndtri

    return np.asarray(ndtri(p))


def gaussian_bound(value: ArrayLike, sigma: ArrayLike, confidence: ArrayLike) -> Floats:
    """Upper bound on a flux that cannot be negative, from a measurement with Gaussian error.

    Parameters
    ----------
    value, sigma : array_like
        Measurement and its one-sigma error (> 0), same unit.
    confidence : array_like
        One-sided, in (0, 1).

    Notes
    -----
    Flat prior on S >= 0: U = f + s z with z = PhiInv(1 - (1 - CL) Phi(f/s)) (Helene 1983, NIM 212, 319, Gaussian case).
    """
    from scipy.special import log_ndtr, ndtri_exp

    f, s = np.asarray(value, dtype=float), np.asarray(sigma, dtype=float)
    if np.any(s <= 0.0):
        raise RangeError(f"error {sigma} is not allowed; a measurement needs an error above 0")
    # in logarithms of the tail, so that it holds far below zero
    return f - s * ndtri_exp(np.log1p(-_fraction("confidence", confidence)) + log_ndtr(f / s))


def completeness_sigma(threshold_sigma: ArrayLike, probability: ArrayLike) -> Floats:
    """True flux, in sigma, that a t-sigma threshold finds with this probability: t + z (Gaussian noise)."""
    return np.asarray(threshold_sigma, dtype=float) + z_one_sided(probability)


def trials_threshold(threshold_sigma: ArrayLike, beams: ArrayLike) -> Floats:
    """Threshold with the same false-alarm rate over several beams, worked in the upper tail (Sidak 1967, JASA 62, 626)."""
    from scipy.special import ndtr, ndtri

    n = np.maximum(np.asarray(beams, dtype=float), 1.0)
    return -np.asarray(ndtri(-np.expm1(np.log1p(-ndtr(-np.asarray(threshold_sigma, dtype=float))) / n)))


def restate(value: ArrayLike, sigma_from: ArrayLike, sigma_to: ArrayLike, quantity: Quantity) -> Floats:
    """A limit of one number of sigma restated at another: fluxes scale, magnitudes shift (definition)."""
    old, new = np.asarray(sigma_from, dtype=float), np.asarray(sigma_to, dtype=float)
    if np.any(~(old > 0.0)) or np.any(~(new > 0.0)):
        raise RangeError(f"{sigma_from} to {sigma_to} sigma is not allowed; both must be above 0")
    ratio = new / old
    if quantity is Quantity.MAGNITUDE:
        return np.asarray(value, dtype=float) - 2.5 * np.log10(ratio)
    return np.asarray(value, dtype=float) * ratio
