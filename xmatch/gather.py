"""Asking what is due and bringing together what is known: between the plan and the weighing.

Each search is in the store the moment it is complete, and what is weighed is always read back from there.
"""

from __future__ import annotations

from collections.abc import Callable, Mapping, Sequence
from dataclasses import replace
from datetime import UTC, datetime
from typing import TYPE_CHECKING

import numpy as np

from xmatch.catalogs.model import Catalog
from xmatch.catalogs.resolving import ready as ready
from xmatch.errors import InterruptedLook, MisreadError
from xmatch.limits.coverage import Contains
from xmatch.limits.pointings import holds
from xmatch.plan import Step, age_s, smaller, wider
from xmatch.records import Pointings, Question, Reply, ReplyStatus, Rows, Search
from xmatch.weigh import Evidence

if TYPE_CHECKING:
    from xmatch.archives.transport import Transport
    from xmatch.store.lists import ListCopy
    from xmatch.store.store import Store

Progress = Callable[[str, str], None]
"""Called with the catalog's id and one of ``asking``, ``whole``, ``truncated``, ``unanswered``, ``misread``."""
Asked = dict[tuple[str, str], Search]
"""The last search of this look per catalog and table."""


def _no_rows() -> Rows:
    nothing = np.empty(0)
    return Rows(
        key=(), ra_deg=nothing, dec_deg=nothing, sigma_major_arcsec=nothing, sigma_minor_arcsec=nothing, angle_deg=nothing,
        epoch_yr=nothing, pm_ra_mas_yr=nothing, pm_dec_mas_yr=nothing, pm_ra_error_mas_yr=nothing,
        pm_dec_error_mas_yr=nothing,
    )  # fmt: skip


NO_ROWS = _no_rows()
"""What a search of an observation log leaves among the rows."""


def waiting_remark(waiting: Sequence[str]) -> tuple[str, ...]:
    """What to say of catalogs that were not asked because nobody has confirmed their columns."""
    if not waiting:
        return ()
    n = len(waiting)
    return (
        f"{n} catalog{'s were' if n > 1 else ' was'} not asked, because nobody has confirmed {'their' if n > 1 else 'its'} "
        f"columns yet ({', '.join(waiting)}): 'blankfield catalogs check' asks the archives and unlocks them",
    )


def to_ask(steps: Sequence[Step], store: Store, now: datetime, *, again: bool = False) -> list[Question]:
    """The questions that really go to archives: a list that the store holds whole is searched there."""
    questions = []
    for step in steps:
        if not _is_list(step):
            questions.append(step.question)
        elif again or not _fresh_list(step, store, now):
            questions.append(step.catalog.whole_question(step.table))
    return questions


def ask_due(
    steps: Sequence[Step],
    run_id: int,
    target_id: int,
    store: Store,
    transport: Transport | None,
    progress: Progress | None,
    now: datetime,
    *,
    again: bool = False,
    least_rows: int = 0,
) -> Asked:
    """Ask, and store each search the moment it is complete.

    Parameters
    ----------
    steps : sequence of Step
        What is due.
    run_id, target_id : int
        Under which look the searches are kept.
    store, transport, progress
        As in a look; without a transport nothing is asked.
    now : datetime
        For the age of whole lists.
    again : bool
        Fetch lists again, whatever their age.
    least_rows : int
        A survey that covers the position with fewer rows around it is asked once more over a wider cone.

    Returns
    -------
    dict
        The last search per catalog and table.

    Raises
    ------
    InterruptedLook
        When the user stopped it.
    """
    if not steps or transport is None:
        return {}
    from xmatch.archives.fleet import ask, ask_all

    keeper = _Keeper(steps, run_id, target_id, store, progress)
    try:
        if progress is not None:
            for step in steps:
                progress(step.catalog.id, "asking")
        for reply in ask_all(to_ask(steps, store, now, again=again), transport):
            if reply.question.is_whole:
                keeper.keep_list(reply)
                continue
            keeper.keep(reply)
            step = keeper.by_table[reply.question.catalog_id, reply.question.table]
            question = reply.question
            # a cut reply is asked again over a smaller cone until it is whole or would miss the counterpart
            while reply.status is ReplyStatus.TRUNCATED:
                narrower = smaller(question, step.least_radius_arcsec)
                if narrower is None:
                    break
                question = narrower
                reply = ask(question, transport)
                keeper.keep(reply)
        for reply in ask_all(keeper.too_few(least_rows), transport):
            keeper.keep_wider(reply)
        for step in steps:
            if (step.catalog.id, step.table.name) not in keeper.done:
                keeper.keep(local_reply(step, _fresh_list(step, store, now, any_age=True)))
    except KeyboardInterrupt:
        store.finish_run(run_id)
        raise InterruptedLook(
            f"stopped by you after {len(keeper.done)} of {len(steps)} searches; they are kept, and the next look goes on from them"
        ) from None
    return keeper.done


class _Keeper:
    """Puts replies into the store: the rows of a catalog, the pointings of a log, or a whole list and its cut."""

    def __init__(
        self, steps: Sequence[Step], run_id: int, target_id: int, store: Store, progress: Progress | None
    ) -> None:
        self.by_table = {(step.catalog.id, step.table.name): step for step in steps}
        self.run_id, self.target_id, self.store, self.progress = run_id, target_id, store, progress
        self.done: Asked = {}
        self.registered: set[str] = set()

    def keep(self, reply: Reply) -> None:
        """Keep one reply; one that the door refuses is a misread one."""
        from xmatch.catalogs.door import normalise, pointings_of, within
        from xmatch.match.separation import separation_arcsec

        step = self.by_table[reply.question.catalog_id, reply.question.table]
        self.register(step.catalog)
        rows: Rows | None = None
        pointings = None
        if reply.status is ReplyStatus.WHOLE:
            try:
                if step.is_log:
                    log = pointings_of(step.catalog, reply)
                    off = separation_arcsec(log.ra_deg, log.dec_deg, step.question.ra_deg, step.question.dec_deg) / 60.0
                    pointings, rows = (log, off), NO_ROWS
                else:
                    rows = within(normalise(step.catalog, reply), reply.question)
            except MisreadError as fault:
                reply = replace(reply, status=ReplyStatus.MISREAD, detail=str(fault), columns=None, n_rows=0)
                pointings, rows = None, None
        place = (step.catalog.id, step.table.name)
        self.done[place] = self.store.put_search(self.run_id, self.target_id, reply, rows, pointings)
        if self.progress is not None:
            self.progress(step.catalog.id, str(reply.status))

    def too_few(self, least_rows: int) -> list[Question]:
        """Questions over wider cones, where a survey that covers the position gave too few rows for a density."""
        found = []
        for place, search in self.done.items():
            step = self.by_table[place]
            question = replace(step.question, radius_arcsec=search.radius_arcsec)
            covers = bool(step.catalog.coverage.contains(question.ra_deg, question.dec_deg))
            asked_by_cone = not (step.is_log or _is_list(step) or step.catalog.is_object_list)
            if search.status is ReplyStatus.WHOLE and asked_by_cone and covers:
                further = wider(question, search.n_rows, least_rows)
                found += [further] if further is not None else []
        return found

    def keep_wider(self, reply: Reply) -> None:
        """Keep the wider cone where it is whole; a failure takes nothing from the narrower one."""
        place = (reply.question.catalog_id, reply.question.table)
        narrower = self.done[place]
        self.keep(reply)
        if self.done[place].status is not ReplyStatus.WHOLE:
            self.done[place] = narrower

    def keep_list(self, reply: Reply) -> None:
        """Keep a whole list, then what of it lies in the cone; a failure is kept as the failure of this search."""
        from xmatch.catalogs.door import normalise

        step = self.by_table[reply.question.catalog_id, reply.question.table]
        self.register(step.catalog)
        if reply.status is ReplyStatus.WHOLE:
            try:
                self.store.put_list(reply, normalise(step.catalog, reply))
            except MisreadError as fault:
                reply = replace(reply, status=ReplyStatus.MISREAD, detail=str(fault), columns=None, n_rows=0)
        if reply.status is not ReplyStatus.WHOLE:
            self.keep(replace(reply, question=step.question))
            return
        self.keep(local_reply(step, self.store.latest_list(step.catalog.id, step.catalog.release, step.table.name)))

    def register(self, catalog: Catalog) -> None:
        """The store must know a catalog before its searches."""
        if catalog.id not in self.registered:
            self.store.put_catalog(
                catalog.id, catalog.release, catalog.title, catalog.waveband, catalog.fingerprint, catalog.band_list
            )
            self.registered.add(catalog.id)


def local_reply(step: Step, copy: ListCopy | None) -> Reply:
    """Answer a cone from the copy of a whole list. It is as old as the copy."""
    from xmatch.archives.reading import judge

    assert copy is not None, "a list is only searched here when the store holds it"
    whole = step.catalog.whole_question(step.table)
    judged = judge(copy.body, 200, "", whole)
    return Reply(
        question=step.question,
        status=judged.status,
        detail=f"cut from the whole list of {copy.n_rows} rows in the store (list {copy.list_id})",
        request=copy.request,
        asked_at=copy.asked_at,
        elapsed_s=0.0,
        columns=judged.columns,
        n_rows=judged.n_rows,
        sha256=copy.sha256,
        reply_bytes=len(copy.body),
        client=copy.client,
    )


def _is_list(step: Step) -> bool:
    return step.catalog.is_mirrored and not step.is_log


def _fresh_list(step: Step, store: Store, now: datetime, *, any_age: bool = False) -> ListCopy | None:
    copy = store.latest_list(step.catalog.id, step.catalog.release, step.table.name)
    if copy is None or any_age:
        return copy
    age_days = (
        now - datetime.fromisoformat(copy.asked_at.replace("Z", "+00:00")).astimezone(UTC)
    ).total_seconds() / 86400.0
    return copy if age_days < step.limit_days else None


def gather(
    plan: Sequence[Step],
    asked: Mapping[tuple[str, str], Search],
    catalogs: Mapping[str, Catalog],
    store: Store,
    now: datetime,
) -> list[Evidence]:
    """Bring together, per catalog, the rows of its best whole searches, where it looked, and what failed just now.

    Parameters
    ----------
    plan : sequence of Step
        Every step of the look, asked or not.
    asked : mapping
        What was asked just now, from :func:`ask_due`.
    catalogs : mapping of str to Catalog
        Those of the plan.
    store : Store
        Where rows, pointings and footprints are.
    now : datetime
        The present, for ages.
    """
    from xmatch.catalogs.door import join

    footprints = _Footprints(store)
    evidence = []
    for catalog in catalogs.values():
        used: list[Search] = []
        logs: list[Search] = []
        failed: Search | None = None
        complete = True
        for step in (step for step in plan if step.catalog.id == catalog.id):
            latest = asked.get((catalog.id, step.table.name))
            good = latest if latest is not None and latest.status is ReplyStatus.WHOLE else None
            if good is None and step.known is not None:
                good = replace(step.known, from_store=True)
            if step.is_log:
                answer = good or latest
                logs += [answer] if answer is not None else []
                continue
            if latest is not None and latest.status is not ReplyStatus.WHOLE:
                failed = latest
            if good is None:
                complete = False
            else:
                used.append(good)
        rows = join(store.rows_of([search.search_id], catalog.band_list) for search in used) if used else None
        log = logs[0] if logs and logs[0].status is ReplyStatus.WHOLE else None
        pointings = store.pointings_of(log.search_id) if log is not None else None
        evidence.append(
            Evidence(
                catalog=catalog,
                searches=tuple(used),
                rows=rows,
                failed=failed,
                age_s=max((age_s(search, now) for search in used), default=None),
                complete=complete and bool(used),
                logs=tuple(logs),
                pointings=pointings,
                contains=_contains(pointings) if pointings is not None else footprints.of(catalog),
            )
        )
    return evidence


def _contains(pointings: Pointings) -> Contains:
    return lambda ra_deg, dec_deg: holds(pointings, ra_deg, dec_deg)


class _Footprints:
    """Footprints of the store, read only when a catalog has one."""

    def __init__(self, store: Store) -> None:
        self.store = store
        self._read: dict[tuple[str, str], bytes] | None = None

    def of(self, catalog: Catalog) -> Contains | None:
        """What says whether a position is inside; None where there is no footprint or it was not fetched yet."""
        if not catalog.coverage.moc:
            return None
        if self._read is None:
            self._read = self.store.footprints()
        body = self._read.get((catalog.id, catalog.coverage.moc))
        if body is None:
            return None
        from xmatch.catalogs.footprint import Footprint

        return Footprint(body).contains
