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


def column_from_dm_cm2(dm_pc_cm3: ArrayLike) -> tuple[Floats, Floats, Floats]:
    """Column behind a dispersion measure with its range: nominal, low, high, cm^-2 (He, Ng & Kaspi 2013, ApJ 768, 64)."""
    dm = np.asarray(dm_pc_cm3, dtype=float)
    if np.any(~(dm >= 0.0)):
        raise RangeError(f"dispersion measure {dm_pc_cm3} pc cm^-3 is not allowed; it must be 0 or more")
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
