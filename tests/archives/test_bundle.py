"""Several tables in one request: the same replies, each with a status of its own; what fails is asked again alone."""

from __future__ import annotations

from dataclasses import replace

import pytest

from xmatch.archives.bundle import LARGEST_BUNDLE, jobs_of
from xmatch.archives.fleet import ask, ask_all, plan_requests
from xmatch.archives.transport import Politeness, Transport
from xmatch.demo.faults import Fault
from xmatch.demo.server import EmbeddedArchive
from xmatch.records import ReplyStatus

N_TABLES = 5


@pytest.fixture(scope="module")
def many(table):
    """Five tables of one host; the third is empty."""
    tables = []
    for i in range(N_TABLES):
        rows = {name: values[:0] for name, values in table.rows.items()} if i == 2 else table.rows
        tables.append(replace(table, remote_table=f"I/{900 + i}/t", rows=rows, cone_path=""))
    with EmbeddedArchive(tables) as archive:
        yield archive


@pytest.fixture
def questions(question):
    return [question("vizier", catalog_id=f"c{i}", remote_table=f"I/{900 + i}/t") for i in range(N_TABLES)]


@pytest.fixture
def bundled(many, waits):
    many.behave()
    many.requests.clear()
    transport = Transport(addresses=many.address, sleep=waits.append, politeness=Politeness(deadline_s=10.0))
    yield transport
    transport.close_session()


def outcomes(replies) -> dict[str, tuple[str, int]]:
    return {reply.question.catalog_id: (str(reply.status), reply.n_rows) for reply in replies}


WHOLE = {f"c{i}": ("whole", 0 if i == 2 else 12) for i in range(N_TABLES)}


def test_five_tables_are_one_request_and_five_replies(many, bundled, questions):
    replies = list(ask_all(questions, bundled))
    assert outcomes(replies) == WHOLE
    assert len(many.requests) == 1
    assert many.requests[0].body.startswith("-source=I/900/t,I/901/t,I/902/t,I/903/t,I/904/t\n")


def test_a_bundle_answers_like_single_requests(bundled, questions):
    together = {reply.question.catalog_id: reply for reply in ask_all(questions, bundled)}
    apart = {reply.question.catalog_id: reply for reply in ask_all(questions, bundled, bundling=False)}
    for name, reply in apart.items():
        assert together[name].detail == reply.detail
        assert together[name].columns.keys() == reply.columns.keys()
        for column, values in reply.columns.items():
            same = together[name].columns[column]
            assert same.unit == values.unit
            assert same.missing.tolist() == values.missing.tolist()
            assert same.values[~same.missing].tolist() == values.values[~values.missing].tolist()


@pytest.mark.parametrize(
    "fault",
    [Fault("html"), Fault("cut file"), Fault("no table"), Fault("entity bomb"), Fault("error status"), Fault("cut stream"),
     Fault("server error"), Fault("empty body"), Fault("closed")],
    ids=lambda fault: fault.kind,
)  # fmt: skip
def test_one_bad_table_spoils_only_itself(many, bundled, questions, fault):
    many.misbehave("I/903/t", fault)
    seen = outcomes(ask_all(questions, bundled))
    assert seen.pop("c3")[0] in ("misread", "unanswered")
    assert seen == {name: outcome for name, outcome in WHOLE.items() if name != "c3"}


def test_a_changed_column_costs_one_request_more(many, bundled, questions):
    many.misbehave("I/903/t", Fault("renamed column", column="Gmag", to="mag_G"))
    # the fault stands in the tables of the whole answer here: all five are asked again alone
    seen = outcomes(ask_all(questions, bundled))
    assert seen["c3"][0] == "misread"
    assert {name: outcome for name, outcome in seen.items() if name != "c3"} == {
        n: o for n, o in WHOLE.items() if n != "c3"
    }


def test_an_unknown_table_is_misread_beside_whole_ones(many, bundled, questions):
    strange = replace(questions[0], catalog_id="strange", remote_table="I/777/none")
    seen = outcomes(ask_all([*questions, strange], bundled))
    assert seen.pop("strange")[0] == "misread"
    assert seen == WHOLE
    assert len(many.requests) == 2


def test_a_cut_table_stays_cut_and_the_others_whole(many, bundled, questions):
    short = [replace(q, row_limit=11) for q in questions]
    seen = outcomes(ask_all(short, bundled))
    assert seen == {f"c{i}": ("whole", 0) if i == 2 else ("truncated", 12) for i in range(N_TABLES)}
    assert len(many.requests) == 1


def test_a_host_that_says_stop_is_not_asked_again(many, bundled, questions):
    many.misbehave("I/903/t", Fault("too many", seconds=3600.0))
    seen = outcomes(ask_all(questions, bundled))
    assert {status for status, _ in seen.values()} == {"unanswered"}
    assert len(many.requests) == 1


def test_what_differs_in_centre_radius_limit_or_protocol_stays_apart(question):
    base = question("vizier", catalog_id="a")
    others = [
        replace(base, ra_deg=1.0), replace(base, radius_arcsec=10.0), replace(base, row_limit=7),
        replace(base, radius_arcsec=180.0 * 3600.0), question("cone"), question("tap"),
    ]  # fmt: skip
    assert [len(job.questions) for job in jobs_of([base, *others], per_host=None)] == [1] * 7
    assert len(plan_requests([base, replace(base, catalog_id="b")])) == 1


@pytest.mark.parametrize(
    ("n", "per_host", "sizes"), [(36, 6, [3] * 12), (5, 6, [1] * 5), (20, None, [7, 7, 6]), (9, 2, [3, 3, 3])]
)
def test_tables_are_spread_over_the_requests_a_host_allows(question, n, per_host, sizes):
    questions = [question("vizier", catalog_id=f"c{i}", remote_table=f"I/{i}/t") for i in range(n)]
    jobs = jobs_of(questions, per_host=per_host)
    assert sorted((len(job.questions) for job in jobs), reverse=True) == sizes
    assert max(sizes) <= LARGEST_BUNDLE
    assert sorted(q.catalog_id for job in jobs for q in job.questions) == sorted(q.catalog_id for q in questions)


# ------------------------------------------------------------------------------------------------
# mirrors
# ------------------------------------------------------------------------------------------------
@pytest.fixture
def mirrored(table):
    """The table at VizieR's own host and at its first mirror."""
    there = replace(table, remote_table="I/999/main", host="vizier.cfa.harvard.edu")
    here = replace(table, remote_table="I/999/main")
    with EmbeddedArchive([here, there]) as archive:
        yield archive


@pytest.mark.parametrize("protocol", ["vizier", "cone"])
def test_a_mirror_answers_where_the_first_host_does_not(question, mirrored, protocol):
    mirrored.misbehave("I/999/main", Fault("bad gateway"), times=1)
    transport = Transport(addresses=mirrored.address, mirrors=True)
    reply = ask(question(protocol), transport)
    transport.close_session()
    assert (reply.status, reply.n_rows) == (ReplyStatus.WHOLE, 12)
    assert "https://vizier.cfa.harvard.edu/" in reply.request
    assert [r.path.split("/")[1] for r in mirrored.requests] == ["vizier.cds.unistra.fr", "vizier.cfa.harvard.edu"]


def test_a_mirror_that_does_not_know_the_table_says_nothing(question, archive):
    archive.misbehave("I/999/main", Fault("bad gateway"))
    transport = Transport(addresses=archive.address, mirrors=True)
    reply = ask(question("vizier"), transport)
    transport.close_session()
    assert reply.status is ReplyStatus.UNANSWERED
    assert "HTTP 502" in reply.detail
    assert reply.request.startswith("POST https://vizier.cds.unistra.fr/")


def test_an_answer_is_never_asked_for_at_a_mirror(question, mirrored):
    mirrored.misbehave("I/999/main", Fault("html"))
    transport = Transport(addresses=mirrored.address, mirrors=True)
    assert ask(question("vizier"), transport).status is ReplyStatus.MISREAD
    transport.close_session()
    assert len(mirrored.requests) == 1
