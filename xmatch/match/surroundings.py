"""What the field around a target is like: density by brightness, gradients, and the same search made beside it."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike

from xmatch.constants import ARCSEC2_PER_DEG2
from xmatch.errors import RangeError
from xmatch.match.nearby import pairs
from xmatch.match.separation import normalised
from xmatch.records import Bools, Floats

GOLDEN_ANGLE = np.pi * (3.0 - np.sqrt(5.0))
"""Turn between neighbouring points that fills a disc evenly (Vogel 1979, Mathematical Biosciences 44, 179)."""


@dataclass(frozen=True)
class Gradient:
    """How unevenly rows lie around a target."""

    n: int
    strength: float
    """Length of the mean unit vector: 0 for an even field, 1 for all rows in one direction."""
    angle_deg: float
    """Direction in which the rows crowd, degrees east of north."""
    p: float
    """Rayleigh-test probability of so much unevenness in an even field."""


@dataclass(frozen=True)
class Repeated:
    """The same search made at positions beside the target."""

    n_positions: int
    n_independent: int
    """How many of them fit beside each other without sharing rows."""
    mean_hits: float
    """Compatible rows per position: what chance really shows."""
    hit_fraction: float
    """Positions with at least one compatible row."""
    expected_fraction: float
    """The same from the density alone."""
    p: float
    """Binomial probability, two-sided, of a fraction so far from the one expected."""

    @property
    def expected(self) -> float:
        """Unrelated rows per position that this fraction stands for; the mean where every position shows one."""
        return float(-np.log1p(-self.hit_fraction)) if self.hit_fraction < 1.0 else self.mean_hits


def ring(separation_arcsec: ArrayLike, inner_arcsec: float, outer_arcsec: float) -> Bools:
    """Rows between two radii, the outer one included (definition)."""
    r = np.asarray(separation_arcsec, dtype=float)
    return np.asarray((r > inner_arcsec) & (r <= outer_arcsec), dtype=bool)


def density_at_least_as_bright(
    brightness: ArrayLike, in_ring: ArrayLike, area_deg2: float, fainter_is_larger: bool
) -> Floats:
    """Surface density of field rows at least as bright as each row, per square degree.

    Parameters
    ----------
    brightness : array_like, shape (n,)
        Magnitudes or fluxes of all rows; ``nan`` where a row has none.
    in_ring : array_like of bool, shape (n,)
        Which rows are the field.
    area_deg2 : float
        Area of the ring, above 0.
    fainter_is_larger : bool
        True for magnitudes.

    Returns
    -------
    ndarray, shape (n,)
        For a row without a brightness the density of the whole ring. Never below that of one row: nothing in the
        ring is no proof of emptiness. Rows without a brightness in the ring count as brighter than all.

    Raises
    ------
    RangeError
        When the area is not positive.
    """
    if not area_deg2 > 0.0:
        raise RangeError(f"ring area {area_deg2} deg^2 is not allowed; it must be above 0")
    value = np.asarray(brightness, dtype=float)
    rank = value if fainter_is_larger else -value
    field = rank[np.asarray(in_ring, dtype=bool)]
    known = np.sort(field[np.isfinite(field)])
    unknown = field.size - known.size
    count = np.where(np.isfinite(rank), np.searchsorted(known, rank, side="right") + unknown, field.size)
    return np.maximum(count, 1) / area_deg2


def gradient(east_arcsec: ArrayLike, north_arcsec: ArrayLike, in_ring: ArrayLike) -> Gradient:
    """Whether the rows of a ring crowd to one side.

    Notes
    -----
    Rayleigh test of uniformity on the circle with p = exp(-n R^2), good to a few per cent above ten rows (Mardia &
    Jupp 2000, Directional Statistics, 6.3.1; edition and section from memory).
    """
    chosen = np.asarray(in_ring, dtype=bool)
    e, n = np.asarray(east_arcsec, dtype=float)[chosen], np.asarray(north_arcsec, dtype=float)[chosen]
    r = np.hypot(e, n)
    e, n, r = e[r > 0.0], n[r > 0.0], r[r > 0.0]
    if not r.size:
        return Gradient(0, 0.0, 0.0, 1.0)
    x, y = float(np.mean(e / r)), float(np.mean(n / r))
    strength = float(np.hypot(x, y))
    return Gradient(r.size, strength, float(np.degrees(np.arctan2(x, y)) % 360.0), float(np.exp(-r.size * strength**2)))


def beside(inner_arcsec: float, outer_arcsec: float, n: int) -> tuple[Floats, Floats]:
    """Positions spread evenly over a ring, east and north offsets in arcsec, the same ones every time.

    An empty pair when the ring has no width. Spiral of the golden angle (Vogel 1979, Mathematical Biosciences 44, 179).
    """
    if not outer_arcsec > inner_arcsec:
        return np.empty(0), np.empty(0)
    i = np.arange(n)
    r = np.sqrt(inner_arcsec**2 + (outer_arcsec**2 - inner_arcsec**2) * (i + 0.5) / n)
    return r * np.sin(i * GOLDEN_ANGLE), r * np.cos(i * GOLDEN_ANGLE)


def search_beside(
    east_arcsec: ArrayLike,
    north_arcsec: ArrayLike,
    cxx: ArrayLike,
    cyy: ArrayLike,
    cxy: ArrayLike,
    *,
    k: float,
    outer_arcsec: float,
    expected: float,
    n_positions: int,
    least: int,
) -> Repeated | None:
    """Repeat the search for compatible rows at positions beside the target.

    Parameters
    ----------
    east_arcsec, north_arcsec : array_like, shape (n,)
        Rows relative to the target.
    cxx, cyy, cxy : array_like, shape (n,)
        Combined covariance of the target and each row, arcsec^2.
    k : float
        Normalised separation up to which a row is compatible.
    outer_arcsec : float
        Radius of the cone that was searched: no repeated search reaches beyond.
    expected : float
        Unrelated rows that the density leads one to expect at one position.
    n_positions, least : int
        How many positions are tried, and how many must fit.

    Returns
    -------
    Repeated or None
        None when fewer than ``least`` error regions fit side by side between the target's own and the edge: they
        would share their rows and prove nothing.
    """
    e, n = np.asarray(east_arcsec, dtype=float), np.asarray(north_arcsec, dtype=float)
    if not e.size:
        return None
    xx, yy, xy = (np.broadcast_to(np.asarray(v, dtype=float), e.shape) for v in (cxx, cyy, cxy))
    reach = k * np.sqrt(np.maximum(xx, yy))
    typical = float(np.median(reach))
    inner, outer = 2.0 * typical, outer_arcsec - typical
    own = float(np.median(np.pi * k * k * np.sqrt(np.maximum(xx * yy - xy**2, 0.0))))
    independent = np.pi * (outer**2 - inner**2) / own if outer > inner and own > 0.0 else 0.0
    if independent < least:
        return None
    at_e, at_n = beside(inner, outer, n_positions)
    which, near = pairs(at_n, np.full(n_positions, float(reach.max())), n)
    d = normalised(e[near] - at_e[which], n[near] - at_n[which], xx[near], yy[near], xy[near])
    hits = np.bincount(which[d <= k], minlength=n_positions)
    n_independent = int(min(independent, n_positions))
    fraction = float(np.mean(hits > 0))
    return Repeated(
        n_positions=n_positions,
        n_independent=n_independent,
        mean_hits=float(hits.mean()),
        hit_fraction=fraction,
        expected_fraction=float(-np.expm1(-expected)),
        p=binomial_two_sided(round(fraction * n_independent), n_independent, float(-np.expm1(-expected))),
    )


def binomial_two_sided(seen: int, n: int, share: float) -> float:
    """Twice the smaller binomial tail of ``seen`` in ``n`` trials, at most 1 (definition).

    Summed term by term, so that a warm answer does not pay for importing scipy.
    """
    if not 0.0 < share < 1.0:
        return 1.0 if seen == round(n * share) else 0.0
    logs = np.concatenate([[0.0], np.cumsum(np.log(np.arange(n, 0, -1)) - np.log(np.arange(1, n + 1)))])
    i = np.arange(n + 1)
    terms = np.exp(logs + i * np.log(share) + (n - i) * np.log1p(-share))
    return float(min(1.0, 2.0 * min(terms[: seen + 1].sum(), terms[seen:].sum())))


def ring_area_deg2(inner_arcsec: float, outer_arcsec: float) -> float:
    """Area of a flat ring, square degrees; 0 where it has no width (definition)."""
    return max(0.0, float(np.pi * (outer_arcsec**2 - inner_arcsec**2) / ARCSEC2_PER_DEG2))
