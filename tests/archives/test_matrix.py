"""Every fault through every adapter: none may pass for an empty answer, and each says what was seen."""

from __future__ import annotations

import pytest

from xmatch.archives.fleet import ask
from xmatch.archives.transport import Politeness, Transport
from xmatch.demo.faults import KINDS, Fault
from xmatch.records import ReplyStatus

WHOLE, CUT = ReplyStatus.WHOLE, ReplyStatus.TRUNCATED
UNANSWERED, MISREAD = ReplyStatus.UNANSWERED, ReplyStatus.MISREAD

MATRIX = [
    (Fault("delay", seconds=0.01), WHOLE, "12 rows"),
    (Fault("drip", seconds=0.05), UNANSWERED, "deadline of 0.3 s"),
    (Fault("drip headers", seconds=0.05), UNANSWERED, "deadline of 0.3 s"),
    (Fault("delay", seconds=30.0), UNANSWERED, "deadline of 0.3 s"),
    *[
        (Fault("error status", place=place, name=name, value=value, element=element), MISREAD, "reports an error")
        for place in ("before", "definitions", "resource", "table", "after", "end")
        for name, value, element in [
            ("QUERY_STATUS", "ERROR", "INFO"),
            ("query_status", "error", "INFO"),
            ("Error", "no such column", "INFO"),
            ("error", "no such column", "PARAM"),
            ("Errors", "no such column", "INFO"),
        ]
    ],
    (Fault("error status", value="FAILED"), MISREAD, "status 'FAILED'"),
    (Fault("overflow", place="resource"), CUT, "OVERFLOW"),
    (Fault("overflow", place="after"), CUT, "OVERFLOW"),
    (Fault("overflow", place="end", name="query_status"), CUT, "OVERFLOW"),
    (Fault("cut notice"), CUT, "truncated result"),
    (Fault("html"), MISREAD, "a web page came instead of a table ('Service under maintenance')"),
    (Fault("bad gateway"), UNANSWERED, "HTTP 502: the archive has a fault ('Service under maintenance')"),
    (Fault("cut stream"), MISREAD, "the answer was cut after"),
    (Fault("cut file"), MISREAD, "the XML is cut"),
    (Fault("empty body"), MISREAD, "the answer is empty"),
    (Fault("unavailable"), UNANSWERED, "HTTP 503, service unavailable; it named no time"),
    (Fault("unavailable", seconds=3600.0), UNANSWERED, "it asks to wait 3600 s"),
    (Fault("too many", seconds=3600.0), UNANSWERED, "HTTP 429, too many requests; it asks to wait 3600 s"),
    (Fault("forbidden"), UNANSWERED, "HTTP 403: it refuses this machine"),
    (Fault("not found"), MISREAD, "HTTP 404: the archive does not know this table"),
    (Fault("server error", name="Error", value="disk full"), UNANSWERED, "HTTP 500: the archive has a fault ('disk f"),
    (Fault("closed"), UNANSWERED, "no connection"),
    (Fault("no table"), MISREAD, "no table in the reply"),
    (Fault("only metadata"), MISREAD, "only a description of tables"),
    (Fault("renamed column", column="Gmag", to="phot_g_mean_mag"), MISREAD, "column"),
    (Fault("changed unit", column="DE_ICRS", to="mag"), MISREAD, "'DE_ICRS' comes in mag, which cannot be converted"),
    (Fault("changed unit", column="Gmag", to=""), MISREAD, "'Gmag' comes in no unit"),
    (Fault("changed unit", column="Gmag", to="furlong"), MISREAD, "'Gmag' comes in furlong"),
    (Fault("out of range", column="Gmag", factor=1000.0), MISREAD, "'Gmag': 9 of 9 values"),
    (Fault("wrong content type"), WHOLE, "12 rows"),
    (Fault("huge body", size=200_000), CUT, "size cap of 100000 bytes"),
    (Fault("entity bomb"), MISREAD, "declares an XML entity"),
    (Fault("missing cells"), MISREAD, "has 5 cells where 6 are declared"),
    (Fault("unknown element"), MISREAD, "element 'ROW' stands inside 'TABLEDATA'"),
]


VOTABLES = ["cone", "vizier", "tap", "tap box", "tap async", "simbad", "file votable"]
"""Adapters whose answers are VOTables."""
STEP = {"tap": "/sync", "tap box": "/sync", "tap async": "/async", "simbad": "/sync"}
LISTS = ["file csv", "file fits", "file ecsv"]
IN_ANY_FORM = {"delay", "drip", "drip headers", "html", "bad gateway", "cut stream", "empty body", "unavailable", "too many",
               "forbidden", "not found", "closed", "renamed column", "out of range", "wrong content type"}  # fmt: skip
LIST_MATRIX = [
    *[row for row in MATRIX if row[0].kind in IN_ANY_FORM],
    (Fault("cut file", fraction=0.6), MISREAD, ""),
    (Fault("server error"), UNANSWERED, "HTTP 500"),
]
CSV_MATRIX = [(Fault("cut list", size=9), MISREAD, "holds 8 rows where at least 12 are known")]


@pytest.mark.parametrize(
    ("protocol", "fault", "status", "words"),
    [
        *[(protocol, *row) for protocol in VOTABLES for row in MATRIX],
        *[(protocol, *row) for protocol in LISTS for row in LIST_MATRIX],
        *[("file csv", *row) for row in CSV_MATRIX],
    ],
    ids=lambda part: getattr(part, "kind", part if isinstance(part, str) and part in VOTABLES + LISTS else None),
)
def test_a_fault_becomes_the_right_status_with_words(protocol, fault, status, words, question, archive, waits, spoilt):
    archive.misbehave(spoilt(protocol), fault)
    slow = fault.kind.startswith("drip") or (fault.kind == "delay" and fault.seconds > 1.0)
    polite = Politeness(deadline_s=0.3 if slow else 10.0, max_bytes=100_000)
    transport = Transport(addresses=archive.address, politeness=polite, sleep=waits.append)
    reply = ask(question(protocol), transport)
    transport.close_session()
    assert (reply.status, words in reply.detail) == (status, True), reply.detail
    assert (reply.columns is None) == (status in (UNANSWERED, MISREAD) or fault.kind == "huge body")
    assert "\n" not in reply.detail


def test_the_matrix_commits_every_kind_of_fault():
    elsewhere = {"moved", "refuses format", "job error", "job aborted", "job stuck"}  # test_transport.py, test_tap.py
    assert {fault.kind for fault, _, _ in MATRIX + CSV_MATRIX} | elsewhere == set(KINDS)


@pytest.mark.parametrize("protocol", VOTABLES + LISTS)
def test_a_whole_answer_brings_every_row_and_its_provenance(protocol, question, archive, transport):
    reply = ask(question(protocol), transport)
    assert (reply.status, reply.n_rows, reply.http_status, reply.tries) == (WHOLE, 12, 200, 1)
    assert len(reply.sha256) == 64
    assert reply.reply_bytes > 900
    assert reply.asked_at.endswith("Z")
    assert reply.client.startswith("blankfield ")
    assert f"asked at {archive.address} in place of the archive" in reply.client
    assert reply.request.split("?")[0].split("\n")[0].split()[1] == question(protocol).address + STEP.get(protocol, "")


@pytest.mark.parametrize("protocol", ["cone", "vizier", "tap", "tap box", "tap async", "simbad"])
def test_an_empty_cone_is_whole_with_its_columns(protocol, question, transport):
    reply = ask(question(protocol, dec_deg=40.0), transport)
    assert (reply.status, reply.n_rows) == (WHOLE, 0)
    assert reply.columns is not None
    assert {"Source", "RA_ICRS", "DE_ICRS", "Gmag", "Qflg", "Nobs"} <= set(reply.columns)
    assert all(len(column.values) == 0 == len(column.missing) for column in reply.columns.values())


@pytest.mark.parametrize("protocol", VOTABLES + LISTS)
@pytest.mark.parametrize(("limit", "status"), [(12, WHOLE), (11, CUT), (1, CUT)])
def test_a_row_over_the_limit_is_a_cut_answer(protocol, limit, status, question, transport):
    assert ask(question(protocol, row_limit=limit), transport).status is status


def test_a_table_that_vizier_does_not_know_is_no_empty_answer(question, transport):
    reply = ask(question("vizier", remote_table="I/998/main"), transport)
    assert reply.status is MISREAD
    assert "no table in the reply" in reply.detail
    assert "'I/998/main'" in reply.detail


def test_a_service_that_refuses_the_question_in_the_file_is_misread(question, transport):
    reply = ask(question("cone", radius_arcsec=200.0 * 3600.0), transport)
    assert reply.status is MISREAD
    assert "Error in input SR value: 200" in reply.detail
