"""Checks of catalogs against their live services, whole lists and footprints: what is done once, not for each target."""

from __future__ import annotations

import hashlib
from collections.abc import Callable, Iterator, Mapping, Sequence
from dataclasses import dataclass, replace
from datetime import UTC, datetime

from xmatch.archives.fleet import ask_all
from xmatch.archives.metadata import Description, describe
from xmatch.archives.transport import Request, Stop, Transport
from xmatch.catalogs.check import Served, compare
from xmatch.catalogs.door import normalise, pointings_of, within
from xmatch.catalogs.footprint import Footprint
from xmatch.catalogs.model import LOG_TABLE, Catalog, Table
from xmatch.catalogs.resolving import with_names
from xmatch.errors import ArchiveError, MisreadError
from xmatch.records import Question, Reply, ReplyStatus
from xmatch.store.schema_lists import CheckVerdict
from xmatch.store.store import Store

Tell = Callable[[str, str], None]
"""Told a catalog's id and what was found."""


@dataclass(frozen=True)
class CheckResult:
    """What one check of one catalog found."""

    catalog_id: str
    verdict: CheckVerdict
    detail: str
    resolved: Mapping[str, str]
    found: Mapping[str, object]
    n_rows: int


def check_catalogs(
    catalogs: Sequence[Catalog], *, store: Store, transport: Transport, tell: Tell | None = None
) -> tuple[CheckResult, ...]:
    """Compare catalog files with their live services, and keep what was found.

    Parameters
    ----------
    catalogs : sequence of Catalog
        Which to check.
    store : Store
        Where results are kept; a good one unlocks a catalog whose columns nobody had confirmed.
    transport : Transport
        How the services are asked.
    tell : callable, optional
        Told of each result.

    Returns
    -------
    tuple of CheckResult
        In the order given.

    Notes
    -----
    Two questions per table: what columns it has (TAP_SCHEMA or the head of an answer), and a cone that is known to hold
    rows, read by the same code as any look. Without rows there the file may name the wrong table.
    """
    described = describe([q for catalog in catalogs for q in _questions(catalog)], transport)
    first = {catalog.id: _compared(catalog, described) for catalog in catalogs}
    ready = [catalog for catalog in catalogs if first[catalog.id].verdict is CheckVerdict.GOOD]
    named = {catalog.id: with_names(catalog, first[catalog.id].resolved) for catalog in ready}
    controls = [question for catalog in named.values() for question in _questions(catalog)]
    replies: dict[str, list[Reply]] = {catalog.id: [] for catalog in catalogs}
    for reply in ask_all(controls, transport, bundling=False):
        replies[reply.question.catalog_id].append(reply)
    results = []
    for catalog in catalogs:
        result = first[catalog.id]
        if catalog.id in named:
            result = _controlled(named[catalog.id], result, replies[catalog.id])
        store.put_check(
            catalog.id,
            catalog.release,
            catalog.fingerprint,
            result.verdict,
            result.detail,
            result.resolved,
            result.found,
        )
        results.append(result)
        if tell is not None:
            tell(catalog.id, str(result.verdict))
    return tuple(results)


def _questions(catalog: Catalog) -> Iterator[Question]:
    """The control cone at each table, and at the observation log. A list is asked whole."""
    if catalog.is_mirrored:
        yield from (catalog.whole_question(table) for table in catalog.tables)
        return
    control = catalog.control
    if control is None:
        return
    for table in _tables_at(catalog, control.ra_deg, control.dec_deg):
        yield catalog.question(table, control.ra_deg, control.dec_deg, control.radius_arcsec)
    if catalog.log is not None:
        yield catalog.log_question(control.ra_deg, control.dec_deg, 0.0)


def _tables_at(catalog: Catalog, ra_deg: float, dec_deg: float) -> list[Table]:
    """The tables that hold the control position; those of other parts of the sky cannot return rows for it."""
    return [t for t in catalog.tables if t.holds is None or bool(t.holds.contains(ra_deg, dec_deg))]


def _compared(catalog: Catalog, described: Mapping[Question, Description]) -> CheckResult:
    questions = list(_questions(catalog))
    if not questions:
        detail = "the file names no control position; add a [control] section with a cone that is known to hold rows"
        return CheckResult(catalog.id, CheckVerdict.DRIFT, detail, {}, {}, 0)
    resolved: dict[str, str] = {}
    problems: list[str] = []
    found: dict[str, object] = {}
    for question in questions:
        description = described[question]
        reply = description.reply
        if reply.status is ReplyStatus.UNANSWERED:
            return CheckResult(catalog.id, CheckVerdict.UNANSWERED, f"{question.table}: {reply.detail}", {}, {}, 0)
        if not description.fields:
            said = reply.detail if reply.status is ReplyStatus.MISREAD else "the service knows no such table"
            problems.append(f"{question.table}: {said}")
            continue
        served = [Served(f.name, f.unit, f.ucd, f.datatype) for f in description.fields]
        found[question.table] = [{"name": s.name, "unit": s.unit, "ucd": s.ucd} for s in served]
        units = catalog.log.units if catalog.log is not None and question.table == LOG_TABLE else catalog.units
        compared = compare(replace(catalog, units=units), question.columns, served)
        resolved |= compared.resolved
        problems += [f"{question.table}: {problem}" for problem in compared.problems]
    verdict = CheckVerdict.DRIFT if problems else CheckVerdict.GOOD
    return CheckResult(catalog.id, verdict, "; ".join(problems), resolved, found, 0)


def _controlled(catalog: Catalog, result: CheckResult, replies: Sequence[Reply]) -> CheckResult:
    """The control cone, read by the code of a look."""
    n_rows, empty = 0, []
    for reply in replies:
        if reply.status is ReplyStatus.UNANSWERED:
            return replace(result, verdict=CheckVerdict.UNANSWERED, detail=reply.detail)
        try:
            if reply.columns is None:
                raise MisreadError(reply.detail)
            if reply.question.table == LOG_TABLE:
                n = len(pointings_of(catalog, reply))
            else:
                n = len(within(normalise(catalog, reply), reply.question))
        except MisreadError as fault:
            return replace(result, verdict=CheckVerdict.DRIFT, detail=str(fault))
        n_rows += n
        if n == 0:
            empty.append(reply.question.table)
    if empty:
        detail = (
            f"columns as the file says, but the control cone is empty in {', '.join(empty)}; is it the right table?"
        )
        return replace(result, verdict=CheckVerdict.NO_ROWS, detail=detail, n_rows=n_rows)
    names = "".join(f"; {key.removeprefix('ucd:')} is {name}" for key, name in result.resolved.items())
    return replace(
        result, detail=f"columns as the file says, {n_rows} rows at the control position{names}", n_rows=n_rows
    )


@dataclass(frozen=True)
class Fetched:
    """One list or footprint that was fetched, or not."""

    catalog_id: str
    what: str
    good: bool
    detail: str


def mirror_catalogs(
    catalogs: Sequence[Catalog], *, store: Store, transport: Transport, tell: Tell | None = None
) -> tuple[Fetched, ...]:
    """Fetch whole lists and footprints into the store, where looks use them.

    Parameters
    ----------
    catalogs : sequence of Catalog
        Those without a list or footprint to fetch are passed over.
    store, transport, tell
        As for :func:`check_catalogs`.

    Returns
    -------
    tuple of Fetched
        Lists first. What could not be fetched leaves the store as it was.
    """
    by_id = {catalog.id: catalog for catalog in catalogs}
    done = []
    wanted = [catalog.whole_question(table) for catalog in catalogs if catalog.is_mirrored for table in catalog.tables]
    for reply in ask_all(wanted, transport):
        catalog = by_id[reply.question.catalog_id]
        good, detail = reply.status is ReplyStatus.WHOLE, reply.detail
        if good:
            try:
                rows = normalise(catalog, reply)
                store.put_list(reply, rows)
                detail = f"{len(rows)} rows kept"
            except MisreadError as fault:
                good, detail = False, str(fault)
        done.append(Fetched(catalog.id, "list", good, detail))
        if tell is not None:
            tell(catalog.id, "kept" if good else str(reply.status))
    for catalog in catalogs:
        if catalog.coverage.moc:
            done.append(_footprint(catalog, store, transport))
            if tell is not None:
                tell(catalog.id, "kept" if done[-1].good else "not kept")
    return tuple(done)


def _footprint(catalog: Catalog, store: Store, transport: Transport) -> Fetched:
    address = catalog.coverage.moc
    try:
        received = transport.fetch(Request("GET", address), stop=Stop())
        if received.http_status != 200:
            raise MisreadError(
                f"HTTP {received.http_status}: only 200 brings a footprint; check its address in the file"
            )
        fraction = Footprint(received.body).sky_fraction
    except ArchiveError as fault:
        return Fetched(catalog.id, "footprint", False, str(fault))
    now = datetime.now(UTC).strftime("%Y-%m-%dT%H:%M:%SZ")
    sha256 = hashlib.sha256(received.body).hexdigest()
    store.put_footprint(catalog.id, catalog.release, address, now, sha256, fraction, received.body)
    return Fetched(catalog.id, "footprint", True, f"covers {fraction:.1%} of the sky")
