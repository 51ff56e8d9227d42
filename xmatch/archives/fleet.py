"""Many questions at once: quick where archives allow it, polite where they do not, first come first served.

Worker threads do nothing but wait for the network. Requests are built before they start, and answers are
judged and decoded in the thread that takes them, because the libraries that do both keep state that is
not safe between threads (warning filters, first imports) and would not run faster in several of them.
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
from xmatch.archives import cone, vizier
from xmatch.archives.reading import judge
from xmatch.archives.transport import Received, Request, Stop, Transport
from xmatch.errors import ArchiveError, FactError, TruncatedError, UnansweredError
from xmatch.records import Question, Reply, ReplyStatus

OnEvent = Callable[[Question, str], None]
"""Called in the consumer's thread with ``asking``, ``asking again`` or the status of the reply."""

BUILDERS: dict[str, Callable[[Question], Request]] = {"cone": cone.request, "vizier": vizier.request}
"""One adapter per protocol."""
JOIN_S = 0.5
"""How long a stopped fleet waits for its threads; those still connecting end by themselves."""


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
    return _reply(_exchange(question, request_of(question), transport, Stop()), transport)


def ask_all(questions: Sequence[Question], transport: Transport, *, on_event: OnEvent | None = None) -> Iterator[Reply]:
    """Put many questions at once and yield the judged replies as they come.

    Parameters
    ----------
    questions : sequence of Question
        Each is asked once.
    transport : Transport
        Shared by all; its politeness says how many questions one host gets at a time.
    on_event : callable, optional
        Told what happens to each question, in the thread that takes the replies.

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
    prepared = [(question, request_of(question)) for question in questions]
    return _run(prepared, transport, on_event)


def plan_requests(questions: Sequence[Question]) -> list[str]:
    """Return exactly what would be sent, in order, without asking.

    Raises
    ------
    FactError
        When a protocol is not known.
    """
    return [request_of(question).text for question in questions]


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


@dataclass(frozen=True)
class _Exchange:
    """One question with whatever came back for it, before it is judged."""

    question: Question
    request: Request
    outcome: Received | ArchiveError
    asked_at: str
    elapsed_s: float
    tries: int


@dataclass(frozen=True)
class _Event:
    question: Question
    what: str


def _exchange(
    question: Question,
    request: Request,
    transport: Transport,
    stop: Stop,
    tell: Callable[[_Event], None] | None = None,
) -> _Exchange:
    tries = 0
    asked_at = ""
    begin = transport.clock()

    def on_try(number: int) -> None:
        nonlocal tries, asked_at, begin
        if number == 1:
            # the wait for a turn at the host is not the archive's doing
            begin = transport.clock()
            asked_at = _utc(transport)
        tries = number
        if tell is not None:
            tell(_Event(question, "asking" if number == 1 else "asking again"))

    outcome: Received | ArchiveError
    try:
        outcome = transport.fetch(request, stop=stop, on_try=on_try)
    except ArchiveError as fault:
        outcome = fault
    return _Exchange(question, request, outcome, asked_at or _utc(transport), transport.clock() - begin, tries)


def _utc(transport: Transport) -> str:
    return transport.now().astimezone(UTC).strftime("%Y-%m-%dT%H:%M:%SZ")


def _reply(exchange: _Exchange, transport: Transport) -> Reply:
    """Judge an exchange. No archive fault leaves here: each becomes a status with words."""
    question, outcome = exchange.question, exchange.outcome
    received = outcome if isinstance(outcome, Received) else None
    fault = outcome if isinstance(outcome, ArchiveError) else None
    judged = None
    if received is not None:
        try:
            judged = judge(received.body, received.http_status, received.content_type, question)
        except ArchiveError as found:
            fault = found
    if fault is not None:
        status, detail = _status_of(fault), str(fault)
    else:
        assert judged is not None
        status, detail = judged.status, judged.detail
    http_status = received.http_status if received is not None else getattr(fault, "http_status", None)
    retry_after = received.retry_after_s if received is not None else getattr(fault, "retry_after_s", None)
    return Reply(
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
        sha256=hashlib.sha256(received.body).hexdigest() if received is not None else "",
        reply_bytes=len(received.body) if received is not None else 0,
        tries=exchange.tries,
        client=_client(transport),
    )


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


def _run(prepared: list[tuple[Question, Request]], transport: Transport, on_event: OnEvent | None) -> Iterator[Reply]:
    if not prepared:
        return
    stop = Stop()
    done: queue.SimpleQueue[_Exchange | _Event | BaseException] = queue.SimpleQueue()
    by_host: dict[str, deque[tuple[Question, Request]]] = defaultdict(deque)
    for question, request in prepared:
        by_host[request.host].append((question, request))

    def work(waiting: deque[tuple[Question, Request]]) -> None:
        try:
            while waiting and not stop.called:
                try:
                    question, request = waiting.popleft()
                except IndexError:  # another thread of the same host took the last one
                    return
                done.put(_exchange(question, request, transport, stop, done.put))
        except BaseException as fault:  # a fault of ours must reach the caller, not die in a thread
            done.put(fault)
        finally:
            transport.close_session()

    threads = [
        threading.Thread(target=work, args=(waiting,), name=f"ask {host}", daemon=True)
        for host, waiting in by_host.items()
        for _ in range(min(len(waiting), transport.per_host or len(waiting)))
    ]
    try:
        for thread in threads:
            thread.start()
        left = len(prepared)
        while left:
            item = done.get()
            if isinstance(item, BaseException):
                raise item
            if isinstance(item, _Event):
                if on_event is not None:
                    on_event(item.question, item.what)
                continue
            left -= 1
            reply = _reply(item, transport)
            if on_event is not None:
                on_event(item.question, str(reply.status))
            yield reply
    finally:
        stop.now()
        for thread in threads:
            if thread.ident is not None:
                thread.join(JOIN_S)
