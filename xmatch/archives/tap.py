"""The Table Access Protocol: requests built by pyvo, sent by our own transport; long questions as a job.

A job is made, started, watched and deleted by the rules of the IVOA's Universal Worker Service.
"""

from __future__ import annotations

import re
import warnings
from collections.abc import Callable
from threading import Lock
from urllib.parse import urlencode, urljoin

from xmatch.archives import adql
from xmatch.archives.transport import Received, Request, Stop, Transport
from xmatch.archives.words import plain
from xmatch.errors import MisreadError, UnansweredError
from xmatch.records import Question

FORM = "application/x-www-form-urlencoded"
FIRST_PAUSE_S, LONGEST_PAUSE_S = 0.5, 8.0
"""Between two looks at a job; doubles in between (our choice)."""
_PHASE = re.compile(rb"\s*(PENDING|QUEUED|EXECUTING|COMPLETED|ERROR|ABORTED|UNKNOWN|HELD|SUSPENDED|ARCHIVED)\s*\Z")
_REFUSES_FORMAT = re.compile(r"\bformat", re.IGNORECASE)
OTHER_FORMAT = "application/x-votable+xml"
"""Asked for by name where a service refuses the question without a format (DALI 1.1, section 3.4.3)."""
_building = Lock()


def request(question: Question) -> Request:
    """Build the POST request of one cone at one table of a TAP service.

    Parameters
    ----------
    question : Question
        ``address`` is the service's base; ``remote_table`` its table; see :func:`xmatch.archives.adql.select`.
        ``mode`` says whether the answer is waited for (``sync``) or a job is made (``async``).

    Returns
    -------
    Request
        LANG, MAXREC (one row more than the limit), QUERY and REQUEST as a form, to ``/sync`` or ``/async``.

    References
    ----------
    Dowler et al. 2019, IVOA Recommendation "Table Access Protocol", version 1.1.
    """
    return form(question.address, adql.select(question), question.row_limit + 1, question.mode)


def form(address: str, query: str, maxrec: int, mode: str = "sync", **more: str) -> Request:
    """The request that puts any ADQL text to a service."""
    with _building, warnings.catch_warnings():
        warnings.simplefilter("ignore")
        from pyvo.dal.tap import TAPQuery

        built = TAPQuery(address, query, mode=mode, maxrec=maxrec)
        values = {name: str(value) for name, value in built.items()}
        url = built.queryurl
        built._session.close()
    return Request("POST", url, urlencode(sorted((values | more).items())).encode(), FORM)


def in_other_format(sent: Request, fault: MisreadError) -> Request | None:
    """The same request with its format named, where the service refused it for its format; None otherwise."""
    assert sent.body is not None
    if not _REFUSES_FORMAT.search(str(fault)) or b"RESPONSEFORMAT=" in sent.body:
        return None
    extra = urlencode({"FORMAT": OTHER_FORMAT, "RESPONSEFORMAT": OTHER_FORMAT})
    return Request(sent.method, sent.address, sent.body + b"&" + extra.encode(), sent.content_type)


def run_job(sent: Request, transport: Transport, stop: Stop, on_try: Callable[[int], None] | None = None) -> Received:
    """Make a job, start it, wait for it, fetch its result and delete it.

    Parameters
    ----------
    sent : Request
        The form, addressed to ``/async``.
    transport : Transport
        How every step is sent; the whole job ends within its ``job_s``.
    stop : Stop
        Calls the waiting off.
    on_try : callable, optional
        Told when the job is made.

    Returns
    -------
    Received
        The result, unread.

    Raises
    ------
    UnansweredError
        The job did not end in time, was aborted, or any step went unanswered.
    MisreadError
        The service did not follow the protocol, or says that the query is wrong.

    References
    ----------
    Harrison et al. 2016, IVOA Recommendation "Universal Worker Service", version 1.1.
    """
    until = transport.clock() + transport.politeness.job_s
    made = transport.fetch(sent, stop=stop, on_try=on_try)
    if made.http_status != 303 or not made.location:
        raise MisreadError(
            f'HTTP {made.http_status} where a job\'s address (303) belongs; the service may not know async: set mode = "sync"'
        )
    job = urljoin(sent.address, made.location)
    try:
        transport.fetch(Request("POST", f"{job}/phase", b"PHASE=RUN", FORM), stop=stop)
        phase = _wait(job, transport, stop, until)
        if phase == "COMPLETED":
            return transport.fetch(Request("GET", f"{job}/results/result"), stop=stop)
        said = ""
        if phase == "ERROR":
            said = _error_text(transport.fetch(Request("GET", f"{job}/error"), stop=stop).body)
            raise MisreadError(f"the job failed: {said or 'without words'}; check the table's columns")
        raise UnansweredError(f"the job ended as {phase}; ask again later")
    finally:
        _delete(job, transport)


def _wait(job: str, transport: Transport, stop: Stop, until: float) -> str:
    pause_s = FIRST_PAUSE_S
    while True:
        found = _PHASE.match(transport.fetch(Request("GET", f"{job}/phase"), stop=stop).body)
        if found is None:
            raise MisreadError('the job tells no phase that the standard knows; set mode = "sync" in the catalog file')
        phase = found[1].decode()
        if phase not in ("PENDING", "QUEUED", "EXECUTING", "UNKNOWN", "HELD", "SUSPENDED"):
            return phase
        if stop.called:
            raise UnansweredError("called off while the job was running; ask again")
        if transport.clock() + pause_s >= until:
            raise UnansweredError(
                f"the job was still {phase} after {transport.politeness.job_s:g} s; ask again later or allow more time"
            )
        transport.pause(pause_s, stop)
        pause_s = min(2.0 * pause_s, LONGEST_PAUSE_S)


def _error_text(body: bytes) -> str:
    return plain(re.sub(rb"<[^>]*>", b" ", body[:4096]).decode("utf-8", "replace"))


def _delete(job: str, transport: Transport) -> None:
    """Leave nothing behind at the archive; a failure to tidy up is not the user's."""
    try:
        transport.fetch(Request("POST", job, b"ACTION=DELETE", FORM), stop=None)
    except (UnansweredError, MisreadError):
        return
