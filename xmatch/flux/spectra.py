"""Spectra that are assumed when a band says too little: power law, blackbody, bremsstrahlung, radio power law."""

from __future__ import annotations

from dataclasses import dataclass
from functools import lru_cache
from typing import Protocol

import numpy as np
from numpy.typing import ArrayLike

from xmatch.constants import JY_CGS, KEV_ERG, KEV_HZ, KEV_K, SIGMA_SB_CGS
from xmatch.errors import RangeError
from xmatch.records import Floats

SERIES_BELOW = 1.0e-6
"""Where the power of an integral is this close to zero its series is used (relative error below 1e-12)."""
NODES = 64
"""Gauss-Legendre nodes of a smooth band integral."""


class Spectrum(Protocol):
    """A photon spectrum shape with its own normalisation of 1."""

    def energy_flux(self, e_kev: ArrayLike) -> Floats:
        """E N(E), in units of the normalisation."""
        ...

    def band_integral(self, low_kev: ArrayLike, high_kev: ArrayLike) -> Floats:
        """Integral of E N(E) over a band."""
        ...


def band_of(low: ArrayLike, high: ArrayLike) -> tuple[Floats, Floats]:
    """Both edges as arrays, checked: 0 < low < high, else RangeError."""
    a, b = np.asarray(low, dtype=float), np.asarray(high, dtype=float)
    if np.any(~(a > 0.0)) or np.any(~(b > a)):
        raise RangeError(f"band {low} to {high} is not allowed; 0 < low < high is needed")
    return a, b


def power_integral(low: ArrayLike, high: ArrayLike, exponent: ArrayLike) -> Floats:
    """Integral of x^(exponent - 1) between two positive bounds, smooth through exponent 0 (ln(high/low))."""
    a, b = band_of(low, high)
    p = np.asarray(exponent, dtype=float)
    log = np.log(b / a)
    small = np.abs(p * log) < SERIES_BELOW
    safe = np.where(small, 1.0, p)
    return a**p * np.where(small, log * (1.0 + 0.5 * p * log), np.expm1(safe * log) / safe)


def _temperature(kt_kev: float) -> None:
    if not 0.0 < kt_kev < np.inf:
        raise RangeError(f"temperature {kt_kev} keV is not allowed; it must be above 0 and finite")


@dataclass(frozen=True)
class PowerLaw:
    """N(E) = (E / 1 keV)^-index photons cm^-2 s^-1 keV^-1."""

    photon_index: float

    def __post_init__(self) -> None:
        if not np.isfinite(self.photon_index):
            raise RangeError(f"photon index {self.photon_index} is not allowed; it must be a finite number")

    def energy_flux(self, e_kev: ArrayLike) -> Floats:
        """E N(E), keV cm^-2 s^-1 keV^-1."""
        return np.asarray(e_kev, dtype=float) ** (1.0 - self.photon_index)

    def band_integral(self, low_kev: ArrayLike, high_kev: ArrayLike) -> Floats:
        """Energy flux in the band, keV cm^-2 s^-1; exact at index 2."""
        return power_integral(low_kev, high_kev, 2.0 - self.photon_index)


@dataclass(frozen=True)
class Blackbody:
    """N(E) ~ E^2 / (exp(E/kT) - 1) (Planck)."""

    kt_kev: float

    def __post_init__(self) -> None:
        _temperature(self.kt_kev)

    def energy_flux(self, e_kev: ArrayLike) -> Floats:
        """E N(E) up to a constant."""
        x = np.asarray(e_kev, dtype=float) / self.kt_kev
        return x**3 / np.expm1(np.minimum(x, 700.0))

    def band_integral(self, low_kev: ArrayLike, high_kev: ArrayLike) -> Floats:
        """Energy flux in the band up to the constant of :meth:`energy_flux`; all energies give kT pi^4 / 15."""
        return _quadrature(self, low_kev, high_kev)


@dataclass(frozen=True)
class ThermalBremsstrahlung:
    """E N(E) ~ exp(-E/kT): free-free emission with a Gaunt factor of 1, which is good to about 30 % (stated)."""

    kt_kev: float

    def __post_init__(self) -> None:
        _temperature(self.kt_kev)

    def energy_flux(self, e_kev: ArrayLike) -> Floats:
        """E N(E) up to a constant."""
        return np.exp(-np.asarray(e_kev, dtype=float) / self.kt_kev)

    def band_integral(self, low_kev: ArrayLike, high_kev: ArrayLike) -> Floats:
        """Energy flux in the band up to the constant of :meth:`energy_flux`; all energies give kT."""
        a, b = band_of(low_kev, high_kev)
        return self.kt_kev * (np.exp(-a / self.kt_kev) - np.exp(-b / self.kt_kev))


@lru_cache(maxsize=16)
def gauss_legendre(n: int) -> tuple[Floats, Floats]:
    """Nodes and weights on [-1, 1], made once."""
    x, w = np.polynomial.legendre.leggauss(n)
    return x, w


def _quadrature(spectrum: Spectrum, low_kev: ArrayLike, high_kev: ArrayLike) -> Floats:
    """Gauss-Legendre over the logarithm of energy."""
    a, b = band_of(low_kev, high_kev)
    x, w = gauss_legendre(NODES)
    la, lb = np.log(a)[..., None], np.log(b)[..., None]
    e = np.exp(0.5 * (lb - la) * x + 0.5 * (lb + la))
    return np.sum(0.5 * (lb - la) * w * e * spectrum.energy_flux(e), axis=-1)


def band_ratio(spectrum: Spectrum, from_kev: tuple[float, float], to_kev: tuple[float, float]) -> float:
    """Factor from the flux in one band to that in another, unabsorbed."""
    return float(spectrum.band_integral(*to_kev) / spectrum.band_integral(*from_kev))


def flux_density_jy(spectrum: Spectrum, flux_cgs: ArrayLike, band_kev: tuple[float, float], at_kev: float) -> Floats:
    """Flux density at an energy from the band flux of a spectrum, Jy.

    Parameters
    ----------
    flux_cgs : array_like
        Band flux, erg s^-1 cm^-2.
    band_kev : tuple of float
        Its band.
    at_kev : float
        Where the flux density is wanted.

    Notes
    -----
    F_nu = F shape(E) / integral / (Hz per keV) (definition).
    """
    per_kev = np.asarray(flux_cgs, dtype=float) * spectrum.energy_flux(at_kev) / spectrum.band_integral(*band_kev)
    return per_kev / KEV_HZ / JY_CGS


def power_law_norm(flux_cgs: ArrayLike, band_kev: tuple[float, float], photon_index: float) -> Floats:
    """Normalisation at 1 keV, photons cm^-2 s^-1 keV^-1, from a band flux in erg s^-1 cm^-2 (definition)."""
    return np.asarray(flux_cgs, dtype=float) / KEV_ERG / PowerLaw(photon_index).band_integral(*band_kev)


def blackbody_luminosity_erg_s(kt_kev: ArrayLike, radius_cm: ArrayLike) -> Floats:
    """Luminosity of a blackbody sphere, 4 pi R^2 sigma T^4, without gravitational redshift (Stefan-Boltzmann)."""
    t = np.asarray(kt_kev, dtype=float) * KEV_K
    return 4.0 * np.pi * np.square(radius_cm) * SIGMA_SB_CGS * t**4


def radio_scaled(flux: ArrayLike, nu_from_hz: ArrayLike, nu_to_hz: ArrayLike, index: ArrayLike) -> Floats:
    """Flux density moved along S ~ nu^index (definition)."""
    return np.asarray(flux, dtype=float) * (np.asarray(nu_to_hz, dtype=float) / nu_from_hz) ** np.asarray(
        index, dtype=float
    )


def radio_band_flux_cgs(
    flux_jy: ArrayLike, nu_hz: ArrayLike, index: ArrayLike, low_hz: ArrayLike, high_hz: ArrayLike
) -> Floats:
    """Flux of S ~ nu^index between two frequencies, erg s^-1 cm^-2; exact at index -1 (definition)."""
    nu = np.asarray(nu_hz, dtype=float)
    a = np.asarray(index, dtype=float)
    return (
        np.asarray(flux_jy, dtype=float)
        * JY_CGS
        * nu
        * power_integral(np.asarray(low_hz, dtype=float) / nu, np.asarray(high_hz, dtype=float) / nu, a + 1.0)
    )
