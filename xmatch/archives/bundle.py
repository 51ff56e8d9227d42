"""One host, one request: VizieR takes several tables in one question, since the busiest host bounds the whole search."""

from __future__ import annotations

import tomllib
from collections import defaultdict
from collections.abc import Sequence
from dataclasses import dataclass, replace
from functools import cache
from pathlib import Path
from urllib.parse import urlsplit, urlunsplit

from xmatch.archives import cone, filelist, simbad, tap, vizier
from xmatch.archives.transport import Request
from xmatch.errors import FactError
from xmatch.records import Question

BUILDERS = {
    "cone": cone.request,
    "vizier": vizier.request,
    "tap": tap.request,
    "simbad": simbad.request,
    "file": filelist.request,
}
"""One adapter per protocol."""
LARGEST_BUNDLE = 8
"""Tables in one question (our choice: a failing one must be split and asked again)."""
ROUNDS = 2
"""Requests that each place at a host works off, so that slow tables and quick ones even out (our choice; measured)."""
MIRRORS_FILE = Path(__file__).parent / "mirrors.toml"


@dataclass(frozen=True)
class Job:
    """One request and the questions that its answer answers."""

    questions: tuple[Question, ...]
    request: Request

    @property
    def is_bundle(self) -> bool:
        """Whether it answers more than one question."""
        return len(self.questions) > 1


def request_of(question: Question) -> Request:
    """Build the request of one question.

    Raises
    ------
    FactError
        When the protocol is not known.
    """
    builder = BUILDERS.get(question.protocol)
    if builder is None:
        raise FactError(
            f"{question.catalog_id}: protocol {question.protocol!r} is not known; "
            f"use one of {', '.join(sorted(BUILDERS))}"
        )
    return builder(question)


def single(question: Question) -> Job:
    """A job of its own for one question."""
    return Job((question,), request_of(question))


def jobs_of(questions: Sequence[Question], *, per_host: int | None, bundling: bool = True) -> list[Job]:
    """Turn questions into as few requests as their protocols allow.

    Parameters
    ----------
    questions : sequence of Question
        Those of the VizieR form that share address, centre, radius and row limit may go together.
    per_host : int or None
        How many requests one host gets at a time: tables are spread evenly over twice as many, so that bundling never
        makes the host work on fewer than it would allow, and slow tables even out.
    bundling : bool
        False for one request per question.

    Returns
    -------
    list of Job
        In the order of their first questions.

    Raises
    ------
    FactError
        When a protocol is not known.
    """
    groups: dict[object, list[Question]] = defaultdict(list)
    for number, question in enumerate(questions):
        together = bundling and question.protocol == "vizier" and not question.is_whole
        alike = (question.address, question.ra_deg, question.dec_deg, question.radius_arcsec, question.row_limit)
        groups[alike if together else number].append(question)
    jobs = []
    for group in groups.values():
        for part in _parts(group, per_host):
            jobs.append(Job(tuple(part), vizier.request_for(part)) if len(part) > 1 else single(part[0]))
    return jobs


def _parts(group: list[Question], per_host: int | None) -> list[list[Question]]:
    """Parts of nearly equal size; two tables of one name never share a request."""
    n = len(group)
    size = min(LARGEST_BUNDLE, -(-n // (ROUNDS * per_host)) if per_host else LARGEST_BUNDLE)
    n_parts = -(-n // size)
    return [group[i::n_parts] for i in range(n_parts)]


def elsewhere(request: Request) -> list[Request]:
    """The same request at each mirror of its host, in order; none for a host without mirrors."""
    parts = urlsplit(request.address)
    return [
        replace(request, address=urlunsplit(parts._replace(netloc=mirror)))
        for mirror in _mirrors().get(parts.netloc.lower(), ())
    ]


@cache
def _mirrors() -> dict[str, tuple[str, ...]]:
    content = tomllib.loads(MIRRORS_FILE.read_text(encoding="utf-8"))
    return {host: tuple(facts["mirrors"]) for host, facts in content.items()}
