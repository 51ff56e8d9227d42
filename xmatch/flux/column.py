"""Column and extinction from each other and from the dispersion measure."""

from __future__ import annotations

import numpy as np
from numpy.typing import ArrayLike

from xmatch.errors import RangeError
from xmatch.records import Floats

COLUMN_PER_DM_CM2 = 0.30e20
COLUMN_PER_DM_LOW_CM2 = 0.21e20
COLUMN_PER_DM_HIGH_CM2 = 0.43e20
"""N_H per pc cm^-3: 0.30 (+0.13 -0.09) x 1e20 (He, Ng & Kaspi 2013, ApJ 768, 64)."""
WILMS = "Wilms, Allen & McCray 2000"
ANDERS = "Anders & Grevesse 1989"
RELATIONS = {
    "Foight et al. 2016": (2.87e21, WILMS),
    "Bahramian et al. 2015": (2.81e21, WILMS),
    "Guver & Ozel 2009": (2.21e21, ANDERS),
}
"""N_H / A_V in cm^-2 mag^-1 and the abundances it belongs to (2016ApJ...826...66F, 2015MNRAS.452.3475B, 2009MNRAS.400.2050G)."""
DEFAULT_RELATION = "Foight et al. 2016"


def _at_least_zero(value: ArrayLike, what: str, unit: str) -> Floats:
    array = np.asarray(value, dtype=float)
    if np.any(~(array >= 0.0)):
        raise RangeError(f"{what} {value} {unit} is not allowed; it must be 0 or more")
    return array


def column_from_dm_cm2(dm_pc_cm3: ArrayLike) -> tuple[Floats, Floats, Floats]:
    """Column behind a dispersion measure with its range: nominal, low, high, cm^-2 (He, Ng & Kaspi 2013, ApJ 768, 64)."""
    dm = _at_least_zero(dm_pc_cm3, "dispersion measure", "pc cm^-3")
    return COLUMN_PER_DM_CM2 * dm, COLUMN_PER_DM_LOW_CM2 * dm, COLUMN_PER_DM_HIGH_CM2 * dm


def column_per_av_cm2(relation: str = DEFAULT_RELATION, abundances: str = WILMS) -> float:
    """N_H per magnitude of A_V of a published relation.

    Raises
    ------
    RangeError
        When the relation is unknown or belongs to other abundances than the absorption uses: mixing them is wrong by 30 %.
    """
    if relation not in RELATIONS:
        raise RangeError(f"relation {relation!r} is not known; there are {', '.join(RELATIONS)}")
    value, own = RELATIONS[relation]
    if own != abundances:
        raise RangeError(f"{relation} belongs to the abundances of {own}, not of {abundances}; choose one that fits")
    return value


def av_from_column_mag(column_cm2: ArrayLike, relation: str = DEFAULT_RELATION, abundances: str = WILMS) -> Floats:
    """A_V behind a column, magnitudes, by one of :data:`RELATIONS` (sources there).

    Raises
    ------
    RangeError
        For a column below 0, or a relation of other abundances.
    """
    return _at_least_zero(column_cm2, "column", "cm^-2") / column_per_av_cm2(relation, abundances)


def column_from_av_cm2(av_mag: ArrayLike, relation: str = DEFAULT_RELATION, abundances: str = WILMS) -> Floats:
    """Column behind an A_V, cm^-2: the inverse of :func:`av_from_column_mag`.

    Raises
    ------
    RangeError
        For an A_V below 0, or a relation of other abundances.
    """
    return _at_least_zero(av_mag, "A_V", "mag") * column_per_av_cm2(relation, abundances)
