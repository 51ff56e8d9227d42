"""Extended objects: whether the target lies inside a remnant, a cluster or an H II region, and how often that is chance."""

from __future__ import annotations

import numpy as np
from numpy.typing import ArrayLike

from xmatch.constants import ARCSEC2_PER_DEG2
from xmatch.errors import RangeError
from xmatch.match.ellipse import axes, covariance
from xmatch.records import Floats

RADII, ANGLES = 24, 48
"""Points of the quadrature over the error ellipse: the contained probability is good to 1e-3 (measured in the tests)."""


def contained_probability(
    east_arcsec: ArrayLike,
    north_arcsec: ArrayLike,
    semi_major_arcsec: ArrayLike,
    semi_minor_arcsec: ArrayLike,
    angle_deg: ArrayLike,
    target_covariance_arcsec2: tuple[float, float, float],
) -> Floats:
    """Probability that the target lies inside each object, its own position error considered.

    Parameters
    ----------
    east_arcsec, north_arcsec : array_like, shape (n,)
        Centres of the objects, relative to the target.
    semi_major_arcsec, semi_minor_arcsec : array_like, shape (n,)
        Semi-axes of the objects' outlines, arcsec, above 0; ``nan`` gives ``nan``.
    angle_deg : array_like, shape (n,)
        Position angle of the major axis, degrees east of north.
    target_covariance_arcsec2 : three float
        East, north and mixed covariance of the target.

    Raises
    ------
    RangeError
        When an axis is not positive.

    Notes
    -----
    The Gaussian of the target is cut into rings and sectors of equal probability, whose centres are tried (midpoint
    rule; definition). The outline is an ellipse: real remnants are not.
    """
    major, minor = np.asarray(semi_major_arcsec, dtype=float), np.asarray(semi_minor_arcsec, dtype=float)
    if np.any(major <= 0.0) or np.any(minor <= 0.0):
        raise RangeError("an outline with an axis of 0 or less is not allowed; treat the object as a point")
    a, b, angle = axes(*target_covariance_arcsec2)
    level = (np.arange(RADII) + 0.5) / RADII
    r, phi = np.sqrt(-2.0 * np.log1p(-level)), 2.0 * np.pi * (np.arange(ANGLES) + 0.5) / ANGLES
    along, across = np.outer(r, np.cos(phi)).ravel() * float(a), np.outer(r, np.sin(phi)).ravel() * float(b)
    turn = np.radians(float(angle))
    east = along * np.sin(turn) + across * np.cos(turn)
    north = along * np.cos(turn) - across * np.sin(turn)
    de = east - np.atleast_1d(np.asarray(east_arcsec, dtype=float))[:, None]
    dn = north - np.atleast_1d(np.asarray(north_arcsec, dtype=float))[:, None]
    return _inside(de, dn, major, minor, angle_deg)


def _inside(de: Floats, dn: Floats, major: Floats, minor: Floats, angle_deg: ArrayLike) -> Floats:
    xx, yy, xy = (np.atleast_1d(v)[:, None] for v in covariance(major, minor, angle_deg))
    inside = (de * de * yy - 2.0 * de * dn * xy + dn * dn * xx) <= xx * yy - xy * xy
    share = inside.mean(axis=1)
    return np.where(np.isfinite(np.broadcast_to(major * minor, share.shape)), share, np.nan)


def expected_containing(
    semi_major_arcsec: ArrayLike, semi_minor_arcsec: ArrayLike, area_deg2: float, margin_arcsec: float = 0.0
) -> float:
    """Unrelated objects expected to contain a position, from those listed in an area around it.

    Parameters
    ----------
    semi_major_arcsec, semi_minor_arcsec : array_like, shape (n,)
        Semi-axes of every object of the kind whose centre lies in the area; ``nan`` counts as a point.
    area_deg2 : float
        The area, above 0; it should be much wider than the objects.
    margin_arcsec : float
        Added to the semi-axes: the error radius within which containment would be accepted.

    Notes
    -----
    Number density times mean area: the share of the sky that such objects cover, overlaps counted twice. The chance of
    being inside at least one is 1 - exp(-mu) (:func:`xmatch.match.chance.chance_within`).

    Raises
    ------
    RangeError
        When the area is not positive.
    """
    if not area_deg2 > 0.0:
        raise RangeError(f"area {area_deg2} deg^2 is not allowed; it must be above 0")
    major = np.nan_to_num(np.asarray(semi_major_arcsec, dtype=float)) + margin_arcsec
    minor = np.nan_to_num(np.asarray(semi_minor_arcsec, dtype=float)) + margin_arcsec
    return float(np.pi * np.sum(major * minor) / ARCSEC2_PER_DEG2 / area_deg2)
