"""What a radio wave meets on its way: dispersion, scattering, ionised gas."""

from __future__ import annotations

import numpy as np
from numpy.typing import ArrayLike

from xmatch.errors import RangeError
from xmatch.records import Floats

DISPERSION_S = 4.148808e3
"""Delay at 1 MHz per pc cm^-3, s (Lorimer & Kramer 2004, Handbook of Pulsar Astronomy)."""


def _frequency(nu_hz: ArrayLike) -> Floats:
    nu = np.asarray(nu_hz, dtype=float)
    if np.any(~(nu > 0.0)):
        raise RangeError(f"frequency {nu_hz} Hz is not allowed; it must be above 0")
    return nu


def dispersion_delay_s(dm_pc_cm3: ArrayLike, nu_hz: ArrayLike) -> Floats:
    """Delay against infinite frequency, s (cold plasma). DM 0 or more, frequency above 0."""
    return DISPERSION_S * np.asarray(dm_pc_cm3, dtype=float) / (_frequency(nu_hz) / 1.0e6) ** 2


def scatter_broadening_s(dm_pc_cm3: ArrayLike, nu_hz: ArrayLike) -> Floats:
    """Typical scatter broadening, s, good to a factor of about 5 (Bhat et al. 2004, ApJ 605, 759).

    Raises
    ------
    RangeError
        For a dispersion measure or a frequency not above 0.
    """
    dm = np.asarray(dm_pc_cm3, dtype=float)
    if np.any(~(dm > 0.0)):
        raise RangeError(f"dispersion measure {dm_pc_cm3} pc cm^-3 is not allowed; it must be above 0")
    log_dm = np.log10(dm)
    log_ms = -6.46 + 0.154 * log_dm + 1.07 * log_dm**2 - 3.86 * np.log10(_frequency(nu_hz) / 1.0e9)
    return 10.0**log_ms / 1.0e3


def free_free_depth(nu_hz: ArrayLike, temperature_k: ArrayLike, emission_measure_pc_cm6: ArrayLike) -> Floats:
    """Optical depth of ionised gas: 8.235e-2 T^-1.35 nu_GHz^-2.1 EM (Mezger & Henderson 1967, ApJ 147, 471).

    Raises
    ------
    RangeError
        For a frequency or a temperature not above 0.
    """
    t = np.asarray(temperature_k, dtype=float)
    if np.any(~(t > 0.0)):
        raise RangeError(f"temperature {temperature_k} K is not allowed; it must be above 0")
    return 8.235e-2 * t**-1.35 * (_frequency(nu_hz) / 1.0e9) ** -2.1 * np.asarray(emission_measure_pc_cm6, dtype=float)
