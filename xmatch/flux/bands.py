"""Bands with a filter curve, photon fluxes, and count rates with the spectrum their factor assumed."""

from __future__ import annotations

from dataclasses import dataclass
from itertools import pairwise

import numpy as np
from numpy.typing import ArrayLike

from xmatch.constants import C_CM_S, KEV_ERG, KEV_HZ
from xmatch.errors import RangeError
from xmatch.flux.absorption import cross_section_cm2, transmitted_fraction
from xmatch.flux.extinction import LAWS, MEAN_R_V, UM_CM, extinction_ratio
from xmatch.flux.shapes import kinks_kev, photon_integral
from xmatch.flux.spectra import Spectrum, gauss_legendre
from xmatch.records import Floats

COUNTERS = ("photons", "energy")
"""What a detector behind a filter counts: CCDs and arrays photons, bolometers energy."""
CURVE_NODES = 12
"""Gauss-Legendre nodes between two points of a filter or effective-area curve."""
FULL_CURVE_ABOVE_MAG = 3.0
"""A_V above which a broad band needs the assumed spectrum instead of one coefficient (common practice, no source)."""


@dataclass(frozen=True)
class FilterCurve:
    """Throughput against wavelength, straight between its points and 0 outside.

    Parameters
    ----------
    um, throughput : tuple of float
        Wavelength in micrometres, rising; throughput in any scale, 0 or more.
    counts : str
        One of :data:`COUNTERS`.
    """

    um: tuple[float, ...]
    throughput: tuple[float, ...]
    counts: str = "photons"

    def __post_init__(self) -> None:
        um, t = np.asarray(self.um, dtype=float), np.asarray(self.throughput, dtype=float)
        if len(um) < 2 or um.shape != t.shape or not (um[0] > 0.0 and np.all(np.diff(um) > 0.0)):
            raise RangeError("a filter curve needs two or more wavelengths above 0, rising, and as many throughputs")
        if not (np.isfinite(t).all() and np.all(t >= 0.0) and np.any(t > 0.0)):
            raise RangeError("the throughput of a filter curve must be 0 or more and finite, and above 0 somewhere")
        if self.counts not in COUNTERS:
            raise RangeError(f"a filter that counts {self.counts!r} is not known; there are {', '.join(COUNTERS)}")

    def _nodes(self) -> tuple[Floats, Floats]:
        """Wavelengths and weights T dlambda x (lambda for photon counters)."""
        x, w = gauss_legendre(CURVE_NODES)
        um = np.asarray(self.um, dtype=float)
        half, middle = 0.5 * np.diff(um), 0.5 * (um[1:] + um[:-1])
        nodes = (middle[:, None] + half[:, None] * x).ravel()
        weight = (half[:, None] * w).ravel() * np.interp(nodes, um, self.throughput)
        return nodes, weight * nodes if self.counts == "photons" else weight

    @property
    def pivot_um(self) -> float:
        """Wavelength that joins f_lambda and f_nu of the band exactly, whatever the spectrum (Koornneef et al. 1986)."""
        um, w = self._nodes()
        return float(np.sqrt(w.sum() / np.sum(w / um**2)))

    def density_over_pivot(self, spectrum: Spectrum) -> float:
        """Band-averaged F_nu of a spectrum over its F_nu at the pivot: the colour correction (definition)."""
        um, w = self._nodes()
        weight = w / um**2
        averaged = np.sum(weight * spectrum.energy_flux(_kev(um))) / weight.sum()
        return float(averaged / spectrum.energy_flux(_kev(self.pivot_um)))

    def extinction_mag(
        self, spectrum: Spectrum, av_mag: ArrayLike, *, law: str = LAWS[0], r_v: float = MEAN_R_V
    ) -> Floats:
        """Extinction of the band for a spectrum, magnitudes: -2.5 log10 of its mean transmission (definition).

        Parameters
        ----------
        spectrum : Spectrum
            As emitted.
        av_mag : array_like
            0 or more, any shape.

        Returns
        -------
        ndarray
            ``nan`` where the law does not reach the whole of the curve.
        """
        av = np.asarray(av_mag, dtype=float)
        if np.any(~(av >= 0.0)):
            raise RangeError(f"A_V {av_mag} mag is not allowed; it must be 0 or more")
        um, w = self._nodes()
        weight = w / um**2 * spectrum.energy_flux(_kev(um))
        um, weight = um[weight > 0.0], weight[weight > 0.0]
        ratio = extinction_ratio(um, law=law, r_v=r_v)
        least = float(np.min(ratio))
        through = 10.0 ** (-0.4 * np.multiply.outer(av, ratio - least)) @ (weight / weight.sum())
        return av * least - 2.5 * np.log10(through)


def _kev(um: ArrayLike) -> Floats:
    return np.asarray(C_CM_S / (np.asarray(um, dtype=float) * UM_CM) / KEV_HZ)


def photon_flux(spectrum: Spectrum, flux_cgs: ArrayLike, band_kev: tuple[float, float]) -> Floats:
    """Photons cm^-2 s^-1 in a band that carries an energy flux in erg s^-1 cm^-2 (definition)."""
    mean_kev = float(spectrum.band_integral(*band_kev)) / photon_integral(spectrum, *band_kev)
    return np.asarray(flux_cgs, dtype=float) / (mean_kev * KEV_ERG)


def flux_of_photons_cgs(spectrum: Spectrum, photons: ArrayLike, band_kev: tuple[float, float]) -> Floats:
    """Energy flux, erg s^-1 cm^-2, of a photon flux in a band: the inverse of :func:`photon_flux`."""
    return np.asarray(photons, dtype=float) / photon_flux(spectrum, 1.0, band_kev)


@dataclass(frozen=True)
class CountFactor:
    """Energy flux per count rate, and the spectrum and column it was made for: without them it means nothing.

    Attributes
    ----------
    cgs_per_count : float
        Observed flux in ``band_kev``, erg cm^-2 per count.
    """

    cgs_per_count: float
    band_kev: tuple[float, float]
    spectrum: Spectrum
    column_cm2: float
    source: str = ""

    def __post_init__(self) -> None:
        if not 0.0 < self.cgs_per_count < np.inf:
            raise RangeError(f"factor {self.cgs_per_count} erg cm^-2 per count is not allowed; it must be above 0")

    def flux_cgs(self, rate: ArrayLike) -> Floats:
        """Observed flux of a count rate in counts s^-1, erg s^-1 cm^-2."""
        return np.asarray(rate, dtype=float) * self.cgs_per_count

    def corrected_flux_cgs(self, rate: ArrayLike) -> Floats:
        """The same before absorption, by the factor's own spectrum and column."""
        return self.flux_cgs(rate) / transmitted_fraction(self.spectrum, *self.band_kev, self.column_cm2)

    def for_another(self, area: AreaCurve, spectrum: Spectrum, column_cm2: float) -> CountFactor:
        """The factor for another spectrum and column, by the detector's effective area.

        Notes
        -----
        The ratio of the two factors follows from the curve; its scale, which calibrations disagree about, drops out.
        """
        old = area.cgs_per_count(self.spectrum, self.band_kev, self.column_cm2)
        new = area.cgs_per_count(spectrum, self.band_kev, column_cm2)
        return CountFactor(
            self.cgs_per_count * new / old, self.band_kev, spectrum, column_cm2, f"{self.source}, other spectrum"
        )


@dataclass(frozen=True)
class AreaCurve:
    """Effective area of a detector against energy, straight between its points and 0 outside."""

    e_kev: tuple[float, ...]
    cm2: tuple[float, ...]

    def __post_init__(self) -> None:
        e, area = np.asarray(self.e_kev, dtype=float), np.asarray(self.cm2, dtype=float)
        if len(e) < 2 or e.shape != area.shape or not (e[0] > 0.0 and np.all(np.diff(e) > 0.0)):
            raise RangeError("an effective area needs two or more energies above 0, rising, and as many areas")
        if not (np.isfinite(area).all() and np.all(area >= 0.0) and np.any(area > 0.0)):
            raise RangeError("effective areas must be 0 or more and finite, and above 0 somewhere")

    def counts(self, spectrum: Spectrum, column_cm2: float) -> float:
        """Count rate of a spectrum of normalisation 1 behind a column (definition)."""
        e, w = self._nodes(spectrum)
        seen = w * np.interp(e, self.e_kev, self.cm2) * spectrum.energy_flux(e) / e
        if column_cm2 > 0.0:
            seen = seen * np.exp(-column_cm2 * cross_section_cm2(e))
        return float(seen.sum())

    def cgs_per_count(self, spectrum: Spectrum, band_kev: tuple[float, float], column_cm2: float) -> float:
        """Observed energy flux in a band per count, erg cm^-2."""
        observed = float(spectrum.band_integral(*band_kev))
        if column_cm2 > 0.0:
            observed *= float(transmitted_fraction(spectrum, *band_kev, column_cm2))
        return observed * KEV_ERG / self.counts(spectrum, column_cm2)

    def _nodes(self, spectrum: Spectrum) -> tuple[Floats, Floats]:
        low, high = self.e_kev[0], self.e_kev[-1]
        # absorption has structure everywhere: a fine grid, cut at the curve's own points and the spectrum's kinks
        fine = np.geomspace(low, high, 400)
        cuts = np.unique(np.concatenate([fine, self.e_kev, [k for k in kinks_kev(spectrum) if low < k < high]]))
        x, w = gauss_legendre(CURVE_NODES)
        pairs = np.array(list(pairwise(cuts)))
        half, middle = 0.5 * (pairs[:, 1] - pairs[:, 0]), 0.5 * pairs.sum(axis=1)
        return (middle[:, None] + half[:, None] * x).ravel(), (half[:, None] * w).ravel()
