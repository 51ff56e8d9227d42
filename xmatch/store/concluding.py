"""Writing what was concluded from one look. Every function runs inside its caller's transaction."""

from __future__ import annotations

import hashlib
import math
from collections import defaultdict
from collections.abc import Sequence
from dataclasses import replace
from typing import Any

from sqlalchemy import Connection, select, update

from xmatch.errors import RangeError, StoreError
from xmatch.records import Candidate, Finding, Limit, Look, PhysicalLimit, Standing
from xmatch.store import schema
from xmatch.store.border import computed, integer, json_text, required, text
from xmatch.store.writing import insert_many, insert_one, put_assumptions, put_band

PLACES = ("low", "median", "high")
"""What the three luminosities of a limit stand for; any other number of them is a grid."""
_CANDIDATE_NUMBERS = ("ra_deg", "dec_deg", "separation_arcsec", "normalised_separation", "tail", "chance", "odds")


def answer_digest(look: Look) -> str:
    """Content hash of what a look concluded: its findings without ages, limits, spin figures, standings and assumptions."""
    findings = [
        replace(one, age_s=None, searches=tuple(replace(search, from_store=False) for search in one.searches))
        for one in look.findings
    ]
    content = [look.version, look.digest, findings, look.limits, look.spin, look.standings, look.expected_chance]
    return hashlib.sha256(json_text(content).encode()).hexdigest()[:32]


def same_answer(connection: Connection, target_id: int, look: Look) -> int | None:
    """Return the run whose answer is the target's latest and equal to this one, None when there is none."""
    run = schema.run
    last = connection.execute(
        select(run.c.run_id, run.c.answer_digest)
        .where(run.c.target_id == target_id, run.c.answered_at.is_not(None))
        .order_by(run.c.run_id.desc())
        .limit(1)
    ).one_or_none()
    return None if last is None or last.answer_digest != answer_digest(look) else int(last.run_id)


def put_answer(connection: Connection, run_id: int, target_id: int, look: Look, now: str) -> None:
    """Write findings, candidates, limits, luminosity limits, tests and standings of one look.

    Raises
    ------
    StoreError
        When the run has an answer already, is of another target, or a limit has no finding.
    """
    run = schema.run
    known = connection.execute(select(run.c.target_id, run.c.answered_at).where(run.c.run_id == run_id)).one_or_none()
    if known is None or known.target_id != target_id:
        raise StoreError(f"run {run_id} is not a look at target {target_id} in this store; begin_run comes first")
    if known.answered_at is not None:
        raise StoreError(f"run {run_id} has its answer since {known.answered_at}; answers are never changed")
    put_assumptions(connection, look.digest, look.assumptions)
    connection.execute(
        update(run)
        .where(run.c.run_id == run_id)
        .values(
            answered_at=now,
            assumptions_digest=text(look.digest),
            n_asked=integer(look.n_asked, "n_asked"),
            n_from_store=integer(look.n_from_store, "n_from_store"),
            offline=int(look.offline),
            expected_chance=required(look.expected_chance, "expected chance alignments"),
            spin=None if look.spin is None else json_text(look.spin),
            remarks=json_text(look.remarks),
            answer_digest=answer_digest(look),
        )
    )
    physical: defaultdict[Limit, list[PhysicalLimit]] = defaultdict(list)
    for item in look.limits:
        physical[item.limit].append(item)
    for finding in look.findings:
        _put_finding(connection, run_id, finding, physical)
    left = [item.limit.band.label for items in physical.values() for item in items]
    if left:
        raise StoreError(f"the limits in {', '.join(left)} belong to no finding of this look; please report this")
    for standing in look.standings:
        _put_standing(connection, run_id, standing)


def _put_finding(
    connection: Connection, run_id: int, finding: Finding, physical: defaultdict[Limit, list[PhysicalLimit]]
) -> None:
    name = finding.catalog_id
    finding_id = insert_one(
        connection,
        schema.finding,
        run_id=run_id,
        catalog_id=text(name),
        release=text(finding.release),
        title=text(finding.title),
        waveband=text(finding.waveband),
        outcome=text(finding.outcome),
        why=text(finding.why),
        coverage_fraction=computed(finding.coverage_fraction, f"covered fraction of {name}"),
        n_rows=integer(finding.n_rows, f"number of rows of {name}"),
        n_compatible=integer(finding.n_compatible, f"number of compatible rows of {name}"),
        density_per_deg2=computed(finding.density_per_deg2, f"density of {name}"),
        expected_chance=computed(finding.expected_chance, f"expected chance rows of {name}"),
        age_s=computed(finding.age_s, f"age of the reply of {name}"),
    )
    searches = {search.search_id: search.from_store for search in finding.searches}
    insert_many(
        connection,
        schema.finding_search,
        [{"finding_id": finding_id, "search_id": key, "from_store": int(old)} for key, old in searches.items()],
    )
    _put_candidates(connection, finding_id, list(searches), finding.candidates)
    for limit in finding.limits:
        waiting = physical.get(limit, [])
        item = waiting.pop(0) if waiting else None
        _put_limit(connection, finding_id, limit, item)


def _put_candidates(
    connection: Connection, finding_id: int, search_ids: Sequence[int], candidates: Sequence[Candidate]
) -> None:
    if not candidates:
        return
    row = schema.row
    stored: defaultdict[str, list[Any]] = defaultdict(list)
    wanted = {text(candidate.key) for candidate in candidates}
    for line in connection.execute(
        select(row.c.source_key, row.c.search_id, row.c.ordinal, row.c.ra_deg, row.c.dec_deg).where(
            row.c.search_id.in_(search_ids)
        )
    ):
        if line.source_key in wanted:
            stored[line.source_key].append(line)
    entries = []
    for candidate in candidates:
        key = text(candidate.key)
        # two tables of a catalog may list one key: the row meant is the nearest
        found = min(
            stored[key],
            key=lambda line: math.hypot(
                math.remainder(line.ra_deg - candidate.ra_deg, 360.0) * math.cos(math.radians(line.dec_deg)),
                line.dec_deg - candidate.dec_deg,
            ),
            default=None,
        )
        numbers = {what: required(getattr(candidate, what), f"{what} of {key}") for what in _CANDIDATE_NUMBERS}
        entries.append(
            {
                "finding_id": finding_id,
                "search_id": None if found is None else found.search_id,
                "ordinal": None if found is None else found.ordinal,
                "source_key": key,
                **numbers,
            }
        )
    insert_many(connection, schema.match, entries)


def _put_limit(connection: Connection, finding_id: int, limit: Limit, item: PhysicalLimit | None) -> None:
    name = limit.band.label
    common: dict[str, Any] = {}
    if item is not None:
        common = {
            "flux_density_jy": computed(item.flux_density_jy, f"flux density limit of {name}"),
            "flux_erg_s_cm2": required(item.flux_cgs, f"flux limit of {name}"),
            "transmitted": computed(item.transmitted, f"transmitted fraction of {name}"),
            "corrected_flux_erg_s_cm2": computed(item.corrected_flux_cgs, f"corrected flux limit of {name}"),
            "physical_note": text(item.note),
        }
    limit_id = insert_one(
        connection,
        schema.flux_limit,
        finding_id=finding_id,
        band_id=put_band(connection, limit.band),
        value=required(limit.value, f"limit of {name}"),
        kind=text(limit.kind),
        confidence=required(limit.confidence, f"confidence of {name}"),
        n_sigma=computed(limit.n_sigma, f"threshold of {name}"),
        method=text(limit.method),
        note=text(limit.note),
        flag=text(limit.flag),
        verified_depth=int(limit.verified_depth),
        **common,
    )
    insert_many(
        connection,
        schema.limit_search,
        [{"limit_id": limit_id, "search_id": key} for key in dict.fromkeys(limit.search_ids)],
    )
    if item is None or not item.luminosity_erg_s:
        return  # blind or uncorrected bands and targets without a distance have none
    n = len(item.luminosity_erg_s)
    if n != len(item.distance_pc):
        raise RangeError(f"{name}: {n} luminosities for {len(item.distance_pc)} distances; there must be one each")
    places = PLACES if n == len(PLACES) else ("grid",) * n
    insert_many(
        connection,
        schema.luminosity_limit,
        [
            {
                "limit_id": limit_id,
                "ordinal": ordinal,
                "place": place,
                "distance_pc": required(distance, f"distance of {name}"),
                "luminosity_erg_s": required(luminosity, f"luminosity limit of {name}"),
            }
            for ordinal, (place, distance, luminosity) in enumerate(
                zip(places, item.distance_pc, item.luminosity_erg_s, strict=True)
            )
        ],
    )


def _put_standing(connection: Connection, run_id: int, standing: Standing) -> None:
    name = standing.class_id
    standing_id = insert_one(
        connection,
        schema.standing,
        run_id=run_id,
        class_id=text(name),
        title=text(standing.title),
        word=text(standing.word),
        reason=text(standing.reason),
        **_survival(standing, name),
        variants=json_text(standing.variants),
        would_overturn=text(standing.would_overturn),
    )
    insert_many(
        connection,
        schema.class_test,
        [
            {
                "standing_id": standing_id,
                "ordinal": ordinal,
                "test": text(test.test),
                "sentence": text(test.sentence),
                **_survival(test, f"{name} {test.test}"),
                "source": text(test.source),
                "informs_only": int(test.informs_only),
            }
            for ordinal, test in enumerate(standing.tests)
        ],
    )


def _survival(item: Any, name: str) -> dict[str, float | None]:
    return {
        what: computed(getattr(item, what), f"{what} of {name}")
        for what in ("survival", "survival_low", "survival_high")
    }
