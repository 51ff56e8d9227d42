"""Which stretches of the nested HEALPix index a cone on the sky touches, one cone at a time.

A cover is *inclusive*: it holds every position of the cone and some outside of it, so an exact separation test
always follows. The arithmetic is plain Python, because importing an array library costs more than a query;
:mod:`xmatch.store.cones` does the same for many cones at once.

The sphere is mapped to a plane in which every HEALPix cell is a square that stands on its corner (Gorski et al.
2005, ApJ 622, 759, section 5; Calabretta & Roukema 2007, MNRAS 381, 865, section 2). With ``along`` in quarter turns
of longitude and ``up`` from -1 at the south pole to 1 at the north pole, the twelve base cells are the squares of
side one in the coordinates ``along + up`` and ``along - up``.
"""

from __future__ import annotations

import math

from xmatch.errors import RangeError

ORDER = 29
"""Order of the stored index; the finest of which an index fits into 64 bits."""
EQUATOR_Z = 2.0 / 3.0
"""Sine of the declination at which the equatorial zone ends (Gorski et al. 2005, section 5.1)."""
SIDE_DEG = math.degrees(math.sqrt(math.pi / 3.0))
"""Side of a base cell: the square root of a twelfth of the sphere. Each order halves it."""
SMALL_ARCSEC = 60.0
"""Up to this radius a cell of the cover is about a radius wide, above it half of one: finer covers read fewer rows
and cost more stretches (measured on 1e7 rows, 5 arcsec to 2 arcmin)."""
PAD_ARCSEC = 0.002
"""Five cells of order 29: rounding of the index, here or by whoever wrote it, never loses a row."""
MAX_RADIUS_ARCSEC = 180.0 * 3600.0
_BLOCK = 4.0
"""The block of 3 x 3 cells around the centre holds the cone when a cell is this many radii wide. The narrowest cell
is about half as wide as its side, so two would just do."""
_CORE = 8
"""Below this order cells are few: the cover starts from the twelve base cells."""
_BASE = [(f, f + 1, f) for f in range(4)] + [(4 + f, f, f) for f in range(4)] + [(8 + f, f, f + 1) for f in range(4)]
"""Base cell, and its place along ``along + up`` and along ``along - up``."""


def reach_rad(order: int) -> float:
    """Largest distance from the centre of a cell to its corner, over all cells of an order, in radians.

    The widest cells are those that the end of the equatorial zone cuts in half next to the edge of a base cell.
    """
    n = 1 << order
    third = (1.0 - 1.0 / n) ** 2 / 3.0
    corner_rho, edge_rho = math.sqrt(third * (2.0 - third)), math.sqrt(1.0 - EQUATOR_Z**2)
    half = math.sin(math.pi / (8 * n))
    # squared chord from differences, which keeps its digits for small cells
    chord2 = (1.0 / 3.0 - third) ** 2 + (corner_rho - edge_rho) ** 2 + 4.0 * corner_rho * edge_rho * half * half
    return 2.0 * math.asin(min(1.0, math.sqrt(chord2) / 2.0)) * (1.0 + 1e-6)


_REACH = [reach_rad(order) for order in range(ORDER + 1)]


def cell(ra_deg: float, dec_deg: float, order: int = ORDER) -> tuple[int, int, int]:
    """Return base cell and column and row in it of the cell that holds a position.

    Parameters
    ----------
    ra_deg, dec_deg : float
        ICRS degrees; any right ascension, declination from -90 to 90.
    order : int
        From 0 to 29.
    """
    quarter = (ra_deg % 360.0) / 90.0
    z = math.sin(math.radians(dec_deg))
    if abs(z) <= EQUATOR_Z:
        along, up = quarter, 0.75 * z
    else:
        # sqrt(3 (1 - |z|)) loses its digits at the pole; with the half angle it does not
        width = math.sqrt(6.0) * math.sin(math.radians(90.0 - abs(dec_deg)) / 2.0)
        middle = min(math.floor(quarter), 3) + 0.5
        along = middle + (quarter - middle) * width
        up = math.copysign(1.0 - width / 2.0, z)
    rising, falling = along + up + 0.5, along - up + 0.5
    i, j = math.floor(rising), math.floor(falling)
    n = 1 << order
    column = min(int((rising - i) * n), n - 1)
    row = n - 1 - min(int((falling - j) * n), n - 1)
    if i == j:
        return 4 + (i & 3), column, row
    return (j & 3 if i > j else 8 + (i & 3)), column, row


def nested(base: int, column: int, row: int, order: int) -> int:
    """Return the nested index: the bits of column and row interleaved, after the base cell."""
    return base << 2 * order | _spread(column) | _spread(row) << 1


def _spread(value: int) -> int:
    value = (value | value << 16) & 0x0000FFFF0000FFFF
    value = (value | value << 8) & 0x00FF00FF00FF00FF
    value = (value | value << 4) & 0x0F0F0F0F0F0F0F0F
    value = (value | value << 2) & 0x3333333333333333
    return (value | value << 1) & 0x5555555555555555


def index(ra_deg: float, dec_deg: float, order: int = ORDER) -> int:
    """Return the nested HEALPix index of a position; RA and Dec in ICRS degrees."""
    return nested(*cell(ra_deg, dec_deg, order), order)


def order_for(radius_arcsec: float) -> int:
    """Order of the finest cells of a cover: up to 1.3 radii wide, half a radius above an arcminute."""
    wanted = radius_arcsec / 3600.0 * (1.3 if radius_arcsec <= SMALL_ARCSEC else 0.5)
    return max(0, min(ORDER, math.ceil(math.log2(SIDE_DEG / max(wanted, 1e-9)))))


def start_order(radius_arcsec: float) -> int | None:
    """Order at which 3 x 3 cells hold a cone; None where it is so large that the base cells are the start."""
    order = min(ORDER, math.floor(math.log2(SIDE_DEG * 3600.0 / (_BLOCK * (radius_arcsec + PAD_ARCSEC)))))
    return order if order >= _CORE else None


def check_cone(ra_deg: float, dec_deg: float, radius_arcsec: float) -> None:
    """Refuse a cone that is none.

    Raises
    ------
    RangeError
        A declination beyond the poles, a radius outside 0 to 180 degrees, or a number that is not finite.
    """
    if not (math.isfinite(ra_deg) and -90.0 <= dec_deg <= 90.0):
        raise RangeError(f"the cone is centred on RA {ra_deg}, Dec {dec_deg}; give degrees, Dec from -90 to 90")
    if not 0.0 <= radius_arcsec <= MAX_RADIUS_ARCSEC:
        raise RangeError(f"the radius of the cone is {radius_arcsec} arcsec; give 0 to {MAX_RADIUS_ARCSEC:.0f}")


def ranges(ra_deg: float, dec_deg: float, radius_arcsec: float) -> list[tuple[int, int]]:
    """Return the stretches of the order-29 index, first and last included, that hold every position of a cone.

    Parameters
    ----------
    ra_deg, dec_deg : float
        Centre, ICRS degrees.
    radius_arcsec : float
        Radius, 0 to 648000 arcsec.

    Returns
    -------
    list of (int, int)
        Rising, apart from each other.

    Raises
    ------
    RangeError
        As :func:`check_cone`.
    """
    check_cone(ra_deg, dec_deg, radius_arcsec)
    radius = math.radians((radius_arcsec + PAD_ARCSEC) / 3600.0)
    finest = order_for(radius_arcsec)
    first = start_order(radius_arcsec)
    cells = None if first is None else _block(*cell(ra_deg, dec_deg, first), first)
    order = first or 0
    if cells is None:
        order, cells = 0, [(base, i, j, 0, 0, base) for base, i, j in _BASE]
    ra, dec = math.radians(ra_deg), math.radians(dec_deg)
    flat = math.cos(dec)
    centre = (flat * math.cos(ra), flat * math.sin(ra), math.sin(dec))
    found: list[tuple[int, int]] = []
    while True:
        kept, whole = _touching(cells, order, centre, radius)
        shift = 2 * (ORDER - order)
        if order >= finest:
            whole += kept
            kept = []
        found += [(one[5] << shift, (one[5] + 1 << shift) - 1) for one in whole]
        if not kept:
            return _joined(found)
        order += 1
        cells = [
            (base, i, j, 2 * x + (k & 1), 2 * y + (k >> 1), 4 * number + k)
            for base, i, j, x, y, number in kept
            for k in range(4)
        ]


_Cell = tuple[int, int, int, int, int, int]
"""Base cell, its two places, column, row, nested index."""


def _block(base: int, column: int, row: int, order: int) -> list[_Cell] | None:
    """The cell and its eight neighbours; None at the edge of a base cell, where neighbours lie in another one."""
    last = (1 << order) - 1
    if not (0 < column < last and 0 < row < last):
        return None
    _, i, j = _BASE[base]
    return [
        (base, i, j, x, y, nested(base, x, y, order))
        for x in (column - 1, column, column + 1)
        for y in (row - 1, row, row + 1)
    ]


def _touching(
    cells: list[_Cell], order: int, centre: tuple[float, float, float], radius: float
) -> tuple[list[_Cell], list[_Cell]]:
    """Cells that may touch the cone, and those that lie in it as a whole."""
    reach = _REACH[order]
    near = 4.0 * math.sin(min(math.pi / 2.0, (radius + reach) / 2.0)) ** 2
    inside = 4.0 * math.sin((radius - reach) / 2.0) ** 2 if radius > reach else -1.0
    n = 1 << order
    x0, y0, z0 = centre
    kept, whole = [], []
    for one in cells:
        base, i, j, column, row, _ = one
        rising = i - 0.5 + (column + 0.5) / n
        falling = j + 0.5 - (row + 0.5) / n
        along, up = (rising + falling) / 2.0, (rising - falling) / 2.0
        if -0.5 <= up <= 0.5:
            z = up / 0.75
            rho = math.sqrt(1.0 - z * z)
        else:
            width = 2.0 * (1.0 - abs(up))
            third = width * width / 3.0
            z = math.copysign(1.0 - third, up)
            rho = math.sqrt(third * (2.0 - third))
            middle = (base & 3) + 0.5
            along = middle + (along - middle) / width
        phi = along * (math.pi / 2.0)
        chord2 = (rho * math.cos(phi) - x0) ** 2 + (rho * math.sin(phi) - y0) ** 2 + (z - z0) ** 2
        if chord2 <= inside:
            whole.append(one)
        elif chord2 <= near:
            kept.append(one)
    return kept, whole


def _joined(found: list[tuple[int, int]]) -> list[tuple[int, int]]:
    found.sort()
    joined: list[tuple[int, int]] = []
    for low, high in found:
        if joined and low == joined[-1][1] + 1:
            joined[-1] = (joined[-1][0], high)
        else:
            joined.append((low, high))
    return joined


def separation_arcsec(ra1_deg: float, dec1_deg: float, ra2_deg: float, dec2_deg: float) -> float:
    """Return the separation of two positions in arcsec; exact from milliarcseconds to opposite points."""
    a, b = math.radians(dec1_deg), math.radians(dec2_deg)
    c = math.radians(ra2_deg - ra1_deg)
    east = math.cos(b) * math.sin(c)
    north = math.cos(a) * math.sin(b) - math.sin(a) * math.cos(b) * math.cos(c)
    straight = math.sin(a) * math.sin(b) + math.cos(a) * math.cos(b) * math.cos(c)
    return math.degrees(math.atan2(math.hypot(east, north), straight)) * 3600.0
