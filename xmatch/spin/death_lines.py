"""Death lines: below the line, pair production fails in that model. They disagree by many dex.

Each line is data: coefficients and source. All are put into one convention: the dipole field at the *equator*,
B = 3.2e19 sqrt(P Pdot) G for a neutron star (vacuum dipole braking, perpendicular rotator). A paper that reads the
same field condition as polar has its line 0.6 dex lower in the derivative.
"""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike

from xmatch.errors import RangeError
from xmatch.records import DeathLine, Floats
from xmatch.spin.rotation import (
    NEUTRON_STAR_INERTIA_G_CM2,
    NEUTRON_STAR_RADIUS_CM,
    _positive,
    equatorial_field,
)

CONVENTION_B0 = 3.2e19
"""Equatorial field over sqrt(P Pdot), gauss, in the convention of the death-line papers (Manchester & Taylor 1977)."""
CHEN_RUDERMAN = "Chen & Ruderman 1993, ApJ 402, 264"
ZHANG = "Zhang, Harding & Muslimov 2000, ApJ 531, L135"


@dataclass(frozen=True)
class FieldLine:
    """A condition on the field: ``slope_b`` log B - ``slope_p`` log P = ``constant`` at R = 10 km.

    For another radius the constant falls by ``slope_r`` times log10(R / 10 km).
    """

    model: str
    slope_b: float
    slope_p: float
    slope_r: float
    constant: float
    source: str


@dataclass(frozen=True)
class DerivativeLine:
    """A condition on the derivative: log Pdot = ``slope`` log P + ``constant`` + ``slope_rho`` log10(rho / 10 km).

    ``rho`` is the curvature radius of a multipolar field; ``slope_rho`` is 0 for a dipole. For a neutron star of
    R = 10 km, I = 1e45 g cm^2.
    """

    model: str
    slope: float
    constant: float
    slope_rho: float
    source: str


# Chen & Ruderman 1993 (constants as printed, to 0.1); powers of the radius from Rea et al. 2024, ApJ 961, 214 (I, II,
# IV) and the data scripts of 2023Natur.619..487H (III)
FIELD_LINES = (
    FieldLine("Chen & Ruderman I: pure dipole", 4.0, 7.5, 9.5, 49.3, CHEN_RUDERMAN),
    FieldLine("Chen & Ruderman II: very curved field lines", 4.0, 6.5, 8.5, 45.7, CHEN_RUDERMAN),
    FieldLine("Chen & Ruderman III: very curved and twisted", 7.0, 13.0, 17.0, 78.0, CHEN_RUDERMAN),
    FieldLine("Chen & Ruderman IV: extremely twisted", 4.0, 6.0, 8.0, 43.8, CHEN_RUDERMAN),
)
# Zhang, Harding & Muslimov 2000, eqs. 3-6 (vacuum gap) and 8-11 (space-charge-limited flow)
DERIVATIVE_LINES = (
    DerivativeLine("Zhang et al. I: curvature radiation, vacuum gap, dipole", 11 / 4, -14.62, 0.0, ZHANG),
    DerivativeLine("Zhang et al. I': curvature radiation, vacuum gap, multipole", 9 / 4, -16.58, 1.0, ZHANG),
    DerivativeLine("Zhang et al. II: inverse Compton, vacuum gap, dipole", 2 / 11, -13.07, 0.0, ZHANG),
    DerivativeLine("Zhang et al. II': inverse Compton, vacuum gap, multipole", -2 / 11, -14.50, 8 / 11, ZHANG),
    DerivativeLine("Zhang et al. III: curvature radiation, free flow, dipole", 5 / 2, -14.56, 0.0, ZHANG),
    DerivativeLine("Zhang et al. III': curvature radiation, free flow, multipole", 2.0, -16.52, 1.0, ZHANG),
    DerivativeLine("Zhang et al. IV: inverse Compton, free flow, dipole", -3 / 11, -15.36, 0.0, ZHANG),
    DerivativeLine("Zhang et al. IV': inverse Compton, free flow, multipole", -7 / 11, -16.79, 8 / 11, ZHANG),
)


def log_field_on_line(line: FieldLine, period_s: ArrayLike, radius_cm: ArrayLike = NEUTRON_STAR_RADIUS_CM) -> Floats:
    """log10 of the equatorial field (gauss) on the line at this period, for a star of this radius.

    Parameters
    ----------
    line : FieldLine
    period_s, radius_cm : array_like
        > 0.
    """
    log_p = np.log10(_positive("period_s", period_s))
    log_r = np.log10(_positive("radius_cm", radius_cm) / NEUTRON_STAR_RADIUS_CM)
    return (line.constant - line.slope_r * log_r + line.slope_p * log_p) / line.slope_b


def log_derivative_on_line(
    line: FieldLine | DerivativeLine,
    period_s: ArrayLike,
    *,
    radius_cm: float = NEUTRON_STAR_RADIUS_CM,
    inertia_g_cm2: float = NEUTRON_STAR_INERTIA_G_CM2,
    curvature_cm: float = 1.0e6,
) -> Floats:
    """log10 of the period derivative on the line at this period.

    Parameters
    ----------
    line : FieldLine or DerivativeLine
    period_s : array_like
        > 0.
    radius_cm, inertia_g_cm2 : float
        The star. A :class:`DerivativeLine` holds for a neutron star only.
    curvature_cm : float
        Curvature radius of a multipolar field.

    Raises
    ------
    RangeError
        When a line that holds for a neutron star only is asked for another star.

    Notes
    -----
    Field lines are turned into the derivative with B_equator = B0 sqrt(P Pdot); B0 = 3.2e19 for a neutron star, as
    in the papers, and sqrt(3 c^3 I / (8 pi^2 R^6)) for any other star.
    """
    log_p = np.log10(_positive("period_s", period_s))
    neutron_star = radius_cm == NEUTRON_STAR_RADIUS_CM and inertia_g_cm2 == NEUTRON_STAR_INERTIA_G_CM2
    if isinstance(line, FieldLine):
        b0 = CONVENTION_B0 if neutron_star else float(equatorial_field(1.0, 1.0, inertia_g_cm2, radius_cm))
        return 2.0 * log_field_on_line(line, period_s, radius_cm) - 2.0 * math.log10(b0) - log_p
    if not neutron_star:
        raise RangeError(
            f"{line.model} is not known for radius {radius_cm:g} cm; it holds for a neutron star of 10 km; use the "
            "Chen & Ruderman lines for other stars"
        )
    log_rho = math.log10(float(_positive("curvature_cm", curvature_cm)) / 1.0e6)
    return line.slope * log_p + line.constant + line.slope_rho * log_rho


def held_against(period_s: float, derivative: float, is_limit: bool) -> tuple[DeathLine, ...]:
    """Hold a neutron star's period and derivative against every death line.

    Parameters
    ----------
    period_s : float
        Spin period, > 0.
    derivative : float
        Period derivative or its upper limit, s/s, > 0.
    is_limit : bool
        Whether the derivative is an upper limit.

    Returns
    -------
    tuple of DeathLine
        ``above`` or ``below`` the line; an upper limit above the line says ``nothing``, because the star may be on
        either side.

    Raises
    ------
    RangeError
        For a period or derivative that is not above 0.

    References
    ----------
    Chen & Ruderman 1993, ApJ 402, 264; Zhang, Harding & Muslimov 2000, ApJ 531, L135.
    """
    log_own = math.log10(float(_positive("derivative", derivative)))
    found = []
    for line in (*FIELD_LINES, *DERIVATIVE_LINES):
        on_line = float(log_derivative_on_line(line, period_s))
        above = log_own >= on_line
        says = ("nothing" if is_limit else "above") if above else "below"
        found.append(
            DeathLine(
                model=line.model, log_derivative=on_line, distance_dex=log_own - on_line, says=says, source=line.source
            )
        )
    return tuple(found)
