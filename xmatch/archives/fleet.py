"""Many questions at once: quick where archives allow it, polite where they do not, first come first served.

Worker threads do nothing but wait for the network. Requests are built before they start, and answers are
judged and decoded in the thread that takes them, because the libraries that do both keep state that is
not safe between threads (warning filters, first imports) and would not run faster in several of them.
Tables of one host go into one request where its protocol allows; what such a bundle does not answer whole is
asked again alone.
"""

from __future__ import annotations

import hashlib
import queue
import threading
from collections import defaultdict, deque
from collections.abc import Callable, Iterator, Sequence
from dataclasses import dataclass
from datetime import UTC
from functools import cache
from importlib.metadata import version

from xmatch import __version__
from xmatch.archives import tap
from xmatch.archives.bundle import Job, elsewhere, jobs_of, single
from xmatch.archives.bundle import request_of as request_of
from xmatch.archives.reading import Answer, judge
from xmatch.archives.transport import Received, Request, Stop, Transport
from xmatch.errors import ArchiveError, MisreadError, TruncatedError, UnansweredError
from xmatch.records import Question, Reply, ReplyStatus

OnEvent = Callable[[Question, str], None]
"""Called in the consumer's thread with ``asking``, ``asking again`` or the status of the reply."""

JOIN_S = 0.5
"""How long a stopped fleet waits for its threads; those still connecting end by themselves."""
FIRST_SHARE = 0.6
"""Part of the deadline that a host with mirrors gets before they are tried (our choice)."""
OK = 200
LEAVE_ALONE = frozenset({401, 403, 407, 429})
"""Refusals of the host, not of the question: splitting a bundle would only annoy it."""


def ask(question: Question, transport: Transport) -> Reply:
    """Put one question and judge what comes back.

    Parameters
    ----------
    question : Question
        One cone at one table.
    transport : Transport
        How it is sent.

    Returns
    -------
    Reply
        Always; whatever goes wrong with an archive becomes the reply's status and detail.

    Raises
    ------
    FactError
        When the question's protocol is not known: that is a fault of the catalog file.
    """
    return _replies(_exchange(single(question), transport, Stop()), transport)[0]


def ask_all(
    questions: Sequence[Question],
    transport: Transport,
    *,
    on_event: OnEvent | None = None,
    bundling: bool = True,
) -> Iterator[Reply]:
    """Put many questions at once and yield the judged replies as they come.

    Parameters
    ----------
    questions : sequence of Question
        Each is asked once, or once more alone where a bundle does not answer it whole.
    transport : Transport
        Shared by all; its politeness says how many requests one host gets at a time.
    on_event : callable, optional
        Told what happens to each question, in the thread that takes the replies.
    bundling : bool
        False for one request per question.

    Yields
    ------
    Reply
        One per question, first come first served.

    Raises
    ------
    FactError
        Before anything is asked, when a protocol is not known.

    Notes
    -----
    Closing the iterator, or an interrupt in the thread that takes the replies, calls off what is not yet
    answered and returns at once.
    """
    jobs = jobs_of(questions, per_host=transport.per_host, bundling=bundling)
    return run_jobs(jobs, transport, on_event=on_event)


def run_jobs(
    jobs: Sequence[Job], transport: Transport, *, on_event: OnEvent | None = None, keep_body: bool = False
) -> Iterator[Reply]:
    """Work off jobs that are ready to be sent; see :func:`ask_all`. ``keep_body`` keeps the bytes of every reply."""
    return _Fleet(jobs, transport, on_event, keep_body).run()


def plan_requests(questions: Sequence[Question], per_host: int | None = None, bundling: bool = True) -> list[str]:
    """Return exactly what would be sent, in order, without asking.

    Raises
    ------
    FactError
        When a protocol is not known.
    """
    return [job.request.text for job in jobs_of(questions, per_host=per_host, bundling=bundling)]


@dataclass(frozen=True)
class _Exchange:
    """One job with whatever came back for it, before it is judged."""

    job: Job
    request: Request
    outcome: Received | ArchiveError
    asked_at: str
    elapsed_s: float
    tries: int


@dataclass(frozen=True)
class _Event:
    job: Job
    what: str


def _exchange(job: Job, transport: Transport, stop: Stop, tell: Callable[[_Event], None] | None = None) -> _Exchange:
    tries = 0
    asked_at = ""
    begin = transport.clock()

    def on_try(number: int) -> None:
        nonlocal tries, asked_at, begin
        tries += 1
        if tries == 1:
            # the wait for a turn at the host is not the archive's doing
            begin = transport.clock()
            asked_at = _utc(transport)
        if tell is not None:
            tell(_Event(job, "asking" if tries == 1 else "asking again"))

    request, outcome = _answer(job, transport, stop, on_try)
    return _Exchange(job, request, outcome, asked_at or _utc(transport), transport.clock() - begin, tries)


def _answer(
    job: Job, transport: Transport, stop: Stop, on_try: Callable[[int], None]
) -> tuple[Request, Received | ArchiveError]:
    """Send the request, and to the host's mirrors while there is no answer and time is left."""
    question, request = job.questions[0], job.request
    others = elsewhere(request) if transport.mirrors else []
    until = transport.clock() + transport.politeness.deadline_s
    share = FIRST_SHARE if others else 1.0
    first: tuple[Request, Received | ArchiveError] | None = None
    for at in (request, *others):
        left_s = until - transport.clock()
        if first is not None and (left_s <= 0.0 or stop.called):
            break
        outcome: Received | ArchiveError
        try:
            if question.protocol == "tap" and question.mode == "async":
                outcome = tap.run_job(at, transport, stop, on_try)
            else:
                outcome = transport.fetch(at, stop=stop, on_try=on_try, deadline_s=share * left_s if others else None)
        except ArchiveError as fault:
            outcome = fault
        if first is None and not _no_answer(outcome):
            return at, outcome
        if first is not None and isinstance(outcome, Received) and outcome.http_status == OK:
            return at, outcome
        # a mirror that does not know the table says nothing: the first fault stays
        first = first or (at, outcome)
    assert first is not None
    return first


def _no_answer(outcome: Received | ArchiveError) -> bool:
    """Whether another host may do better: nothing came, or the host has a fault of its own."""
    if isinstance(outcome, Received):
        return outcome.http_status >= 500
    return isinstance(outcome, UnansweredError)


def _utc(transport: Transport) -> str:
    return transport.now().astimezone(UTC).strftime("%Y-%m-%dT%H:%M:%SZ")


def _replies(exchange: _Exchange, transport: Transport, keep_body: bool = False) -> list[Reply]:
    """Judge an exchange for each of its questions. No archive fault leaves here: each becomes a status with words."""
    outcome = exchange.outcome
    received = outcome if isinstance(outcome, Received) else None
    sha256 = hashlib.sha256(received.body).hexdigest() if received is not None else ""
    answer = Answer(received.body) if received is not None else None
    replies = []
    for question in exchange.job.questions:
        fault = outcome if isinstance(outcome, ArchiveError) else None
        judged = None
        if received is not None and answer is not None:
            try:
                judged = judge(
                    answer, received.http_status, received.content_type, question, bundled=exchange.job.is_bundle
                )
            except ArchiveError as found:
                fault = found
        if fault is not None:
            status, detail = _status_of(fault), str(fault)
        else:
            assert judged is not None
            status, detail = judged.status, judged.detail
        http_status = received.http_status if received is not None else getattr(fault, "http_status", None)
        retry_after = received.retry_after_s if received is not None else getattr(fault, "retry_after_s", None)
        keep = keep_body or (question.is_whole and status is ReplyStatus.WHOLE)
        replies.append(
            Reply(
                question=question,
                status=status,
                detail=detail,
                request=exchange.request.text,
                asked_at=exchange.asked_at,
                elapsed_s=exchange.elapsed_s,
                columns=judged.columns if judged is not None else None,
                n_rows=judged.n_rows if judged is not None else 0,
                http_status=http_status,
                retry_after_s=retry_after,
                sha256=sha256,
                reply_bytes=len(received.body) if received is not None else 0,
                tries=exchange.tries,
                client=_client(transport),
                body=received.body if keep and received is not None else None,
            )
        )
    return replies


def _status_of(fault: ArchiveError) -> ReplyStatus:
    if isinstance(fault, UnansweredError):
        return ReplyStatus.UNANSWERED
    if isinstance(fault, TruncatedError):
        return ReplyStatus.TRUNCATED
    return ReplyStatus.MISREAD


@cache
def _libraries() -> str:
    """Versions of what asks and decodes; looking them up reads files, so it is done once."""
    return ", ".join(f"{name} {version(name)}" for name in ("requests", "pyvo", "astroquery", "astropy"))


def _client(transport: Transport) -> str:
    instead = f"; asked at {transport.addresses} in place of the archive" if transport.addresses else ""
    return f"blankfield {__version__}; {_libraries()}{instead}"


class _Fleet:
    """Threads per host that work off its jobs; what a bundle leaves open is added while they work."""

    def __init__(
        self, jobs: Sequence[Job], transport: Transport, on_event: OnEvent | None, keep_body: bool = False
    ) -> None:
        self.keep_body = keep_body
        self.transport = transport
        self.on_event = on_event
        self.stop = Stop()
        self.done: queue.SimpleQueue[_Exchange | _Event | BaseException] = queue.SimpleQueue()
        self.waiting: dict[str, deque[Job]] = defaultdict(deque)
        self.threads: list[threading.Thread] = []
        self.left = sum(len(job.questions) for job in jobs)
        for job in jobs:
            self.waiting[job.request.host].append(job)

    def run(self) -> Iterator[Reply]:
        """Yield the replies as they come."""
        try:
            for host in tuple(self.waiting):
                self.staff(host)
            while self.left:
                item = self.done.get()
                if isinstance(item, BaseException):
                    raise item
                if isinstance(item, _Event):
                    self.tell(item.job, item.what)
                    continue
                for reply in self.settled(item):
                    self.left -= 1
                    if self.on_event is not None:
                        self.on_event(reply.question, str(reply.status))
                    yield reply
        finally:
            self.stop.now()
            for thread in self.threads:
                if thread.ident is not None:
                    thread.join(JOIN_S)

    def staff(self, host: str) -> None:
        """Start as many threads for a host as it may have, no more than it has jobs."""
        per_host = self.transport.per_host
        busy = sum(thread.is_alive() and thread.name == f"ask {host}" for thread in self.threads)
        wanted = len(self.waiting[host]) if per_host is None else min(len(self.waiting[host]), per_host - busy)
        for _ in range(wanted):
            thread = threading.Thread(target=self.work, args=(host,), name=f"ask {host}", daemon=True)
            self.threads.append(thread)
            thread.start()

    def work(self, host: str) -> None:
        """Take jobs of one host until there is none."""
        try:
            while not self.stop.called:
                try:
                    job = self.waiting[host].popleft()
                except IndexError:
                    return
                self.done.put(_exchange(job, self.transport, self.stop, self.done.put))
        except BaseException as fault:  # a fault of ours must reach the caller, not die in a thread
            self.done.put(fault)
        finally:
            self.transport.close_session()

    def settled(self, exchange: _Exchange) -> list[Reply]:
        """The replies that stand; the others of a bundle are put on the list again, alone."""
        replies = _replies(exchange, self.transport, self.keep_body)
        job = exchange.job
        if not job.is_bundle:
            again = self.in_other_format(exchange, replies[0])
            if again is not None:
                self.add([again])
                return []
            return replies
        if isinstance(exchange.outcome, UnansweredError) and (
            exchange.outcome.at_host or exchange.outcome.http_status in LEAVE_ALONE
        ):
            return replies
        # a table cut by its own limit would be cut again alone: the caller asks it over a smaller cone
        stands = {ReplyStatus.WHOLE}
        if isinstance(exchange.outcome, Received):
            stands.add(ReplyStatus.TRUNCATED)
        self.add([single(reply.question) for reply in replies if reply.status not in stands])
        return [reply for reply in replies if reply.status in stands]

    def in_other_format(self, exchange: _Exchange, reply: Reply) -> Job | None:
        """A service that refuses the default format is asked once more with the format named."""
        if reply.status is not ReplyStatus.MISREAD or reply.question.protocol not in ("tap", "simbad"):
            return None
        request = tap.in_other_format(exchange.job.request, MisreadError(reply.detail))
        return None if request is None else Job(exchange.job.questions, request)

    def add(self, jobs: Sequence[Job]) -> None:
        """More work for hosts whose threads may already have gone home."""
        for job in jobs:
            self.waiting[job.request.host].append(job)
        for host in {job.request.host for job in jobs}:
            self.staff(host)

    def tell(self, job: Job, what: str) -> None:
        if self.on_event is not None:
            for question in job.questions:
                self.on_event(question, what)
