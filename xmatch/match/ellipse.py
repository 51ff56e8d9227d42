"""Error ellipses as covariances on the tangent plane (x east, y north, arcsec)."""

from __future__ import annotations

import numpy as np
from numpy.typing import ArrayLike

from xmatch.errors import RangeError
from xmatch.records import Floats


def covariance(major_arcsec: ArrayLike, minor_arcsec: ArrayLike, angle_deg: ArrayLike) -> tuple[Floats, Floats, Floats]:
    """Covariance of a one-sigma ellipse.

    Parameters
    ----------
    major_arcsec, minor_arcsec : array_like
        One-sigma semi-axes, arcsec, any broadcastable shape.
    angle_deg : array_like
        Position angle of the major axis, degrees east of north.

    Returns
    -------
    cxx, cyy, cxy : ndarray
        Variance along east, variance along north, covariance; arcsec^2. ``nan`` passes through.

    Notes
    -----
    Rotation of a diagonal covariance (definition).
    """
    a2 = np.square(np.asarray(major_arcsec, dtype=float))
    b2 = np.square(np.asarray(minor_arcsec, dtype=float))
    angle = np.radians(np.asarray(angle_deg, dtype=float))
    sin, cos = np.sin(angle), np.cos(angle)
    return a2 * sin**2 + b2 * cos**2, a2 * cos**2 + b2 * sin**2, (a2 - b2) * sin * cos


def axes(cxx: ArrayLike, cyy: ArrayLike, cxy: ArrayLike) -> tuple[Floats, Floats, Floats]:
    """One-sigma semi-axes and position angle of a covariance.

    Parameters
    ----------
    cxx, cyy, cxy : array_like
        Covariance, arcsec^2.

    Returns
    -------
    major_arcsec, minor_arcsec, angle_deg : ndarray
        Angle in [0, 180), degrees east of north.

    Notes
    -----
    Eigenvalues of a symmetric 2 x 2 matrix (definition).
    """
    cxx, cyy, cxy = (np.asarray(value, dtype=float) for value in (cxx, cyy, cxy))
    mean, half = 0.5 * (cxx + cyy), 0.5 * (cyy - cxx)
    root = np.hypot(half, cxy)
    major = np.sqrt(np.maximum(mean + root, 0.0))
    minor = np.sqrt(np.maximum(mean - root, 0.0))
    return major, minor, np.degrees(0.5 * np.arctan2(2.0 * cxy, 2.0 * half)) % 180.0


def radius_factor(level: ArrayLike) -> Floats:
    """Radius that holds a fraction of a round 2-D Gaussian, over the per-axis sigma.

    Parameters
    ----------
    level : array_like
        Contained fraction, 0 < level < 1.

    Raises
    ------
    RangeError
        When a level lies outside (0, 1).

    Notes
    -----
    Rayleigh distribution: r = sigma sqrt(-2 ln(1 - level)).
    """
    level = np.asarray(level, dtype=float)
    if not np.all((level > 0.0) & (level < 1.0)):
        raise RangeError(f"containment level {level} is not allowed; give a fraction between 0 and 1, such as 0.9")
    return np.sqrt(-2.0 * np.log1p(-level))


def sigma_from_radius(radius_arcsec: ArrayLike, level: ArrayLike) -> Floats:
    """Per-axis sigma of a round error whose radius holds the fraction ``level`` (Rayleigh distribution)."""
    return np.asarray(radius_arcsec, dtype=float) / radius_factor(level)


def sigma_from_radial(radial_arcsec: ArrayLike) -> Floats:
    """Per-axis sigma of a radial error sqrt(sigma_ra^2 + sigma_dec^2) (definition)."""
    return np.asarray(radial_arcsec, dtype=float) / np.sqrt(2.0)
