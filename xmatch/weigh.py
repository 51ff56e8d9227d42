"""From rows to findings: what each catalog says, and how faint the target must be where it says nothing.

Pure composition of the match and limits rooms: no store, no network, no clock.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, replace

import numpy as np

from xmatch.assumptions import Assumptions
from xmatch.catalogs.model import Catalog
from xmatch.flux.physical import observed_flux_cgs
from xmatch.limits.coverage import SECTORS, Contains, covered_fraction, sides_with_rows
from xmatch.limits.depth import limit_for_band
from xmatch.limits.hiding import raise_limit
from xmatch.limits.pointings import Exposed, exposure_factor, exposures
from xmatch.limits.pulses import (
    contains_whole_pulse_probability,
    overlaps_pulse_probability,
    pulse_peak_limit,
)
from xmatch.match.chance import chance_within
from xmatch.match.decide import Weighed, candidates, outcome, weigh
from xmatch.plan import FASTEST_STAR_ARCSEC_YR
from xmatch.records import (
    Candidate,
    Finding,
    Limit,
    LimitMethod,
    Outcome,
    Pointings,
    Quantity,
    ReplyStatus,
    Rows,
    Search,
    Target,
    Waveband,
)

COVERED = 1.0 - 1.0e-9
ROWS_A_SIDE = 3
"""Rows in each of eight directions that show a survey reaching a place (our choice: by chance a void of that size
beside a survey's edge would have to hold none of some 24 rows)."""
_FAILED = {
    ReplyStatus.TRUNCATED: Outcome.TRUNCATED,
    ReplyStatus.UNANSWERED: Outcome.UNANSWERED,
    ReplyStatus.MISREAD: Outcome.MISREAD,
}


@dataclass(frozen=True)
class Evidence:
    """Everything known of one catalog around the target.

    ``failed`` is the failed attempt of this look, if asking went wrong; ``searches`` are the whole
    searches whose rows are used, possibly older ones.
    """

    catalog: Catalog
    searches: tuple[Search, ...]
    rows: Rows | None
    failed: Search | None
    age_s: float | None
    complete: bool = True
    """Whether every table that may hold rows has a whole answer."""
    logs: tuple[Search, ...] = ()
    """The search of the observation log, for a mission that points."""
    pointings: Pointings | None = None
    """What the log answered; None without an answer."""
    contains: Contains | None = None
    """Says which positions the catalog looked at, from the log or a fetched footprint."""


def findings(target: Target, evidence: Sequence[Evidence], assumptions: Assumptions) -> tuple[Finding, ...]:
    """Return what each catalog says about the target, in the order given.

    The outcome of a catalog depends on the others only through the chance alignments expected over
    all catalogs searched.
    """
    distance_pc = None
    if target.distance is not None:
        distance_pc = float(np.sqrt(target.distance.low_pc * target.distance.high_pc))
    weighed: dict[str, Weighed] = {}
    for item in evidence:
        if item.rows is not None and item.complete:
            radius = min(search.radius_arcsec for search in item.searches)
            weighed[item.catalog.id] = weigh(
                target.position, item.rows, radius_arcsec=radius, assumptions=assumptions, distance_pc=distance_pc
            )
    return tuple(_finding(target, item, weighed.get(item.catalog.id), weighed, assumptions) for item in evidence)


def _global_chance(own: Weighed, all_weighed: Mapping[str, Weighed]) -> float:
    """Chance that any catalog searched shows an unrelated row as good as this catalog's best one.

    For the best row the expected number of unrelated rows at least as close is known in its own catalog;
    the other catalogs are trials of the same kind (Sidak, independent trials).
    """
    best = int(np.argmax(own.odds))
    p_best = float(own.chance[best])
    return 1.0 - (1.0 - p_best) ** max(1, len(all_weighed))


def _finding(
    target: Target,
    item: Evidence,
    own: Weighed | None,
    all_weighed: Mapping[str, Weighed],
    assumptions: Assumptions,
) -> Finding:
    catalog = item.catalog
    k = assumptions.compatible_sigma
    fraction = covered_fraction(target.position, catalog.coverage, k, item.contains)
    base = Finding(
        catalog_id=catalog.id,
        title=catalog.title,
        waveband=catalog.waveband,
        release=catalog.release,
        outcome=Outcome.UNANSWERED,
        why="not asked yet: nothing in the store answers, and asking was not allowed",
        searches=item.searches + item.logs + ((item.failed,) if item.failed is not None else ()),
        coverage_fraction=fraction,
        age_s=item.age_s,
    )
    if own is None or item.rows is None:
        if fraction == 0.0:
            # nothing follows from such an answer anyway, so a failure to get it takes nothing away
            unread = f"; the archive gave no usable answer either ({item.failed.detail})" if item.failed else ""
            return replace(base, outcome=Outcome.NOT_COVERED, why=f"{_outside(item)}{unread}")
        if item.failed is not None:
            return replace(base, outcome=_FAILED[item.failed.status], why=item.failed.detail)
        return base
    word, why = _position_says(target, item, own, all_weighed, fraction, assumptions)
    limits: tuple[Limit, ...] = ()
    if word.permits_limit and not catalog.is_object_list:
        limits, raised = _limits(target, item, own, fraction, word, assumptions)
        if raised and word is Outcome.BLANK:
            word = Outcome.HIDDEN
            why = f"{raised[0]}; {why}"
    if item.failed is not None:
        why = f"{why}. The archive did not give a usable answer now ({item.failed.detail}): this is the stored one"
    return replace(
        base,
        outcome=word,
        why=why,
        n_rows=len(item.rows),
        n_compatible=int(own.compatible.sum()),
        density_per_deg2=own.density_per_deg2 if np.isfinite(own.density_per_deg2) else None,
        expected_chance=own.expected_chance,
        candidates=tuple(_with_flux(one) for one in candidates(own, item.rows, catalog.id, catalog.band_list)),
        limits=limits,
    )


def _with_flux(candidate: Candidate) -> Candidate:
    """The candidate with every listed value also as a flux."""
    photometry = tuple(replace(one, flux_cgs=observed_flux_cgs(one.value, one.band)) for one in candidate.photometry)
    return replace(candidate, photometry=photometry)


def _position_says(
    target: Target,
    item: Evidence,
    own: Weighed,
    all_weighed: Mapping[str, Weighed],
    fraction: float | None,
    assumptions: Assumptions,
) -> tuple[Outcome, str]:
    """Outcome before neighbours that hide are considered, with the numbers that decided."""
    catalog = item.catalog
    if own.compatible.any():
        word, why = outcome(own, global_chance=_global_chance(own, all_weighed), assumptions=assumptions)
        if word is not None:
            return word, why
    n = len(own.compatible)
    if catalog.is_object_list:
        return Outcome.COVERAGE_UNKNOWN, f"no listed object at the position{_nearest(item, own)}; a list proves nothing"
    if fraction == 0.0:
        why = _outside(item)
        if n and catalog.log is None:
            why += f", yet the archive returned {n} rows around it: the footprint in the catalog file needs a check"
        return Outcome.NOT_COVERED, why
    surrounded = item.rows is not None and _surrounded(target, item.rows, own, assumptions)
    if fraction is None and surrounded and catalog.log is None:
        return Outcome.BLANK, (
            f"{n} rows on all sides of the position show that the catalog reaches here (its footprint was not fetched), none "
            f"compatible with it{_nearest(item, own)}{_fast(item, own)}"
        )
    if fraction is None and catalog.log is not None:
        return Outcome.COVERAGE_UNKNOWN, (
            f"no row at the position, but its observation log did not answer{_log_detail(item)}: nothing shows that it "
            "looked here"
        )
    if catalog.log is not None and fraction is not None:
        seen = _exposed(target, item)
        if fraction < COVERED:
            return (
                Outcome.PARTLY_COVERED,
                f"fields hold {fraction:.0%} of the error region ({seen}); no row in that part",
            )
        return Outcome.BLANK, f"{seen}; {n} rows around the position, none compatible with it{_nearest(item, own)}"
    if fraction is None or n == 0:
        why = "no row at the position, and no row around it either: nothing shows that the catalog reaches here"
        return Outcome.COVERAGE_UNKNOWN, why
    if fraction < COVERED:
        return Outcome.PARTLY_COVERED, f"the footprint holds {fraction:.0%} of the error region; no row in that part"
    return (
        Outcome.BLANK,
        f"covered; {n} rows around the position, none compatible with it{_nearest(item, own)}{_fast(item, own)}",
    )


def _surrounded(target: Target, rows: Rows, own: Weighed, assumptions: Assumptions) -> bool:
    """Whether rows lie on all sides, close enough together that no survey's edge runs between them and the position."""
    hole = assumptions.compatible_sigma * target.position.sigma_major_arcsec
    return sides_with_rows(target.position, rows.ra_deg, rows.dec_deg, hole, ROWS_A_SIDE) == SECTORS


def _outside(item: Evidence) -> str:
    if item.pointings is not None and item.catalog.log is not None:
        return (
            f"no pointing holds the position: {len(item.pointings)} within reach in its observation log, each field taken "
            f"as {item.catalog.log.field_radius_arcmin:g} arcmin around its axis"
        )
    return f"outside the footprint ({_footprint(item.catalog)})"


def _log_detail(item: Evidence) -> str:
    return f" ({item.logs[0].detail})" if item.logs else ""


def _exposed(target: Target, item: Evidence) -> str:
    """The pointings that hold the position, in words."""
    assert item.pointings is not None
    seen = exposures(item.pointings, target.position.ra_deg, target.position.dec_deg)
    if not seen:
        return "only the edge of a field reaches the error region"
    best, total = seen[0], sum(one.exposure_s for one in seen)
    longest = f"{best.exposure_s / 1e3:.3g} ks at {best.off_axis_arcmin:.1f} arcmin off axis ({best.key})"
    if len(seen) == 1:
        return f"one pointing holds the position: {longest}"
    return f"{len(seen)} pointings hold the position, {total / 1e3:.3g} ks in all, the longest {longest}"


def _fast(item: Evidence, own: Weighed) -> str:
    """What a cone that had to be made smaller no longer shows: stars that moved out of it since the catalog's epoch."""
    radius = min(search.radius_arcsec for search in item.searches)
    if item.catalog.motion is None or abs(own.dt_yr) < 1.0 or radius >= FASTEST_STAR_ARCSEC_YR * abs(own.dt_yr):
        return ""
    return f"; in this cone of {radius:.0f} arcsec a star faster than {radius / abs(own.dt_yr):.1f} arcsec/yr could be missed"


def _nearest(item: Evidence, own: Weighed) -> str:
    if not len(own.separation_arcsec) or item.rows is None:
        return ""
    index = int(np.argmin(own.separation_arcsec))
    distance = float(own.separation_arcsec[index])
    text = f"{distance:.1f} arcsec" if distance < 120.0 else f"{distance / 60.0:.1f} arcmin"
    return f" (nearest: {item.rows.key[index]}, {text})"


def _footprint(catalog: Catalog) -> str:
    region = catalog.coverage
    parts = []
    if region.dec_deg is not None:
        parts.append(f"Dec {region.dec_deg[0]:+g} to {region.dec_deg[1]:+g} deg")
    if region.l_deg is not None:
        parts.append(f"l {region.l_deg[0]:g} to {region.l_deg[1]:g} deg")
    if region.b_deg is not None:
        parts.append(f"b {region.b_deg[0]:+g} to {region.b_deg[1]:+g} deg")
    return ", ".join(parts) or region.kind


def _limits(
    target: Target,
    item: Evidence,
    own: Weighed,
    fraction: float | None,
    word: Outcome,
    assumptions: Assumptions,
) -> tuple[tuple[Limit, ...], list[str]]:
    """Limits of every band with a depth, raised where a neighbour hides; and what hides, in words."""
    rows, catalog = item.rows, item.catalog
    assert rows is not None
    flags = []
    if word is Outcome.COVERAGE_UNKNOWN:
        flags.append("coverage unproven")
    if word is Outcome.PARTLY_COVERED and fraction is not None:
        flags.append(f"covers {fraction:.0%} of the error region")
    if word is Outcome.AMBIGUOUS:
        flags.append("holds only if no compatible row is the counterpart")
    ids = tuple(search.search_id for search in item.searches)
    found: list[Limit] = []
    hiding: list[str] = []
    for columns in catalog.bands:
        if catalog.log is not None and columns.band.depth is None:
            continue  # neighbours lie in other exposures: they say nothing of this one
        photometry = rows.flux.get(columns.band.name)
        # where a mission pointed, the exposure that holds the position says more than neighbours in other exposures
        exposed = _longest(target, item) if columns.band.depth is not None else None
        limit = limit_for_band(
            columns.band,
            None if exposed else photometry,
            assumptions=assumptions,
            why_none="neighbours lie in other exposures" if exposed else "no neighbours",
        )
        if limit is None:
            continue
        if exposed is not None and limit.method is LimitMethod.NOMINAL:
            limit = _in_exposure(limit, catalog, exposed)
        limit = replace(limit, search_ids=ids, flag="; ".join(flags))
        if photometry is not None and len(rows):
            limit, raised = raise_limit(
                limit, photometry.value, own.separation_arcsec, catalog.resolution_arcsec, assumptions
            )
            if raised:
                hiding.append(f"a bright neighbour hides the position in {columns.band.name} ({limit.flag})")
        found.append(_as_pulse(target, catalog, limit))
    return tuple(found), hiding


def _longest(target: Target, item: Evidence) -> Exposed | None:
    """The pointing with the longest exposure on the position."""
    if item.pointings is None:
        return None
    return next(iter(exposures(item.pointings, target.position.ra_deg, target.position.dec_deg)), None)


def _in_exposure(limit: Limit, catalog: Catalog, exposed: Exposed) -> Limit:
    """A depth on the axis in a reference exposure, at the exposure and angle that the observation log gives."""
    log = catalog.log
    assert log is not None
    factor, effective_s = (
        float(value)
        for value in exposure_factor(
            exposed.exposure_s,
            exposed.off_axis_arcmin,
            log.reference_s,
            log.field_radius_arcmin,
            log.vignetting_at_edge,
        )
    )
    is_magnitude = limit.band.quantity is Quantity.MAGNITUDE
    value = limit.value - 2.5 * float(np.log10(factor)) if is_magnitude else limit.value * factor
    return replace(
        limit,
        value=value,
        note=f"{limit.note}; stated for {log.reference_s / 1e3:.3g} ks on the axis, here {exposed.exposure_s / 1e3:.3g} ks at "
        f"{exposed.off_axis_arcmin:.1f} arcmin ({exposed.key}), worth {effective_s / 1e3:.3g} ks: {factor:.3g} times the flux",
    )


def _as_pulse(target: Target, catalog: Catalog, limit: Limit) -> Limit:
    """Say beside an image limit what it means for a pulse: it is not a pulse limit."""
    if (
        limit.band.waveband is not Waveband.RADIO
        or limit.band.quantity is not Quantity.FLUX_DENSITY
        or catalog.integration_s is None
        or not target.pulses
    ):
        return limit
    width = max(pulse.width_s for pulse in target.pulses)
    if catalog.integration_s < width:
        text = (
            f"the {catalog.integration_s:g} s exposure is shorter than a {width:g} s pulse: it caught part of one "
            "undiluted, or none"
        )
    else:
        peak = float(pulse_peak_limit(limit.value, catalog.integration_s, width, 1))
        text = f"as the peak of one {width:g} s pulse in {catalog.integration_s:g} s: < {peak:.3g} {limit.band.unit}"
    if target.spin is not None:
        period, exposure = target.spin.period_s, catalog.integration_s
        if exposure < width:
            caught = float(overlaps_pulse_probability(period, width, exposure))
            text += f"; chance that it caught any of one: {caught:.0%}"
        else:
            inside = float(contains_whole_pulse_probability(period, width, exposure))
            text += f"; chance that a whole pulse fell inside: {inside:.0%}"
    return replace(limit, note=f"{limit.note}; {text}")


def expected_chance_total(found: Sequence[Finding]) -> float:
    """Unrelated rows expected inside the error regions of all catalogs searched."""
    return float(sum(finding.expected_chance or 0.0 for finding in found))


def chance_of_any(found: Sequence[Finding]) -> float:
    """Probability that at least one catalog shows an unrelated row."""
    return float(chance_within(expected_chance_total(found)))
