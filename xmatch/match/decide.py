"""Weigh the rows of one catalog against the target's position, and say what the best of them may be called."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass

import numpy as np

from xmatch.assumptions import Assumptions
from xmatch.constants import ARCSEC2_PER_DEG2
from xmatch.match.chance import chance_within, crowding_tail, downes, expected_in_ellipse, local_density
from xmatch.match.ellipse import covariance
from xmatch.match.motion import covariance_at, move, parallax_covariance, target_motion_sigma_arcsec
from xmatch.match.odds import density_at, likelihood_ratio, reliability, with_heavy_tail
from xmatch.match.separation import normalised, offsets_arcsec, separation_arcsec, tail
from xmatch.match.surroundings import (
    Gradient,
    Repeated,
    density_at_least_as_bright,
    gradient,
    ring,
    ring_area_deg2,
    search_beside,
)
from xmatch.records import Band, Bools, Candidate, Floats, Measured, Outcome, Position, Quantity, Rows


@dataclass(frozen=True)
class Weighed:
    """Rows of one catalog held against the target's position; arrays of length n, rows at the target's epoch."""

    ra_deg: Floats
    dec_deg: Floats
    east_arcsec: Floats
    north_arcsec: Floats
    separation_arcsec: Floats
    normalised: Floats
    tail: Floats
    chance: Floats
    """Probability of an unrelated row as close in normalised separation and as bright (Downes et al. 1986)."""
    odds: Floats
    compatible: Bools
    density_per_deg2: float
    density_note: str
    expected_chance: float
    """Unrelated rows expected inside the compatible region of a typical row."""
    none_listed: float
    """Posterior probability that no row is the counterpart."""
    dt_yr: float
    """Median epoch step that the rows were moved by."""
    ratio: Floats
    """Likelihood ratio of each row, the listed fraction in it."""
    cxx: Floats
    cyy: Floats
    cxy: Floats
    """Combined covariance of target and row, arcsec^2."""
    chance_band: str
    """Band in which brightness was ranked for ``chance``; empty when it was not."""
    repeated: Repeated | None
    """The same search at positions beside the target; None where the cone has no room for it."""
    gradient: Gradient


def weigh(
    position: Position,
    rows: Rows,
    *,
    radius_arcsec: float,
    assumptions: Assumptions,
    distance_pc: float | None = None,
    bands: Sequence[Band] = (),
) -> Weighed:
    """Weigh every row of one catalog as a counterpart.

    Parameters
    ----------
    position : Position
        The target; without an epoch the rows stay where they are.
    rows : Rows
        Neighbourhood rows, possibly none.
    radius_arcsec : float
        Radius of the cone that was searched.
    assumptions : Assumptions
        Frame term, population motion, priors.
    distance_pc : float, optional
        For the target's own motion when a speed is assumed.
    bands : sequence of Band, optional
        The catalog's bands; the one most rows have a value in ranks them by brightness for the chance probability.

    Notes
    -----
    Covariances of target, row, frame and motions are added; the multi-hypothesis posterior is that of Sutherland &
    Saunders 1992, MNRAS 259, 413. The class of the target being unknown, its brightness is taken to be spread like that
    of the field, so that brightness cancels in the odds; it counts in the chance probability.
    """
    k = assumptions.compatible_sigma
    dt = np.zeros(len(rows)) if position.epoch_yr is None else position.epoch_yr - rows.epoch_yr
    ra, dec = move(rows.ra_deg, rows.dec_deg, rows.pm_ra_mas_yr, rows.pm_dec_mas_yr, dt)
    east, north = offsets_arcsec(position.ra_deg, position.dec_deg, ra, dec)
    separation = separation_arcsec(position.ra_deg, position.dec_deg, ra, dec)
    txx, tyy, txy = covariance(position.sigma_major_arcsec, position.sigma_minor_arcsec, position.angle_deg)
    own_motion = np.zeros(len(rows))
    if assumptions.target_speed_km_s > 0.0 and distance_pc is not None:
        own_motion = np.square(target_motion_sigma_arcsec(assumptions.target_speed_km_s, distance_pc, dt))
    rxx, ryy, rxy = row_covariance(rows, dt, assumptions)
    cxx, cyy, cxy = txx + rxx + own_motion, tyy + ryy + own_motion, txy + rxy
    d = normalised(east, north, cxx, cyy, cxy)
    compatible = d <= k
    own = (cxx, cyy, cxy) if len(rows) else (txx, tyy, txy)
    inner = k * float(np.sqrt(max(float(np.median(own[0])), float(np.median(own[1])))))
    density, error, n_ring = local_density(separation, inner, radius_arcsec)
    around = ring(separation, inner, radius_arcsec)
    area_deg2 = ring_area_deg2(inner, radius_arcsec)
    if area_deg2 <= 0.0:  # the error region fills the cone: all rows are field and candidate at once
        density, error, n_ring = local_density(separation, -1.0, radius_arcsec)
        around, area_deg2 = ring(separation, -1.0, radius_arcsec), ring_area_deg2(0.0, radius_arcsec)
    notes = [f"{density:.3g} +- {error:.2g} per square degree from {n_ring} rows in the ring"]
    if n_ring < assumptions.density_min_rows:
        notes = [f"density from only {n_ring} rows: {notes[0]}"]
    expected = float(np.mean(expected_in_ellipse(density, *own, k)))
    slope = gradient(east, north, around)
    if slope.n >= assumptions.density_min_rows and slope.p < assumptions.gradient_p:
        notes.append(
            f"rows crowd towards position angle {slope.angle_deg:.0f} deg (mean direction {slope.strength:.2f} of 1, "
            f"probability {slope.p:.1g} in an even field)"
        )
    repeated = search_beside(
        east, north, cxx, cyy, cxy, k=k, outer_arcsec=radius_arcsec, expected=expected,
        n_positions=assumptions.offset_positions, least=assumptions.offset_positions_least,
    )  # fmt: skip
    if repeated is not None and repeated.p < assumptions.offset_disagree_p:
        notes.append(
            f"the same search at {repeated.n_positions} positions beside it shows a row at {repeated.hit_fraction:.2g} of "
            f"them where the density expects {repeated.expected_fraction:.2g} (probability {repeated.p:.1g}): what was "
            "seen is used"
        )
        expected = repeated.expected
    chance, band = _chance(rows, d, (cxx, cyy, cxy), around, density, area_deg2, k, bands)
    q = assumptions.listed_fraction
    f = with_heavy_tail(np.nan_to_num(density_at(d, cxx, cyy, cxy)), assumptions.heavy_tail, radius_arcsec)
    ratio = likelihood_ratio(q, f, density / ARCSEC2_PER_DEG2)
    odds, none = reliability(ratio, q)
    return Weighed(
        ra_deg=ra,
        dec_deg=dec,
        east_arcsec=east,
        north_arcsec=north,
        separation_arcsec=separation,
        normalised=d,
        tail=tail(d),
        chance=chance,
        odds=odds,
        compatible=np.asarray(compatible, dtype=bool),
        density_per_deg2=density,
        density_note="; ".join(notes),
        expected_chance=expected,
        none_listed=none,
        dt_yr=float(np.median(dt)) if len(rows) else 0.0,
        ratio=ratio,
        cxx=cxx,
        cyy=cyy,
        cxy=cxy,
        chance_band=band,
        repeated=repeated,
        gradient=slope,
    )


def row_covariance(rows: Rows, dt_yr: Floats, assumptions: Assumptions) -> tuple[Floats, Floats, Floats]:
    """Covariance of every row moved by ``dt_yr``, frame, motion and parallax terms included, arcsec^2.

    A row without a motion gets the population's spread, one whose motion has no error the stated default.
    """
    known = np.isfinite(rows.pm_ra_mas_yr) & np.isfinite(rows.pm_dec_mas_yr)

    def error(listed: Floats) -> Floats:
        default = np.where(known, assumptions.motion_error_mas_yr, assumptions.population_motion_mas_yr)
        return np.where(known & np.isfinite(listed), listed, default)

    cxx, cyy, cxy = covariance_at(
        *covariance(rows.sigma_major_arcsec, rows.sigma_minor_arcsec, rows.angle_deg),
        dt_yr,
        error(rows.pm_ra_error_mas_yr),
        error(rows.pm_dec_error_mas_yr),
    )
    if assumptions.parallax_mas > 0.0:
        pxx, pyy, pxy = parallax_covariance(assumptions.parallax_mas, rows.ra_deg, rows.dec_deg)
        cxx, cyy, cxy = cxx + pxx, cyy + pyy, cxy + pxy
    frame = assumptions.frame_sigma_arcsec**2
    return cxx + frame, cyy + frame, cxy


def _chance(
    rows: Rows,
    d: Floats,
    cov: tuple[Floats, Floats, Floats],
    around: Bools,
    density: float,
    area_deg2: float,
    k: float,
    bands: Sequence[Band],
) -> tuple[Floats, str]:
    """Probability of an unrelated row as close and as bright, and the band in which brightness was ranked.

    Downes et al. 1986: a close row is noticed whether bright or not, a bright one also farther out, so that the
    product of both is what chance has to reach. Without a brightness it is the plain chance of a row as close.
    """
    within = np.minimum(np.nan_to_num(d, nan=np.inf), k)
    best = max(bands, key=lambda b: _n_listed(rows, b), default=None)
    if best is None or _n_listed(rows, best) == 0 or not len(rows):
        return chance_within(expected_in_ellipse(density, *cov, within)), ""
    listed = rows.flux[best.name].value
    as_bright = density_at_least_as_bright(listed, around, area_deg2, best.quantity is Quantity.MAGNITUDE)
    p_star = chance_within(expected_in_ellipse(np.minimum(as_bright, density), *cov, within))
    p_critical = chance_within(expected_in_ellipse(density, *cov, k))
    return downes(p_star, p_critical), best.name


def _n_listed(rows: Rows, band: Band) -> int:
    return int(np.isfinite(rows.flux[band.name].value).sum()) if band.name in rows.flux else 0


def outcome(weighed: Weighed, *, global_chance: float, assumptions: Assumptions) -> tuple[Outcome | None, str]:
    """Say what the compatible rows may be called; None when there is none.

    Parameters
    ----------
    weighed : Weighed
        From :func:`weigh`.
    global_chance : float
        Chance that any of the catalogs searched shows an unrelated row as good as the best one here.
    assumptions : Assumptions
        Thresholds.

    Returns
    -------
    outcome : Outcome or None
    why : str
        The numbers that decided.
    """
    n = int(np.count_nonzero(weighed.compatible))
    if n == 0:
        return None, ""
    told = decided(weighed, global_chance=global_chance, assumptions=assumptions)
    odds, crowd = told["odds"], told["crowding"]
    rows = "1 row is" if n == 1 else f"{n} rows are"
    facts = (
        f"{rows} compatible, {weighed.expected_chance:.2g} unrelated expected; the best lies "
        f"{told['separation_arcsec']:.2f} arcsec away ({told['normalised_separation']:.2f} sigma), probability of a "
        f"true match {odds:.2g}, of any chance row so close{' and bright' if weighed.chance_band else ''} over all "
        f"catalogs {global_chance:.2g}"
    )
    if odds >= assumptions.counterpart_odds and global_chance <= assumptions.counterpart_global_chance:
        return Outcome.COUNTERPART, facts
    if crowd >= assumptions.crowding_tail and odds < assumptions.crowding_odds:
        return Outcome.CHANCE, f"{facts}; crowding shows as many with probability {crowd:.2g}"
    return Outcome.AMBIGUOUS, f"{facts}; neither chance nor a counterpart can be set aside"


def decided(weighed: Weighed, *, global_chance: float, assumptions: Assumptions) -> dict[str, float]:
    """The numbers that decide an outcome, beside the thresholds they were held against.

    Empty when no row is compatible: then nothing was decided. Definition.
    """
    n = int(np.count_nonzero(weighed.compatible))
    if n == 0:
        return {}
    best = int(np.argmax(np.where(weighed.compatible, weighed.odds, -1.0)))
    told = {
        "n_compatible": float(n),
        "expected_chance": weighed.expected_chance,
        "odds": float(weighed.odds[best]),
        "odds_threshold": assumptions.counterpart_odds,
        "none_listed": weighed.none_listed,
        "chance": float(weighed.chance[best]),
        "global_chance": float(global_chance),
        "global_chance_threshold": assumptions.counterpart_global_chance,
        "crowding": crowding_tail(n, weighed.expected_chance),
        "crowding_threshold": assumptions.crowding_tail,
        "crowding_odds_threshold": assumptions.crowding_odds,
        "separation_arcsec": float(weighed.separation_arcsec[best]),
        "normalised_separation": float(weighed.normalised[best]),
        "density_per_deg2": weighed.density_per_deg2,
        "gradient_p": weighed.gradient.p,
    }
    if weighed.repeated is not None:
        told |= {"beside_positions": float(weighed.repeated.n_positions), "beside_fraction": weighed.repeated.hit_fraction,
                 "beside_expected_fraction": weighed.repeated.expected_fraction, "beside_p": weighed.repeated.p}  # fmt: skip
    return told


def candidates(weighed: Weighed, rows: Rows, catalog_id: str, bands: Sequence[Band]) -> tuple[Candidate, ...]:
    """The compatible rows, most probable first, with what each band lists."""
    order = [int(i) for i in np.argsort(-weighed.odds, kind="stable") if weighed.compatible[i]]
    return tuple(
        Candidate(
            catalog_id=catalog_id,
            key=rows.key[i],
            ra_deg=float(weighed.ra_deg[i]),
            dec_deg=float(weighed.dec_deg[i]),
            separation_arcsec=float(weighed.separation_arcsec[i]),
            normalised_separation=float(weighed.normalised[i]),
            tail=float(weighed.tail[i]),
            chance=float(weighed.chance[i]),
            odds=float(weighed.odds[i]),
            photometry=listed_in(rows, i, bands),
        )
        for i in order
    )


def listed_in(
    rows: Rows, index: int, bands: Sequence[Band], flux_cgs: Callable[[float, Band], float | None] | None = None
) -> tuple[Measured, ...]:
    """What a row lists, band by band; with ``flux_cgs`` also as observed flux (definition)."""
    found = []
    for band in bands:
        photometry = rows.flux.get(band.name)
        if photometry is not None and np.isfinite(photometry.value[index]):
            value = float(photometry.value[index])
            found.append(
                Measured(
                    band=band,
                    value=value,
                    error=float(photometry.error[index]),
                    is_limit=bool(photometry.is_limit[index]),
                    flux_cgs=None if flux_cgs is None else flux_cgs(value, band),
                )
            )
    return tuple(found)
