"""What turns a unit as an archive spells it into one of ours."""

from __future__ import annotations

from functools import lru_cache

FORMS = (None, "cds", "vounit")
"""Spellings that archives use, in the order tried; None is astropy's own."""


@lru_cache(maxsize=512)
def unit_factor(served: str | None, wanted: str) -> float | None:
    """Return the factor from a served unit to a wanted one.

    Parameters
    ----------
    served : str or None
        As the archive writes it; None or empty where it writes none.
    wanted : str
        As astropy writes it.

    Returns
    -------
    float or None
        None when nothing turns one into the other: a missing unit, a logarithmic one, another dimension. A flux density
        per beam counts as that of a point source.
    """
    if served == wanted:
        return 1.0
    if not served:
        return None
    import astropy.units as u

    target = u.Unit(wanted)
    for form in FORMS:
        try:
            unit = u.Unit(served, format=form, parse_strict="silent")
            # logarithmic units would be taken for a factor, and are none
            if not isinstance(unit, u.UnitBase):
                continue
            if u.beam in unit.decompose(bases={u.beam, *target.decompose().bases}).bases:
                unit = unit * u.beam
            return float(unit.to(target))
        except (ValueError, TypeError, AttributeError, u.UnitsError):
            continue
    return None
