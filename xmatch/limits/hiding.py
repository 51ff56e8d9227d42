"""Neighbours that hide: what a bright source nearby leaves visible at the position."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
from numpy.typing import ArrayLike

from xmatch.assumptions import Assumptions
from xmatch.constants import ARCSEC2_PER_DEG2
from xmatch.errors import RangeError
from xmatch.records import Floats, Limit, Quantity

MOFFAT_BETA = 2.5
"""Wing exponent of the point-spread profile (Moffat 1969, A&A 3, 455; value common practice)."""


def profile(separation_arcsec: ArrayLike, fwhm_arcsec: float) -> Floats:
    """Moffat profile over its peak: (1 + (r/alpha)^2)^-beta (Moffat 1969, A&A 3, 455)."""
    if not fwhm_arcsec > 0.0:
        raise RangeError(f"FWHM {fwhm_arcsec} arcsec is not allowed; it must be above 0")
    alpha = fwhm_arcsec / (2.0 * np.sqrt(2.0 ** (1.0 / MOFFAT_BETA) - 1.0))
    return (1.0 + np.square(np.asarray(separation_arcsec, dtype=float) / alpha)) ** -MOFFAT_BETA


def hidden_flux(
    neighbour_flux: ArrayLike, separation_arcsec: ArrayLike, fwhm_arcsec: float, *, residual: float, deblend: float
) -> Floats:
    """Flux below which a source at the position cannot be told from each neighbour, in the neighbour's unit.

    Parameters
    ----------
    neighbour_flux, separation_arcsec : array_like
        Flux (any linear unit) and separation of the neighbours.
    fwhm_arcsec : float
        Width of the point-spread function, > 0.
    residual : float
        Part of a neighbour's light that is left after it is modelled.
    deblend : float
        Separation, in FWHM, inside which two sources are listed as one.

    Notes
    -----
    The neighbour's own flux inside the deblending radius, residual x profile x flux outside (common practice, no source).
    """
    flux, r = np.asarray(neighbour_flux, dtype=float), np.asarray(separation_arcsec, dtype=float)
    return np.where(r < deblend * fwhm_arcsec, flux, residual * profile(r, fwhm_arcsec) * flux)


def radio_floor(neighbour_flux: ArrayLike, dynamic_range: float) -> Floats:
    """Flux below which the sidelobes of each neighbour hide a source: S / DR, same unit (definition of dynamic range)."""
    if not dynamic_range > 1.0:
        raise RangeError(f"dynamic range {dynamic_range} is not allowed; it must be above 1")
    return np.asarray(neighbour_flux, dtype=float) / dynamic_range


def beams_per_source(beam_fwhm_arcsec: ArrayLike, density_per_deg2: ArrayLike) -> Floats:
    """Gaussian beams per source; fewer than 20 to 30 mean confusion (Condon 1974, ApJ 188, 279; the number is common practice)."""
    fwhm, density = np.asarray(beam_fwhm_arcsec, dtype=float), np.asarray(density_per_deg2, dtype=float)
    if not np.all(fwhm > 0.0) or not np.all(density > 0.0):
        raise RangeError(f"beam {beam_fwhm_arcsec} arcsec and density {density_per_deg2} must both be above 0")
    solid = np.pi * np.square(fwhm) / (4.0 * np.log(2.0))
    return ARCSEC2_PER_DEG2 / (solid * density)


def raise_limit(
    limit: Limit,
    neighbour_values: Floats,
    separations_arcsec: Floats,
    fwhm_arcsec: float,
    assumptions: Assumptions,
) -> tuple[Limit, bool]:
    """Raise a limit to what the worst neighbour leaves visible.

    Parameters
    ----------
    limit : Limit
        In the band's own unit.
    neighbour_values : ndarray
        Neighbours in the same unit; ``nan`` hides nothing.
    separations_arcsec : ndarray
        Their separations from the position.
    fwhm_arcsec : float
        0 means unknown: nothing is raised.
    assumptions : Assumptions
        Residual and deblending radius.

    Returns
    -------
    Limit, bool
        The limit, and whether it was raised.
    """
    if fwhm_arcsec <= 0.0 or not len(neighbour_values):
        return limit, False
    magnitude = limit.band.quantity is Quantity.MAGNITUDE
    flux = 10.0 ** (-0.4 * neighbour_values) if magnitude else neighbour_values
    hidden = hidden_flux(
        np.nan_to_num(flux), separations_arcsec, fwhm_arcsec,
        residual=assumptions.halo_residual, deblend=assumptions.deblend_fwhm,
    )  # fmt: skip
    worst = int(np.argmax(hidden))
    own = 10.0 ** (-0.4 * limit.value) if magnitude else limit.value
    if not hidden[worst] > own:
        return limit, False
    factor = float(hidden[worst] / own)
    value = float(-2.5 * np.log10(hidden[worst])) if magnitude else float(hidden[worst])
    by = f"a neighbour of {neighbour_values[worst]:.4g} {limit.band.unit} at {separations_arcsec[worst]:.1f} arcsec"
    flag = f"raised {factor:.3g} times by a neighbour"
    return (
        replace(
            limit,
            value=value,
            flag="; ".join(part for part in (limit.flag, flag) if part),
            note=f"{limit.note}; raised {factor:.3g} times by {by}",
        ),
        True,
    )
