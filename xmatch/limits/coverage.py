"""Whether a catalog looked at a position: footprints by declination and Galactic box."""

from __future__ import annotations

import math
from collections.abc import Callable
from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike

from xmatch.match.ellipse import covariance
from xmatch.match.motion import move
from xmatch.match.separation import separation_arcsec
from xmatch.records import Bools, Floats, Position

# ICRS to Galactic: the IAU 1958 pole and node as fixed for ICRS in the Hipparcos and Tycho Catalogues,
# ESA SP-1200, vol. 1, eq. 1.5.11.
ICRS_TO_GALACTIC = np.array(
    [
        [-0.0548755604162154, -0.8734370902348850, -0.4838350155487132],
        [+0.4941094278755837, -0.4448296299600112, +0.7469822444972189],
        [-0.8676661490190047, -0.1980763734312015, +0.4559837761750669],
    ]
)
Contains = Callable[[Floats, Floats], Bools]
NEED_MORE = frozenset({"footprint", "pointed", "unstated"})
"""Kinds of coverage that the catalog file alone cannot decide."""
SECTORS = 8
RINGS, SPOKES = 24, 48
"""Equal-probability points that stand for the error region."""


@dataclass(frozen=True)
class Region:
    """A part of the sky. Every bound given must hold; ``outside`` inverts a Galactic box.

    Attributes
    ----------
    kind : str
        ``all sky``, ``declination``, ``galactic box``, ``footprint`` (a MOC that must be fetched first),
        ``pointed`` (an observation log must be asked), ``unstated`` (no map of it is
        published, only bounds) or ``compilation`` (whose absence proves nothing).
    dec_deg, l_deg, b_deg : tuple of float or None
        Inclusive bounds in degrees; an ``l`` interval may wrap through 0.
    """

    kind: str
    dec_deg: tuple[float, float] | None = None
    l_deg: tuple[float, float] | None = None
    b_deg: tuple[float, float] | None = None
    outside: bool = False
    source: str = ""
    moc: str = ""
    """Address of the footprint."""
    also: tuple[Region, ...] = ()
    """Further parts: a position inside any of them is inside."""

    def contains(self, ra_deg: ArrayLike, dec_deg: ArrayLike) -> Bools:
        """Whether positions (degrees) lie inside."""
        inside = self._own(ra_deg, dec_deg)
        for part in self.also:
            inside |= part.contains(ra_deg, dec_deg)
        return inside

    def _own(self, ra_deg: ArrayLike, dec_deg: ArrayLike) -> Bools:
        dec = np.asarray(dec_deg, dtype=float)
        inside = np.ones(np.broadcast_shapes(np.shape(ra_deg), dec.shape), dtype=bool)
        if self.dec_deg is not None:
            inside &= (dec >= self.dec_deg[0]) & (dec <= self.dec_deg[1])
        if self.l_deg is not None or self.b_deg is not None:
            gal_l, gal_b = icrs_to_galactic(ra_deg, dec)
            box = np.ones_like(inside)
            if self.l_deg is not None:
                low, high = self.l_deg
                box &= (gal_l >= low) & (gal_l <= high) if low <= high else (gal_l >= low) | (gal_l <= high)
            if self.b_deg is not None:
                box &= (gal_b >= self.b_deg[0]) & (gal_b <= self.b_deg[1])
            inside &= ~box if self.outside else box
        return inside


def icrs_to_galactic(ra_deg: ArrayLike, dec_deg: ArrayLike) -> tuple[Floats, Floats]:
    """Galactic longitude in [0, 360) and latitude, degrees (ESA SP-1200, vol. 1, 1.5.3)."""
    a, d = np.radians(np.asarray(ra_deg, dtype=float)), np.radians(np.asarray(dec_deg, dtype=float))
    vector = np.stack(np.broadcast_arrays(np.cos(d) * np.cos(a), np.cos(d) * np.sin(a), np.sin(d)))
    x, y, z = np.tensordot(ICRS_TO_GALACTIC, vector, axes=1)
    return np.degrees(np.arctan2(y, x)) % 360.0, np.degrees(np.arctan2(z, np.hypot(x, y)))


def error_points(position: Position, k: float) -> tuple[Floats, Floats]:
    """Deterministic points inside the k-sigma error ellipse, each standing for the same probability."""
    inside = -math.expm1(-0.5 * k * k)
    p = (np.arange(RINGS) + 0.5) / RINGS * inside
    r = np.sqrt(-2.0 * np.log1p(-p))[:, None]
    phi = 2.0 * np.pi * (np.arange(SPOKES)[None, :] + 0.25 + 0.5 * (np.arange(RINGS)[:, None] % 2)) / SPOKES
    u, v = (r * np.cos(phi)).ravel(), (r * np.sin(phi)).ravel()
    cxx, cyy, cxy = covariance(position.sigma_major_arcsec, position.sigma_minor_arcsec, position.angle_deg)
    sx = math.sqrt(float(cxx))
    low = float(cxy) / sx if sx > 0.0 else 0.0
    east, north = sx * u, low * u + math.sqrt(max(float(cyy) - low * low, 0.0)) * v
    return move(position.ra_deg, position.dec_deg, 1.0e3 * east, 1.0e3 * north, 1.0)


def covered_fraction(position: Position, region: Region, k: float, contains: Contains | None = None) -> float | None:
    """Fraction of the error region, by probability, that the catalog looked at.

    Parameters
    ----------
    position : Position
        Centre and error ellipse.
    region : Region
        The coverage that the catalog file states.
    k : float
        Size of the error region in sigma.
    contains : callable, optional
        For a ``footprint`` or ``pointed`` coverage: takes right ascensions and declinations (degrees, arrays) and says
        which are inside.

    Returns
    -------
    float or None
        From 0 to 1, by 1,152 points of equal probability; None where nothing says so: a compilation, a footprint that
        was not fetched, an observation log without an answer. Bounds stated beside such a coverage still hold: outside
        them it is 0.
    """
    if region.kind == "compilation":
        return None
    ra, dec = error_points(position, k)
    inside = region.contains(ra, dec)
    if region.kind in NEED_MORE and inside.any():
        if contains is None:
            return None
        inside = inside & contains(ra, dec)
    return float(np.mean(inside))


def sides_with_rows(
    position: Position, ra_deg: ArrayLike, dec_deg: ArrayLike, hole_arcsec: float, at_least: int
) -> int:
    """Of eight sectors around a position, how many hold enough rows: evidence that a catalog reaches here.

    Parameters
    ----------
    position : Position
        The centre.
    ra_deg, dec_deg : array_like
        Rows, ICRS degrees.
    hole_arcsec : float
        Rows nearer than this say nothing of the surroundings.
    at_least : int
        Rows that a sector must hold.

    Returns
    -------
    int
        0 to 8. All eight say that the edge of a survey does not run through here; for a sparse list they never fill.
    """
    ra, dec = np.asarray(ra_deg, dtype=float), np.asarray(dec_deg, dtype=float)
    distance = separation_arcsec(position.ra_deg, position.dec_deg, ra, dec)
    east = np.sin(np.radians(ra - position.ra_deg)) * np.cos(np.radians(dec))
    north = np.sin(np.radians(dec - position.dec_deg))
    sector = np.floor(np.degrees(np.arctan2(east, north)) % 360.0 / 360.0 * SECTORS).astype(int) % SECTORS
    counts = np.bincount(sector[distance > hole_arcsec], minlength=SECTORS)
    return int(np.count_nonzero(counts >= at_least))


def touches(ra_deg: float, dec_deg: float, radius_arcsec: float, region: Region) -> bool:
    """Whether a cone may hold rows of the region; errs on the side of yes."""
    if any(touches(ra_deg, dec_deg, radius_arcsec, part) for part in region.also):
        return True
    r = radius_arcsec / 3600.0
    if region.dec_deg is not None and not region.dec_deg[0] - r <= dec_deg <= region.dec_deg[1] + r:
        return False
    if region.l_deg is None and region.b_deg is None:
        return True
    gal_l, gal_b = (float(v) for v in icrs_to_galactic(ra_deg, dec_deg))
    if region.outside:
        if region.b_deg is None or region.l_deg is not None:
            return True
        return gal_b - r < region.b_deg[0] or gal_b + r > region.b_deg[1]
    if region.b_deg is not None and not region.b_deg[0] - r <= gal_b <= region.b_deg[1] + r:
        return False
    if region.l_deg is not None:
        if abs(gal_b) + r >= 89.0:  # near a Galactic pole every longitude is close
            return True
        reach = math.degrees(math.asin(min(1.0, math.sin(math.radians(r)) / math.cos(math.radians(gal_b)))))
        low, high = region.l_deg
        width = (high - low) % 360.0 if (high - low) % 360.0 else 360.0
        return (gal_l - low + reach) % 360.0 <= width + 2.0 * reach or width + 2.0 * reach >= 360.0
    return True
