"""What the pointings of a mission say of a position: whether any field holds it, how long, how far off its axis."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike

from xmatch.match.separation import separation_arcsec
from xmatch.records import Bools, Floats, Pointings

ARCSEC_PER_ARCMIN = 60.0


@dataclass(frozen=True)
class Exposed:
    """One pointing that holds the position."""

    key: str
    instrument: str
    start: str
    exposure_s: float
    off_axis_arcmin: float


def holds(pointings: Pointings, ra_deg: ArrayLike, dec_deg: ArrayLike) -> Bools:
    """Whether any field holds each position.

    Parameters
    ----------
    pointings : Pointings
        Axes and reach of the fields; may be empty.
    ra_deg, dec_deg : array_like
        ICRS degrees, one shape.

    Returns
    -------
    ndarray of bool
        Of that shape. A field is taken as a disc around its axis: gaps between detectors and bad pixels are not known
        to an observation log.
    """
    ra, dec = np.asarray(ra_deg, dtype=float), np.asarray(dec_deg, dtype=float)
    inside = np.zeros(np.broadcast_shapes(ra.shape, dec.shape), dtype=bool)
    for axis_ra, axis_dec, reach in zip(
        pointings.ra_deg, pointings.dec_deg, pointings.field_radius_arcmin, strict=True
    ):
        inside |= separation_arcsec(axis_ra, axis_dec, ra, dec) <= reach * ARCSEC_PER_ARCMIN
    return inside


def exposures(pointings: Pointings, ra_deg: float, dec_deg: float) -> tuple[Exposed, ...]:
    """The pointings whose field holds one position, the longest exposure first.

    Parameters
    ----------
    pointings : Pointings
        The mission's log around the position.
    ra_deg, dec_deg : float
        ICRS degrees.

    Returns
    -------
    tuple of Exposed
        Exposure in s and angle from the axis in arcmin; empty where no field holds it.
    """
    off: Floats = separation_arcsec(pointings.ra_deg, pointings.dec_deg, ra_deg, dec_deg) / ARCSEC_PER_ARCMIN
    found = [
        Exposed(
            pointings.key[i], pointings.instrument[i], pointings.start[i], float(pointings.exposure_s[i]), float(off[i])
        )
        for i in np.flatnonzero(off <= pointings.field_radius_arcmin)
    ]
    return tuple(sorted(found, key=lambda one: (-one.exposure_s, one.off_axis_arcmin, one.key)))
