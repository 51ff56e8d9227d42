"""What turns a unit as an archive spells it into one of ours."""

from __future__ import annotations

import warnings
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
        None when nothing turns one into the other: a missing unit, a logarithmic one, another dimension.
    """
    if served == wanted:
        return 1.0
    if not served:
        return None
    import astropy.units as u

    target = u.Unit(wanted)
    for form in FORMS:
        try:
            with warnings.catch_warnings():
                warnings.simplefilter("ignore")  # an odd spelling that is understood is no news
                unit = u.Unit(served, format=form, parse_strict="silent")
            # logarithmic units would be taken for a factor, and are none
            if isinstance(unit, u.UnitBase):
                return float(unit.to(target))
        except (ValueError, TypeError, u.UnitsError):
            continue
    return None
