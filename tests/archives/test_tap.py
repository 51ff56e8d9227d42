"""TAP: exact queries, services without geometry, jobs from first to last, formats that a service refuses."""

from __future__ import annotations

from dataclasses import replace
from urllib.parse import parse_qs

import pytest

from xmatch.archives import adql, simbad, tap
from xmatch.archives.fleet import ask, ask_all
from xmatch.archives.transport import Politeness, Transport
from xmatch.demo.faults import Fault
from xmatch.records import ReplyStatus, WantedColumn

RA, DEC = WantedColumn("ra", "deg", low=0.0, high=360.0), WantedColumn("dec", "deg", low=-90.0, high=90.0)


def form_of(request) -> dict[str, str]:
    return {name: values[0] for name, values in parse_qs(request.body.decode(), keep_blank_values=True).items()}


# ------------------------------------------------------------------------------------------------
# what is asked
# ------------------------------------------------------------------------------------------------
def test_a_cone_is_asked_by_geometry_with_the_limit_twice(question):
    asked = tap.request(
        question(
            "tap", address="https://a.example/tap", remote_table="swbat157m", ra_deg=264.50625, dec_deg=-33.81583,
            radius_arcsec=120.0, columns=(WantedColumn("name"), RA, DEC), row_limit=500,
        )
    )  # fmt: skip
    assert (asked.method, asked.address) == ("POST", "https://a.example/tap/sync")
    assert asked.content_type == "application/x-www-form-urlencoded"
    assert form_of(asked) == {
        "REQUEST": "doQuery",
        "LANG": "ADQL",
        "MAXREC": "501",
        "QUERY": "SELECT TOP 501 name, ra, dec FROM swbat157m WHERE 1 = CONTAINS(POINT('ICRS', ra, dec), "
        "CIRCLE('ICRS', 264.50625, -33.81583, 0.0333333333))",
    }


def test_a_job_goes_to_the_other_address(question):
    assert tap.request(question("tap async")).address.endswith("/tap/async")


@pytest.mark.parametrize(
    ("name", "written"),
    [
        ("ra", "ra"),
        ("dec", "dec"),
        ("csc21.master_source", "csc21.master_source"),
        ("2MASS", '"2MASS"'),
        ("S1.4", '"S1.4"'),
        ("3.6mag", '"3.6mag"'),
        ("F(3.6)", '"F(3.6)"'),
        ("II/246/out", '"II/246/out"'),
        ("J/A+A/682/A34/erass1-m", '"J/A+A/682/A34/erass1-m"'),
        ("_RAJ2000", '"_RAJ2000"'),
        ("max", '"max"'),
        ("decaps_dr2.select", '"decaps_dr2.select"'),
        ('odd"name', '"odd""name"'),
    ],
)
def test_names_are_quoted_where_the_language_needs_it(name, written):
    assert adql.quoted(name) == written


@pytest.mark.parametrize(
    ("ra_deg", "dec_deg", "radius_arcsec", "where"),
    [
        # asin(sin 1 deg / cos 60 deg) = 2.0003046 deg: the meridians that touch the circle
        (100.0, 60.0, 3600.0, "dec BETWEEN 59 AND 61 AND ra BETWEEN 97.9996953 AND 102.0003047"),
        (0.5, 0.0, 3600.0, "dec BETWEEN -1 AND 1 AND (ra >= 359.5 OR ra <= 1.5)"),
        (10.0, 89.5, 3600.0, "dec BETWEEN 88.5 AND 90"),
    ],
)
def test_a_service_without_geometry_is_asked_by_a_box(question, ra_deg, dec_deg, radius_arcsec, where):
    asked = question(
        "tap box",
        ra_deg=ra_deg,
        dec_deg=dec_deg,
        radius_arcsec=radius_arcsec,
        columns=(RA, DEC),
        remote_table="t",
        row_limit=9,
    )
    query = adql.select(asked)
    head, _, condition = query.partition(" WHERE ")
    assert head == "SELECT TOP 10 ra, dec FROM t"
    numbers = [float(word.strip("()")) for word in condition.split() if word.strip("()-").replace(".", "").isdigit()]
    expected = [float(word.strip("()")) for word in where.split() if word.strip("()-").replace(".", "").isdigit()]
    assert numbers == pytest.approx(expected, abs=2e-7)
    assert [w for w in condition.split() if w.isupper()] == [w for w in where.split() if w.isupper()]


def test_the_whole_table_has_no_condition(question):
    assert " WHERE " not in adql.select(question("tap", radius_arcsec=180.0 * 3600.0))


def test_simbad_joins_the_tables_that_columns_point_to(question):
    wanted = (WantedColumn("main_id"), RA, DEC, WantedColumn("allfluxes.V"))
    asked = simbad.request(question("simbad", address="https://s.example/sim-tap", columns=wanted, row_limit=99))
    assert asked.address == "https://s.example/sim-tap/sync"
    assert form_of(asked)["QUERY"].startswith(
        'SELECT TOP 100 basic.main_id, basic.ra, basic.dec, allfluxes.V AS "allfluxes.V" FROM basic '
        "LEFT OUTER JOIN allfluxes ON basic.oid = allfluxes.oidref WHERE 1 = CONTAINS(POINT('ICRS', basic.ra, basic.dec), "
    )


# ------------------------------------------------------------------------------------------------
# jobs
# ------------------------------------------------------------------------------------------------
def test_a_job_is_made_started_watched_fetched_and_deleted(question, archive, transport, waits):
    reply = ask(question("tap async"), transport)
    assert (reply.status, reply.n_rows) == (ReplyStatus.WHOLE, 12)
    steps = [(r.method, r.path.rpartition("/tap/")[2], r.body.partition("&")[0]) for r in archive.requests]
    job = steps[1][1].removesuffix("/phase")
    assert steps == [
        ("POST", "async", "LANG=ADQL"),
        ("POST", f"{job}/phase", "PHASE=RUN"),
        ("GET", f"{job}/phase", ""),
        ("GET", f"{job}/phase", ""),
        ("GET", f"{job}/results/result", ""),
        ("POST", job, "ACTION=DELETE"),
    ]
    assert waits == [0.5]
    assert len(archive.jobs) == 0


@pytest.mark.parametrize(
    ("kind", "status", "words"),
    [
        ("job error", ReplyStatus.MISREAD, "the job failed: column RAXX does not exist"),
        ("job aborted", ReplyStatus.UNANSWERED, "the job ended as ABORTED"),
    ],
)
def test_a_job_that_fails_says_so_and_is_deleted(question, archive, transport, kind, status, words):
    archive.misbehave("I/999/main", Fault(kind))
    reply = ask(question("tap async"), transport)
    assert (reply.status, words in reply.detail) == (status, True), reply.detail
    assert len(archive.jobs) == 0


def test_a_job_that_never_ends_is_left_within_its_time(question, archive, waits):
    archive.misbehave("I/999/main", Fault("job stuck"))
    polite = Politeness(job_s=20.0)
    transport = Transport(
        addresses=archive.address, politeness=polite, sleep=waits.append, clock=lambda: float(sum(waits))
    )
    reply = ask(question("tap async"), transport)
    transport.close_session()
    assert reply.status is ReplyStatus.UNANSWERED
    assert "still EXECUTING after 20 s" in reply.detail
    assert waits == [0.5, 1.0, 2.0, 4.0, 8.0]  # the next would end after the 20 s
    assert len(archive.jobs) == 0


def test_a_service_without_jobs_is_named(question, transport):
    reply = ask(question("tap async", address="https://vizier.cds.unistra.fr/tap/sync"), transport)
    assert reply.status is ReplyStatus.MISREAD
    assert 'set mode = "sync"' in reply.detail


# ------------------------------------------------------------------------------------------------
# formats
# ------------------------------------------------------------------------------------------------
def test_a_service_that_refuses_the_default_format_is_asked_with_its_name(question, archive, transport):
    archive.misbehave("I/999/main", Fault("refuses format"))
    (reply,) = ask_all([question("tap")], transport)
    assert (reply.status, reply.n_rows) == (ReplyStatus.WHOLE, 12)
    assert len(archive.requests) == 2
    assert "RESPONSEFORMAT=application%2Fx-votable%2Bxml" in archive.requests[1].body


def test_another_refusal_is_not_asked_twice(question, archive, transport):
    (reply,) = ask_all([question("tap", columns=(WantedColumn("RAXX"), *question("tap").columns))], transport)
    assert (reply.status, len(archive.requests)) == (ReplyStatus.MISREAD, 1)
    assert "Unknown column RAXX" in reply.detail


def test_a_box_brings_the_corners_too_and_the_cone_brings_none(question, transport):
    near = question("tap", radius_arcsec=60.0)
    circle, box = ask(near, transport), ask(replace(near, geometry="box"), transport)
    assert 0 < circle.n_rows < box.n_rows < 12
