"""Exactly what is sent: a change here is a change of what every archive is asked."""

from __future__ import annotations

import subprocess
import sys

import pytest

from xmatch.archives import cone, filelist, vizier
from xmatch.archives.fleet import plan_requests
from xmatch.errors import FactError
from xmatch.records import WantedColumn


def test_a_cone_search_is_asked_in_degrees_with_all_columns_and_one_row_more(question):
    asked = cone.request(question("cone", ra_deg=264.50625, dec_deg=-33.81583, radius_arcsec=120.0, row_limit=5000))
    assert asked.method == "GET"
    assert asked.body is None
    assert asked.address == (
        "https://vizier.cds.unistra.fr/viz-bin/conesearch/I/999/main"
        "?RA=264.50625&DEC=-33.81583&SR=0.0333333333&VERB=3&MAXREC=5001"
    )


@pytest.mark.parametrize(
    ("address", "begins"),
    [
        ("https://a.example/scs?", "https://a.example/scs?RA="),
        ("https://a.example/scs?cat=x", "https://a.example/scs?cat=x&RA="),
        ("https://a.example/scs?cat=x&", "https://a.example/scs?cat=x&RA="),
    ],
)
def test_a_cone_address_may_bring_parameters_of_its_own(question, address, begins):
    assert cone.request(question("cone", address=address)).address.startswith(begins)


def test_small_numbers_are_sent_without_an_exponent(question):
    address = cone.request(question("cone", ra_deg=1.0e-6, dec_deg=-1.0e-7, radius_arcsec=0.1)).address
    assert "RA=0.000001&DEC=-0.0000001&SR=0.0000277778&" in address


def test_vizier_is_asked_by_its_form_with_named_columns_one_row_more_and_column_metadata(question):
    wanted = tuple(map(WantedColumn, ("2MASS", "RAJ2000", "DEJ2000", "S1.4", "_RAJ2000", "_DEJ2000")))
    asked = vizier.request(
        question(
            "vizier", remote_table="II/246/out", ra_deg=264.50625, dec_deg=-33.81583, radius_arcsec=180.0,
            columns=wanted, row_limit=5000,
        )
    )  # fmt: skip
    assert asked.method == "POST"
    assert asked.address == "https://vizier.cds.unistra.fr/viz-bin/votable"
    assert asked.body is not None
    assert asked.body.decode().split("\n") == [
        "-source=II/246/out",
        "-out.max=5001",
        "-out=2MASS,RAJ2000,DEJ2000,S1.4",
        "-out.add=_RAJ2000,_DEJ2000",
        # the centre in FK5: 0.03 arcsec from the ICRS numbers of the question
        "-c=264.50625840-33.81582474",
        "-c.rs=180.0",
        "-out.meta=huUD",
        "-out.form=mini",
        "-oc.form=d",
    ]


def test_a_whole_list_is_asked_of_vizier_without_a_centre(question):
    wanted = (WantedColumn("PSRJ"), WantedColumn("_RAJ2000"), WantedColumn("_DEJ2000"))
    asked = vizier.request(
        question("vizier", remote_table="B/psr/psr", radius_arcsec=180.0 * 3600.0, columns=wanted, row_limit=100_000)
    )
    assert asked.body is not None
    assert asked.body.decode().splitlines() == [
        "-source=B/psr/psr", "-out.max=100001", "-out=PSRJ", "-out.add=_RAJ2000,_DEJ2000", "-out.meta=huUD", "-out.form=mini",
        "-oc.form=d",
    ]  # fmt: skip


def test_several_tables_of_vizier_go_into_one_form(question):
    first = question("vizier", remote_table="II/246/out", columns=(WantedColumn("2MASS"), WantedColumn("RAJ2000")))
    second = question("vizier", remote_table="I/355/gaiadr3", columns=(WantedColumn("Source"), WantedColumn("RAJ2000")))
    asked = vizier.request_for([first, second])
    assert asked.body is not None
    assert asked.body.decode().splitlines()[:3] == [
        "-source=II/246/out,I/355/gaiadr3", "-out.max=101", "-out=2MASS,RAJ2000,Source",
    ]  # fmt: skip


def test_a_file_is_asked_for_as_it_is(question):
    asked = filelist.request(question("file csv", address="https://a.example/list.csv?sheet=Main"))
    assert (asked.method, asked.address, asked.body) == ("GET", "https://a.example/list.csv?sheet=Main", None)


def test_the_plan_shows_the_requests_and_asks_nothing(question, archive):
    texts = plan_requests([question("cone"), question("vizier")])
    assert texts[0].startswith("GET https://vizier.cds.unistra.fr/viz-bin/conesearch/I/999/main?RA=0&DEC=-20&")
    assert texts[1].startswith("POST https://vizier.cds.unistra.fr/viz-bin/votable\n\n-source=I/999/main\n")
    assert archive.requests == []


def test_an_unknown_protocol_is_a_fault_of_the_catalog_file(question):
    with pytest.raises(FactError, match="'gopher' is not known; use one of cone, file, simbad, tap, vizier"):
        plan_requests([question(protocol="gopher")])


def test_neither_import_nor_building_touches_the_network(question):
    code = f"""
import socket
def refuse(*args, **kwargs):
    raise SystemExit("touched the network")
socket.socket.connect = socket.socket.connect_ex = socket.getaddrinfo = refuse
from xmatch.archives.fleet import plan_requests
from xmatch.records import Question, WantedColumn
print(len(plan_requests([{question("cone")!r}, {question("vizier")!r}])))
"""
    done = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, check=False)
    assert (done.stdout.strip(), done.stderr) == ("2", "")
