"""Rotation formulas for a star of any moment of inertia and radius. Pure, vectorised, CGS.

Every argument may be a number or an array; arrays broadcast. ``nan`` in gives ``nan`` out.
"""

from __future__ import annotations

import math

import numpy as np
from numpy.typing import ArrayLike

from xmatch.constants import ARCSEC_RAD, C_CM_S, G_CGS, JY_CGS, K_ERG_K, PC_CM, YR_S
from xmatch.errors import RangeError
from xmatch.records import Floats

NEUTRON_STAR_INERTIA_G_CM2 = 1.0e45
"""Moment of inertia by convention (Lorimer & Kramer 2005, Handbook of Pulsar Astronomy, ch. 3; from memory)."""
NEUTRON_STAR_RADIUS_CM = 1.0e6
"""10 km by convention (same source; from memory)."""
WHITE_DWARF_INERTIA_G_CM2 = 1.0e50
"""Order of magnitude (common practice, no source): 0.2 M R^2 of 0.8 solar masses and 7e8 cm is 1.6e50, a uniform
sphere of 0.6 solar masses and 8.7e8 cm has 3.6e50."""
WHITE_DWARF_RADIUS_CM = 7.0e8
"""About 0.8 solar masses (common practice, no source)."""
POLE_TO_EQUATOR = 2.0
"""Surface field of a centred dipole at the pole over that at the equator (definition)."""
UNIFORM_SPHERE = 0.4
"""I / (M R^2) of a uniform sphere; degenerate stars have 0.2-0.25 (from memory)."""
MAS_RAD = ARCSEC_RAD / 1.0e3


def _positive(name: str, value: ArrayLike) -> Floats:
    """Return the value as floats; refuse what is zero, negative or infinite, let ``nan`` pass."""
    array = np.asarray(value, dtype=float)
    if np.any(array <= 0.0) or np.any(np.isinf(array)):
        raise RangeError(
            f"{name} = {array} is not allowed; it must be a finite number above 0; check its sign and unit"
        )
    return array


def _finite(name: str, value: ArrayLike) -> Floats:
    array = np.asarray(value, dtype=float)
    if np.any(np.isinf(array)):
        raise RangeError(f"{name} = {array} is not allowed; it must be finite; give nan where nothing was measured")
    return array


def spin_down_power(
    period_s: ArrayLike, derivative: ArrayLike, inertia_g_cm2: ArrayLike = NEUTRON_STAR_INERTIA_G_CM2
) -> Floats:
    """Rate at which the star loses rotational energy, erg/s; negative for a star that spins up.

    Parameters
    ----------
    period_s : array_like
        Spin period, > 0.
    derivative : array_like
        Period derivative, s/s, any sign.
    inertia_g_cm2 : array_like
        Moment of inertia, > 0.

    Raises
    ------
    RangeError
        For a period or a moment of inertia that is not above 0.

    Notes
    -----
    Edot = 4 pi^2 I Pdot / P^3, the derivative of I Omega^2 / 2 (definition; Lorimer & Kramer 2005, ch. 3).
    """
    p, i = _positive("period_s", period_s), _positive("inertia_g_cm2", inertia_g_cm2)
    return 4.0 * math.pi**2 * i * _finite("derivative", derivative) / p**3


def equatorial_field(
    period_s: ArrayLike,
    derivative: ArrayLike,
    inertia_g_cm2: ArrayLike = NEUTRON_STAR_INERTIA_G_CM2,
    radius_cm: ArrayLike = NEUTRON_STAR_RADIUS_CM,
) -> Floats:
    """Dipole field at the magnetic equator from vacuum dipole braking, gauss.

    Parameters
    ----------
    period_s, derivative : array_like
        Spin period, s, and its derivative, s/s; both > 0.
    inertia_g_cm2, radius_cm : array_like
        Moment of inertia and radius, > 0.

    Raises
    ------
    RangeError
        For anything that is not above 0.

    Notes
    -----
    B = sqrt(3 c^3 I P Pdot / (8 pi^2 R^6)) for a perpendicular rotator: 3.2e19 sqrt(P Pdot) G for I = 1e45 g cm^2
    and R = 10 km (Manchester & Taylor 1977, Pulsars; Lorimer & Kramer 2005, ch. 3). Papers on long-period
    sources often quote the polar field, twice as large: :func:`polar_field`. A force-free magnetosphere
    (Spitkovsky 2006, ApJ 648, L51) gives 0.58 to 0.82 of this value.
    """
    p, pdot = _positive("period_s", period_s), _positive("derivative", derivative)
    i, r = _positive("inertia_g_cm2", inertia_g_cm2), _positive("radius_cm", radius_cm)
    return np.sqrt(3.0 * C_CM_S**3 * i * p * pdot / (8.0 * math.pi**2 * r**6))


def polar_field(
    period_s: ArrayLike,
    derivative: ArrayLike,
    inertia_g_cm2: ArrayLike = NEUTRON_STAR_INERTIA_G_CM2,
    radius_cm: ArrayLike = NEUTRON_STAR_RADIUS_CM,
) -> Floats:
    """Dipole field at the magnetic pole, gauss: twice :func:`equatorial_field` (centred dipole, definition)."""
    return POLE_TO_EQUATOR * equatorial_field(period_s, derivative, inertia_g_cm2, radius_cm)


def characteristic_age_yr(period_s: ArrayLike, derivative: ArrayLike) -> Floats:
    """Spin-down age P / (2 Pdot) in Julian years, for braking index 3 and a birth period much below P.

    Parameters
    ----------
    period_s, derivative : array_like
        Spin period, s, and its derivative, s/s; both > 0.

    Notes
    -----
    Lorimer & Kramer 2005, ch. 3. With an upper limit of the derivative the result is a lower limit.
    """
    return _positive("period_s", period_s) / (2.0 * _positive("derivative", derivative)) / YR_S


def light_cylinder_radius_cm(period_s: ArrayLike) -> Floats:
    """Radius at which corotation reaches the speed of light, cm: c P / (2 pi) (definition)."""
    return C_CM_S * _positive("period_s", period_s) / (2.0 * math.pi)


def light_cylinder_field(
    period_s: ArrayLike,
    derivative: ArrayLike,
    inertia_g_cm2: ArrayLike = NEUTRON_STAR_INERTIA_G_CM2,
    radius_cm: ArrayLike = NEUTRON_STAR_RADIUS_CM,
) -> Floats:
    """Field at the light cylinder, gauss: equatorial field times (R / R_LC)^3 (dipole; Lorimer & Kramer 2005, ch. 3).

    Parameters as in :func:`equatorial_field`.
    """
    surface = equatorial_field(period_s, derivative, inertia_g_cm2, radius_cm)
    return surface * (np.asarray(radius_cm, dtype=float) / light_cylinder_radius_cm(period_s)) ** 3


def moment_of_inertia(mass_g: ArrayLike, radius_cm: ArrayLike, concentration: ArrayLike = UNIFORM_SPHERE) -> Floats:
    """Moment of inertia k M R^2, g cm^2.

    Parameters
    ----------
    mass_g, radius_cm : array_like
        Mass and radius, > 0.
    concentration : array_like
        k: 0.4 for a uniform sphere (definition), 0.2-0.25 for a degenerate star (from memory).
    """
    k = _positive("concentration", concentration)
    return k * _positive("mass_g", mass_g) * _positive("radius_cm", radius_cm) ** 2


def shklovskii_derivative(period_s: ArrayLike, motion_mas_yr: ArrayLike, dist_pc: ArrayLike) -> Floats:
    """Apparent period derivative of a star that moves across the sky, s/s.

    Parameters
    ----------
    period_s : array_like
        Period, > 0.
    motion_mas_yr : array_like
        Total proper motion, mas/yr.
    dist_pc : array_like
        Distance, > 0.

    Notes
    -----
    Pdot = P mu^2 d / c (Shklovskii 1970, Soviet Astronomy 13, 562). Subtract it from a measured derivative.
    """
    mu = _finite("motion_mas_yr", motion_mas_yr) * MAS_RAD / YR_S
    return _positive("period_s", period_s) * mu**2 * _positive("dist_pc", dist_pc) * PC_CM / C_CM_S


def derivative_from_period_change(change_s: ArrayLike, baseline_yr: ArrayLike) -> Floats:
    """Limit of the derivative from a period that changed by less than ``change_s`` over the baseline, s/s.

    Parameters
    ----------
    change_s : array_like
        Largest change of the period that the data allow, s, > 0.
    baseline_yr : array_like
        Time between the two measurements, Julian years, > 0.

    Notes
    -----
    abs(Pdot) < dP / T (definition of the mean derivative).
    """
    return _positive("change_s", change_s) / (_positive("baseline_yr", baseline_yr) * YR_S)


def derivative_from_phase(period_s: ArrayLike, phase_error_s: ArrayLike, baseline_yr: ArrayLike) -> Floats:
    """Limit of the derivative from pulses that stay in phase over the baseline, s/s.

    Parameters
    ----------
    period_s : array_like
        Period, > 0.
    phase_error_s : array_like
        Largest departure of an arrival time from a constant period, s, > 0 and below half a period.
    baseline_yr : array_like
        Length of the data, Julian years, > 0.

    Raises
    ------
    RangeError
        When the departure reaches half a period: the cycle count is then not certain.

    Notes
    -----
    A constant derivative shifts arrival times by Pdot T^2 / (2 P), so abs(Pdot) < 2 P dt / T^2 (definition of the
    second-order term of the phase). It holds only if no cycle was miscounted.
    """
    p, dt = _positive("period_s", period_s), _positive("phase_error_s", phase_error_s)
    if np.any(dt >= p / 2.0):
        raise RangeError(
            f"phase_error_s = {dt} is not allowed; it must be below half the period {p} s, else "
            "cycles may be miscounted; use the change of the period over the baseline instead"
        )
    return 2.0 * p * dt / (_positive("baseline_yr", baseline_yr) * YR_S) ** 2


def break_up_period_s(mass_g: ArrayLike, radius_cm: ArrayLike) -> Floats:
    """Shortest spin period of a rigid Newtonian star, s: 2 pi sqrt(R^3 / (G M)) (Kepler at the equator).

    Parameters
    ----------
    mass_g, radius_cm : array_like
        Mass and radius, > 0. A star that swells to its Roche shape breaks up at 1.5^1.5 times this period.
    """
    return 2.0 * math.pi * np.sqrt(_positive("radius_cm", radius_cm) ** 3 / (G_CGS * _positive("mass_g", mass_g)))


def brightness_temperature_k(flux_jy: ArrayLike, dist_pc: ArrayLike, nu_hz: ArrayLike, width_s: ArrayLike) -> Floats:
    """Lower limit of the brightness temperature of a pulse whose source is no larger than c times its width, K.

    Parameters
    ----------
    flux_jy : array_like
        Peak flux density, Jy, any sign.
    dist_pc, nu_hz, width_s : array_like
        Distance, frequency, width; > 0.

    Notes
    -----
    T = S d^2 / (2 k nu^2 W^2): Rayleigh-Jeans with a solid angle (c W / d)^2 (definition; other papers take another
    emitting area and get up to 1.2 times this).
    """
    d = _positive("dist_pc", dist_pc) * PC_CM
    nu, w = _positive("nu_hz", nu_hz), _positive("width_s", width_s)
    return _finite("flux_jy", flux_jy) * JY_CGS * d**2 / (2.0 * K_ERG_K * nu**2 * w**2)
