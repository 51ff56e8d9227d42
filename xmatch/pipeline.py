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
from xmatch.flux.physical import physical_limit, resolve
from xmatch.gather import Progress, ask_due, gather, ready, to_ask, waiting_remark
from xmatch.plan import make_plan
from xmatch.records import Look, PhysicalLimit, Target
from xmatch.sources import distinct_expected
from xmatch.spin.figures import figures
from xmatch.weigh import Evidence, expected_chance_total, findings, physical_objects, weigh_all

if TYPE_CHECKING:
    from xmatch.archives.transport import Transport
    from xmatch.store.store import Store

NO_RUN = 0
"""Stands for the run of a look that asked nothing, until its answer turns out to be new."""
PARTIAL = "only some catalogs were looked at: their searches are kept, this answer is not"


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
    catalogs, waiting = ready(catalogs, store.latest_checks())
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
    asked = ask_due(due, run_id, target_id, store, transport, progress, now(), again=options.again,
                    least_rows=assumptions.density_min_rows)  # fmt: skip
    evidence = gather(plan, asked, catalogs, store, now())
    answer = conclude(
        target,
        evidence,
        assumptions,
        made_at=now(),
        run_id=run_id,
        n_asked=len(asked),
        offline=options.offline,
        store_name=store.name,
        remarks=(*store.remarks, *waiting_remark(waiting)),
        waiting=waiting,
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
    target: Target,
    *,
    store: Store,
    catalogs: Mapping[str, Catalog],
    transport: Transport,
    options: LookOptions | None = None,
) -> list[str]:
    """Return exactly what a look would send now, in order, without asking and without writing anything."""
    from xmatch.archives.fleet import plan_requests

    options = options or LookOptions()
    target_id = store.find_target(target)
    catalogs, _ = ready(catalogs, store.latest_checks())
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
    due = [step for step in plan if step.ask]
    return plan_requests(to_ask(due, store, datetime.now(UTC), again=options.again), transport.per_host)


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
    waiting: Sequence[str] = (),
) -> Look:
    """Draw everything that can be drawn from the evidence. Pure but for the packaged class files."""
    weighed = weigh_all(target, evidence, assumptions)
    expected_distinct, trials = distinct_expected(target.position, weighed, assumptions)
    found = findings(target, evidence, assumptions, weighed, trials)
    sources, none_listed = physical_objects(target, evidence, weighed, found, assumptions)
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
        n_from_store=sum(search.from_store for item in evidence for search in (*item.searches, *item.logs)),
        offline=offline,
        remarks=tuple(remarks),
        store=store_name,
        sources=sources,
        none_listed=none_listed,
        expected_distinct=expected_distinct,
        waiting=tuple(waiting),
    )
