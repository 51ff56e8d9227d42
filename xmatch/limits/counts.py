"""Bounds from counted events."""

from __future__ import annotations

import numpy as np
from numpy.typing import ArrayLike

from xmatch.errors import RangeError
from xmatch.limits.bounds import _fraction
from xmatch.records import Bools, Floats

BISECTIONS = 52
"""Halvings of a bracket: what is left is below the rounding of a double."""


def _counts(name: str, value: ArrayLike) -> Floats:
    n = np.asarray(value, dtype=float)
    if not np.all(n >= 0.0):
        raise RangeError(f"{name} {value} is not allowed; counts are 0 or more")
    return n


def gehrels_upper(n: ArrayLike, confidence: ArrayLike) -> Floats:
    """Exact upper limit on a Poisson mean after n counts (Gehrels 1986, ApJ 303, 336, eq. 1)."""
    from scipy.special import gammaincinv

    counts, level = _counts("counts", n), _fraction("confidence", confidence)
    top = float(counts.max(initial=0.0))
    if level.ndim == 0 and counts.size > 10.0 * top and np.all(counts == np.floor(counts)):
        # many whole counts, few different ones: one bound for each, then read off
        return np.asarray(gammaincinv(np.arange(int(top) + 1) + 1.0, level)[counts.astype(int)])
    return np.asarray(gammaincinv(counts + 1.0, level))


def gehrels_lower(n: ArrayLike, confidence: ArrayLike) -> Floats:
    """Exact lower limit on a Poisson mean after n counts; 0 for none (Gehrels 1986, ApJ 303, 336, eq. 2)."""
    from scipy.special import gammaincinv

    counts, level = np.broadcast_arrays(_counts("counts", n), _fraction("confidence", confidence))
    return np.where(counts > 0.0, gammaincinv(np.where(counts > 0.0, counts, 1.0), 1.0 - level), 0.0)


def bayesian_upper(n: ArrayLike, background: ArrayLike, confidence: ArrayLike) -> Floats:
    """Upper bound on a source on top of a known background, flat prior S >= 0.

    Notes
    -----
    Helene 1983, NIM 212, 319: Q(n+1, U+b) = (1 - CL) Q(n+1, b), Q the regularised upper gamma function.
    """
    from scipy.special import gammaincc, gammainccinv

    counts, b = _counts("counts", n), _counts("background", background)
    rest = 1.0 - _fraction("confidence", confidence)
    return np.asarray(gammainccinv(counts + 1.0, rest * gammaincc(counts + 1.0, b))) - b


def kraft_interval(n: ArrayLike, background: ArrayLike, confidence: ArrayLike) -> tuple[Floats, Floats]:
    """Shortest interval that holds the confidence, source on top of a known background, flat prior S >= 0.

    Parameters
    ----------
    n, background, confidence : array_like
        Counts (>= 0), expected background (>= 0), confidence in (0, 1); broadcastable.

    Returns
    -------
    lower, upper : ndarray
        Bounds on the source counts.

    Notes
    -----
    Kraft, Burrows & Nousek 1991, ApJ 374, 344. The posterior exp(-(S+b)) (S+b)^n peaks at S = max(n - b, 0);
    bisection on the lower bound finds where both ends are equally probable. n = 0 and b = 0 are ordinary cases.
    """
    from scipy.special import gammaincc, gammainccinv

    counts, b, level = np.broadcast_arrays(
        _counts("counts", n), _counts("background", background), _fraction("confidence", confidence)
    )
    shape = counts.shape
    counts, b, level = counts.ravel(), b.ravel(), level.ravel()
    whole = gammaincc(counts + 1.0, b)

    def upper_of(lower: Floats, pick: Bools) -> Floats:
        """Upper bound that leaves the wanted probability above ``lower``; infinite when too little is left."""
        n, back = counts[pick], b[pick]
        left = gammaincc(n + 1.0, lower + back) - level[pick] * whole[pick]
        return np.where(left > 0.0, gammainccinv(n + 1.0, np.maximum(left, 1.0e-300)) - back, np.inf)

    def log_density(s: Floats, pick: Bools) -> Floats:
        n, total = counts[pick], s + b[pick]
        with np.errstate(divide="ignore", invalid="ignore"):
            return np.where(np.isinf(s), -np.inf, np.where(n > 0.0, n * np.log(total), 0.0) - total)

    every = np.ones(counts.shape, dtype=bool)
    lower = np.zeros(counts.shape)
    upper = upper_of(lower, every)
    # only where the density at 0 is below that at the far end does the interval leave 0: the rest is done
    inner = log_density(lower, every) < log_density(upper, every)
    low, high = np.zeros(int(inner.sum())), np.maximum(counts[inner] - b[inner], 0.0)
    for _ in range(BISECTIONS if len(low) else 0):
        middle = 0.5 * (low + high)
        rises = log_density(middle, inner) < log_density(upper_of(middle, inner), inner)
        low, high = np.where(rises, middle, low), np.where(rises, high, middle)
    lower[inner] = 0.5 * (low + high)
    upper[inner] = upper_of(lower[inner], inner)
    return lower.reshape(shape), upper.reshape(shape)


def bayesian_upper_measured(n_on: ArrayLike, n_off: ArrayLike, off_over_on: ArrayLike, confidence: ArrayLike) -> Floats:
    """Upper bound on a source whose background was counted elsewhere, flat priors on both rates.

    Parameters
    ----------
    n_on, n_off : array_like
        Whole counts in the source aperture and in the background region, >= 0.
    off_over_on : array_like
        Area times exposure of the background region over that of the aperture, > 0.
    confidence : array_like
        One-sided, in (0, 1).

    Notes
    -----
    The posterior is a sum of gamma densities of order i = 0..n_on with weights proportional to
    (1 + r)^i (n_on + n_off - i)! / (n_on - i)! (Loredo 1992, Statistical Challenges in Modern Astronomy, 275;
    formula from memory, checked in the tests by integrating the likelihood).
    """
    from scipy.special import gammaincc, gammaincinv, gammaln

    on, off, ratio, level = np.broadcast_arrays(
        _counts("counts", n_on), _counts("background counts", n_off),
        np.asarray(off_over_on, dtype=float), _fraction("confidence", confidence),
    )  # fmt: skip
    if not np.all(ratio > 0.0) or np.any(on != np.floor(on)) or np.any(off != np.floor(off)):
        raise RangeError(
            f"counts {n_on}, {n_off} and ratio {off_over_on} are not allowed; give whole counts and a ratio above 0"
        )
    shape = on.shape
    on, off, ratio, level = on.ravel(), off.ravel(), ratio.ravel(), level.ravel()
    order = np.arange(int(on.max(initial=0.0)) + 1)[:, None]
    used = order <= on
    left = np.where(used, on - order, 0.0)
    weight = np.where(used, order * np.log1p(ratio) + gammaln(left + off + 1.0) - gammaln(left + 1.0), -np.inf)
    weight = np.exp(weight - weight.max(axis=0))
    weight /= weight.sum(axis=0)
    low, high = np.zeros(on.shape), gammaincinv(on + 1.0, level)  # the highest order alone lies furthest out
    for _ in range(BISECTIONS):
        middle = 0.5 * (low + high)
        above = (weight * gammaincc(order + 1.0, middle)).sum(axis=0)
        low, high = np.where(above > 1.0 - level, middle, low), np.where(above > 1.0 - level, high, middle)
    return (0.5 * (low + high)).reshape(shape)


def kashyap_threshold(background: ArrayLike, false_alarm: ArrayLike) -> Floats:
    """Smallest count that a background exceeds with at most this probability (Kashyap et al. 2010, ApJ 719, 900)."""
    from scipy.special import gammainc

    b, alpha = np.broadcast_arrays(_counts("background", background), _fraction("false-alarm probability", false_alarm))
    threshold = np.zeros(b.shape)
    while True:
        above = gammainc(threshold + 1.0, b)  # P(N > threshold)
        if np.all(above <= alpha):
            return threshold
        threshold = np.where(above > alpha, threshold + 1.0, threshold)


def kashyap_limit(background: ArrayLike, false_alarm: ArrayLike, detection_probability: ArrayLike) -> Floats:
    """Source counts detected with this probability above the threshold.

    Notes
    -----
    Kashyap et al. 2010, ApJ 719, 900: P(N > S* | l + b) equals the detection probability.
    """
    from scipy.special import gammaincinv

    b = _counts("background", background)
    threshold = kashyap_threshold(background, false_alarm)
    return np.asarray(gammaincinv(threshold + 1.0, _fraction("detection probability", detection_probability))) - b


def counts_to_flux(
    counts: ArrayLike, exposure_s: ArrayLike, enclosed: ArrayLike, ecf_counts_cm2_erg: ArrayLike
) -> Floats:
    """Counts in an aperture to band flux, erg s^-1 cm^-2: U / (t EEF ECF) (definition).

    Raises
    ------
    RangeError
        When exposure, enclosed fraction or conversion factor is not above 0.
    """
    t, e, f = (np.asarray(v, dtype=float) for v in (exposure_s, enclosed, ecf_counts_cm2_erg))
    if np.any(t <= 0.0) or np.any((e <= 0.0) | (e > 1.0)) or np.any(f <= 0.0):
        raise RangeError("exposure and conversion factor must be above 0, the enclosed fraction in (0, 1]")
    return _counts("counts", counts) / (t * e * f)
