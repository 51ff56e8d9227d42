"""How many distinct objects the rows of several catalogs are: one star in five catalogs is one chance, not five."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from xmatch.match.nearby import pairs
from xmatch.match.separation import normalised
from xmatch.records import Floats

LEAST_ROWS = 10
"""Rows a catalog needs for the share it has in common with others to mean anything (our choice)."""
MOST_ROWS = 400
"""Rows, nearest first, that are tried: enough for a share good to a few per cent (our choice)."""
COARSER = 3.0
"""Rows whose errors are this much larger than any of a catalog's own pair with it by chance alone (our choice)."""
CROWDED = 2.0
"""Others expected within the reach of a row above which no pair can be told from chance (our choice)."""
ASIDE = 3.0
"""Shift, in reaches, at which agreement of two catalogs can only be chance (our choice)."""


@dataclass(frozen=True)
class Field:
    """Rows of one catalog around the target, on its tangent plane; arrays of length n, covariances without the target's."""

    east_arcsec: Floats
    north_arcsec: Floats
    cxx: Floats
    cyy: Floats
    cxy: Floats
    expected: float
    """Unrelated rows expected in the error region."""


def new_shares(fields: Sequence[Field], k: float) -> Floats:
    """Share of each catalog's rows that no catalog before it lists, most crowded catalog first.

    Parameters
    ----------
    fields : sequence of Field
        In any order; the most crowded one counts whole, and ties go to the earlier.
    k : float
        Normalised separation up to which two rows are taken as one object.

    Returns
    -------
    ndarray, shape (len(fields),)
        0 to 1. A catalog with too few rows to tell counts whole.

    Notes
    -----
    The share of rows with a partner, less the share that finds one after the others were shifted aside (the empirical
    rate of chance pairs; definition).
    """
    shares = np.ones(len(fields))
    union = np.empty((5, 0))
    for index in sorted(range(len(fields)), key=lambda i: (-fields[i].expected, i)):
        one = fields[index]
        table = np.vstack([one.east_arcsec, one.north_arcsec, one.cxx, one.cyy, one.cxy])
        table = table[:, np.isfinite(table).all(axis=0)]
        near = table[:, np.argsort(np.hypot(table[0], table[1]), kind="stable")[:MOST_ROWS]]
        others = _comparable(union, near, k)
        if others.shape[1] and near.shape[1] >= LEAST_ROWS:
            # only where both looked: beyond the last row of the others nothing can be in common
            near = near[:, np.hypot(near[0], near[1]) <= np.hypot(others[0], others[1]).max()]
        if others.shape[1] and near.shape[1] >= LEAST_ROWS:
            by_chance = _paired(near, others, k, aside=True)
            together = _paired(near, others, k, aside=False)
            if by_chance < 1.0:
                shares[index] = 1.0 - min(max((together - by_chance) / (1.0 - by_chance), 0.0), 1.0)
        union = np.hstack([union, table])
    return shares


def _comparable(others: Floats, near: Floats, k: float) -> Floats:
    """Rows of the others with which a pair would mean something: not much coarser, around the near rows, not a crowd."""
    if not others.shape[1] or not near.shape[1]:
        return others[:, :0]
    largest = float(near[2:4].max())
    span = float(np.hypot(near[0], near[1]).max())
    keep = (np.maximum(others[2], others[3]) <= COARSER**2 * largest) & (np.hypot(others[0], others[1]) <= 1.2 * span)
    kept = others[:, keep]
    if not kept.shape[1] or span <= 0.0:
        return kept
    reach2 = k * k * (float(np.median(near[2:4])) + float(np.median(kept[2:4])))
    return kept if kept.shape[1] * reach2 / span**2 <= CROWDED else kept[:, :0]


def _paired(rows: Floats, others: Floats, k: float, *, aside: bool) -> float:
    """Share of rows with a partner within k, the others shifted east and north where only chance is wanted."""
    far = k * np.sqrt(max(float(others[2:4].max()), 0.0))
    reach = k * np.sqrt(np.maximum(rows[2], rows[3])) + far
    shift = ASIDE * float(np.median(reach)) if aside else 0.0
    i, j = pairs(rows[1], reach, others[1] + shift)
    total = rows[2:, i] + others[2:, j]
    d = normalised(rows[0, i] - others[0, j] - shift, rows[1, i] - others[1, j] - shift, *total)
    return float(np.unique(i[d <= k]).size / rows.shape[1])
