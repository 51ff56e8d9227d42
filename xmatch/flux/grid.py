"""Luminosity limits over distance and column, kept in factors; and every luminosity under a name of its own."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike

from xmatch.errors import RangeError
from xmatch.flux.absorption import transmitted_fraction
from xmatch.flux.distance import k_factor_density
from xmatch.flux.luminosity import luminosity_density_erg_s_hz, luminosity_erg_s, pseudo_luminosity_mjy_kpc2, sphere_cm2
from xmatch.flux.spectra import Spectrum, radio_band_flux_cgs
from xmatch.records import Floats


@dataclass(frozen=True)
class LimitGrid:
    """Luminosity limits = flux x 4 pi d^2 / transmitted fraction, in factors: of 1e8 values a few 1e5 numbers are kept.

    Attributes
    ----------
    flux_cgs : ndarray, shape (n,)
        Observed band fluxes, erg s^-1 cm^-2.
    sphere_cm2 : ndarray, shape (d,)
        4 pi d^2.
    through : ndarray, shape (c,)
        Transmitted fraction of each column; ``nan`` where the band is blind, and so is every luminosity there.
    """

    flux_cgs: Floats
    sphere_cm2: Floats
    through: Floats

    @property
    def shape(self) -> tuple[int, int, int]:
        """(limits, distances, columns)."""
        return len(self.flux_cgs), len(self.sphere_cm2), len(self.through)

    def expanded(self, limits: slice = slice(None), out: Floats | None = None) -> Floats:
        """Luminosities of some limits or all, erg s^-1, shape (limits, distances, columns).

        Parameters
        ----------
        limits : slice
            Which; all unless told.
        out : ndarray, optional
            A ready buffer of that shape, which saves asking for the memory.
        """
        line_of_sight = np.multiply.outer(self.sphere_cm2, 1.0 / self.through)
        return np.multiply(self.flux_cgs[limits, None, None], line_of_sight, out=out)

    def at(self, limit: ArrayLike, distance: ArrayLike, column: ArrayLike) -> Floats:
        """Luminosities at indices that broadcast together, erg s^-1."""
        through = self.through[np.asarray(column)]
        return np.asarray(self.flux_cgs[np.asarray(limit)] * self.sphere_cm2[np.asarray(distance)] / through)


def limit_grid(
    flux_cgs: ArrayLike,
    dist_pc: ArrayLike,
    column_cm2: ArrayLike,
    spectrum: Spectrum,
    band_kev: tuple[float, float],
    blind_below: float,
) -> LimitGrid:
    """The grid of X-ray limits of one band, by one spectrum.

    Parameters
    ----------
    flux_cgs, dist_pc, column_cm2 : array_like
        One-dimensional; each axis of the grid.
    spectrum : Spectrum
    band_kev : tuple of float
        Within 0.1-20 keV.
    blind_below : float
        Transmitted fraction below which the band is blind, (0, 1].
    """
    if not 0.0 < blind_below <= 1.0:
        raise RangeError(f"floor {blind_below} of the transmitted fraction is not allowed; it must be in (0, 1]")
    through = transmitted_fraction(spectrum, *band_kev, np.atleast_1d(np.asarray(column_cm2, dtype=float)))
    return LimitGrid(
        flux_cgs=np.atleast_1d(np.asarray(flux_cgs, dtype=float)),
        sphere_cm2=sphere_cm2(np.atleast_1d(np.asarray(dist_pc, dtype=float))),
        through=np.where(through >= blind_below, through, np.nan),
    )


def band_luminosities(
    flux_cgs: ArrayLike, dist_pc: ArrayLike, *, beam_fraction: float, k_factor: float = 1.0
) -> dict[str, Floats]:
    """Luminosities of a band flux (corrected for absorption), each under its own name.

    Parameters
    ----------
    flux_cgs, dist_pc : array_like
        They broadcast. With a redshift the distance is the luminosity distance.
    beam_fraction : float
        Omega / 4 pi, in (0, 1].
    k_factor : float
        K-correction to the same band in the rest frame (:func:`xmatch.flux.distance.k_factor_shape`).

    Returns
    -------
    dict
        ``band_isotropic_erg_s``: 4 pi d^2 F; ``band_beamed_erg_s``: the same times the beam fraction.
    """
    isotropic = luminosity_erg_s(flux_cgs, dist_pc) * k_factor
    return {"band_isotropic_erg_s": isotropic, "band_beamed_erg_s": isotropic * _beam(beam_fraction)}


def density_luminosities(
    flux_jy: ArrayLike,
    nu_hz: float,
    dist_pc: ArrayLike,
    *,
    index: float,
    band_hz: tuple[float, float] | None = None,
    beam_fraction: float = 1.0,
    duty_cycle: float | None = None,
    z: float = 0.0,
) -> dict[str, Floats]:
    """Luminosities of a flux density, each under its own name: none of them is "the luminosity".

    Parameters
    ----------
    flux_jy, dist_pc : array_like
        They broadcast.
    nu_hz : float
        Where the flux density was measured.
    index : float
        S ~ nu^index, for the integral over ``band_hz`` and the K-correction.
    band_hz : tuple of float, optional
        For the luminosity integrated over the assumed spectrum.
    beam_fraction : float
        Omega / 4 pi, in (0, 1].
    duty_cycle : float, optional
        Width over period, in (0, 1], when ``flux_jy`` is the peak of a pulse: period averages are then added.
    z : float
        Redshift.

    Returns
    -------
    dict
        ``density_isotropic_erg_s_hz`` (L_nu, with 4 pi), ``nu_density_isotropic_erg_s`` (nu L_nu),
        ``pseudo_mjy_kpc2`` (S d^2, without 4 pi), ``integrated_isotropic_erg_s`` and ``integrated_beamed_erg_s``; with a
        duty cycle the names begin with ``peak_`` and each has an ``average_`` beside it.
    """
    jy = np.asarray(flux_jy, dtype=float)
    k = k_factor_density(z, index)
    density = luminosity_density_erg_s_hz(jy, dist_pc) * k
    found = {
        "density_isotropic_erg_s_hz": density,
        "nu_density_isotropic_erg_s": density * nu_hz,
        "pseudo_mjy_kpc2": pseudo_luminosity_mjy_kpc2(jy, dist_pc),
    }
    if band_hz is not None:
        integrated = luminosity_erg_s(radio_band_flux_cgs(jy, nu_hz, index, *band_hz), dist_pc) * k
        found["integrated_isotropic_erg_s"] = integrated
        found["integrated_beamed_erg_s"] = integrated * _beam(beam_fraction)
    if duty_cycle is None:
        return found
    if not 0.0 < duty_cycle <= 1.0:
        raise RangeError(f"duty cycle {duty_cycle} is not allowed; width over period must be in (0, 1]")
    return {
        f"{when}_{name}": value * factor
        for name, value in found.items()
        for when, factor in (("peak", 1.0), ("average", duty_cycle))
    }


def pulsar_luminosity_erg_s(
    mean_jy: ArrayLike,
    nu_hz: float,
    dist_pc: ArrayLike,
    *,
    index: float,
    band_hz: tuple[float, float],
    duty_cycle: float,
    cone_rad: float,
) -> Floats:
    """Radio luminosity of a pulsar whose beam is a cone: 4 pi d^2 / duty x sin^2(rho/2) x integral of the mean spectrum.

    Parameters
    ----------
    mean_jy : array_like
        Period-averaged flux density at ``nu_hz``, Jy.
    duty_cycle : float
        Equivalent width over period, (0, 1].
    cone_rad : float
        Half opening angle rho of the cone, (0, pi].

    References
    ----------
    Lorimer & Kramer 2004, Handbook of Pulsar Astronomy, section 3.4.
    """
    if not (0.0 < duty_cycle <= 1.0 and 0.0 < cone_rad <= np.pi):
        raise RangeError(f"duty cycle {duty_cycle}, cone {cone_rad} rad is not allowed; (0, 1] and (0, pi] are needed")
    return (
        luminosity_erg_s(radio_band_flux_cgs(mean_jy, nu_hz, index, *band_hz), dist_pc)
        * np.sin(0.5 * cone_rad) ** 2
        / duty_cycle
    )


def _beam(fraction: float) -> float:
    if not 0.0 < fraction <= 1.0:
        raise RangeError(f"beam fraction {fraction} is not allowed; Omega / 4 pi lies in (0, 1]")
    return fraction
