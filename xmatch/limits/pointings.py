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


def exposure_factor(
    exposure_s: ArrayLike,
    off_axis_arcmin: ArrayLike,
    reference_s: float,
    field_radius_arcmin: float,
    vignetting_at_edge: float,
) -> tuple[Floats, Floats]:
    """How a depth on the axis in a reference exposure changes with exposure and angle.

    Parameters
    ----------
    exposure_s, off_axis_arcmin : array_like
        Exposure in s, above 0, and angle from the axis in arcmin, 0 to the reach of the field.
    reference_s : float
        Exposure for which the depth is stated, in s.
    field_radius_arcmin : float
        Reach of the field, in arcmin.
    vignetting_at_edge : float
        Part of the effective area that is left at the edge of the field, above 0 to 1.

    Returns
    -------
    factor : ndarray
        What the faintest detectable flux on the axis is multiplied by.
    effective_s : ndarray
        Exposure times vignetting, in s.

    Notes
    -----
    Between the two limits of counting: where the background decides, the faintest flux falls with the square root of the
    exposure; where a source needs a number of counts, with the exposure itself (definition of a Poisson threshold). Which
    holds is not known to a log, so the pessimistic one is taken: the square root beyond the reference exposure, the
    exposure itself below it. Vignetting is taken as linear in the angle (common practice, no source).
    """
    exposure, off = np.asarray(exposure_s, dtype=float), np.asarray(off_axis_arcmin, dtype=float)
    seen = 1.0 - (1.0 - vignetting_at_edge) * np.clip(off / field_radius_arcmin, 0.0, 1.0)
    effective = exposure * seen
    ratio = effective / reference_s
    return np.where(ratio >= 1.0, ratio**-0.5, 1.0 / ratio), effective
