"""Rows of several catalogs that are one physical object."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray

from xmatch.assumptions import Assumptions
from xmatch.constants import ARCSEC2_PER_DEG2, DEG2_SR
from xmatch.match.chance import chance_within, expected_in_ellipse
from xmatch.match.decide import Weighed, row_covariance
from xmatch.match.ellipse import axes, covariance
from xmatch.match.motion import move, target_motion_sigma_arcsec
from xmatch.match.nearby import pairs
from xmatch.match.odds import (
    bayes_n_way_elliptical,
    density_at,
    likelihood_ratio,
    mean_place,
    n_way_prior,
    reliability,
    with_heavy_tail,
)
from xmatch.match.separation import normalised, offsets_arcsec
from xmatch.records import Bools, Floats, Position, Rows

SAME_DIGITS = 9
"""Digits to which two odds must differ to be told apart, so that the order of rows never decides (our choice)."""
ARCSEC_PER_DEG = 3600.0


@dataclass(frozen=True)
class Listed:
    """One catalog's rows and how they were weighed."""

    catalog_id: str
    rows: Rows
    weighed: Weighed


@dataclass(frozen=True)
class Group:
    """One physical object: at most one row of each catalog."""

    members: tuple[tuple[int, int], ...]
    """(index of the catalog, index of the row), in the order of the catalogs."""
    ra_deg: float
    dec_deg: float
    """Weighted mean at the target's epoch."""
    sigma_major_arcsec: float
    sigma_minor_arcsec: float
    angle_deg: float
    separation_arcsec: float
    normalised: float
    chance: float
    """Probability of an unrelated object as close, at the density of the sparsest catalog that lists it."""
    odds: float
    """Posterior probability of being the target, all objects considered."""
    log10_bayes: float
    """Of the rows being one object against independent ones; 0 for a single row."""
    together: float
    """Posterior probability that they are one object; 1 for a single row."""


@dataclass(frozen=True)
class Grouped:
    """All objects, most probable first, and the probability that none of them is the target."""

    groups: tuple[Group, ...]
    none_listed: float


def group(
    position: Position,
    listed: Sequence[Listed],
    *,
    radius_arcsec: float,
    assumptions: Assumptions,
    distance_pc: float | None = None,
) -> Grouped:
    """Join compatible rows of several catalogs into objects, and weigh the objects.

    Parameters
    ----------
    position : Position
        The target.
    listed : sequence of Listed
        One entry per catalog. Every row that is compatible with the target becomes part of exactly one object; other
        rows join where they belong to one, such as the old place of a star that has moved since.
    radius_arcsec : float
        Radius of the smallest cone that was searched.
    assumptions : Assumptions
        ``listed_fraction`` is also the prior that a second catalog lists an object of the first;
        ``together_odds`` is the probability from which two rows are joined.
    distance_pc : float, optional
        For the target's own motion when a speed is assumed.

    Notes
    -----
    Two rows are compared at one epoch: the one with a proper motion is moved to the epoch of the other. Joining is
    greedy, best pair first, each pair weighed against all other rows of its catalog and against none of them
    (Sutherland & Saunders 1992, MNRAS 259, 413); the n-way factor of the whole is that of Budavari & Szalay 2008, ApJ
    679, 301. The objects are then weighed as rows are, an object at the density of the sparsest catalog that lists
    it: it is one of that catalog's population.
    """
    partners: dict[tuple[int, int], tuple[tuple[int, int], ...]] = {}
    for members in _joined(listed, assumptions):
        for member in members:
            partners[member] = members
    seeds = [(c, int(i)) for c, one in enumerate(listed) for i in np.flatnonzero(one.weighed.compatible)]
    found = list(dict.fromkeys(partners.get(seed, (seed,)) for seed in seeds))
    drafts = [_draft(position, listed, members, assumptions, distance_pc, radius_arcsec) for members in found]
    odds, none = reliability([ratio for _, ratio in drafts], assumptions.listed_fraction)
    groups = [Group(**{**vars(draft), "odds": float(value)}) for (draft, _), value in zip(drafts, odds, strict=True)]
    groups.sort(key=lambda g: (-round(g.odds, SAME_DIGITS), _names(listed, g.members)))
    return Grouped(tuple(groups), none)


def _names(listed: Sequence[Listed], members: Sequence[tuple[int, int]]) -> list[tuple[str, str]]:
    return [(listed[c].catalog_id, listed[c].rows.key[i]) for c, i in members]


def _joined(listed: Sequence[Listed], assumptions: Assumptions) -> list[tuple[tuple[int, int], ...]]:
    """Sets of rows that are one object, from the best pair down; no row in two, no catalog twice in one."""
    links = [
        link
        for a in range(len(listed))
        if listed[a].weighed.compatible.any()
        for b in range(len(listed))
        if a != b
        for link in _links(listed, a, b, assumptions)
    ]
    links.sort(key=lambda link: (-round(link[0], SAME_DIGITS), sorted(_names(listed, link[1:]))))
    sets: dict[tuple[int, int], list[tuple[int, int]]] = {}
    for _, one, other in links:
        left, right = sets.get(one, [one]), sets.get(other, [other])
        if left is right or {c for c, _ in left} & {c for c, _ in right}:
            continue
        merged = left + right
        for member in merged:
            sets[member] = merged
    unique = {id(members): members for members in sets.values()}
    return [tuple(sorted(members)) for members in unique.values()]


def _links(
    listed: Sequence[Listed], a: int, b: int, assumptions: Assumptions
) -> list[tuple[float, tuple[int, int], tuple[int, int]]]:
    """Rows of catalog b that belong to a compatible row of catalog a, seen from either side.

    A star has only one X-ray source near it, but the X-ray source may have fifty stars: the probability of a pair
    is the lower of the two.
    """
    left, right = listed[a], listed[b]
    if not len(left.rows) or not len(right.rows):
        return []
    seeds = np.flatnonzero(left.weighed.compatible)
    if _far_apart(left.rows, seeds, right.rows, assumptions):
        return []
    i, j, there, near = _one_way(left.rows, seeds, right.rows, right.weighed.density_per_deg2, assumptions)
    good = near & (there >= assumptions.together_odds)
    i, j, there = i[good], j[good], there[good]
    if not i.size:
        return []
    j_back, i_back, back, _ = _one_way(right.rows, np.unique(j), left.rows, left.weighed.density_per_deg2, assumptions)
    seen = dict(zip(zip(i_back.tolist(), j_back.tolist(), strict=True), back.tolist(), strict=True))
    both = [
        (min(p, seen.get((x, y), 0.0)), (a, x), (b, y))
        for x, y, p in zip(i.tolist(), j.tolist(), there.tolist(), strict=True)
    ]
    return [link for link in both if link[0] >= assumptions.together_odds]


def _far_apart(one: Rows, chosen: NDArray[np.intp], other: Rows, assumptions: Assumptions) -> bool:
    """Whether no row of the other list can lie within reach: most pairs of catalogs end here, cheaply."""
    k = assumptions.compatible_sigma
    ends = (one.epoch_yr.min(), one.epoch_yr.max(), other.epoch_yr.min(), other.epoch_yr.max())
    span = float(max(ends) - min(ends))
    fastest = sum(
        float(np.max(np.hypot(np.nan_to_num(rows.pm_ra_mas_yr), np.nan_to_num(rows.pm_dec_mas_yr))))
        for rows in (one, other)
    )
    slack = span * (fastest + k * (_motion_spread(one, assumptions) + _motion_spread(other, assumptions))) / 1e3
    sigma = float(np.max(one.sigma_major_arcsec[chosen])) + float(np.max(other.sigma_major_arcsec))
    reach = k * (sigma + 2.0 * assumptions.frame_sigma_arcsec + 2.0 * assumptions.parallax_mas / 1e3) + slack
    apart = np.abs(np.subtract.outer(one.dec_deg[chosen], other.dec_deg)).min() * ARCSEC_PER_DEG
    return bool(apart > reach)


def _one_way(
    one: Rows, chosen: NDArray[np.intp], other: Rows, other_density_per_deg2: float, assumptions: Assumptions
) -> tuple[NDArray[np.intp], NDArray[np.intp], Floats, Bools]:
    """Pairs (i, j) of chosen rows of one catalog with rows of another: probability that j, rather than another row
    or none, is the same object as i; and whether they are compatible."""
    k, q = assumptions.compatible_sigma, assumptions.listed_fraction
    nothing = np.empty(0, dtype=np.intp)
    if not len(chosen):
        return nothing, nothing, np.empty(0), np.empty(0, dtype=bool)
    picked = _taken(one, chosen)
    ra0, dec0 = float(picked.ra_deg[0]), float(picked.dec_deg[0])
    ends = [float(other.epoch_yr.min()), float(other.epoch_yr.max())]
    span = np.abs(np.subtract.outer(picked.epoch_yr, ends)).max(axis=1)
    speed = np.hypot(np.nan_to_num(picked.pm_ra_mas_yr), np.nan_to_num(picked.pm_dec_mas_yr))
    fastest = float(np.max(np.hypot(np.nan_to_num(other.pm_ra_mas_yr), np.nan_to_num(other.pm_dec_mas_yr))))
    slack = float(span.max()) * _motion_spread(other, assumptions) / 1e3
    widest = k * float(np.sqrt(np.max(other.sigma_major_arcsec) ** 2 + assumptions.frame_sigma_arcsec**2 + slack**2))
    widest += k * assumptions.parallax_mas / 1e3
    reach = k * np.sqrt(_largest(picked, span, assumptions)) + widest + span * (speed + fastest) / 1e3
    _, north1 = offsets_arcsec(ra0, dec0, picked.ra_deg, picked.dec_deg)
    _, north2 = offsets_arcsec(ra0, dec0, other.ra_deg, other.dec_deg)
    i, j = pairs(north1, reach, north2)
    if not i.size:
        return nothing, nothing, np.empty(0), np.empty(0, dtype=bool)
    first, second = _taken(picked, i), _taken(other, j)
    dt = second.epoch_yr - first.epoch_yr
    moves = _has_motion(first) | ~_has_motion(second)  # the one whose motion is known
    dt1, dt2 = np.where(moves, dt, 0.0), np.where(moves, 0.0, -dt)
    ra1, dec1 = move(first.ra_deg, first.dec_deg, first.pm_ra_mas_yr, first.pm_dec_mas_yr, dt1)
    ra2, dec2 = move(second.ra_deg, second.dec_deg, second.pm_ra_mas_yr, second.pm_dec_mas_yr, dt2)
    east, north = offsets_arcsec(ra1, dec1, ra2, dec2)
    own, their = row_covariance(first, dt1, assumptions), row_covariance(second, dt2, assumptions)
    cxx, cyy, cxy = own[0] + their[0], own[1] + their[1], own[2] + their[2]
    d = normalised(east, north, cxx, cyy, cxy)
    f = np.nan_to_num(density_at(d, cxx, cyy, cxy))
    ratio = likelihood_ratio(q, f, other_density_per_deg2 / ARCSEC2_PER_DEG2)
    total = np.bincount(i, weights=ratio, minlength=len(chosen)) + 1.0 - q
    return chosen[i], j, ratio / total[i], np.asarray(d <= k, dtype=bool)


def _has_motion(rows: Rows) -> Bools:
    return np.asarray(np.isfinite(rows.pm_ra_mas_yr) & np.isfinite(rows.pm_dec_mas_yr), dtype=bool)


def _motion_spread(rows: Rows, assumptions: Assumptions) -> float:
    """The largest error that any motion of these rows may have, mas/yr: a bound, cheaper than every row's own."""
    listed = max(float(np.max(np.nan_to_num(v))) for v in (rows.pm_ra_error_mas_yr, rows.pm_dec_error_mas_yr))
    return max(listed, assumptions.motion_error_mas_yr, assumptions.population_motion_mas_yr)


def _largest(rows: Rows, dt_yr: Floats | float, assumptions: Assumptions) -> Floats:
    cxx, cyy, _ = row_covariance(rows, np.asarray(dt_yr, dtype=float), assumptions)
    return np.maximum(cxx, cyy)


def _taken(rows: Rows, index: NDArray[np.intp]) -> Rows:
    """Rows at positions, possibly repeated, without their photometry."""
    names = ("ra_deg", "dec_deg", "sigma_major_arcsec", "sigma_minor_arcsec", "angle_deg", "epoch_yr", "pm_ra_mas_yr", "pm_dec_mas_yr", "pm_ra_error_mas_yr", "pm_dec_error_mas_yr")  # fmt: skip
    arrays: dict[str, Any] = {name: getattr(rows, name)[index] for name in names}
    return Rows(key=("",) * len(index), **arrays)


def _steps(epoch_yr: float | None, rows: Rows, known: NDArray[np.intp]) -> Floats:
    if epoch_yr is not None:
        return epoch_yr - rows.epoch_yr
    if not known.size:
        return np.zeros(len(rows))
    return rows.epoch_yr[known[np.argmin(rows.sigma_major_arcsec[known])]] - rows.epoch_yr


def _draft(
    position: Position,
    listed: Sequence[Listed],
    members: tuple[tuple[int, int], ...],
    assumptions: Assumptions,
    distance_pc: float | None,
    radius_arcsec: float,
) -> tuple[Group, float]:
    """One object before all are weighed against each other, and its likelihood ratio."""
    parts = [_taken(listed[c].rows, np.array([i])) for c, i in members]
    names = [name for name in vars(parts[0]) if name not in ("key", "flux", "raw")]
    arrays: dict[str, Any] = {name: np.concatenate([getattr(part, name) for part in parts]) for name in names}
    rows = Rows(key=("",) * len(parts), **arrays)
    has = _has_motion(rows)
    known = np.flatnonzero(has)
    if known.size and known.size < len(members):
        # the object moves as the row with a motion says, also where the other catalogs list none
        best = known[np.argmin(rows.sigma_major_arcsec[known])]
        for values in (rows.pm_ra_mas_yr, rows.pm_dec_mas_yr, rows.pm_ra_error_mas_yr, rows.pm_dec_error_mas_yr):
            values[~has] = values[best]  # the arrays are this function's own
    # without an epoch of the target rows stay where they are, but for those that must meet a moving one
    dt = _steps(position.epoch_yr, rows, known)
    ra, dec = move(rows.ra_deg, rows.dec_deg, rows.pm_ra_mas_yr, rows.pm_dec_mas_yr, dt)
    east, north = offsets_arcsec(position.ra_deg, position.dec_deg, ra, dec)
    cov = row_covariance(rows, dt, assumptions)
    log_bayes, together = 0.0, 1.0
    if len(members) > 1:
        log_bayes, place, mean = bayes_n_way_elliptical(east, north, *cov)
        numbers = np.log10([4.0 * np.pi * listed[c].weighed.density_per_deg2 / DEG2_SR for c, _ in members])
        prior = n_way_prior(numbers, float(numbers.min()) + np.log10(assumptions.listed_fraction))
        together = float(1.0 / (1.0 + 10.0 ** min(300.0, -(log_bayes + prior))))
    else:
        place, mean, _ = mean_place(east, north, *cov)
    major, minor, angle = axes(*mean)
    txx, tyy, txy = covariance(position.sigma_major_arcsec, position.sigma_minor_arcsec, position.angle_deg)
    own = 0.0
    if assumptions.target_speed_km_s > 0.0 and distance_pc is not None:
        own = float(np.max(target_motion_sigma_arcsec(assumptions.target_speed_km_s, distance_pc, dt))) ** 2
    total = mean[0] + txx + own, mean[1] + tyy + own, mean[2] + txy
    d = float(normalised(*place, *total))
    density = min(listed[c].weighed.density_per_deg2 for c, _ in members)
    f = with_heavy_tail(density_at(d, *total), assumptions.heavy_tail, radius_arcsec)
    ratio = float(likelihood_ratio(assumptions.listed_fraction, f, density / ARCSEC2_PER_DEG2))
    # a small step on the tangent plane is a motion of one year
    at_ra, at_dec = move(position.ra_deg, position.dec_deg, place[0] * 1e3, place[1] * 1e3, 1.0)
    draft = Group(
        members=members,
        ra_deg=float(at_ra),
        dec_deg=float(at_dec),
        sigma_major_arcsec=float(major),
        sigma_minor_arcsec=float(minor),
        angle_deg=float(angle),
        separation_arcsec=float(np.hypot(*place)),
        normalised=d,
        chance=float(chance_within(expected_in_ellipse(density, *total, d))),
        odds=float("nan"),
        log10_bayes=log_bayes,
        together=together,
    )
    return draft, ratio
