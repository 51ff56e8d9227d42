"""Bounds from counted events."""

from __future__ import annotations

import numpy as np
from numpy.typing import ArrayLike

from xmatch.errors import RangeError
from xmatch.limits.bounds import _fraction
from xmatch.records import Floats

BISECTIONS = 200


def _counts(name: str, value: ArrayLike) -> Floats:
    n = np.asarray(value, dtype=float)
    if not np.all(n >= 0.0):
        raise RangeError(f"{name} {value} is not allowed; counts are 0 or more")
    return n


def gehrels_upper(n: ArrayLike, confidence: ArrayLike) -> Floats:
    """Exact upper limit on a Poisson mean after n counts (Gehrels 1986, ApJ 303, 336, eq. 1)."""
    from scipy.special import gammaincinv

    return np.asarray(gammaincinv(_counts("counts", n) + 1.0, _fraction("confidence", confidence)))


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
    whole = gammaincc(counts + 1.0, b)

    def upper_of(lower: Floats) -> Floats:
        """Upper bound that leaves the wanted probability above ``lower``; infinite when too little is left."""
        left = gammaincc(counts + 1.0, lower + b) - level * whole
        return np.where(left > 0.0, gammainccinv(counts + 1.0, np.maximum(left, 1.0e-300)) - b, np.inf)

    def log_density(s: Floats) -> Floats:
        total = s + b
        with np.errstate(divide="ignore", invalid="ignore"):
            return np.where(np.isinf(s), -np.inf, np.where(counts > 0.0, counts * np.log(total), 0.0) - total)

    low, high = np.zeros_like(counts), np.maximum(counts - b, 0.0)
    for _ in range(BISECTIONS):
        middle = 0.5 * (low + high)
        # density still higher at the far end: the interval must move up
        rises = log_density(middle) < log_density(upper_of(middle))
        low, high = np.where(rises, middle, low), np.where(rises, high, middle)
    edge = log_density(np.zeros_like(counts)) >= log_density(upper_of(np.zeros_like(counts)))
    lower = np.where(edge, 0.0, 0.5 * (low + high))
    return lower, upper_of(lower)


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
