"""Many targets at once: every target's neighbourhood rows weighed in one pass.

The same numbers as :func:`xmatch.match.decide.weigh` gives one target at a time, for catalogs of one epoch and without
brightness. Work runs over blocks that stay in the processor's cache; memory beyond the answer is one block.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike, NDArray

from xmatch.constants import ARCSEC_RAD
from xmatch.errors import RangeError
from xmatch.match.separation import offsets_arcsec
from xmatch.records import Floats

BLOCK_ROWS = 16_384
"""Rows worked on at a time: some twenty arrays of them fit into the second-level cache (measured)."""
SMALL_RAD = 0.02
"""Offsets up to this (1.1 deg) use a series, whose error is below 1e-8 of the offset (computed)."""
POLE_RAD = 1.45
"""Beyond this declination (83 deg) right ascensions run too far apart for the series."""


@dataclass(frozen=True)
class Many:
    """Weighed rows of many targets. ``n`` rows in all, ``t`` targets."""

    normalised: Floats
    """shape (n,)"""
    chance: Floats
    """Probability of an unrelated row at least as close, shape (n,)."""
    odds: Floats
    """Posterior probability of being the counterpart, all rows of the target considered, shape (n,)."""
    none_listed: Floats
    """shape (t,)"""
    density_per_arcsec2: Floats
    """From the ring of each target; that of one row where the ring is empty; shape (t,)."""


def weigh_many(
    ra_deg: ArrayLike,
    dec_deg: ArrayLike,
    covariance_arcsec2: tuple[ArrayLike, ArrayLike, ArrayLike],
    start: NDArray[np.intp],
    row_ra_deg: Floats,
    row_dec_deg: Floats,
    row_covariance_arcsec2: tuple[Floats, Floats, Floats],
    *,
    radius_arcsec: float,
    inner_arcsec: float,
    listed_fraction: float,
    frame_sigma_arcsec: float = 0.0,
    heavy_tail: float = 0.0,
) -> Many:
    """Weigh the neighbourhood rows of many targets.

    Parameters
    ----------
    ra_deg, dec_deg : array_like, shape (t,)
        Targets, ICRS degrees.
    covariance_arcsec2 : three array_like, shape (t,)
        East, north and mixed covariance of each target.
    start : ndarray of int, shape (t + 1,)
        Rows ``start[i]:start[i + 1]`` are the neighbourhood of target i; a target may have none.
    row_ra_deg, row_dec_deg : ndarray, shape (n,)
        Rows at the targets' epoch, degrees. ``nan`` is not allowed: rows without a position stay at the door.
    row_covariance_arcsec2 : three ndarray, shape (n,)
        Their covariances, motion terms included.
    radius_arcsec, inner_arcsec : float
        The ring between them gives each target's density; the cone ends at the outer.
    listed_fraction : float
        Prior that the catalog lists the counterpart, between 0 and 1.
    frame_sigma_arcsec : float
        Alignment error, added per axis.
    heavy_tail : float
        Share of matches with a wrong error, spread over the cone.

    Returns
    -------
    Many

    Raises
    ------
    RangeError
        When the shapes do not fit, or a number lies outside its range.

    Notes
    -----
    Posterior of Sutherland & Saunders 1992, MNRAS 259, 413; the Gaussian is that of the added covariances. Offsets are
    zenithal equidistant to third order in the separation, which the tests hold against
    :func:`xmatch.match.separation.offsets_arcsec`.
    """
    ra, dec = (
        np.atleast_1d(np.radians(np.asarray(ra_deg, float))),
        np.atleast_1d(np.radians(np.asarray(dec_deg, float))),
    )
    first = np.asarray(start, dtype=np.intp)
    n, t = len(row_ra_deg), len(ra)
    if len(first) != t + 1 or first[0] != 0 or first[-1] != n or np.any(np.diff(first) < 0):
        raise RangeError(f"starts of {t} targets over {n} rows do not fit; give {t + 1} rising numbers from 0 to {n}")
    if not 0.0 < inner_arcsec < radius_arcsec or not 0.0 < listed_fraction < 1.0 or not 0.0 <= heavy_tail < 1.0:
        raise RangeError(
            f"inner radius {inner_arcsec}, radius {radius_arcsec}, listed fraction {listed_fraction}, heavy tail "
            f"{heavy_tail} are not allowed; radii rise from above 0, shares lie between 0 and 1"
        )
    target = np.stack([np.broadcast_to(np.asarray(v, dtype=float), (t,)) for v in covariance_arcsec2])
    target[:2] += frame_sigma_arcsec**2
    out = Many(np.empty(n), np.empty(n), np.empty(n), np.empty(t), np.empty(t))
    ring_arcsec2 = np.pi * (radius_arcsec**2 - inner_arcsec**2)
    tail_per_arcsec2 = heavy_tail / (np.pi * radius_arcsec**2)
    for lo, hi in _blocks(first):
        a, b = int(first[lo]), int(first[hi])
        count = np.diff(first[lo : hi + 1])
        which = np.repeat(np.arange(hi - lo), count)
        east, north = _offsets(ra[lo:hi], dec[lo:hi], which, row_ra_deg[a:b], row_dec_deg[a:b])
        xx, yy, xy = (target[c, lo:hi][which] + row_covariance_arcsec2[c][a:b] for c in range(3))
        det = xx * yy
        det -= xy * xy
        if not np.all(det > 0.0):
            raise RangeError("a row without a position error cannot be weighed; give every catalog a floor above 0")
        e2, n2 = east * east, north * north
        square = e2 * yy
        square += n2 * xx
        east *= north
        east *= xy
        square -= 2.0 * east
        square /= det
        e2 += n2
        in_ring = (e2 > inner_arcsec**2) & (e2 <= radius_arcsec**2)
        density = np.maximum(np.bincount(which[in_ring], minlength=hi - lo), 1) / ring_arcsec2
        root = np.sqrt(det, out=det)
        rho = density[which]
        np.sqrt(square, out=out.normalised[a:b])
        # density of matches over that of unrelated rows
        ratio = np.exp(-0.5 * square)
        ratio *= (1.0 - heavy_tail) * listed_fraction / (2.0 * np.pi)
        ratio /= root
        ratio += listed_fraction * tail_per_arcsec2
        ratio /= rho
        rho *= -np.pi
        rho *= square
        rho *= root
        np.negative(np.expm1(rho, out=rho), out=out.chance[a:b])
        total = np.bincount(which, weights=ratio, minlength=hi - lo) + (1.0 - listed_fraction)
        out.none_listed[lo:hi] = (1.0 - listed_fraction) / total
        np.divide(ratio, total[which], out=out.odds[a:b])
        out.density_per_arcsec2[lo:hi] = density
    return out


def _blocks(first: NDArray[np.intp]) -> list[tuple[int, int]]:
    """Ranges of targets with about one block of rows each; a target is never cut."""
    blocks, lo, t = [], 0, len(first) - 1
    while lo < t:
        hi = int(np.searchsorted(first, first[lo] + BLOCK_ROWS, side="right")) - 1
        hi = min(max(hi, lo + 1), t, lo + BLOCK_ROWS)
        blocks.append((lo, hi))
        lo = hi
    return blocks


def _offsets(
    ra: Floats, dec: Floats, which: NDArray[np.intp], row_ra_deg: Floats, row_dec_deg: Floats
) -> tuple[Floats, Floats]:
    """East and north offsets, arcsec: trigonometry once a target, a series once a row."""
    da = row_ra_deg * (np.pi / 180.0)
    da -= ra[which]
    dd = row_dec_deg * (np.pi / 180.0)
    dd -= dec[which]
    np.subtract(da, 2.0 * np.pi, out=da, where=da > np.pi)
    np.add(da, 2.0 * np.pi, out=da, where=da < -np.pi)
    if (
        np.abs(dec).max() > POLE_RAD
        or max(float(np.abs(da).max(initial=0.0)), float(np.abs(dd).max(initial=0.0))) > SMALL_RAD
    ):
        return offsets_arcsec(np.degrees(ra)[which], np.degrees(dec)[which], row_ra_deg, row_dec_deg)
    sin0, cos0 = np.sin(dec)[which], np.cos(dec)[which]
    a2, d2 = da * da, dd * dd
    cos_d = cos0 * (1.0 - d2 * (0.5 - d2 / 24.0)) - sin0 * dd * (1.0 - d2 / 6.0)
    east = cos_d * da * (1.0 - a2 * (1.0 / 6.0 - a2 / 120.0))
    # sin(d) cos(d0) - cos(d) sin(d0) cos(da) = sin(d - d0) + cos(d) sin(d0) (1 - cos(da))
    north = dd * (1.0 - d2 * (1.0 / 6.0 - d2 / 120.0)) + cos_d * sin0 * a2 * (0.5 - a2 / 24.0)
    s2 = east * east + north * north  # sine of the separation, squared
    scale = (1.0 + s2 * (1.0 / 6.0 + s2 * (3.0 / 40.0))) / ARCSEC_RAD
    east *= scale
    north *= scale
    return east, north
