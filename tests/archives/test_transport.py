"""Deadlines, tries, pace and identity of the transport, all on the loopback interface."""

from __future__ import annotations

import socket
import time
from datetime import UTC, datetime

import pytest

from xmatch.archives.fleet import ask
from xmatch.archives.mishaps import retry_after_s
from xmatch.archives.transport import Politeness, Request, Stop, Transport
from xmatch.demo.faults import Fault
from xmatch.demo.server import EmbeddedArchive
from xmatch.errors import ConfigurationError, MisreadError, TruncatedError, UnansweredError
from xmatch.records import ReplyStatus

NOW = datetime(2026, 12, 1, 12, 0, 0, tzinfo=UTC)


def cone_request(host: str = "vizier.cds.unistra.fr") -> Request:
    return Request("GET", f"https://{host}/viz-bin/conesearch/I/999/main?RA=0&DEC=-20&SR=0.1&VERB=3&MAXREC=101")


def direct(archive: EmbeddedArchive, path: str = "/viz-bin/conesearch/I/999/main") -> Request:
    """The same question put to the loopback server as if it were the archive itself."""
    return Request("GET", f"{archive.address}/vizier.cds.unistra.fr{path}?RA=0&DEC=-20&SR=0.1")


# ------------------------------------------------------------------------------------------------
# time
# ------------------------------------------------------------------------------------------------
@pytest.mark.parametrize(
    "fault", [Fault("drip", seconds=0.02), Fault("drip headers", seconds=0.02), Fault("delay", seconds=60.0)]
)
def test_the_deadline_holds_where_no_single_read_times_out(archive, fault):
    archive.misbehave("*", fault)
    transport = Transport(addresses=archive.address, politeness=Politeness(read_s=30.0, deadline_s=0.3))
    begin = time.monotonic()
    with pytest.raises(UnansweredError, match=r"deadline of 0\.3 s"):
        transport.fetch(cone_request())
    assert 0.25 < time.monotonic() - begin < 3.0  # the drip alone would take a minute


def test_a_socket_that_gives_up_at_the_deadline_is_the_deadline_and_no_further_try(archive, waits):
    archive.misbehave("*", Fault("delay", seconds=60.0))
    polite = Politeness(read_s=0.1, deadline_s=10.0)
    clock = lambda: 10.0 if archive.requests else 0.0  # noqa: E731 - the deadline passes while the archive is silent
    with pytest.raises(UnansweredError, match=r"deadline of 10 s"):
        Transport(addresses=archive.address, politeness=polite, sleep=waits.append, clock=clock).fetch(cone_request())
    assert (len(archive.requests), waits) == (1, [])


def test_silence_is_a_time_out_and_is_tried_again(archive, waits):
    archive.misbehave("*", Fault("delay", seconds=60.0))
    polite = Politeness(read_s=0.1, deadline_s=10.0, max_tries=2)
    with pytest.raises(UnansweredError, match=r"nothing came for 0\.1 s"):
        Transport(addresses=archive.address, politeness=polite, sleep=waits.append).fetch(cone_request())
    assert len(archive.requests) == 2


def test_no_wait_reaches_beyond_the_deadline(archive, waits):
    archive.misbehave("*", Fault("unavailable", seconds=5.0))
    polite = Politeness(deadline_s=4.0, patience_s=10.0)
    with pytest.raises(UnansweredError) as fault:
        Transport(addresses=archive.address, politeness=polite, sleep=waits.append).fetch(cone_request())
    assert (fault.value.retry_after_s, waits) == (5.0, [])


def test_a_wait_beyond_our_patience_is_not_waited_for(archive, waits):
    archive.misbehave("*", Fault("too many", seconds=20.0))
    polite = Politeness(deadline_s=300.0, patience_s=10.0)
    with pytest.raises(UnansweredError) as fault:
        Transport(addresses=archive.address, politeness=polite, sleep=waits.append).fetch(cone_request())
    assert (fault.value.retry_after_s, waits) == (20.0, [])


def test_a_stop_cuts_an_open_exchange(archive):
    archive.misbehave("*", Fault("drip", seconds=0.02))
    stop = Stop()
    transport = Transport(addresses=archive.address)
    with pytest.raises(UnansweredError, match="called off"):
        transport.fetch(cone_request(), stop=stop, on_try=lambda number: stop.now())


# ------------------------------------------------------------------------------------------------
# tries
# ------------------------------------------------------------------------------------------------
@pytest.mark.parametrize("kind", ["closed", "cut stream", "unavailable", "too many"])
def test_faults_that_may_pass_are_tried_again(kind, archive, transport, waits):
    archive.misbehave("*", Fault(kind), times=2)
    assert transport.fetch(cone_request()).http_status == 200
    assert waits == [0.5, 1.0]
    assert len(archive.requests) == 3


def test_tries_come_to_an_end(archive, transport, waits):
    archive.misbehave("*", Fault("cut stream"))
    with pytest.raises(MisreadError, match="cut after"):
        transport.fetch(cone_request())
    assert (len(archive.requests), len(waits)) == (3, 2)


@pytest.mark.parametrize("kind", ["forbidden", "not found", "server error", "bad gateway", "html", "empty body"])
def test_nothing_else_is_tried_again(kind, archive, transport):
    archive.misbehave("*", Fault(kind))
    transport.fetch(cone_request())
    assert len(archive.requests) == 1


def test_a_short_retry_after_is_waited_for_a_long_one_is_reported(archive, transport, waits):
    archive.misbehave("*", Fault("unavailable", seconds=2.0), times=1)
    assert transport.fetch(cone_request()).http_status == 200
    assert waits == [2.0]
    archive.misbehave("*", Fault("too many", seconds=120.0))
    with pytest.raises(UnansweredError) as fault:
        transport.fetch(cone_request())
    assert (fault.value.retry_after_s, fault.value.http_status, waits) == (120.0, 429, [2.0])


@pytest.mark.parametrize(
    ("header", "seconds"),
    [
        (None, None),
        ("120", 120.0),
        (" 0 ", 0.0),
        ("Tue, 01 Dec 2026 12:01:30 GMT", 90.0),
        ("Tuesday, 01-Dec-26 12:01:30 GMT", 90.0),
        ("Tue Dec  1 12:01:30 2026", 90.0),
        ("Tue, 01 Dec 2026 11:00:00 GMT", 0.0),
        ("soon", None),
        ("-5", None),
        ("1e9", None),
    ],
)
def test_retry_after_is_read_in_seconds_and_in_all_date_forms_of_rfc_9110(header, seconds):
    assert retry_after_s(header, NOW) == seconds


def test_an_http_date_is_taken_from_the_transports_clock(archive, waits):
    archive.misbehave("*", Fault("unavailable", retry_after="Tue, 01 Dec 2026 12:00:04 GMT"), times=1)
    transport = Transport(addresses=archive.address, sleep=waits.append, now=lambda: NOW)
    assert transport.fetch(cone_request()).http_status == 200
    assert waits == [4.0]


# ------------------------------------------------------------------------------------------------
# size, connections, redirects
# ------------------------------------------------------------------------------------------------
def test_an_answer_over_the_size_cap_is_left_unread(archive):
    archive.misbehave("*", Fault("huge body", size=2_000_000))
    transport = Transport(addresses=archive.address, politeness=Politeness(max_bytes=50_000))
    with pytest.raises(TruncatedError, match="size cap of 50000 bytes"):
        transport.fetch(cone_request())


def test_a_refused_connection_is_no_answer(question, waits):
    with socket.socket() as free:
        free.bind(("127.0.0.1", 0))
        port = free.getsockname()[1]
        transport = Transport(addresses=f"http://127.0.0.1:{port}", sleep=waits.append)
        reply = ask(question("cone"), transport)
    assert reply.status is ReplyStatus.UNANSWERED
    assert "Connection refused" in reply.detail
    assert (reply.tries, reply.http_status, reply.sha256) == (3, None, "")


def test_a_server_without_tls_is_not_trusted_where_tls_is_asked(archive, waits):
    address = archive.address.replace("http://", "https://")
    with pytest.raises(UnansweredError, match="the connection is not secure"):
        Transport(sleep=waits.append).fetch(Request("GET", f"{address}/x"))
    assert waits == []


def test_a_redirect_stays_with_the_embedded_archive(archive, transport):
    there = "https://vizier.cds.unistra.fr/viz-bin/conesearch/I/999/main?RA=0&DEC=40&SR=0.1"
    archive.misbehave("*", Fault("moved", to=there), times=1)
    assert transport.fetch(cone_request()).http_status == 200
    assert [logged.path.split("?")[0] for logged in archive.requests] == [
        "/vizier.cds.unistra.fr/viz-bin/conesearch/I/999/main"
    ] * 2
    assert "DEC=40" in archive.requests[1].path


def test_a_redirect_may_be_relative_to_the_archives_own_address(archive, transport):
    archive.misbehave("*", Fault("moved", to="/viz-bin/conesearch/I/999/main?RA=0&DEC=41&SR=0.1"), times=1)
    assert transport.fetch(cone_request()).http_status == 200
    assert archive.requests[1].path.startswith("/vizier.cds.unistra.fr/viz-bin/conesearch/I/999/main?RA=0&DEC=41")


def test_redirects_without_end_are_no_answer(archive, transport):
    archive.misbehave("*", Fault("moved", to=cone_request().address))
    with pytest.raises(UnansweredError, match="redirects"):
        transport.fetch(cone_request())


def test_a_redirected_form_is_not_followed_without_its_question(question, archive, transport):
    archive.misbehave("*", Fault("moved", to="https://vizier.cds.unistra.fr/elsewhere"))
    reply = ask(question("vizier"), transport)
    assert reply.status is ReplyStatus.MISREAD
    assert "HTTP 302: the service has moved" in reply.detail
    assert len(archive.requests) == 1


def test_a_proxy_named_by_the_environment_is_used(archive, monkeypatch):
    monkeypatch.setenv("http_proxy", archive.address)
    monkeypatch.delenv("no_proxy", raising=False)
    received = Transport().fetch(Request("GET", "http://archive.invalid/scs?RA=1"))
    assert received.http_status == 404  # the embedded archive is no proxy, but it was asked to be one
    assert archive.requests[0].path == "http://archive.invalid/scs?RA=1"


def test_the_embedded_archive_is_never_asked_through_a_proxy(archive, transport, monkeypatch):
    for name in ("http_proxy", "https_proxy", "all_proxy"):
        monkeypatch.setenv(name, "http://127.0.0.1:9")
    assert transport.fetch(cone_request()).http_status == 200


# ------------------------------------------------------------------------------------------------
# who we are, and where we go
# ------------------------------------------------------------------------------------------------
@pytest.mark.parametrize(
    ("contact", "agent"),
    [
        (None, "blankfield/0.1.0 (IVOA-science)"),
        ("  ", "blankfield/0.1.0 (IVOA-science)"),
        ("observer@example.org", "blankfield/0.1.0 (observer@example.org) (IVOA-science)"),
    ],
)
def test_the_user_agent_names_program_contact_and_purpose(contact, agent, archive, monkeypatch):
    monkeypatch.setattr("xmatch.archives.transport.__version__", "0.1.0")
    Transport(contact, archive.address).fetch(cone_request())
    assert archive.requests[0].headers["User-Agent"] == agent


@pytest.mark.parametrize("contact", ["a\r\nHost: b", "a) (b", "höhe@example.org"])
def test_a_contact_that_would_break_the_header_is_refused(contact):
    with pytest.raises(ConfigurationError, match="cannot stand in a header"):
        Transport(contact)


def test_the_environment_sends_every_request_elsewhere(archive, monkeypatch):
    monkeypatch.setenv("BLANKFIELD_ARCHIVES", archive.address + "/")
    transport = Transport()
    assert transport.fetch(cone_request()).http_status == 200
    assert archive.requests[0].path.startswith("/vizier.cds.unistra.fr/viz-bin/conesearch/I/999/main?")
    assert transport.is_embedded


@pytest.mark.parametrize("addresses", ["127.0.0.1:80", "ftp://127.0.0.1", "http://", "http://127.0.0.1/?a=b"])
def test_an_address_of_another_form_is_refused(addresses):
    with pytest.raises(ConfigurationError, match="is not of the form"):
        Transport(addresses=addresses)


def test_the_pace_is_kept_per_host(archive):
    clock = [100.0]
    waited: list[float] = []

    def sleep(seconds: float) -> None:
        waited.append(round(seconds, 6))
        clock[0] += seconds

    transport = Transport(politeness=Politeness(pace_s=0.25), sleep=sleep, clock=lambda: clock[0])
    for _ in range(3):
        transport.fetch(direct(archive))
    assert waited == [0.25, 0.25]
    # the embedded archive is owed no pace
    embedded = Transport(addresses=archive.address, politeness=Politeness(pace_s=0.25), sleep=waited.append)
    for _ in range(3):
        embedded.fetch(cone_request())
    assert waited == [0.25, 0.25]
    assert (transport.per_host, embedded.per_host) == (6, None)
