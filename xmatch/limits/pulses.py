"""What an image says of pulses: dilution, the chance that one fell in, and what blank epochs add up to."""

from __future__ import annotations

import numpy as np
from numpy.typing import ArrayLike

from xmatch.errors import RangeError
from xmatch.limits.bounds import _fraction
from xmatch.records import Floats

PHASE_TURNS = 6
"""Turns around the exposure over which a predicted phase is summed: 6 sigma when the error is one period."""


def pulse_peak_limit(
    image_limit: ArrayLike, integration_s: ArrayLike, width_s: ArrayLike, pulses: ArrayLike = 1
) -> Floats:
    """Limit on the peak of pulses inside an image of a given limit, same unit.

    Parameters
    ----------
    image_limit : array_like
        Limit on the mean over the image.
    integration_s, width_s : array_like
        Length of the image and equivalent width (fluence over peak), s; the image must be the longer one.
    pulses : array_like
        Number of pulses inside the image.

    Notes
    -----
    Fluence is conserved: S_peak < S_image T / (N w) (definition of the mean).
    """
    t, w, n = (np.asarray(v, dtype=float) for v in (integration_s, width_s, pulses))
    if np.any(w <= 0.0) or np.any(t < n * w) or np.any(n < 1.0):
        raise RangeError(
            f"{pulses} pulse(s) of {width_s} s in {integration_s} s is not allowed; the image must be at least as long "
            "as the pulses in it, otherwise nothing is diluted"
        )
    return np.asarray(image_limit, dtype=float) * t / (n * w)


def _times(period_s: ArrayLike, width_s: ArrayLike, integration_s: ArrayLike) -> tuple[Floats, Floats, Floats]:
    p, w, t = (np.asarray(v, dtype=float) for v in (period_s, width_s, integration_s))
    if np.any(p <= 0.0) or np.any(w < 0.0) or np.any(t < 0.0):
        raise RangeError("a period above 0 and widths and exposures of 0 or more are needed")
    return p, w, t


def overlaps_pulse_probability(period_s: ArrayLike, width_s: ArrayLike, integration_s: ArrayLike) -> Floats:
    """Chance that an exposure at random phase catches any part of a pulse: min(1, (T + w)/P) (geometry)."""
    p, w, t = _times(period_s, width_s, integration_s)
    return np.minimum(1.0, (t + w) / p)


def contains_whole_pulse_probability(period_s: ArrayLike, width_s: ArrayLike, integration_s: ArrayLike) -> Floats:
    """Chance that an exposure at random phase holds a whole pulse: min(1, max(0, T - w)/P) (geometry)."""
    p, w, t = _times(period_s, width_s, integration_s)
    return np.minimum(1.0, np.maximum(0.0, t - w) / p)


def all_blank_probability(active_fraction: ArrayLike, seen_probability: ArrayLike, epochs: ArrayLike) -> Floats:
    """Chance that N independent epochs are all blank: (1 - f p)^N (binomial)."""
    f, p, n = (np.asarray(v, dtype=float) for v in (active_fraction, seen_probability, epochs))
    if np.any((f < 0.0) | (f > 1.0) | (p < 0.0) | (p > 1.0)):
        raise RangeError("an active fraction and a probability between 0 and 1 are needed")
    return (1.0 - f * p) ** n


def active_fraction_bound(epochs: ArrayLike, confidence: ArrayLike) -> Floats:
    """Upper bound on f p after N blank independent epochs: 1 - (1 - CL)^(1/N) (binomial, classical)."""
    n = np.asarray(epochs, dtype=float)
    if np.any(n < 1.0):
        raise RangeError(f"{epochs} epochs is not allowed; at least one is needed")
    return -np.expm1(np.log1p(-_fraction("confidence", confidence)) / n)


def pulse_averaged_limit(image_limit: ArrayLike, integration_s: ArrayLike, on_s: ArrayLike) -> Floats:
    """Limit on the mean flux over the time a pulse is on, from an image longer than that: S T / t_on (definition)."""
    return pulse_peak_limit(image_limit, integration_s, on_s, 1)


def period_averaged_limit(peak_limit: ArrayLike, width_s: ArrayLike, period_s: ArrayLike) -> Floats:
    """Limit on the mean over the period from one on the peak: S w / P, w the equivalent width (definition)."""
    p, w, _ = _times(period_s, width_s, 0.0)
    if np.any(w > p):
        raise RangeError(f"width {width_s} s is not allowed; a pulse must be no longer than its period {period_s} s")
    return np.asarray(peak_limit, dtype=float) * w / p


def predicted_pulse_probability(
    start_s: ArrayLike, integration_s: ArrayLike, period_s: ArrayLike, period_error_s: ArrayLike,
    epoch_error_s: ArrayLike, width_s: ArrayLike,
) -> Floats:  # fmt: skip
    """Chance that an exposure holds a whole pulse that an ephemeris predicts.

    Parameters
    ----------
    start_s : array_like
        Start of the exposure after the reference pulse centre, s (negative: before).
    integration_s, period_s, width_s : array_like
        Exposure (>= 0), period (> 0), pulse width (>= 0), s.
    period_error_s, epoch_error_s : array_like
        One-sigma errors, >= 0, taken as independent.

    Notes
    -----
    The error of a predicted centre is sqrt(epoch_error^2 + (k period_error)^2) after k turns (linear propagation);
    the Gaussian is summed over the turns around the exposure. When it exceeds a period the random-phase value is left.
    """
    from scipy.special import ndtr

    p, w, t = _times(period_s, width_s, integration_s)
    begin, dp, de = (np.asarray(v, dtype=float) for v in (start_s, period_error_s, epoch_error_s))
    if np.any(dp < 0.0) or np.any(de < 0.0):
        raise RangeError("errors of an ephemeris must be 0 or more")
    turns = (begin + 0.5 * t) / p
    spread = np.maximum(np.hypot(de, turns * dp), 1.0e-12 * p)
    room = t - w
    # distance of the nearest predicted centre from the middle of the exposure
    off = (turns - np.round(turns)) * p
    total = np.zeros(np.broadcast_shapes(off.shape, spread.shape, np.shape(room)))
    for k in range(-PHASE_TURNS, PHASE_TURNS + 1):
        centre = k * p - off
        total = total + ndtr((centre + 0.5 * room) / spread) - ndtr((centre - 0.5 * room) / spread)
    at_random = contains_whole_pulse_probability(p, w, t)
    return np.where(room < 0.0, 0.0, np.where(spread > p, at_random, np.minimum(1.0, total)))


def not_missed_confidence(active_fraction: ArrayLike, seen_probability: ArrayLike, epochs: ArrayLike) -> Floats:
    """Confidence that a pulse above the limit was not missed: 1 - (1 - f p)^N, a function of the activity (binomial)."""
    return 1.0 - all_blank_probability(active_fraction, seen_probability, epochs)
