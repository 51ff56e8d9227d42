"""Distances as probability: ranges, values with errors, samples, parallaxes, several models, redshifts.

Whatever is known becomes one table of quantiles, from which every room takes its near end, its median, its far end and its
draws. A plain range has no table and is filled by the prior of the assumptions.
"""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np
from numpy.typing import ArrayLike

from xmatch.errors import RangeError
from xmatch.flux.luminosity import distance_quantiles_pc
from xmatch.flux.spectra import Spectrum
from xmatch.records import Distance, Floats

AS_GIVEN = "as given with the target"
"""The prior of a distance that comes as a whole distribution."""
LEVELS = np.linspace(0.0, 1.0, 401)
"""Cumulative probabilities of a table; its two ends hold :data:`TAIL` instead of the endless tails."""
TAIL = 0.001
SCALE_LENGTH_PC = 1350.0
"""Scale length of the space density along the line of sight (Bailer-Jones 2015, PASP 127, 994; value from memory)."""
FARTHEST_SCALES = 30.0
"""Where a parallax posterior is cut, in scale lengths: e^-30 of the prior is left."""
MOST_NEGATIVE_SIGMA = 5.0
"""How far below zero a parallax may lie and still be chance (common practice, no source)."""
GRID = 40_000
MODEL_SCATTER_LN = 0.4
"""Log-normal scatter about one electron-density model, natural logarithm (common practice, no source)."""
COSMOLOGIES = ("Planck18", "Planck15", "Planck13", "WMAP9", "WMAP7", "WMAP5")
"""Cosmologies by their name in astropy.cosmology."""


def _levels() -> Floats:
    return np.clip(LEVELS, TAIL, 1.0 - TAIL)


def quantiles_of(distance: Distance, prior: str, quantiles: ArrayLike) -> Floats:
    """Distances at cumulative probabilities, pc.

    Parameters
    ----------
    distance : Distance
        Its own table of quantiles is used where it has one.
    prior : str
        How a plain range is filled. A target's own prior is settled into the assumptions before
        (:func:`xmatch.flux.physical.resolve`).
    quantiles : array_like
        In [0, 1]; 0 and 1 give the ends of the range.
    """
    if distance.quantiles_pc:
        table = np.asarray(distance.quantiles_pc, dtype=float)
        return np.exp(np.interp(np.asarray(quantiles, dtype=float), np.linspace(0.0, 1.0, len(table)), np.log(table)))
    return distance_quantiles_pc(distance.low_pc, distance.high_pc, prior, quantiles)


def tabulated(quantiles_pc: ArrayLike, origin: str) -> Distance:
    """A distance from its quantiles at evenly spaced probabilities.

    Raises
    ------
    RangeError
        Unless there are three or more, all above 0, finite and never falling.
    """
    table = np.asarray(quantiles_pc, dtype=float)
    if table.ndim != 1 or len(table) < 3 or not (np.isfinite(table).all() and table[0] > 0.0):
        raise RangeError("a table of distance quantiles needs three or more values, finite and above 0 pc")
    if np.any(np.diff(table) < 0.0):
        raise RangeError("the distance quantiles fall somewhere; give them at rising probabilities")
    return Distance(float(table[0]), float(table[-1]), origin, quantiles_pc=tuple(float(v) for v in table))


def with_errors(value_pc: float, plus_pc: float, minus_pc: float, origin: str) -> Distance:
    """A value with one-sigma errors that may differ upwards and downwards.

    Parameters
    ----------
    value_pc : float
        The median, above 0.
    plus_pc, minus_pc : float
        Above 0; ``minus_pc`` below ``value_pc``.

    Notes
    -----
    Two halves of log-normals that meet at the median, so that 16 % lies below value - minus, 16 % above value + plus and
    nothing below 0 (definition).
    """
    from scipy.special import ndtri

    if not (0.0 < minus_pc < value_pc < np.inf and 0.0 < plus_pc < np.inf):
        raise RangeError(
            f"distance {value_pc:g} +{plus_pc:g} -{minus_pc:g} pc is not allowed; errors above 0 are needed, the lower one "
            "smaller than the value; give a range instead"
        )
    sigma = np.asarray(ndtri(_levels()))
    width = np.where(sigma < 0.0, np.log(value_pc / (value_pc - minus_pc)), np.log1p(plus_pc / value_pc))
    return tabulated(value_pc * np.exp(sigma * width), origin)


def from_samples(samples_pc: ArrayLike, origin: str) -> Distance:
    """A distance from samples of its posterior.

    Raises
    ------
    RangeError
        With fewer than 20 samples, or one that is not finite and above 0.
    """
    samples = np.asarray(samples_pc, dtype=float)
    if samples.ndim != 1 or len(samples) < 20:
        raise RangeError(f"{samples.size} distance samples are too few for a distribution; give 20 or more")
    if not np.all((samples > 0.0) & np.isfinite(samples)):
        raise RangeError("every distance sample must be finite and above 0; remove what is not")
    return tabulated(np.quantile(samples, _levels()), origin)


def from_density(dist_pc: Floats, density: Floats, origin: str) -> Distance:
    """A distance from a probability density on a rising grid (trapezoid rule)."""
    steps = 0.5 * (density[1:] + density[:-1]) * np.diff(dist_pc)
    below = np.concatenate([[0.0], np.cumsum(steps)])
    if not below[-1] > 0.0:
        raise RangeError("no distance on the grid has any probability; the value and its error do not belong together")
    rising = np.concatenate([[True], np.diff(below) > 0.0])
    return tabulated(np.interp(_levels(), below[rising] / below[-1], dist_pc[rising]), origin)


def from_parallax(
    parallax_mas: float,
    error_mas: float,
    *,
    zero_point_mas: float = 0.0,
    scale_pc: float = SCALE_LENGTH_PC,
    origin: str = "",
) -> Distance:
    """Posterior distance of a parallax, also of a negative one; never the inverse of the parallax.

    Parameters
    ----------
    parallax_mas, error_mas : float
        Parallax of either sign and its one-sigma error, above 0.
    zero_point_mas : float
        Zero point of the survey, subtracted (Gaia: -0.02 to -0.05; Lindegren et al. 2021, A&A 649, A4; from memory).
    scale_pc : float
        Scale length of the prior d^2 exp(-d/L), above 0.

    Notes
    -----
    Bailer-Jones 2015, PASP 127, 994.
    """
    if not (np.isfinite(parallax_mas) and 0.0 < error_mas < np.inf and 0.0 < scale_pc < np.inf):
        raise RangeError(
            f"parallax {parallax_mas} +- {error_mas} mas over a scale of {scale_pc} pc is not allowed; the error and the "
            "scale must be above 0"
        )
    w = parallax_mas - zero_point_mas
    if w < -MOST_NEGATIVE_SIGMA * error_mas:
        raise RangeError(
            f"parallax {w:g} +- {error_mas:g} mas lies more than {MOST_NEGATIVE_SIGMA:g} sigma below zero, where no distance "
            "explains it; check the zero point and the error"
        )
    near = 1.0e3 / (max(w, 0.0) + 12.0 * error_mas)  # 12 sigma: nothing is left nearer than that
    far = max(FARTHEST_SCALES * scale_pc, 4.0 * parallax_mode_pc(w, error_mas, scale_pc))
    if w - 12.0 * error_mas > 0.0:
        far = 1.0e3 / (w - 12.0 * error_mas)
    d = np.geomspace(min(near, 0.5 * far), far, GRID)
    log_p = -0.5 * ((w - 1.0e3 / d) / error_mas) ** 2 + 2.0 * np.log(d) - d / scale_pc
    told = f"parallax {parallax_mas:g} +- {error_mas:g} mas, zero point {zero_point_mas:g}, scale {scale_pc:g} pc"
    return from_density(
        d, np.exp(log_p - log_p.max()), f"{told} (Bailer-Jones 2015)" + (f"; {origin}" if origin else "")
    )


def parallax_mode_pc(parallax_mas: float, error_mas: float, scale_pc: float = SCALE_LENGTH_PC) -> float:
    """Most probable distance of a parallax: root of d^3/L - 2 d^2 + w d/s^2 - 1/s^2 (Bailer-Jones 2015, PASP 127, 994).

    Parameters
    ----------
    parallax_mas, error_mas, scale_pc : float
        As in :func:`from_parallax`; the zero point is subtracted by the caller.
    """
    if not (np.isfinite(parallax_mas) and 0.0 < error_mas < np.inf and 0.0 < scale_pc < np.inf):
        raise RangeError(f"parallax {parallax_mas} +- {error_mas} mas is not allowed; the error must be above 0")
    inverse = 1.0 / error_mas**2
    roots = np.roots([1.0e3 / scale_pc, -2.0, parallax_mas * inverse, -inverse])
    real = np.sort(roots[np.abs(roots.imag) < 1e-9 * np.abs(roots)].real)
    positive = real[real > 0.0]
    # of two maxima the nearer belongs to the parallax, the farther to the prior; a negative parallax has one root above 0
    return 1.0e3 * float(positive[0])


def from_models(values_pc: Sequence[float], names: Sequence[str], scatter_ln: float = MODEL_SCATTER_LN) -> Distance:
    """One distance from several models: each with its own log-normal scatter, all with equal weight.

    Parameters
    ----------
    values_pc : sequence of float
        What each model says, above 0.
    names : sequence of str
        Their names, for the origin.
    scatter_ln : float
        Scatter of each, natural logarithm, above 0.
    """
    values = np.asarray(values_pc, dtype=float)
    if not (len(values) and np.all((values > 0.0) & np.isfinite(values)) and scatter_ln > 0.0):
        raise RangeError(
            f"model distances {list(values_pc)} pc with scatter {scatter_ln} are not allowed; above 0 is needed"
        )
    log_d = np.linspace(np.log(values.min()) - 5.0 * scatter_ln, np.log(values.max()) + 5.0 * scatter_ln, 4001)
    per_log = np.exp(-0.5 * ((log_d[:, None] - np.log(values)) / scatter_ln) ** 2).sum(axis=1)
    told = ", ".join(f"{name} {value / 1.0e3:.2f} kpc" for name, value in zip(names, values, strict=True))
    return from_density(np.exp(log_d), per_log / np.exp(log_d), f"{told}; scatter {scatter_ln:g} in ln d each")


def luminosity_distance_pc(z: float, cosmology: str = COSMOLOGIES[0]) -> float:
    """Luminosity distance at a redshift, pc, in a cosmology by name (astropy.cosmology and the papers it cites).

    Raises
    ------
    RangeError
        For a redshift not above 0 (peculiar motions rule below about 0.01), or a cosmology that is not known.
    """
    if cosmology not in COSMOLOGIES:
        raise RangeError(f"cosmology {cosmology!r} is not known; there are {', '.join(COSMOLOGIES)}")
    if not 0.0 < z < 1100.0:
        raise RangeError(f"redshift {z} is not allowed; it must be above 0 and below that of the last scattering")
    import astropy.cosmology

    return float(getattr(astropy.cosmology, cosmology).luminosity_distance(z).to_value("pc"))


def at_redshift(z: float, cosmology: str = COSMOLOGIES[0], error: float = 0.0, origin: str = "") -> Distance:
    """The distance of a redshift: a range of luminosity distances from z - error to z + error.

    Parameters
    ----------
    z, error : float
        Redshift and one sigma; 0 for an error too small to matter.
    cosmology : str
        One of :data:`COSMOLOGIES`.
    """
    if not 0.0 <= error < z:
        raise RangeError(f"redshift {z} +- {error} is not allowed; 0 <= error < z is needed")
    low, high = (luminosity_distance_pc(value, cosmology) for value in (z - error, z + error))
    told = f"redshift {z:g}, {cosmology}" + (f"; {origin}" if origin else "")
    return Distance(low, high, told, redshift=z, redshift_error=error, cosmology=cosmology)


def k_factor_density(z: ArrayLike, index: ArrayLike) -> Floats:
    """Factor from 4 pi D_L^2 S_nu to L_nu at the same frequency in the rest frame, S ~ nu^index.

    (1 + z)^-(1 + index) (Hogg et al. 2002, arXiv:astro-ph/0210394).
    """
    return (1.0 + _redshift(z)) ** -(1.0 + np.asarray(index, dtype=float))


def k_factor_band(z: ArrayLike, photon_index: ArrayLike) -> Floats:
    """Factor from 4 pi D_L^2 F to the luminosity in the same band in the rest frame, for a power law.

    (1 + z)^(photon index - 2) (Hogg et al. 2002, arXiv:astro-ph/0210394).
    """
    return (1.0 + _redshift(z)) ** (np.asarray(photon_index, dtype=float) - 2.0)


def k_factor_shape(z: float, spectrum: Spectrum, band_kev: tuple[float, float]) -> float:
    """The same as :func:`k_factor_band` for any spectrum, given as observed.

    The light of the rest-frame band arrives at energies lower by 1 + z (Hogg et al. 2002, arXiv:astro-ph/0210394).
    """
    low, high = (edge / (1.0 + float(_redshift(z))) for edge in band_kev)
    return float(spectrum.band_integral(low, high) / spectrum.band_integral(*band_kev))


def _redshift(z: ArrayLike) -> Floats:
    array = np.asarray(z, dtype=float)
    if np.any(~(array > -1.0)):
        raise RangeError(f"redshift {z} is not allowed; it must be above -1")
    return array
