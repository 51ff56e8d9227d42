"""The HEALPix arithmetic of :mod:`xmatch.store.cone` for many positions at once, on numpy arrays."""

from __future__ import annotations

import math
from collections.abc import Sequence
from itertools import pairwise

import numpy as np
from numpy.typing import NDArray

from xmatch.errors import RangeError
from xmatch.records import Floats
from xmatch.store import cone
from xmatch.store.cone import EQUATOR_Z, MAX_RADIUS_ARCSEC, ORDER, PAD_ARCSEC

Ints = NDArray[np.int64]
_PLACE = np.array([(i, j) for _, i, j in cone._BASE], dtype=np.float64)
_CORES = np.arange(12, dtype=np.int64)


def _cells(ra_deg: Floats, dec_deg: Floats, n: Ints | int) -> tuple[Ints, Ints, Ints]:
    quarter = np.mod(ra_deg, 360.0) / 90.0
    z = np.sin(np.radians(dec_deg))
    polar = np.abs(z) > EQUATOR_Z
    width = np.where(polar, math.sqrt(6.0) * np.sin(np.radians(90.0 - np.abs(dec_deg)) / 2.0), 1.0)
    middle = np.minimum(np.floor(quarter), 3.0) + 0.5
    along = np.where(polar, middle + (quarter - middle) * width, quarter)
    up = np.where(polar, np.copysign(1.0 - width / 2.0, z), 0.75 * z)
    rising, falling = along + up + 0.5, along - up + 0.5
    i, j = np.floor(rising).astype(np.int64), np.floor(falling).astype(np.int64)
    column = np.minimum(((rising - i) * n).astype(np.int64), n - 1)
    row = n - 1 - np.minimum(((falling - j) * n).astype(np.int64), n - 1)
    base = np.where(i == j, 4 + (i & 3), np.where(i > j, j & 3, 8 + (i & 3)))
    return base, column, row


def _spread(value: Ints) -> Ints:
    for shift, mask in ((16, 0x0000FFFF0000FFFF), (8, 0x00FF00FF00FF00FF), (4, 0x0F0F0F0F0F0F0F0F),
                        (2, 0x3333333333333333), (1, 0x5555555555555555)):  # fmt: skip
        value = (value | value << shift) & mask
    return value


def index(ra_deg: Floats, dec_deg: Floats, order: int = ORDER) -> Ints:
    """Return the nested HEALPix index of positions.

    Parameters
    ----------
    ra_deg, dec_deg : array of float, shape (n,)
        ICRS degrees, finite.
    order : int
        From 0 to 29.

    Returns
    -------
    array of int64, shape (n,)

    References
    ----------
    Gorski et al. 2005, ApJ 622, 759; Calabretta & Roukema 2007, MNRAS 381, 865.
    """
    base, column, row = _cells(np.asarray(ra_deg, float), np.asarray(dec_deg, float), 1 << order)
    return base << 2 * order | _spread(column) | _spread(row) << 1


def covers(ra_deg: Floats, dec_deg: Floats, radius_arcsec: Floats) -> tuple[Ints, Ints, Ints]:
    """Return the stretches of the order-29 index that hold every position of each of many cones.

    Parameters
    ----------
    ra_deg, dec_deg : array of float, shape (n,)
        Centres, ICRS degrees.
    radius_arcsec : array of float, shape (n,)
        Radii, 0 to 648000 arcsec.

    Returns
    -------
    which, low, high : array of int64, shape (m,)
        Number of the cone and the first and last index of a stretch; sorted by cone, then by ``low``.

    Raises
    ------
    RangeError
        A centre or a radius that is none.
    """
    ra, dec, radius = (np.asarray(values, dtype=np.float64) for values in (ra_deg, dec_deg, radius_arcsec))
    wrong = ~(np.isfinite(ra) & (np.abs(dec) <= 90.0) & (radius >= 0.0) & (radius <= MAX_RADIUS_ARCSEC))
    if wrong.any():
        first = int(np.argmax(wrong))
        try:
            cone.check_cone(float(ra[first]), float(dec[first]), float(radius[first]))
        except RangeError as fault:
            raise RangeError(f"cone {first}: {fault}") from None
    if not len(ra):
        return np.zeros(0, np.int64), np.zeros(0, np.int64), np.zeros(0, np.int64)
    kinds, kind = np.unique(radius, return_inverse=True)
    finest = np.array([cone.order_for(float(value)) for value in kinds], dtype=np.int64)[kind]
    first_order = np.array([cone.start_order(float(value)) or 0 for value in kinds], dtype=np.int64)[kind]
    n = np.int64(1) << first_order
    base, column, row = _cells(ra, dec, n)
    edge = (first_order == 0) | (column == 0) | (row == 0) | (column == n - 1) | (row == n - 1)
    first_order[edge] = 0
    descent = _Descent(ra, dec, radius, finest)
    which = np.flatnonzero(edge)
    waiting = (np.repeat(which, 12), np.tile(_CORES, len(which)), np.zeros(12 * len(which), np.int64))
    cells: tuple[Ints, ...] = (*waiting, waiting[2], waiting[1])
    for order in range(ORDER + 1):
        starts = np.flatnonzero((first_order == order) & ~edge)
        if len(starts):
            cells = tuple(
                np.concatenate(pair) for pair in zip(cells, _blocks(starts, base, column, row, order), strict=True)
            )
        cells = descent.step(cells, order)
        if not len(cells[0]) and not (first_order > order).any():
            break
    return descent.joined()


def _blocks(starts: Ints, base: Ints, column: Ints, row: Ints, order: int) -> tuple[Ints, ...]:
    x = (column[starts, None] + np.repeat(np.arange(-1, 2), 3)).ravel()
    y = (row[starts, None] + np.tile(np.arange(-1, 2), 3)).ravel()
    core = np.repeat(base[starts], 9)
    return np.repeat(starts, 9), core, x, y, core << 2 * order | _spread(x) | _spread(y) << 1


class _Descent:
    """From coarse cells to fine ones; keeps those that touch their cone."""

    def __init__(self, ra: Floats, dec: Floats, radius: Floats, finest: Ints) -> None:
        self.radius = np.radians((radius + PAD_ARCSEC) / 3600.0)
        self.finest = finest
        lon, lat = np.radians(ra), np.radians(dec)
        self.centre = (np.cos(lat) * np.cos(lon), np.cos(lat) * np.sin(lon), np.sin(lat))
        self.found: list[tuple[Ints, Ints, Ints]] = []

    def step(self, cells: tuple[Ints, ...], order: int) -> tuple[Ints, ...]:
        """Sort cells of one order into outside, done and to be divided; return the parts of the last."""
        which, base, x, y, number = cells
        if not len(which):
            return cells
        chord2 = self._chord2(which, base, x, y, order)
        reach, radius = cone._REACH[order], self.radius[which]
        touching = chord2 <= 4.0 * np.sin(np.minimum(np.pi / 2.0, (radius + reach) / 2.0)) ** 2
        whole = (radius > reach) & (chord2 <= 4.0 * np.sin((radius - reach) / 2.0) ** 2)
        done = touching & (whole | (order >= self.finest[which]))
        shift = 2 * (ORDER - order)
        self.found.append((which[done], number[done] << shift, (number[done] + 1 << shift) - 1))
        left = touching & ~done
        which, base, x, y, number = (np.repeat(values[left], 4) for values in cells)
        part = np.tile(np.arange(4, dtype=np.int64), len(which) // 4)
        return which, base, 2 * x + (part & 1), 2 * y + (part >> 1), 4 * number + part

    def _chord2(self, which: Ints, base: Ints, x: Ints, y: Ints, order: int) -> Floats:
        n = 1 << order
        rising = _PLACE[base, 0] - 0.5 + (x + 0.5) / n
        falling = _PLACE[base, 1] + 0.5 - (y + 0.5) / n
        along, up = (rising + falling) / 2.0, (rising - falling) / 2.0
        polar = np.abs(up) > 0.5
        width = np.where(polar, 2.0 * (1.0 - np.abs(up)), 1.0)
        third = width * width / 3.0
        z = np.where(polar, np.copysign(1.0 - third, up), up / 0.75)
        rho = np.sqrt(np.where(polar, third * (2.0 - third), 1.0 - z * z))
        middle = (base & 3) + 0.5
        phi = np.where(polar, middle + (along - middle) / width, along) * (np.pi / 2.0)
        x0, y0, z0 = (part[which] for part in self.centre)
        chord2: Floats = (rho * np.cos(phi) - x0) ** 2 + (rho * np.sin(phi) - y0) ** 2 + (z - z0) ** 2
        return chord2

    def joined(self) -> tuple[Ints, Ints, Ints]:
        """All stretches found, sorted; neighbours joined."""
        which, low, high = (np.concatenate(parts) for parts in zip(*self.found, strict=True))
        order = np.lexsort((low, which))
        which, low, high = which[order], low[order], high[order]
        fresh = np.ones(len(which), dtype=bool)
        fresh[1:] = (which[1:] != which[:-1]) | (low[1:] != high[:-1] + 1)
        last = np.append(np.flatnonzero(fresh)[1:] - 1, len(which) - 1)
        return which[fresh], low[fresh], high[last]


def as_lists(which: Ints, low: Ints, high: Ints, n: int) -> Sequence[list[list[int]]]:
    """Return the stretches as one list of pairs for each of n cones."""
    pairs = np.column_stack((low, high)).tolist()
    edges = np.searchsorted(which, np.arange(n + 1)).tolist()
    return [pairs[a:b] for a, b in pairwise(edges)]
