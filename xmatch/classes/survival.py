"""Survival fractions: their interval, their floor, how they are printed, and what a blank says of one source."""

from __future__ import annotations

import math
from functools import lru_cache
from statistics import NormalDist

import numpy as np
from numpy.typing import ArrayLike

from xmatch.errors import RangeError
from xmatch.records import Floats, PhysicalLimit

Z_95 = 1.959963984540054
"""Two-sided 95 % of a normal distribution (definition)."""
RULE_OF_THREE = 3.0
"""No survivor in N draws means less than 3/N at 95 % (-ln 0.05 = 2.996)."""
DEFAULT_THRESHOLD_SIGMA = 5.0
"""Detection threshold of a limit that does not say its own (common practice, no source)."""
CDF_REACH = 9.0
"""Reach of the table of the cumulative normal, sigma; beyond it is 0 or 1 to 1e-19."""
CDF_POINTS = 18001
"""Points of that table: 1e-3 sigma apart, interpolated to 3e-8."""
UNUSABLE_FLAGS = ("coverage unproven", "hidden", "covers", "holds only if")
"""Words in a limit's flag that keep it from ruling anything out."""


def wilson(survivors: float, n: int, z: float = Z_95) -> tuple[float, float]:
    """Interval of a fraction seen as ``survivors`` out of ``n``.

    Parameters
    ----------
    survivors : float
        0 to n; a sum of weights in [0, 1] counts as that many survivors, which overstates the interval.
    n : int
        Above 0.
    z : float
        Normal deviate; the default is two-sided 95 %.

    References
    ----------
    Wilson 1927, J. Am. Stat. Assoc. 22, 209.
    """
    if n < 1 or not 0.0 <= survivors <= n * (1.0 + 1.0e-12):
        raise RangeError(f"{survivors} of {n} is not allowed; 0 to n survivors of at least one draw are needed")
    p = min(survivors / n, 1.0)
    scale = 1.0 + z**2 / n
    centre = (p + z**2 / (2 * n)) / scale
    half = z / scale * math.sqrt(p * (1.0 - p) / n + z**2 / (4.0 * n**2))
    return max(0.0, centre - half), min(1.0, centre + half)


def floored(fraction: float, n: int) -> float:
    """The fraction, or 3/N where the draws cannot tell it from less: a survival is never 0."""
    return max(fraction, min(1.0, RULE_OF_THREE / n))


def say_fraction(fraction: float, n: int) -> str:
    """A survival in words for people: ``43 %``, ``0.4 %``, ``< 3e-05``."""
    if fraction <= RULE_OF_THREE / n:
        return f"< {RULE_OF_THREE / n:.0e}"
    if fraction < 0.001:
        return f"{fraction:.1e}"
    return f"{100.0 * fraction:.{0 if fraction >= 0.1 else 1}f} %"


@lru_cache(maxsize=1)
def _cdf_table() -> Floats:
    x = np.linspace(-CDF_REACH, CDF_REACH, CDF_POINTS)
    return np.array([0.5 * math.erfc(-value / math.sqrt(2.0)) for value in x])


def read_even(table: Floats, position: Floats) -> Floats:
    """Read an evenly spaced table between its points; ``position`` counts points and is held inside the table."""
    inside = np.clip(position, 0.0, len(table) - 1.000001)
    cell = inside.astype(np.intp)
    here = table[cell]
    return here + (inside - cell) * (table[cell + 1] - here)


def normal_cdf(x: ArrayLike) -> Floats:
    """Cumulative normal distribution for many draws, by a table; absolute error below 1e-7.

    scipy has it exactly, but importing scipy.special costs a quarter of a warm answer, and the draws resolve 3e-5.
    """
    scale = (CDF_POINTS - 1) / (2.0 * CDF_REACH)
    return read_even(_cdf_table(), (np.asarray(x, dtype=float) + CDF_REACH) * scale)


def miss_probability(flux: ArrayLike, limit: float, n_sigma: float | None, confidence: float) -> Floats:
    """Probability that a source of this flux leaves the position blank.

    Parameters
    ----------
    flux : array_like
        True flux as observed, >= 0, in the unit of ``limit``.
    limit : float
        Flux that is detected with the probability ``confidence``, > 0.
    n_sigma : float or None
        The limit in units of the noise; None takes a threshold of 5 sigma.
    confidence : float
        In (0, 1).

    Notes
    -----
    1 - C(F) with C = Phi(F / s - t), where s = limit / n_sigma is the noise and t = n_sigma - z the threshold: C is the
    confidence at the limit and 1/2 at the threshold (Gaussian noise; common practice). C is counted from its value at
    zero flux, so that no source at all is missed with probability 1.
    """
    if not (limit > 0.0 and 0.0 < confidence < 1.0):
        raise RangeError(
            f"limit {limit} at confidence {confidence} is not allowed; a limit above 0 and a confidence between 0 and "
            "1 are needed"
        )
    z = NormalDist().inv_cdf(confidence)
    total = n_sigma if n_sigma is not None else DEFAULT_THRESHOLD_SIGMA + z
    threshold = max(total - z, 0.0)
    empty = float(normal_cdf(-threshold))
    # a limit of fewer sigma than its confidence needs is read with that many
    found = normal_cdf(np.asarray(flux, dtype=float) / limit * max(total, z) - threshold)
    return np.clip(1.0 - (found - empty) / (1.0 - empty), 0.0, 1.0)


def usable(limit: PhysicalLimit) -> bool:
    """Whether a limit may rule anything out: nothing in its flag says that a source could have gone unseen."""
    flag = limit.limit.flag.lower()
    return not any(word in flag for word in UNUSABLE_FLAGS)
