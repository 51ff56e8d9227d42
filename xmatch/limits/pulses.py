"""What an image says of pulses: dilution, the chance that one fell in, and what blank epochs add up to."""

from __future__ import annotations

import numpy as np
from numpy.typing import ArrayLike

from xmatch.errors import RangeError
from xmatch.limits.bounds import _fraction
from xmatch.records import Floats


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
