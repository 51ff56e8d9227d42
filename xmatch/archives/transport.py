"""One transport for every archive: patient within a deadline, polite, and never silent about a fault.

Requests' time-outs count per read, so an archive that drips one byte a second keeps a client for hours.
Here a watch cuts the socket when the whole question has taken too long, headers included. What cannot be
cut is the look-up of a name by the operating system.
"""

from __future__ import annotations

import os
import random
import tempfile
import threading
import time
from collections.abc import Callable
from dataclasses import dataclass
from datetime import UTC, datetime
from typing import Any
from urllib.parse import urlsplit

import requests
import tenacity

from xmatch import __version__
from xmatch.archives.mishaps import AgainError, busy, fault_of, retry_after_s
from xmatch.archives.wire import ArchiveAdapter, Watch, is_loopback
from xmatch.errors import ConfigurationError, TruncatedError, UnansweredError

ADDRESSES_VARIABLE = "BLANKFIELD_ARCHIVES"
"""Environment variable that sends every request to another address, such as the embedded archive."""
CHUNK_BYTES = 65_536
IN_MEMORY_BYTES = 4 * 2**20
"""Up to here an answer grows in memory (our choice: most are below 1 MB)."""
BUSY = frozenset({429, 503})
"""HTTP statuses by which an archive asks to be left alone for a while (RFC 6585, RFC 9110)."""
MAX_REDIRECTS = 5


@dataclass(frozen=True)
class Politeness:
    """How patient and how modest we are. All values are our choice unless a source is named."""

    connect_s: float = 10.0
    """Longest wait for a connection."""
    read_s: float = 30.0
    """Longest wait between two pieces of an answer."""
    deadline_s: float = 60.0
    """Longest time for one question, all tries and waits included."""
    max_bytes: int = 64 * 2**20
    """Largest answer that is read, after decompression."""
    per_host: int = 6
    """Questions open at one host at a time (browsers do the same; common practice, no source)."""
    pace_s: float = 0.1
    """Least time between two questions to one host: SIMBAD blocks above 5 to 10 a second (astroquery#2856)."""
    max_tries: int = 3
    """Tries for faults of the network and for 429 and 503; nothing else is tried again."""
    wait_s: float = 0.5
    """First wait between tries; it doubles, with jitter."""
    wait_max_s: float = 8.0
    """Longest wait between tries of our own making."""
    job_s: float = 300.0
    """Longest time for a job that an archive works on by itself."""
    patience_s: float = 10.0
    """Longest wait an archive may ask for and get within a look; beyond it the look goes on without."""


@dataclass(frozen=True)
class Request:
    """Exactly what is sent."""

    method: str
    address: str
    body: bytes | None = None
    content_type: str | None = None

    @property
    def host(self) -> str:
        """The archive's host, to which politeness is owed."""
        return urlsplit(self.address).netloc.lower()

    @property
    def text(self) -> str:
        """Method, address and body as one text, for the store and for people."""
        head = f"{self.method} {self.address}"
        return head if self.body is None else f"{head}\n\n{self.body.decode()}"


@dataclass(frozen=True)
class Received:
    """What came back, unread."""

    http_status: int
    content_type: str
    body: bytes
    retry_after_s: float | None
    location: str = ""
    """Where a redirect points that was not followed, such as to a job just made."""


class Stop:
    """A way to call off everything that was started under it, from another thread."""

    def __init__(self) -> None:
        self._event = threading.Event()
        self._lock = threading.Lock()
        self._watches: set[Watch] = set()

    def now(self) -> None:
        """Start nothing more, end every wait, cut every open socket."""
        self._event.set()
        with self._lock:
            watches = tuple(self._watches)
        for watch in watches:
            watch.cut()

    @property
    def called(self) -> bool:
        """Whether :meth:`now` was called."""
        return self._event.is_set()

    def pause(self, seconds: float) -> None:
        """Wait, but not beyond a stop."""
        self._event.wait(max(0.0, seconds))

    def watch(self, watch: Watch) -> None:
        """Let :meth:`now` cut this one too."""
        with self._lock:
            self._watches.add(watch)

    def forget(self, watch: Watch) -> None:
        """The exchange under it is over."""
        with self._lock:
            self._watches.discard(watch)


class Transport:
    """Sends requests. Safe to share between threads; each thread has a session of its own.

    Parameters
    ----------
    contact : str, optional
        Mail or web address that archives may write to; it is put into the User-Agent.
    addresses : str, optional
        Where every request goes instead, as ``<addresses>/<host><path>``; by default the environment
        variable ``BLANKFIELD_ARCHIVES``, and without it the archives themselves.
    politeness : Politeness, optional
        Time-outs, deadline, size cap, pace and tries.
    mirrors : bool, optional
        Whether a host that does not answer is asked for at its mirrors; by default yes, but not when ``addresses`` is this
        machine.
    sleep, clock, now, jitter : callable, optional
        Waiting, monotonic seconds, UTC time and a number from 0 to 1, for tests.

    Raises
    ------
    ConfigurationError
        When ``contact`` or ``addresses`` cannot be used.
    """

    def __init__(
        self,
        contact: str | None = None,
        addresses: str | None = None,
        politeness: Politeness | None = None,
        *,
        mirrors: bool | None = None,
        sleep: Callable[[float], None] | None = None,
        clock: Callable[[], float] = time.monotonic,
        now: Callable[[], datetime] = lambda: datetime.now(UTC),
        jitter: Callable[[], float] = random.random,
    ) -> None:
        addresses = os.environ.get(ADDRESSES_VARIABLE) if addresses is None else addresses
        self.addresses = _checked_addresses(addresses) if addresses else None
        self.politeness = politeness or Politeness()
        self.user_agent = _user_agent(contact)
        self.mirrors = not self.is_embedded if mirrors is None else mirrors
        self.clock = clock
        self.now = now
        self._sleep = sleep
        self._jitter = jitter
        self._local = threading.local()
        self._pace_lock = threading.Lock()
        self._next_start: dict[str, float] = {}

    @property
    def is_embedded(self) -> bool:
        """Whether requests go to this machine, where no politeness is owed."""
        return self.addresses is not None and is_loopback(urlsplit(self.addresses).hostname)

    @property
    def per_host(self) -> int | None:
        """How many questions may be open at one host; None where no politeness is owed."""
        return None if self.is_embedded else self.politeness.per_host

    def fetch(
        self,
        request: Request,
        *,
        stop: Stop | None = None,
        on_try: Callable[[int], None] | None = None,
        deadline_s: float | None = None,
    ) -> Received:
        """Send one request and bring back the whole body.

        Parameters
        ----------
        request : Request
            What to send.
        stop : Stop, optional
            Calls the question off.
        on_try : callable, optional
            Told the number of each try as it starts.
        deadline_s : float, optional
            A shorter deadline than that of the politeness, in seconds.

        Returns
        -------
        Received
            Any HTTP answer but 429 and 503, unread: judging it is the reader's work.

        Raises
        ------
        UnansweredError
            Time-out, deadline, refusal, closed connection, bad certificate, 429 or 503 after all tries.
        MisreadError
            The connection was cut in the middle of the body, or the body cannot be decompressed.
        TruncatedError
            The body is larger than the size cap.
        """
        stop = stop or Stop()
        self._wait_for_turn(request.host, stop)
        allowed_s = self.politeness.deadline_s if deadline_s is None else deadline_s
        until = self.clock() + allowed_s
        retrying = tenacity.Retrying(
            retry=tenacity.retry_if_exception_type(AgainError),
            wait=self._wait_before_next,
            stop=lambda state: self._give_up(state, until, stop),
            sleep=self._sleep or stop.pause,
            reraise=True,
        )
        try:
            for attempt in retrying:
                with attempt:
                    if on_try is not None:
                        on_try(attempt.retry_state.attempt_number)
                    return self._try_once(request, until, allowed_s, stop)
        except AgainError as again:
            raise again.fault from None
        raise AssertionError("unreachable: tenacity either returns or raises")

    def pause(self, seconds: float, stop: Stop) -> None:
        """Wait between two steps, but not beyond a stop."""
        (self._sleep or stop.pause)(seconds)

    def close_session(self) -> None:
        """Close the calling thread's session and its idle connections."""
        session: requests.Session | None = getattr(self._local, "session", None)
        if session is not None:
            session.close()
            del self._local.session

    def _session(self) -> requests.Session:
        session: requests.Session | None = getattr(self._local, "session", None)
        if session is None:
            session = requests.Session()
            session.headers["User-Agent"] = self.user_agent
            session.headers["Accept"] = "application/x-votable+xml, text/xml;q=0.9, */*;q=0.5"
            session.max_redirects = MAX_REDIRECTS
            for scheme in ("http://", "https://"):
                session.mount(scheme, ArchiveAdapter(self.addresses))
            self._local.session = session
        return session

    def _wait_for_turn(self, host: str, stop: Stop) -> None:
        """Keep the pace of a host: each caller takes the next free moment and waits for it."""
        if self.is_embedded:
            return
        with self._pace_lock:
            turn = max(self.clock(), self._next_start.get(host, 0.0))
            self._next_start[host] = turn + self.politeness.pace_s
        wait_s = turn - self.clock()
        if wait_s > 0.0:
            self.pause(wait_s, stop)

    def _wait_before_next(self, state: tenacity.RetryCallState) -> float:
        fault = state.outcome.exception() if state.outcome is not None else None
        if isinstance(fault, AgainError) and fault.retry_after_s is not None:
            return fault.retry_after_s
        longest = min(self.politeness.wait_s * 2.0 ** (state.attempt_number - 1), self.politeness.wait_max_s)
        return longest * (0.5 + 0.5 * self._jitter())

    def _give_up(self, state: tenacity.RetryCallState, until: float, stop: Stop) -> bool:
        wait_s = self._wait_before_next(state)
        fault = state.outcome.exception() if state.outcome is not None else None
        asked_s = fault.retry_after_s if isinstance(fault, AgainError) else None
        return (
            stop.called
            or state.attempt_number >= self.politeness.max_tries
            or (asked_s is not None and asked_s > self.politeness.patience_s)
            or self.clock() + wait_s >= until
        )

    def _try_once(self, request: Request, until: float, allowed_s: float, stop: Stop) -> Received:
        polite = self.politeness
        left_s = until - self.clock()
        watch = Watch(left_s)
        stop.watch(watch)
        got = 0
        status: int | None = None
        try:
            if stop.called or left_s <= 0.0:
                raise UnansweredError("called off before it was asked; ask again")
            with watch, self._send(request, left_s) as response, _spool() as whole:
                status = response.status_code
                for part in response.iter_content(CHUNK_BYTES):
                    got += len(part)
                    if got > polite.max_bytes:
                        raise TruncatedError(
                            f"the answer passed the size cap of {polite.max_bytes} bytes and was left unread; "
                            "ask for a smaller cone"
                        )
                    whole.write(part)
                whole.seek(0)
                received = Received(
                    http_status=status,
                    content_type=response.headers.get("Content-Type", ""),
                    body=whole.read(),
                    retry_after_s=retry_after_s(response.headers.get("Retry-After"), self.now()),
                    location=response.headers.get("Location", ""),
                )
        except requests.RequestException as fault:
            if stop.called:
                raise UnansweredError("called off while it was being answered; ask again") from None
            # at the deadline the socket's own time-out and the watch race: both are the deadline
            if watch.fired or self.clock() >= until:
                raise _too_late(allowed_s, got, status) from None
            raise fault_of(fault, got, status, polite.connect_s, polite.read_s) from None
        finally:
            stop.forget(watch)
        # a body that ends with the connection looks whole to the client when the watch cut it
        if watch.fired:
            raise _too_late(allowed_s, got, status)
        if received.http_status in BUSY:
            raise busy(received.http_status, received.retry_after_s)
        return received

    def _send(self, request: Request, left_s: float) -> requests.Response:
        return self._session().request(
            request.method,
            request.address,
            data=request.body,
            headers=None if request.content_type is None else {"Content-Type": request.content_type},
            timeout=(min(self.politeness.connect_s, left_s), min(self.politeness.read_s, left_s)),
            stream=True,
            # a redirected form would be sent on as a plain GET, without the question in it
            allow_redirects=request.method == "GET",
        )


def _spool() -> tempfile.SpooledTemporaryFile[bytes]:
    """Where an answer grows: in memory while it is small, on disk beyond, so that a huge one costs no memory."""
    return tempfile.SpooledTemporaryFile(max_size=IN_MEMORY_BYTES)


def _too_late(deadline_s: float, got_bytes: int, http_status: int | None) -> UnansweredError:
    return UnansweredError(
        f"no whole answer within the deadline of {deadline_s:g} s ({got_bytes} bytes had come); "
        "ask again later or allow more time",
        http_status=http_status,
    )


def _user_agent(contact: str | None) -> str:
    """Name, contact and purpose, as the IVOA note on software identification recommends."""
    if contact is None or not contact.strip():
        return f"blankfield/{__version__} (IVOA-science)"
    contact = contact.strip()
    if not contact.isprintable() or not contact.isascii() or set("()") & set(contact):
        raise ConfigurationError(f"contact {contact!r} cannot stand in a header; give a plain mail or web address")
    return f"blankfield/{__version__} ({contact}) (IVOA-science)"


def _checked_addresses(addresses: str) -> str:
    parts: Any = urlsplit(addresses)
    if parts.scheme not in ("http", "https") or not parts.netloc or parts.query or parts.fragment:
        raise ConfigurationError(
            f"archives' address {addresses!r} is not of the form http://host:port; "
            f"correct it, or unset {ADDRESSES_VARIABLE}"
        )
    return addresses.rstrip("/")
