"""Weigh the rows of one catalog against the target's position, and say what the best of them may be called."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from xmatch.assumptions import Assumptions
from xmatch.constants import ARCSEC2_PER_DEG2
from xmatch.match.chance import chance_within, crowding_tail, expected_in_ellipse, local_density
from xmatch.match.ellipse import covariance
from xmatch.match.motion import motion_sigma_arcsec, move, target_motion_sigma_arcsec
from xmatch.match.odds import density_at, reliability
from xmatch.match.separation import normalised, offsets_arcsec, separation_arcsec, tail
from xmatch.records import Band, Bools, Candidate, Floats, Measured, Outcome, Position, Rows


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
    """Probability of an unrelated row at least as close in normalised separation."""
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


def weigh(
    position: Position,
    rows: Rows,
    *,
    radius_arcsec: float,
    assumptions: Assumptions,
    distance_pc: float | None = None,
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

    Notes
    -----
    Covariances of target, row, frame and motions are added; the multi-hypothesis posterior is that of Sutherland &
    Saunders 1992, MNRAS 259, 413, with a uniform prior over brightness.
    """
    k = assumptions.compatible_sigma
    dt = np.zeros(len(rows)) if position.epoch_yr is None else position.epoch_yr - rows.epoch_yr
    ra, dec = move(rows.ra_deg, rows.dec_deg, rows.pm_ra_mas_yr, rows.pm_dec_mas_yr, dt)
    east, north = offsets_arcsec(position.ra_deg, position.dec_deg, ra, dec)
    separation = separation_arcsec(position.ra_deg, position.dec_deg, ra, dec)
    txx, tyy, txy = covariance(position.sigma_major_arcsec, position.sigma_minor_arcsec, position.angle_deg)
    rxx, ryy, rxy = covariance(rows.sigma_major_arcsec, rows.sigma_minor_arcsec, rows.angle_deg)
    extra: Floats = np.full(len(rows), assumptions.frame_sigma_arcsec**2)
    if assumptions.target_speed_km_s > 0.0 and distance_pc is not None:
        extra = extra + np.square(target_motion_sigma_arcsec(assumptions.target_speed_km_s, distance_pc, dt))
    population = assumptions.population_motion_mas_yr
    known = np.isfinite(rows.pm_ra_mas_yr) & np.isfinite(rows.pm_dec_mas_yr)
    ra_error = np.where(known, np.nan_to_num(rows.pm_ra_error_mas_yr), np.nan)
    dec_error = np.where(known, np.nan_to_num(rows.pm_dec_error_mas_yr), np.nan)
    cxx = txx + rxx + extra + np.square(motion_sigma_arcsec(ra_error, dt, population))
    cyy = tyy + ryy + extra + np.square(motion_sigma_arcsec(dec_error, dt, population))
    cxy = txy + rxy
    d = normalised(east, north, cxx, cyy, cxy)
    compatible = d <= k
    own = (cxx, cyy, cxy) if len(rows) else (txx, tyy, txy)
    xx, yy, xy = (float(np.median(v)) for v in own)
    inner = k * float(np.sqrt(max(xx, yy)))
    density, error, n_ring = local_density(separation, inner, radius_arcsec)
    note = f"{density:.3g} +- {error:.2g} per square degree from {n_ring} rows in the ring"
    if n_ring < assumptions.density_min_rows:
        note = f"density from only {n_ring} rows: {note}"
    chance = chance_within(expected_in_ellipse(density, cxx, cyy, cxy, d))
    q = assumptions.listed_fraction
    ratio = q * density_at(d, cxx, cyy, cxy) * ARCSEC2_PER_DEG2 / density
    odds, none = reliability(np.nan_to_num(ratio), q)
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
        density_note=note,
        expected_chance=float(expected_in_ellipse(density, xx, yy, xy, k)),
        none_listed=none,
        dt_yr=float(np.median(dt)) if len(rows) else 0.0,
    )


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
    best = int(np.argmax(weighed.odds))
    odds = float(weighed.odds[best])
    crowd = crowding_tail(n, weighed.expected_chance)
    rows = "1 row is" if n == 1 else f"{n} rows are"
    facts = (
        f"{rows} compatible, {weighed.expected_chance:.2g} unrelated expected; the best lies "
        f"{weighed.separation_arcsec[best]:.2f} arcsec away ({weighed.normalised[best]:.2f} sigma), probability of a "
        f"true match {odds:.2g}, of any chance row so close over all catalogs {global_chance:.2g}"
    )
    if odds >= assumptions.counterpart_odds and global_chance <= assumptions.counterpart_global_chance:
        return Outcome.COUNTERPART, facts
    if crowd >= assumptions.crowding_tail and odds < assumptions.crowding_odds:
        return Outcome.CHANCE, f"{facts}; crowding shows as many with probability {crowd:.2g}"
    return Outcome.AMBIGUOUS, f"{facts}; neither chance nor a counterpart can be set aside"


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
            photometry=tuple(
                Measured(
                    band=band,
                    value=float(rows.flux[band.name].value[i]),
                    error=float(rows.flux[band.name].error[i]),
                    is_limit=bool(rows.flux[band.name].is_limit[i]),
                )
                for band in bands
                if band.name in rows.flux and np.isfinite(rows.flux[band.name].value[i])
            ),
        )
        for i in order
    )
