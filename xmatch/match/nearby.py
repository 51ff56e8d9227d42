"""Pairs of rows of two lists that may lie within reach of each other, without trying every pair."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from xmatch.records import Floats


def pairs(
    north_arcsec: Floats, reach_arcsec: Floats, other_north_arcsec: Floats
) -> tuple[NDArray[np.intp], NDArray[np.intp]]:
    """Indices (i, j) of every pair whose declinations differ by no more than the reach of i.

    Parameters
    ----------
    north_arcsec, reach_arcsec : ndarray, shape (n,)
        One list, and how far each of its rows reaches.
    other_north_arcsec : ndarray, shape (m,)
        The other list, in any order.

    Notes
    -----
    A sorted strip: n log m comparisons and one entry per pair found (definition).
    """
    order = np.argsort(other_north_arcsec, kind="stable")
    listed = other_north_arcsec[order]
    first = np.searchsorted(listed, north_arcsec - reach_arcsec)
    count = np.searchsorted(listed, north_arcsec + reach_arcsec, side="right") - first
    i = np.repeat(np.arange(len(north_arcsec)), count)
    j = order[np.arange(i.size) + np.repeat(first - np.cumsum(count) + count, count)]
    return i, j
