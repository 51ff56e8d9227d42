"""More spectra, of the same protocol as those in :mod:`xmatch.flux.spectra`: bent, curved, tabulated, redshifted.

All are shapes: the caller's band flux fixes the normalisation. Energies are keV; radio spectra use the same classes with
any other unit of photon energy or frequency, as long as it is one unit throughout.
"""

from __future__ import annotations

from dataclasses import dataclass
from itertools import pairwise

import numpy as np
from numpy.typing import ArrayLike

from xmatch.errors import RangeError
from xmatch.flux.spectra import PowerLaw, Spectrum, band_of, gauss_legendre, power_integral
from xmatch.records import Floats

PIECE_NODES = 48
"""Gauss-Legendre nodes of one smooth piece of a spectrum."""


@dataclass(frozen=True)
class BrokenPowerLaw:
    """E N(E) ~ E^(1 - index), with one photon index below the break and another above; continuous there (definition)."""

    index_below: float
    index_above: float
    break_kev: float

    def __post_init__(self) -> None:
        if not (np.isfinite([self.index_below, self.index_above]).all() and 0.0 < self.break_kev < np.inf):
            raise RangeError(f"{self} is not allowed; the indices must be finite and the break above 0")

    def energy_flux(self, e_kev: ArrayLike) -> Floats:
        """E N(E), 1 at the break."""
        x = np.asarray(e_kev, dtype=float) / self.break_kev
        return x ** (1.0 - np.where(x < 1.0, self.index_below, self.index_above))

    def band_integral(self, low_kev: ArrayLike, high_kev: ArrayLike) -> Floats:
        """Energy flux in the band up to the constant of :meth:`energy_flux`; exact, also at index 2."""
        a, b = band_of(low_kev, high_kev)
        x, y = a / self.break_kev, b / self.break_kev
        below = _power_part(x, np.minimum(y, 1.0), 2.0 - self.index_below)
        above = _power_part(np.maximum(x, 1.0), y, 2.0 - self.index_above)
        return self.break_kev * (below + above)


def _power_part(low: Floats, high: Floats, exponent: float) -> Floats:
    """The power integral, 0 where the piece lies outside the band."""
    some = high > low
    return np.where(some, power_integral(np.where(some, low, 1.0), np.where(some, high, 2.0), exponent), 0.0)


@dataclass(frozen=True)
class LogParabola:
    """N(E) ~ (E/E0)^-(index + curvature log10(E/E0)): a power law that bends (Massaro et al. 2004, A&A 413, 489)."""

    index: float
    curvature: float
    pivot_kev: float

    def __post_init__(self) -> None:
        if not (np.isfinite([self.index, self.curvature]).all() and 0.0 < self.pivot_kev < np.inf):
            raise RangeError(f"{self} is not allowed; index and curvature must be finite and the pivot above 0")

    def energy_flux(self, e_kev: ArrayLike) -> Floats:
        """E N(E), 1 at the pivot."""
        x = np.asarray(e_kev, dtype=float) / self.pivot_kev
        return x ** (1.0 - self.index - self.curvature * np.log10(x))

    def band_integral(self, low_kev: ArrayLike, high_kev: ArrayLike) -> Floats:
        """Energy flux in the band up to the constant of :meth:`energy_flux`; relative error below 1e-9 over six decades."""
        return smooth_integral(self, low_kev, high_kev)


@dataclass(frozen=True)
class Tabulated:
    """E N(E) given at points, a power law between each two of them; 0 outside.

    Parameters
    ----------
    e_kev : tuple of float
        Rising, at least two.
    values : tuple of float
        E N(E) there, in any unit, above 0.
    """

    e_kev: tuple[float, ...]
    values: tuple[float, ...]

    def __post_init__(self) -> None:
        e, v = np.asarray(self.e_kev, dtype=float), np.asarray(self.values, dtype=float)
        if len(e) < 2 or e.shape != v.shape:
            raise RangeError(
                f"a table of {len(e)} energies and {len(v)} values is not allowed; give two or more of each"
            )
        if not (np.all(np.diff(e) > 0.0) and e[0] > 0.0 and np.isfinite(e).all()):
            raise RangeError("the energies of a tabulated spectrum must be above 0, finite and rising; sort the table")
        if not (np.all(v > 0.0) and np.isfinite(v).all()):
            raise RangeError("the values of a tabulated spectrum must be above 0 and finite; cut what is not")

    def energy_flux(self, e_kev: ArrayLike) -> Floats:
        """E N(E), in the table's own unit."""
        e = np.asarray(e_kev, dtype=float)
        inside = (e >= self.e_kev[0]) & (e <= self.e_kev[-1])
        log = np.interp(np.log(np.where(inside, e, self.e_kev[0])), np.log(self.e_kev), np.log(self.values))
        return np.where(inside, np.exp(log), 0.0)

    def band_integral(self, low_kev: ArrayLike, high_kev: ArrayLike) -> Floats:
        """Integral of the table over the band; exact for the power laws between its points.

        Raises
        ------
        RangeError
            For a band that reaches outside the table: what is not known there is not taken as 0.
        """
        a, b = band_of(low_kev, high_kev)
        first, last = self.e_kev[0], self.e_kev[-1]
        if np.any(a < first * (1.0 - 1e-12)) or np.any(b > last * (1.0 + 1e-12)):
            raise RangeError(
                f"band {low_kev} to {high_kev} reaches outside the table, {first:g} to {last:g}; extend the table"
            )
        total = np.zeros(np.broadcast_shapes(a.shape, b.shape))
        points = list(zip(self.e_kev, self.values, strict=True))
        for (e0, v0), (e1, v1) in pairwise(points):
            slope = np.log(v1 / v0) / np.log(e1 / e0)
            part = _power_part(np.maximum(a, e0) / e0, np.minimum(b, e1) / e0, slope + 1.0)
            total = total + v0 * e0 * part
        return total


@dataclass(frozen=True)
class Redshifted:
    """Another spectrum seen from redshift z: E N(E) of the rest frame at E (1 + z) (definition).

    The surface of a neutron star has z of about 0.2-0.3 (from memory); a galaxy its own.
    """

    rest: Spectrum
    z: float

    def __post_init__(self) -> None:
        if not -1.0 < self.z < np.inf:
            raise RangeError(f"redshift {self.z} is not allowed; it must be above -1 and finite")

    def energy_flux(self, e_kev: ArrayLike) -> Floats:
        """E N(E) of the rest frame at the energy it left with."""
        return self.rest.energy_flux(np.asarray(e_kev, dtype=float) * (1.0 + self.z))

    def band_integral(self, low_kev: ArrayLike, high_kev: ArrayLike) -> Floats:
        """Energy flux in the observed band up to the constant of :meth:`energy_flux`."""
        a, b = band_of(low_kev, high_kev)
        return self.rest.band_integral(a * (1.0 + self.z), b * (1.0 + self.z)) / (1.0 + self.z)


def smooth_integral(spectrum: Spectrum, low_kev: ArrayLike, high_kev: ArrayLike, power: float = 0.0) -> Floats:
    """Integral of E N(E) E^power over a band without a kink, by Gauss-Legendre quadrature in the logarithm of energy.

    Parameters
    ----------
    spectrum : Spectrum
    low_kev, high_kev : array_like
        Band, above 0, any shape.
    power : float
        0 for energy flux, -1 for photons.
    """
    a, b = band_of(low_kev, high_kev)
    x, w = gauss_legendre(PIECE_NODES)
    half, middle = (0.5 * (np.log(b) + s * np.log(a))[..., None] for s in (-1.0, 1.0))
    e = np.exp(middle + half * x)
    return np.sum(half * w * e ** (1.0 + power) * spectrum.energy_flux(e), axis=-1)


def kinks_kev(spectrum: Spectrum) -> tuple[float, ...]:
    """Energies at which a spectrum is not smooth, rising; a quadrature is cut there."""
    if isinstance(spectrum, BrokenPowerLaw):
        return (spectrum.break_kev,)
    if isinstance(spectrum, Tabulated):
        return spectrum.e_kev
    if isinstance(spectrum, Redshifted):
        return tuple(e / (1.0 + spectrum.z) for e in kinks_kev(spectrum.rest))
    return ()


def photon_integral(spectrum: Spectrum, low_kev: float, high_kev: float) -> float:
    """Photons of a spectrum in a band, in the units of its normalisation: integral of N(E) (definition).

    With :meth:`Spectrum.band_integral` it gives the mean photon energy of the band, keV; exact at photon index 1.
    """
    if isinstance(spectrum, PowerLaw):
        return float(power_integral(low_kev, high_kev, 1.0 - spectrum.photon_index))
    band_of(low_kev, high_kev)
    cuts = [low_kev, *(e for e in kinks_kev(spectrum) if low_kev < e < high_kev), high_kev]
    return float(sum(smooth_integral(spectrum, a, b, -1.0) for a, b in pairwise(cuts)))
