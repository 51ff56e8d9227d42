"""Separations on the sphere and on the tangent plane, right across RA 0/360 and at the poles."""

from __future__ import annotations

import numpy as np
from numpy.typing import ArrayLike

from xmatch.constants import ARCSEC_RAD
from xmatch.records import Floats


def separation_arcsec(ra0_deg: ArrayLike, dec0_deg: ArrayLike, ra_deg: ArrayLike, dec_deg: ArrayLike) -> Floats:
    """Great-circle separation, arcsec (Vincenty 1975, Survey Review 23, 88; spherical case).

    Parameters
    ----------
    ra0_deg, dec0_deg, ra_deg, dec_deg : array_like
        Two sets of positions, degrees, broadcastable. ``nan`` passes through.
    """
    a0, d0, a, d = (np.radians(np.asarray(v, dtype=float)) for v in (ra0_deg, dec0_deg, ra_deg, dec_deg))
    da = a - a0
    across = np.hypot(np.cos(d) * np.sin(da), np.cos(d0) * np.sin(d) - np.sin(d0) * np.cos(d) * np.cos(da))
    along = np.sin(d0) * np.sin(d) + np.cos(d0) * np.cos(d) * np.cos(da)
    return np.arctan2(across, along) / ARCSEC_RAD


def offsets_arcsec(
    ra0_deg: ArrayLike, dec0_deg: ArrayLike, ra_deg: ArrayLike, dec_deg: ArrayLike
) -> tuple[Floats, Floats]:
    """East and north offsets on the tangent plane at (ra0, dec0), arcsec.

    Notes
    -----
    Zenithal equidistant: the length is the great-circle separation and the direction its position angle at the
    centre, so that offsets stay finite anywhere on the sky (Calabretta & Greisen 2002, A&A 395, 1077, ARC).
    """
    a0, d0, a, d = (np.radians(np.asarray(v, dtype=float)) for v in (ra0_deg, dec0_deg, ra_deg, dec_deg))
    da = a - a0
    east = np.cos(d) * np.sin(da)
    north = np.cos(d0) * np.sin(d) - np.sin(d0) * np.cos(d) * np.cos(da)
    length = np.hypot(east, north)
    r = separation_arcsec(ra0_deg, dec0_deg, ra_deg, dec_deg)
    scale = np.where(length > 0.0, r / np.where(length > 0.0, length, 1.0), 1.0 / ARCSEC_RAD)
    return east * scale, north * scale


def normalised(east: ArrayLike, north: ArrayLike, cxx: ArrayLike, cyy: ArrayLike, cxy: ArrayLike) -> Floats:
    """Normalised separation sqrt(d^T C^-1 d) (Mahalanobis 1936); ``nan`` where the covariance is singular."""
    e, n, xx, yy, xy = (np.asarray(v, dtype=float) for v in (east, north, cxx, cyy, cxy))
    det = xx * yy - xy**2
    with np.errstate(divide="ignore", invalid="ignore"):
        square = (e * e * yy - 2.0 * e * n * xy + n * n * xx) / det
    return np.sqrt(np.where(det > 0.0, np.maximum(square, 0.0), np.nan))


def tail(separation: ArrayLike) -> Floats:
    """Probability that a true match lies at least this normalised separation out: exp(-D^2/2) (Rayleigh)."""
    return np.exp(-0.5 * np.square(np.asarray(separation, dtype=float)))
