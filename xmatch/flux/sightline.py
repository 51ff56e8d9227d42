"""Column and extinction along a line of sight: growth with distance, scatter, the total that caps both."""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np
from numpy.typing import ArrayLike

from xmatch.errors import RangeError
from xmatch.records import Floats

DUST_HEIGHT_PC = 125.0
"""Scale height of the dust disc (Marshall et al. 2006, A&A 453, 635; value from memory)."""
PLANE_MAG_PER_KPC = 1.0
"""Visual extinction per kpc in the plane where no map is at hand (common practice, no source; a fallback)."""


def growth_pc(dist_pc: ArrayLike, latitude_deg: float, height_pc: float = DUST_HEIGHT_PC) -> Floats:
    """Length of the plane that holds as much dust as the line of sight out to a distance, pc.

    Parameters
    ----------
    dist_pc : array_like
        0 or more; infinite for the whole line of sight.
    latitude_deg : float
        Galactic latitude. At 0 the growth is linear and without end.
    height_pc : float
        Scale height of an exponential disc, above 0.

    Notes
    -----
    Integral of exp(-d |sin b| / h) along the line (definition). The Sun is put into the plane.
    """
    d = np.asarray(dist_pc, dtype=float)
    if np.any(~(d >= 0.0)) or not (-90.0 <= latitude_deg <= 90.0 and 0.0 < height_pc < np.inf):
        raise RangeError(
            f"distance {dist_pc} pc at latitude {latitude_deg} deg, height {height_pc} pc, is not allowed; distance 0 or more, "
            "latitude -90 to 90, height above 0"
        )
    rate = abs(np.sin(np.radians(latitude_deg))) / height_pc
    return d if rate == 0.0 else -np.expm1(-d * rate) / rate


def at_distance(
    dist_pc: ArrayLike, known: float, known_at_pc: float, latitude_deg: float, height_pc: float = DUST_HEIGHT_PC
) -> Floats:
    """A column or extinction known out to one distance, at others.

    Parameters
    ----------
    dist_pc : array_like
        0 or more.
    known : float
        Column or extinction out to ``known_at_pc``, in the unit wanted, 0 or more.
    known_at_pc : float
        Above 0; infinite when ``known`` is the total of the line of sight (not in the plane itself).
    """
    if not (known >= 0.0 and known_at_pc > 0.0):
        raise RangeError(f"{known:g} out to {known_at_pc:g} pc is not allowed; 0 or more, out to a distance above 0")
    whole = float(growth_pc(known_at_pc, latitude_deg, height_pc))
    if not np.isfinite(whole):
        raise RangeError(
            f"at latitude {latitude_deg} deg a total cannot be shared out over distance; give it at a distance"
        )
    return known * growth_pc(dist_pc, latitude_deg, height_pc) / whole


def plane_extinction_mag(dist_pc: ArrayLike, latitude_deg: float) -> Floats:
    """A_V out to a distance where nothing is known: :data:`PLANE_MAG_PER_KPC` in an exponential disc. A fallback."""
    return PLANE_MAG_PER_KPC / 1.0e3 * growth_pc(dist_pc, latitude_deg)


def scattered(nominal: ArrayLike, scatter_dex: float, sigma: ArrayLike, cap: float | None = None) -> Floats:
    """Log-normal scatter about a nominal value, never above the total of the line of sight.

    Parameters
    ----------
    nominal : array_like
        Median, 0 or more.
    scatter_dex : float
        One sigma, 0 or more.
    sigma : array_like
        Standard normal deviates, drawn by the caller.
    cap : float or None
        The total; what scatters above it is put onto it.
    """
    if not scatter_dex >= 0.0 or (cap is not None and not cap >= 0.0):
        raise RangeError(f"scatter {scatter_dex} dex under a total of {cap} is not allowed; both must be 0 or more")
    drawn = np.asarray(nominal, dtype=float) * 10.0 ** (scatter_dex * np.asarray(sigma, dtype=float))
    return drawn if cap is None else np.minimum(drawn, cap)


def mixture(
    estimates: Sequence[tuple[float, float]], pick: ArrayLike, sigma: ArrayLike, cap: float | None = None
) -> Floats:
    """Draws from several estimates of one column with equal weight: a log-normal each.

    Parameters
    ----------
    estimates : sequence of (median, scatter in dex)
        From the dispersion measure, a dust map, a hydrogen map ...
    pick : array_like
        Uniform deviates in [0, 1), which estimate a draw follows.
    sigma : array_like
        Standard normal deviates of the same shape.
    """
    if not estimates:
        raise RangeError("no estimate of the column was given; give one or more")
    table = np.asarray(estimates, dtype=float)
    which = np.minimum((np.asarray(pick, dtype=float) * len(table)).astype(int), len(table) - 1)
    drawn = table[which, 0] * 10.0 ** (table[which, 1] * np.asarray(sigma, dtype=float))
    return drawn if cap is None else np.minimum(drawn, cap)
