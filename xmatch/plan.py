"""Which searches a look needs, and which of them the store can already answer."""

from __future__ import annotations

from collections.abc import Iterable, Mapping
from dataclasses import dataclass, replace
from datetime import UTC, datetime

from xmatch.assumptions import Assumptions
from xmatch.catalogs.model import LOG_TABLE, Catalog, Table
from xmatch.limits.coverage import touches
from xmatch.match.motion import target_motion_sigma_arcsec
from xmatch.match.separation import separation_arcsec
from xmatch.records import Question, ReplyStatus, Search, Target

FASTEST_STAR_ARCSEC_YR = 10.4
"""Barnard's star, 1916AJ.....29..181B and Gaia DR3: nothing outside the solar system moves faster."""
AGE_LIMIT_DAYS = {"frozen": 180.0, "yearly": 90.0, "monthly": 14.0, "rolling": 3.0}
"""Age at which an answer is asked for again, by the catalog's cadence (our choice; an option overrides it)."""
SAME_CENTRE_ARCSEC = 0.1
"""A stored cone answers a new one only when its centre agrees this well (our choice)."""
LEAST_SIGMA_ARCSEC = 1.0
"""Catalog errors and frames make a cone below a few arcsec meaningless (our choice)."""
WIDEST_ARCSEC = 5.0 * 3600.0
"""No cone is made wider than this (our choice: the widest that a catalog file may ask for)."""
MOST_GROWTH, AIM = 4.0, 2.0
"""A cone with too few rows grows so that twice the least number is expected, at most fourfold (our choice)."""
DENSITY_RING = 4.0
"""The cone reaches at least this many times the compatible radius, so that a ring is left for the density."""


@dataclass(frozen=True)
class Step:
    """One search of the plan.

    ``known`` is the stored search that answers it, if any; ``ask`` says whether the archive is to be
    asked again; ``least_radius_arcsec`` is the smallest cone that still answers the question;
    ``limit_days`` is the age at which an answer is too old.
    """

    catalog: Catalog
    table: Table
    question: Question
    least_radius_arcsec: float
    known: Search | None
    ask: bool
    limit_days: float = 0.0

    @property
    def is_log(self) -> bool:
        """Whether it asks where a mission looked, not what it found."""
        return self.table.name == LOG_TABLE


def make_plan(
    target: Target,
    catalogs: Mapping[str, Catalog],
    stored: Iterable[Search],
    *,
    assumptions: Assumptions,
    now: datetime,
    offline: bool = False,
    again: bool = False,
    age_limit_days: float | None = None,
) -> tuple[Step, ...]:
    """Return one step per table that may hold rows around the target.

    Parameters
    ----------
    target : Target
        What is looked at.
    catalogs : mapping of str to Catalog
        The registry; every catalog in it gets at least one step.
    stored : iterable of Search
        Whole searches of this target that the store holds.
    assumptions : Assumptions
        For the width of the error region.
    now : datetime
        The present, time-zone aware.
    offline : bool
        Never ask; any age will do.
    again : bool
        Ask even when the store has a fresh answer.
    age_limit_days : float, optional
        Overrides the age limit of every catalog.
    """
    position = target.position
    stored = list(stored)
    steps = []
    for catalog in catalogs.values():
        least = least_radius_arcsec(target, catalog, assumptions)
        ring = DENSITY_RING * assumptions.compatible_sigma * position.sigma_major_arcsec
        radius = max(catalog.neighbourhood_arcsec, ring, least + fast_star_arcsec(target, catalog))
        limit_days = AGE_LIMIT_DAYS[catalog.refresh] if age_limit_days is None else age_limit_days
        tables = [
            table
            for table in catalog.tables
            if table.holds is None or touches(position.ra_deg, position.dec_deg, radius, table.holds)
        ]
        asked = [(table, catalog.question(table, position.ra_deg, position.dec_deg, radius), least) for table in tables]
        if catalog.log is not None:
            log_question = catalog.log_question(position.ra_deg, position.dec_deg, least)
            asked.append((catalog.log.table, log_question, log_question.radius_arcsec))
        for table, question, enough in asked:
            known = _answer_in_store(question, enough, stored)
            fresh = known is not None and age_s(known, now) < limit_days * 86400.0
            ask = not offline and (again or not fresh)
            steps.append(Step(catalog, table, question, enough, known, ask, limit_days))
    return tuple(steps)


def least_radius_arcsec(target: Target, catalog: Catalog, assumptions: Assumptions) -> float:
    """Smallest cone that still holds the error region, and the target's own motion where a speed is assumed."""
    region = assumptions.compatible_sigma * max(target.position.sigma_major_arcsec, LEAST_SIGMA_ARCSEC)
    own = 0.0
    if assumptions.target_speed_km_s > 0.0 and target.distance is not None:
        own = assumptions.compatible_sigma * float(
            target_motion_sigma_arcsec(
                assumptions.target_speed_km_s, target.distance.low_pc, epoch_gap_yr(target, catalog)
            )
        )
    return region + own


def fast_star_arcsec(target: Target, catalog: Catalog) -> float:
    """How far the fastest star can have moved between the epochs; a catalog without motions cannot move it back."""
    return FASTEST_STAR_ARCSEC_YR * epoch_gap_yr(target, catalog) if catalog.motion is not None else 0.0


def epoch_gap_yr(target: Target, catalog: Catalog) -> float:
    """Years between the target's epoch and the catalog's; 0 without an epoch of the target."""
    epoch = target.position.epoch_yr
    return 0.0 if epoch is None else abs(epoch - catalog.epoch.value_yr)


def smaller(question: Question, least_radius: float) -> Question | None:
    """Return the same question over half the radius, or None when that could miss the counterpart."""
    radius = question.radius_arcsec / 2.0
    return replace(question, radius_arcsec=radius) if radius >= least_radius else None


def wider(question: Question, n_rows: int, least_rows: int) -> Question | None:
    """Return the same question over a cone wide enough for some tens of rows, None where it is wide enough already.

    Parameters
    ----------
    question : Question
        What was asked.
    n_rows : int
        Rows that it brought.
    least_rows : int
        Rows from which a density is believed.
    """
    if n_rows >= least_rows or question.radius_arcsec >= WIDEST_ARCSEC:
        return None
    growth = min(MOST_GROWTH, (AIM * least_rows / max(n_rows, 1)) ** 0.5)
    return replace(question, radius_arcsec=min(WIDEST_ARCSEC, growth * question.radius_arcsec))


def age_s(search: Search, now: datetime) -> float:
    """Age of a search in seconds, never negative."""
    asked = datetime.fromisoformat(search.asked_at.replace("Z", "+00:00"))
    return max(0.0, (now - asked.astimezone(UTC)).total_seconds())


def _answer_in_store(question: Question, least: float, stored: list[Search]) -> Search | None:
    """The latest whole search that covers the question: same table and release, same centre, wide enough."""
    fitting = [
        search
        for search in stored
        if search.status is ReplyStatus.WHOLE
        and (search.catalog_id, search.release, search.table) == (question.catalog_id, question.release, question.table)
        and search.radius_arcsec >= least
        and separation_arcsec(search.ra_deg, search.dec_deg, question.ra_deg, question.dec_deg) < SAME_CENTRE_ARCSEC
    ]
    return max(fitting, key=lambda search: (search.asked_at, search.search_id)) if fitting else None
