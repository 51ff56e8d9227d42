"""Photoelectric absorption by interstellar matter.

The cross-section is a packaged table (abundances of Wilms, Allen & McCray 2000; see its head), read once.
The polynomial of Morrison & McCammon (1983) is the self-contained check.
"""

from __future__ import annotations

from collections.abc import Sequence
from functools import lru_cache
from importlib import resources

import numpy as np
from numpy.typing import ArrayLike

from xmatch.errors import RangeError
from xmatch.flux.spectra import Spectrum, gauss_legendre
from xmatch.records import Floats

TABLE = "photoelectric_wilms2000.csv"
LOW_KEV, HIGH_KEV = 0.1, 20.0
"""Range of the table."""
THOMSON_CM2 = 6.6524587e-25
"""Thomson cross-section (CODATA 2018)."""
ELECTRONS_PER_H = 1.2
"""Electrons per hydrogen atom, helium included (definition for solar helium, rounded)."""
THOMSON_ABOVE_KEV = 10.0
"""Scattering is added above this energy, where it rivals absorption (common practice, no source)."""
NODES_PER_CELL = 3
"""Gauss-Legendre nodes between two points of the table."""

# Morrison & McCammon 1983, ApJ 270, 119, table 2: upper edge (keV) and c0, c1, c2 of
# sigma = (c0 + c1 E + c2 E^2) / E^3 x 1e-24 cm^2
MORRISON_LOW_KEV = 0.03
MORRISON = np.array(
    [
        [0.100, 17.3, 608.1, -2150.0],
        [0.284, 34.6, 267.9, -476.1],
        [0.400, 78.1, 18.8, 4.3],
        [0.532, 71.4, 66.8, -51.4],
        [0.707, 95.5, 145.8, -61.1],
        [0.867, 308.9, -380.6, 294.0],
        [1.303, 120.6, 169.3, -47.7],
        [1.840, 141.3, 146.8, -31.5],
        [2.471, 202.7, 104.7, -17.0],
        [3.210, 342.7, 18.7, 0.0],
        [4.038, 352.2, 18.7, 0.0],
        [7.111, 433.9, -2.4, 0.75],
        [8.331, 629.0, 30.9, 0.0],
        [10.00, 701.2, 25.2, 0.0],
    ]
)


def _span(e_kev: Floats) -> str:
    """What a message says of many energies: the one, or the lowest and the highest."""
    low, high = e_kev.min(), e_kev.max()
    return f"{low:.4g}" if low == high else f"{low:.4g} to {high:.4g}"


def cross_section_morrison_cm2(e_kev: ArrayLike) -> Floats:
    """Photoelectric cross-section per hydrogen atom, cm^2, 0.03-10 keV (Morrison & McCammon 1983, ApJ 270, 119).

    Raises
    ------
    RangeError
        Outside 0.03 to 10 keV.
    """
    e = np.asarray(e_kev, dtype=float)
    if np.any(~((e >= MORRISON_LOW_KEV) & (e <= MORRISON[-1, 0]))):
        raise RangeError(f"energy {_span(e)} keV is outside 0.03 to 10 keV, where the 1983 polynomial holds")
    c = MORRISON[np.searchsorted(MORRISON[:, 0], e, side="left")]
    return (c[..., 1] + c[..., 2] * e + c[..., 3] * e**2) / e**3 * 1.0e-24


@lru_cache(maxsize=1)
def _table() -> tuple[Floats, Floats]:
    text = resources.files("xmatch.flux").joinpath("data", TABLE).read_text(encoding="utf-8")
    rows = [line.split(",") for line in text.splitlines() if line and line[0].isdigit()]
    array = np.array(rows, dtype=float)
    return np.log(array[:, 0]), np.log(array[:, 1])


def cross_section_cm2(e_kev: ArrayLike) -> Floats:
    """Cross-section per hydrogen atom, cm^2, abundances of Wilms, Allen & McCray 2000, ApJ 542, 914.

    Parameters
    ----------
    e_kev : array_like
        0.1 to 20 keV. Above 10 keV Thomson scattering is added.

    Raises
    ------
    RangeError
        Outside the table.
    """
    e = np.asarray(e_kev, dtype=float)
    if np.any(~((e >= LOW_KEV * (1.0 - 1.0e-9)) & (e <= HIGH_KEV * (1.0 + 1.0e-9)))):
        raise RangeError(
            f"energy {_span(e)} keV is outside {LOW_KEV:g} to {HIGH_KEV:g} keV, the range of the cross-section; "
            "cut the band or take transmitted_through_all"
        )
    log_e, log_s = _table()
    sigma = np.exp(np.interp(np.log(e), log_e, log_s))
    return sigma + np.where(e > THOMSON_ABOVE_KEV, ELECTRONS_PER_H * THOMSON_CM2, 0.0)


@lru_cache(maxsize=64)
def _nodes(low_kev: float, high_kev: float) -> tuple[Floats, Floats, Floats]:
    """Energies, weights (dE) and cross-sections: a few nodes in every cell of the table, so that edges are cell borders."""
    log_e, _ = _table()
    inside = log_e[(log_e > np.log(low_kev)) & (log_e < np.log(high_kev))]
    borders = np.concatenate([[np.log(low_kev)], inside, [np.log(high_kev)]])
    if low_kev < THOMSON_ABOVE_KEV < high_kev:
        borders = np.unique(np.append(borders, np.log(THOMSON_ABOVE_KEV)))
    x, w = gauss_legendre(NODES_PER_CELL)
    half, middle = 0.5 * np.diff(borders), 0.5 * (borders[1:] + borders[:-1])
    log_nodes = (middle[:, None] + half[:, None] * x).ravel()
    e = np.exp(log_nodes)
    return e, (half[:, None] * w).ravel() * e, cross_section_cm2(e)


def transmitted_fraction(spectrum: Spectrum, low_kev: float, high_kev: float, column_cm2: ArrayLike) -> Floats:
    """Fraction of a band's energy flux that gets through a column.

    Parameters
    ----------
    spectrum : Spectrum
        Shape of the emitted spectrum.
    low_kev, high_kev : float
        Band, within 0.1-20 keV.
    column_cm2 : array_like
        Equivalent hydrogen column, >= 0, any shape.

    Returns
    -------
    ndarray
        In (0, 1]; 1 without a column.

    Raises
    ------
    RangeError
        For a negative column, or a band outside the table.

    Notes
    -----
    exp(-N_H sigma(E)) averaged over E N(E) (Wilms, Allen & McCray 2000). Every cell of the cross-section table has its own
    Gauss-Legendre nodes, so that the integral of the tabulated curve is exact to rounding.
    """
    return transmitted_fractions([spectrum], low_kev, high_kev, column_cm2)[0]


def transmitted_fractions(
    spectra: Sequence[Spectrum], low_kev: float, high_kev: float, column_cm2: ArrayLike
) -> Floats:
    """The same for several spectra behind the same columns; shape (spectra, columns...).

    The attenuation is computed once for all of them, which is what the class tests need.
    """
    column = np.asarray(column_cm2, dtype=float)
    if np.any(~(column >= 0.0)):
        raise RangeError(f"column {column_cm2} cm^-2 is not allowed; it must be 0 or more")
    if not 0.0 < low_kev < high_kev:
        raise RangeError(f"band {low_kev} to {high_kev} keV is not allowed; 0 < low < high is needed")
    e, w, sigma = _nodes(float(low_kev), float(high_kev))
    weight = np.array([w * spectrum.energy_flux(e) for spectrum in spectra])
    through = np.exp(-np.multiply.outer(column, sigma))
    return np.moveaxis(through @ (weight / weight.sum(axis=1, keepdims=True)).T, -1, 0)


def transmitted_through_all(spectrum: Spectrum, low_kev: float, high_kev: float, column_cm2: float) -> float:
    """The same for any X-ray band, also one that reaches past the table.

    Returns
    -------
    float
        In [0, 1]; ``nan`` for a band that starts below 0.1 keV, where the table says nothing and little gets through.

    Raises
    ------
    RangeError
        For a negative column.

    Notes
    -----
    Above 20 keV the cross-section is held at its value there. Absorption falls further and scattering does not rise
    (Klein & Nishina 1929, Z. Phys. 52, 853), so that the fraction is a lower bound and a corrected limit stays a limit.
    """
    if not low_kev >= LOW_KEV * (1.0 - 1.0e-9):
        return np.nan
    if high_kev <= HIGH_KEV * (1.0 + 1.0e-9):
        return float(transmitted_fraction(spectrum, low_kev, high_kev, column_cm2))
    if not column_cm2 >= 0.0:
        raise RangeError(f"column {column_cm2} cm^-2 is not allowed; it must be 0 or more")
    hard_through = float(np.exp(-column_cm2 * cross_section_cm2(HIGH_KEV)))
    if low_kev >= HIGH_KEV:
        return hard_through
    through = float(transmitted_fraction(spectrum, low_kev, HIGH_KEV, column_cm2))
    soft, hard = spectrum.band_integral(low_kev, HIGH_KEV), spectrum.band_integral(HIGH_KEV, high_kev)
    return float((soft * through + hard * hard_through) / (soft + hard))


def absorbed_band_ratio(
    spectrum: Spectrum, from_kev: tuple[float, float], to_kev: tuple[float, float], column_cm2: ArrayLike
) -> Floats:
    """Factor from the observed flux in one band to that in another, behind a column.

    Parameters
    ----------
    spectrum : Spectrum
        Shape of the emitted spectrum.
    from_kev, to_kev : tuple of float
        Bands, within 0.1-20 keV.
    column_cm2 : array_like
        Equivalent hydrogen column, >= 0, any shape.

    Returns
    -------
    ndarray
        ``nan`` where nothing of the first band arrives.

    Notes
    -----
    Ratio of band integrals times that of the transmitted fractions (definition). The flux that a catalog quotes is taken as
    the observed one: how its counts became energy depends on the survey's response, which is not undone here.
    """
    start = transmitted_fraction(spectrum, *from_kev, column_cm2)
    arrive = transmitted_fraction(spectrum, *to_kev, column_cm2)
    with np.errstate(divide="ignore", invalid="ignore"):
        ratio = np.where(start > 0.0, arrive / start, np.nan)
    return ratio * spectrum.band_integral(*to_kev) / spectrum.band_integral(*from_kev)
