"""The street: target, plan, archives, store, match, limits, flux, classes, report.

:func:`look` calls the rooms in order. Everything it learns is in the store before anything is
concluded, and the conclusions are always drawn from the store, so that a warm answer and a cold one
walk the same code.
"""

from __future__ import annotations

from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass, field, replace
from datetime import UTC, datetime
from typing import TYPE_CHECKING

from xmatch import __version__
from xmatch.assumptions import Assumptions
from xmatch.catalogs.model import Catalog
from xmatch.classes.engine import standings
from xmatch.classes.loader import load_classes
from xmatch.errors import InterruptedLook, MisreadError
from xmatch.flux.physical import physical_limit, resolve
from xmatch.plan import Step, age_s, make_plan, smaller
from xmatch.records import Look, PhysicalLimit, Reply, ReplyStatus, Rows, Search, Target
from xmatch.spin.figures import figures
from xmatch.weigh import Evidence, expected_chance_total, findings

if TYPE_CHECKING:
    from xmatch.archives.transport import Transport
    from xmatch.store.store import Store

NO_RUN = 0
"""Stands for the run of a look that asked nothing, until its answer turns out to be new."""
PARTIAL = "only some catalogs were looked at: their searches are kept, this answer is not"
Progress = Callable[[str, str], None]
"""Called with the catalog's id and one of ``asking``, ``whole``, ``truncated``, ``unanswered``, ``misread``."""


@dataclass(frozen=True)
class LookOptions:
    """How a look is made. Nothing here changes what a number means."""

    offline: bool = False
    again: bool = False
    age_limit_days: float | None = None
    partial: bool = False
    """Only some catalogs are looked at: the searches are kept, the answer is not, lest it pass for the whole one."""
    assumptions: Assumptions = field(default_factory=Assumptions)


def look(
    target: Target,
    *,
    store: Store,
    catalogs: Mapping[str, Catalog],
    transport: Transport | None = None,
    options: LookOptions | None = None,
    progress: Progress | None = None,
    now: Callable[[], datetime] = lambda: datetime.now(UTC),
) -> Look:
    """Answer for one position: ask what is due, then weigh everything the store holds.

    Parameters
    ----------
    target : Target
        What is known of the object.
    store : Store
        Where searches and answers are kept.
    catalogs : mapping of str to Catalog
        The registry.
    transport : Transport, optional
        How archives are asked; None with ``options.offline``.
    options : LookOptions, optional
        Offline, ask again, age limit, assumptions.
    progress : callable, optional
        Told of every search that starts or ends.
    now : callable, optional
        The clock, for tests.

    Raises
    ------
    InterruptedLook
        When the user stopped it; every search that was complete is in the store.
    """
    options = options or LookOptions()
    target_id = store.put_target(target)
    assumptions = resolve(target, options.assumptions)
    plan = make_plan(
        target,
        catalogs,
        store.current_searches(target_id),
        assumptions=assumptions,
        now=now(),
        offline=options.offline or transport is None,
        again=options.again,
        age_limit_days=options.age_limit_days,
    )
    how = {"offline": options.offline, "again": options.again}
    due = [step for step in plan if step.ask]
    run_id = store.begin_run(target_id, __version__, how) if due else NO_RUN
    asked = _ask(due, run_id, target_id, store, transport, progress)
    evidence = _gather(plan, asked, catalogs, store, now())
    answer = conclude(
        target,
        evidence,
        assumptions,
        made_at=now(),
        run_id=run_id,
        n_asked=len(asked),
        offline=options.offline,
        store_name=store.name,
        remarks=store.remarks,
    )
    if options.partial:
        if run_id != NO_RUN:
            store.finish_run(run_id)
        return replace(answer, remarks=(*answer.remarks, PARTIAL))
    if run_id == NO_RUN:
        # nothing was asked: an answer that is already the latest is not kept twice
        known = store.same_answer(target_id, answer)
        if known is not None:
            return replace(answer, run_id=known)
        run_id = store.begin_run(target_id, __version__, how)
        answer = replace(answer, run_id=run_id)
    store.put_answer(run_id, target_id, answer)
    store.finish_run(run_id)
    return answer


def requests_of(
    target: Target, *, store: Store, catalogs: Mapping[str, Catalog], options: LookOptions | None = None
) -> list[str]:
    """Return exactly what a look would send now, in order, without asking and without writing anything."""
    from xmatch.archives.fleet import plan_requests

    options = options or LookOptions()
    target_id = store.find_target(target)
    plan = make_plan(
        target,
        catalogs,
        store.current_searches(target_id) if target_id is not None else (),
        assumptions=resolve(target, options.assumptions),
        now=datetime.now(UTC),
        offline=options.offline,
        again=options.again,
        age_limit_days=options.age_limit_days,
    )
    return plan_requests([step.question for step in plan if step.ask])


def conclude(
    target: Target,
    evidence: Sequence[Evidence],
    assumptions: Assumptions,
    *,
    made_at: datetime,
    run_id: int,
    n_asked: int,
    offline: bool,
    store_name: str,
    remarks: Sequence[str] = (),
) -> Look:
    """Draw everything that can be drawn from the evidence. Pure but for the packaged class files."""
    found = findings(target, evidence, assumptions)
    limits: tuple[PhysicalLimit, ...] = tuple(
        physical_limit(limit, target, assumptions) for finding in found for limit in finding.limits
    )
    spin = figures(target.spin) if target.spin is not None else None
    return Look(
        target=target,
        made_at=made_at.astimezone(UTC).strftime("%Y-%m-%dT%H:%M:%SZ"),
        version=__version__,
        run_id=run_id,
        digest=assumptions.digest,
        assumptions=assumptions.as_dict(),
        findings=found,
        limits=limits,
        spin=spin,
        standings=standings(target, limits, found, spin, assumptions, load_classes()),
        expected_chance=expected_chance_total(found),
        n_asked=n_asked,
        n_from_store=sum(search.from_store for item in evidence for search in item.searches),
        offline=offline,
        remarks=tuple(remarks),
        store=store_name,
    )


def _ask(
    steps: Sequence[Step],
    run_id: int,
    target_id: int,
    store: Store,
    transport: Transport | None,
    progress: Progress | None,
) -> dict[tuple[str, str], Search]:
    """Ask, and store each search the moment it is complete. Returns the last search per catalog and table."""
    if not steps or transport is None:
        return {}
    from xmatch.archives.fleet import ask, ask_all
    from xmatch.catalogs.door import normalise

    by_table = {(step.catalog.id, step.table.name): step for step in steps}
    done: dict[tuple[str, str], Search] = {}
    registered: set[str] = set()

    def keep(reply: Reply) -> None:
        step = by_table[reply.question.catalog_id, reply.question.table]
        catalog = step.catalog
        if catalog.id not in registered:
            store.put_catalog(
                catalog.id, catalog.release, catalog.title, catalog.waveband, catalog.fingerprint, catalog.band_list
            )
            registered.add(catalog.id)
        rows: Rows | None = None
        if reply.status is ReplyStatus.WHOLE:
            try:
                rows = normalise(catalog, reply)
            except MisreadError as fault:
                reply = replace(reply, status=ReplyStatus.MISREAD, detail=str(fault), columns=None, n_rows=0)
        done[catalog.id, step.table.name] = store.put_search(run_id, target_id, reply, rows)
        if progress is not None:
            progress(catalog.id, str(reply.status))

    try:
        if progress is not None:
            for step in steps:
                progress(step.catalog.id, "asking")
        for reply in ask_all([step.question for step in steps], transport):
            keep(reply)
            step = by_table[reply.question.catalog_id, reply.question.table]
            question = reply.question
            # a cut reply is asked again over a smaller cone until it is whole or would miss the counterpart
            while reply.status is ReplyStatus.TRUNCATED:
                narrower = smaller(question, step.least_radius_arcsec)
                if narrower is None:
                    break
                question = narrower
                reply = ask(question, transport)
                keep(reply)
    except KeyboardInterrupt:
        store.finish_run(run_id)
        raise InterruptedLook(
            f"stopped by you after {len(done)} of {len(steps)} searches; they are kept, and the next look goes on from them"
        ) from None
    return done


def _gather(
    plan: Sequence[Step],
    asked: Mapping[tuple[str, str], Search],
    catalogs: Mapping[str, Catalog],
    store: Store,
    now: datetime,
) -> list[Evidence]:
    """Bring together, per catalog, the rows of its best whole searches and what failed just now."""
    from xmatch.catalogs.door import join

    evidence = []
    for catalog in catalogs.values():
        used: list[Search] = []
        failed: Search | None = None
        complete = True
        for step in (step for step in plan if step.catalog.id == catalog.id):
            latest = asked.get((catalog.id, step.table.name))
            if latest is not None and latest.status is ReplyStatus.WHOLE:
                used.append(latest)
                continue
            failed = latest if latest is not None else failed
            if step.known is not None:
                used.append(replace(step.known, from_store=True))
            else:
                complete = False
        rows = join(store.rows_of([search.search_id], catalog.band_list) for search in used) if used else None
        evidence.append(
            Evidence(
                catalog=catalog,
                searches=tuple(used),
                rows=rows,
                failed=failed,
                age_s=max((age_s(search, now) for search in used), default=None),
                complete=complete and bool(used),
            )
        )
    return evidence
