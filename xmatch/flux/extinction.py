"""Dust extinction from a packaged curve (Gordon et al. 2023; see the head of the table), read once."""

from __future__ import annotations

from functools import lru_cache
from importlib import resources

import numpy as np
from numpy.typing import ArrayLike

from xmatch.constants import C_CM_S
from xmatch.errors import RangeError
from xmatch.flux.spectra import gauss_legendre
from xmatch.records import Band, Floats

TABLE = "extinction.csv"
LOW_UM, HIGH_UM = 0.0913, 31.9
R_V_LOW, R_V_HIGH = 2.3, 5.6
"""Range of the law (Gordon et al. 2023, ApJ 950, 86)."""
MEAN_R_V = 3.1
LAWS = (
    "Gordon et al. 2023",
    "Cardelli, Clayton & Mathis 1989",
    "Fitzpatrick 1999",
    "Fitzpatrick et al. 2019",
    "Wang & Chen 2019",
)
"""Extinction curves by name; the first is the default, the others are there for R_V 3.1 (ApJ 950, 86; ApJ 345, 245;
PASP 111, 63; ApJ 886, 108; ApJ 877, 116)."""
NODES = 16
UM_CM = 1.0e-4


@lru_cache(maxsize=1)
def _table() -> tuple[Floats, Floats, Floats, dict[str, Floats]]:
    text = resources.files("xmatch.flux").joinpath("data", TABLE).read_text(encoding="utf-8")
    rows = [
        [float(cell) if cell else np.nan for cell in line.split(",")]
        for line in text.splitlines()
        if line and line[0].isdigit()
    ]
    um, a, b, *others = np.array(rows, dtype=float).T
    return np.log(um), a, b, dict(zip(LAWS[1:], others, strict=True))


def extinction_ratio(wavelength_um: ArrayLike, *, law: str = LAWS[0], r_v: float = MEAN_R_V) -> Floats:
    """A(lambda)/A(V) at one wavelength.

    Parameters
    ----------
    wavelength_um : array_like
        Micrometres. Longward of 31.9 um, radio included, extinction is 0; shortward of 0.0913 um it is ``nan``:
        there gas absorbs, not dust.
    law : str
        One of :data:`LAWS`.
    r_v : float
        2.3 to 5.6; only 3.1 for another law than the default.

    Raises
    ------
    RangeError
        For an unknown law or an R_V outside its range.

    References
    ----------
    Gordon et al. 2023, ApJ 950, 86; Cardelli, Clayton & Mathis 1989, ApJ 345, 245.
    """
    if law not in LAWS:
        raise RangeError(f"extinction law {law!r} is not known; there are {', '.join(LAWS)}")
    if not R_V_LOW <= r_v <= R_V_HIGH or (law != LAWS[0] and r_v != MEAN_R_V):
        raise RangeError(
            f"R_V {r_v} is not allowed for {law}; give {R_V_LOW} to {R_V_HIGH} (only 3.1 for a law that is not {LAWS[0]})"
        )
    um = np.asarray(wavelength_um, dtype=float)
    log_um, a, b, others = _table()
    curve = others[law] if law in others else a + b * (1.0 / r_v - 1.0 / MEAN_R_V)
    inside = np.interp(np.log(np.clip(um, LOW_UM, HIGH_UM)), log_um, curve)
    return np.where(um > HIGH_UM, 0.0, np.where(um < LOW_UM, np.nan, inside))


def law_range(wavelength_um: float) -> tuple[float, float]:
    """Lowest and highest A(lambda)/A(V) of all the laws that reach a wavelength, R_V 3.1: their disagreement is a systematic.

    ``nan`` where none does.
    """
    ratios = np.array([float(extinction_ratio(wavelength_um, law=law)) for law in LAWS])
    known = ratios[np.isfinite(ratios)]
    return (float(known.min()), float(known.max())) if len(known) else (np.nan, np.nan)


def band_extinction_mag(band: Band, av_mag: ArrayLike, *, law: str = LAWS[0], r_v: float = MEAN_R_V) -> Floats:
    """Extinction of a band, magnitudes, averaged over its edges for a flat F_nu.

    Parameters
    ----------
    band : Band
        Radio bands give 0; X-ray bands ``nan``, since dust extinction is not defined there.
    av_mag : array_like
        Visual extinction, >= 0.

    Notes
    -----
    -2.5 log10 of the mean transmission, so that a broad band saturates as it should instead of following a constant
    coefficient (definition).
    """
    av = np.asarray(av_mag, dtype=float)
    if np.any(~(av >= 0.0)):
        raise RangeError(f"A_V {av_mag} mag is not allowed; it must be 0 or more")
    low_um, high_um = C_CM_S / band.nu_high_hz / UM_CM, C_CM_S / band.nu_low_hz / UM_CM
    if low_um > HIGH_UM:
        return np.zeros_like(av)
    if high_um < LOW_UM:
        return np.full_like(av, np.nan)
    x, w = gauss_legendre(NODES)
    half, middle = 0.5 * (band.nu_high_hz - band.nu_low_hz), 0.5 * (band.nu_high_hz + band.nu_low_hz)
    ratio = extinction_ratio(C_CM_S / (middle + half * x) / UM_CM, law=law, r_v=r_v)
    # the least dimmed wavelength is taken out first, so that a hundred magnitudes do not underflow
    least = float(np.min(ratio))
    through = 10.0 ** (-0.4 * np.multiply.outer(av, ratio - least)) @ (w / w.sum())
    return av * least - 2.5 * np.log10(through)
