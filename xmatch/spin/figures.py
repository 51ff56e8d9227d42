"""Everything that period and derivative say, for a neutron star and for a white dwarf."""

from __future__ import annotations

import math

from xmatch.errors import RangeError
from xmatch.records import DeathLine, RotationBudget, Spin, SpinFigures
from xmatch.spin.death_lines import held_against
from xmatch.spin.rotation import (
    NEUTRON_STAR_INERTIA_G_CM2,
    NEUTRON_STAR_RADIUS_CM,
    WHITE_DWARF_INERTIA_G_CM2,
    WHITE_DWARF_RADIUS_CM,
    characteristic_age_yr,
    equatorial_field,
    light_cylinder_field,
    light_cylinder_radius_cm,
    polar_field,
    spin_down_power,
)

STARS = {
    "neutron star": (NEUTRON_STAR_INERTIA_G_CM2, NEUTRON_STAR_RADIUS_CM),
    "white dwarf": (WHITE_DWARF_INERTIA_G_CM2, WHITE_DWARF_RADIUS_CM),
}
"""Moment of inertia (g cm^2) and radius (cm) of the two stars a budget is made for."""
IF_SPIN = "the period may be orbital: spin-down power, field, age and death lines hold only if it is the spin period"
CONVENTION = "fields are of a vacuum dipole braking a perpendicular rotator"


def budget(star: str, period_s: float, derivative: float, is_limit: bool) -> RotationBudget:
    """Spin-down figures of one kind of star.

    Parameters
    ----------
    star : str
        A key of :data:`STARS`.
    period_s, derivative : float
        Spin period, s, and its derivative, s/s; both > 0.
    is_limit : bool
        Whether the derivative is an upper limit; the figures then are upper limits too.

    Notes
    -----
    Formulas and sources: :mod:`xmatch.spin.rotation`.
    """
    inertia, radius = STARS[star]
    return RotationBudget(
        star=star,
        inertia_g_cm2=inertia,
        radius_cm=radius,
        power_erg_s=float(spin_down_power(period_s, derivative, inertia)),
        field_equator_g=float(equatorial_field(period_s, derivative, inertia, radius)),
        field_pole_g=float(polar_field(period_s, derivative, inertia, radius)),
        light_cylinder_field_g=float(light_cylinder_field(period_s, derivative, inertia, radius)),
        is_limit=is_limit,
    )


def figures(spin: Spin) -> SpinFigures:
    """Say what period and derivative mean, model by model.

    Parameters
    ----------
    spin : Spin
        Period > 0; derivative, an upper limit of it, both or neither. A measured derivative is used before a limit.

    Returns
    -------
    SpinFigures
        Without budgets, death lines and age where no spin-down is known. With an upper limit every budget is an
        upper limit and the age is a lower limit.

    Raises
    ------
    RangeError
        For a period, or a limit of the derivative, that is not a finite number above 0.

    Notes
    -----
    A derivative that is zero or negative is no spin-down: it pays for nothing, and accretion or an orbit can cause
    it. It is set aside with a note; a limit given beside it is used.
    """
    if not (math.isfinite(spin.period_s) and spin.period_s > 0.0):
        raise RangeError(f"period {spin.period_s} s is not allowed; it must be a finite number above 0")
    if spin.derivative_limit is not None and not (math.isfinite(spin.derivative_limit) and spin.derivative_limit > 0.0):
        raise RangeError(
            f"limit {spin.derivative_limit} of the period derivative is not allowed; it must be a finite number above "
            "0; give the upper limit of its absolute value"
        )
    derivative, is_limit, notes = _usable(spin)
    cylinder = float(light_cylinder_radius_cm(spin.period_s))
    budgets: tuple[RotationBudget, ...] = ()
    lines: tuple[DeathLine, ...] = ()
    age: float | None = None
    if derivative is not None:
        notes.append(CONVENTION)
        budgets = tuple(budget(star, spin.period_s, derivative, is_limit) for star in STARS)
        lines = held_against(spin.period_s, derivative, is_limit)
        age = float(characteristic_age_yr(spin.period_s, derivative))
    return SpinFigures(
        period_s=spin.period_s,
        derivative=derivative,
        derivative_is_limit=is_limit,
        age_yr=age,
        light_cylinder_cm=cylinder,
        budgets=budgets,
        death_lines=lines,
        conditional=IF_SPIN if spin.may_be_orbital else "",
        note="; ".join(notes),
    )


def _usable(spin: Spin) -> tuple[float | None, bool, list[str]]:
    """The derivative that may be used, whether it is a limit, and what has to be said about the choice."""
    notes: list[str] = []
    measured = spin.derivative
    if measured is not None and not math.isfinite(measured):
        raise RangeError(f"period derivative {measured} is not allowed; it must be finite; leave it out if unknown")
    if measured is not None and measured <= 0.0:
        what = "no change of the period" if measured == 0.0 else "a shortening period"
        notes.append(
            f"derivative {measured:g} means {what}: no spin-down is measured, and nothing follows from its size"
        )
        measured = None
    if measured is not None:
        return measured, False, notes
    if spin.derivative_limit is not None:
        notes.append(
            f"derivative < {spin.derivative_limit:g} is an upper limit: power and fields are upper limits, the age is "
            "a lower limit"
        )
        return spin.derivative_limit, True, notes
    if not notes:
        notes.append("no period derivative is known")
    return None, False, notes
