"""Many questions at once: all answered, first come first served, polite, and stopped without delay."""

from __future__ import annotations

import os
import signal
import threading
import time
from dataclasses import replace

import pytest

from xmatch.archives.fleet import ask, ask_all
from xmatch.archives.transport import Politeness, Transport
from xmatch.demo.faults import Fault
from xmatch.demo.server import EmbeddedArchive
from xmatch.errors import FactError
from xmatch.records import Question, ReplyStatus


def asking_threads() -> list[str]:
    return [thread.name for thread in threading.enumerate() if thread.name.startswith("ask ")]


def test_every_question_gets_one_reply(question, transport):
    questions = [question(protocol, catalog_id=f"{protocol}-{i}") for protocol in ("cone", "vizier") for i in range(8)]
    replies = list(ask_all(questions, transport))
    assert sorted(reply.question.catalog_id for reply in replies) == sorted(q.catalog_id for q in questions)
    assert {(reply.status, reply.n_rows) for reply in replies} == {(ReplyStatus.WHOLE, 12)}
    assert asking_threads() == []


def test_nothing_to_ask_is_no_trouble(transport):
    assert list(ask_all([], transport)) == []


def test_a_reply_is_the_same_alone_and_in_the_fleet(question, transport):
    alone = ask(question("vizier"), transport)
    (together,) = ask_all([question("vizier")], transport)
    assert (alone.sha256, alone.detail, alone.request) == (together.sha256, together.detail, together.request)
    assert alone.columns is not None
    assert alone.columns.keys() == together.columns.keys()


def test_failures_are_replies_among_replies(question, archive, transport):
    archive.misbehave("I/999/main", Fault("html"), times=1)
    replies = list(ask_all([question("cone")] * 3, transport))
    assert sorted(str(reply.status) for reply in replies) == ["misread", "whole", "whole"]


def test_the_first_to_answer_is_yielded_first(table, question):
    slow = replace(table, remote_table="I/998/slow", cone_path="/slow")
    with EmbeddedArchive([table, slow]) as archive:
        archive.misbehave("I/998/slow", Fault("delay", seconds=0.4))
        transport = Transport(addresses=archive.address)
        late = question("cone", catalog_id="late", address="https://vizier.cds.unistra.fr/slow")
        order = [reply.question.catalog_id for reply in ask_all([late, question("cone")], transport)]
    assert order == ["invented", "late"]


def test_questions_overlap_where_no_cap_holds_them(question, archive, transport):
    archive.misbehave("*", Fault("delay", seconds=0.4))
    told: list[str] = []
    replies = list(ask_all([question("cone")] * 6, transport, on_event=lambda q, what: told.append(what)))
    assert told == ["asking"] * 6 + ["whole"] * 6
    assert max(reply.elapsed_s for reply in replies) < 6 * 0.4  # none waited for another


def test_the_cap_per_host_is_kept(question, archive):
    archive.misbehave("*", Fault("delay", seconds=0.05))
    address = f"{archive.address}/vizier.cds.unistra.fr/viz-bin/conesearch/I/999/main"
    transport = Transport(politeness=Politeness(per_host=2, pace_s=0.0))
    still_open = most = 0

    def count(_: Question, what: str) -> None:
        nonlocal still_open, most
        still_open += 1 if what == "asking" else -1
        most = max(most, still_open)

    replies = list(ask_all([question("cone", address=address)] * 7, transport, on_event=count))
    assert most == 2
    assert len(replies) == 7
    assert len({logged.headers["Host"] for logged in archive.requests}) == 1


def test_events_tell_of_new_tries_in_the_consumers_thread(question, archive, transport):
    archive.misbehave("*", Fault("closed"), times=1)
    told: list[tuple[str, str]] = []

    def tell(_: Question, what: str) -> None:
        told.append((what, threading.current_thread().name))

    list(ask_all([question("cone")], transport, on_event=tell))
    assert told == [(what, threading.current_thread().name) for what in ("asking", "asking again", "whole")]


def test_an_unknown_protocol_stops_everything_before_anything_is_asked(question, archive, transport):
    with pytest.raises(FactError, match="gopher"):
        ask_all([question("cone"), question(protocol="gopher")], transport)
    assert archive.requests == []


@pytest.mark.parametrize("how", ["close", "interrupt", "interrupt in an event", "signal while waiting"])
def test_stopping_calls_off_the_rest_at_once(how, table, question):
    slow = replace(table, remote_table="I/998/slow", cone_path="/slow")

    def tell(_: Question, what: str) -> None:
        if how == "interrupt in an event" and what == "whole":
            raise KeyboardInterrupt

    with EmbeddedArchive([table, slow]) as archive:
        archive.misbehave("I/998/slow", Fault("delay", seconds=60.0))
        there = f"{archive.address}/vizier.cds.unistra.fr"
        late = question("cone", address=f"{there}/slow")
        questions = [question("cone", address=f"{there}/viz-bin/conesearch/I/999/main"), *[late] * 19]
        transport = Transport(politeness=Politeness(per_host=2, pace_s=0.0))

        def take() -> None:
            for _ in ask_all(questions, transport, on_event=tell):
                if how == "interrupt":
                    raise KeyboardInterrupt
                if how == "signal while waiting":
                    threading.Timer(0.1, os.kill, (os.getpid(), signal.SIGINT)).start()
                    continue
                break

        begin = time.monotonic()
        if how == "close":
            take()
        else:
            with pytest.raises(KeyboardInterrupt):
                take()
        assert time.monotonic() - begin < 5.0
        assert len(archive.requests) <= 3
    assert asking_threads() == []


def test_a_fault_of_our_own_reaches_the_caller(question, transport, monkeypatch):
    def broken(*args: object, **kwargs: object) -> None:
        raise ZeroDivisionError

    monkeypatch.setattr(transport, "fetch", broken)
    with pytest.raises(ZeroDivisionError):
        list(ask_all([question("cone")], transport))
    assert asking_threads() == []
