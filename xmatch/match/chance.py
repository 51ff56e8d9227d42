"""How often an unrelated row falls where the counterpart should be."""

from __future__ import annotations

import math

import numpy as np
from numpy.typing import ArrayLike

from xmatch.constants import ARCSEC2_PER_DEG2
from xmatch.records import Floats


def expected_in_ellipse(
    density_per_deg2: ArrayLike, cxx: ArrayLike, cyy: ArrayLike, cxy: ArrayLike, k: ArrayLike
) -> Floats:
    """Unrelated rows expected inside the k-sigma ellipse of a covariance (arcsec^2): rho pi k^2 sqrt(det C)."""
    xx, yy, xy = (np.asarray(v, dtype=float) for v in (cxx, cyy, cxy))
    area = np.pi * np.square(np.asarray(k, dtype=float)) * np.sqrt(np.maximum(xx * yy - xy**2, 0.0))
    return np.asarray(density_per_deg2, dtype=float) * area / ARCSEC2_PER_DEG2


def expected_in_circle(density_per_deg2: ArrayLike, radius_arcsec: ArrayLike) -> Floats:
    """Unrelated rows expected within a radius: rho pi r^2."""
    return np.asarray(density_per_deg2, dtype=float) * np.pi * np.square(radius_arcsec) / ARCSEC2_PER_DEG2


def chance_within(expected: ArrayLike) -> Floats:
    """Probability of at least one unrelated row where ``expected`` are expected (Poisson): 1 - exp(-mu)."""
    return -np.expm1(-np.asarray(expected, dtype=float))


def downes(p_star: ArrayLike, p_critical: ArrayLike) -> Floats:
    """Chance probability corrected for having chosen the magnitude after the fact.

    Parameters
    ----------
    p_star : array_like
        Chance of a row at least this bright within its separation.
    p_critical : array_like
        Chance of any row of the catalog within the search radius.

    Notes
    -----
    Downes et al. 1986, MNRAS 218, 31: E = P* [1 + ln(Pc/P*)], or Pc where P* exceeds it; P = 1 - exp(-E).
    """
    p, c = np.broadcast_arrays(np.asarray(p_star, dtype=float), np.asarray(p_critical, dtype=float))
    with np.errstate(divide="ignore", invalid="ignore"):
        expected = np.where(p >= c, c, np.where(p > 0.0, p * (1.0 + np.log(c / np.where(p > 0.0, p, 1.0))), 0.0))
    return chance_within(expected)


def global_p(p: ArrayLike, trials: float) -> Floats:
    """Chance that any of ``trials`` independent searches shows one so good (Sidak 1967, JASA 62, 626).

    ``trials`` need not be whole: catalogs that list the same objects count for less than one each.
    """
    return -np.expm1(trials * np.log1p(-np.asarray(p, dtype=float)))


def local_density(separation_arcsec: ArrayLike, inner_arcsec: float, outer_arcsec: float) -> tuple[float, float, int]:
    """Surface density from the ring between two radii; an inner radius below 0 takes the centre in.

    Returns
    -------
    density_per_deg2, error_per_deg2, n : float, float, int
        An empty ring gives the density of one row, as a cautious bound, with n = 0.
    """
    r = np.asarray(separation_arcsec, dtype=float)
    n = int(np.count_nonzero((r > inner_arcsec) & (r <= outer_arcsec)))
    area_deg2 = math.pi * (outer_arcsec**2 - max(inner_arcsec, 0.0) ** 2) / ARCSEC2_PER_DEG2
    if area_deg2 <= 0.0:
        return math.nan, math.nan, n
    return max(n, 1) / area_deg2, math.sqrt(max(n, 1)) / area_deg2, n


def crowding_tail(n_seen: int, expected: float) -> float:
    """Poisson probability of seeing at least ``n_seen`` unrelated rows when ``expected`` are expected."""
    term, below = math.exp(-expected), 0.0
    for i in range(n_seen):
        below += term
        term *= expected / (i + 1)
    return max(0.0, 1.0 - below)
