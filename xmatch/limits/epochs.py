"""Several epochs: one mean for a constant source, the best single epoch for a variable one, never mixed."""

from __future__ import annotations

import numpy as np
from numpy.typing import ArrayLike

from xmatch.errors import RangeError
from xmatch.limits.bounds import gaussian_bound
from xmatch.records import Floats


def _epochs(value: ArrayLike, sigma: ArrayLike) -> tuple[Floats, Floats]:
    f, s = np.broadcast_arrays(np.asarray(value, dtype=float), np.asarray(sigma, dtype=float))
    if f.ndim != 1 or not len(f) or not np.all(np.isfinite(f)) or not np.all(s > 0.0):
        raise RangeError(
            f"epochs {value} +- {sigma} are not allowed; give at least one finite value with error above 0"
        )
    return f, s


def constant_source(value: ArrayLike, sigma: ArrayLike) -> tuple[float, float]:
    """Weighted mean of epochs and its error, same unit; only for a source that does not vary (inverse variance)."""
    f, s = _epochs(value, sigma)
    weight = s**-2.0
    return float((f * weight).sum() / weight.sum()), float(weight.sum() ** -0.5)


def best_single_epoch(value: ArrayLike, sigma: ArrayLike, confidence: float) -> tuple[int, float]:
    """Index and bound of the epoch with the smallest error: the limit for a source that may vary.

    The epoch is chosen by its error and not by its bound: choosing the lowest of many bounds would void
    the stated confidence (definition of coverage).
    """
    f, s = _epochs(value, sigma)
    index = int(np.argmin(s))
    return index, float(gaussian_bound(f[index], s[index], confidence))
