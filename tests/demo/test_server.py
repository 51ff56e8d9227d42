"""The embedded archive against clients and a formula that are not ours: it must be what it stands for."""

from __future__ import annotations

import contextlib
import http.client
import threading
import time
import urllib.error
import urllib.parse
import urllib.request
from io import BytesIO

import numpy as np
import pytest
from astropy.coordinates import SkyCoord, angular_separation
from astropy.io.votable import parse_single_table, validate
from astropy.table import Table
from pyvo.dal import DALQueryError
from pyvo.dal.scs import SCSService

from xmatch.demo.faults import Fault
from xmatch.demo.server import DemoColumn, DemoTable, EmbeddedArchive, load_table
from xmatch.demo.tables import separation_deg
from xmatch.errors import ConfigurationError

HOST = "vizier.cds.unistra.fr"


@pytest.fixture(scope="module")
def tables() -> list[DemoTable]:
    rng = np.random.default_rng(7)
    made = []
    for number, (ra, dec) in enumerate([(0.0, -20.0), (120.0, 89.95)]):
        n = 60
        rows = {
            "ID": np.arange(n, dtype=np.int64) + 2**60,
            "RAJ2000": (ra + rng.uniform(-0.2, 0.2, n) / np.cos(np.radians(dec))) % 360.0,
            "DEJ2000": np.clip(dec + rng.uniform(-0.2, 0.2, n), -90.0, 90.0),
            "Flux": np.where(np.arange(n) % 5 == 0, np.nan, rng.uniform(1.0, 9.0, n)),
        }
        columns = (
            DemoColumn("ID", "long", None, "meta.id;meta.main"),
            DemoColumn("RAJ2000", "double", "deg", "pos.eq.ra;meta.main"),
            DemoColumn("DEJ2000", "double", "deg", "pos.eq.dec;meta.main"),
            DemoColumn("Flux", "double", "mJy", "phot.flux"),
        )
        name = f"J/x/{number}/list"
        made.append(DemoTable(name, columns, rows, "RAJ2000", "DEJ2000", HOST, f"/cone/{number}"))
    return made


@pytest.fixture
def archive(tables):
    with EmbeddedArchive(tables) as archive:
        yield archive


def fetched(url: str, body: str | None = None) -> bytes:
    with urllib.request.urlopen(url, data=None if body is None else body.encode(), timeout=5.0) as response:
        return bytes(response.read())


def form(archive: EmbeddedArchive, *lines: str) -> bytes:
    return fetched(f"{archive.address}/{HOST}/viz-bin/votable", "\n".join(lines))


def test_pyvo_finds_the_rows_that_astropy_finds(archive, tables):
    for number, centre in enumerate([SkyCoord(0.0, -20.0, unit="deg"), SkyCoord(300.0, 89.99, unit="deg")]):
        found = SCSService(f"{archive.address}/{HOST}/cone/{number}").search(centre, radius=0.1)
        rows = tables[number].rows
        inside = centre.separation(SkyCoord(rows["RAJ2000"], rows["DEJ2000"], unit="deg")).deg <= 0.1
        assert sorted(found["ID"].tolist()) == sorted(rows["ID"][inside].tolist())
        assert 3 < inside.sum() < 60


def test_separations_agree_with_astropy():
    rng = np.random.default_rng(3)
    ra0, ra = rng.uniform(0.0, 360.0, (2, 200))
    dec0, dec = np.degrees(np.arcsin(rng.uniform(-1.0, 1.0, (2, 200))))
    for i in range(200):
        expected = np.degrees(angular_separation(*np.radians([ra0[i], dec0[i]]), np.radians(ra), np.radians(dec)))
        np.testing.assert_allclose(separation_deg(ra0[i], dec0[i], ra, dec), expected, rtol=1e-12, atol=1e-12)


def test_pyvo_sees_the_error_form_of_the_standard(archive):
    with pytest.raises(DALQueryError, match="Error in input SR value"):
        SCSService(f"{archive.address}/{HOST}/cone/0").search((0.0, -20.0), radius=200.0)


@pytest.mark.parametrize("query", ["RA=x&DEC=0&SR=1", "DEC=0&SR=1", "RA=400&DEC=0&SR=1", "RA=0&DEC=-91&SR=1"])
def test_a_bad_cone_gets_an_error_and_no_table(archive, query):
    reply = fetched(f"{archive.address}/{HOST}/cone/0?{query}")
    assert b'<INFO name="Error" value="Error in input' in reply
    assert b"<TABLE" not in reply


def test_both_protocols_serve_valid_votables(archive, tmp_path):
    cone = fetched(f"{archive.address}/{HOST}/cone/0?RA=0&DEC=-20&SR=0.1&VERB=3&MAXREC=3")
    post = form(archive, "-source=J/x/0/list", "-c=0.0-20.0", "-c.rs=360", "-out.max=3", "-out=*", "-out.add=_r")
    for reply in (cone, post):
        text = tmp_path / "reply.xml"
        text.write_bytes(reply)
        with open(tmp_path / "report.txt", "w+", encoding="utf-8") as out:
            assert validate(text, output=out), (tmp_path / "report.txt").read_text()


def test_the_form_brings_named_and_computed_columns_in_order_of_distance(archive):
    wanted = ("-out=Flux,ID", "-out.add=_RAJ2000,_DEJ2000,_r")
    reply = form(archive, "-source=J/x/0/list", "-c=0.0-20.0", "-c.rm=6", *wanted)
    table = parse_single_table(BytesIO(reply)).to_table()
    assert table.colnames == ["Flux", "ID", "_RAJ2000", "_DEJ2000", "_r"]
    assert (np.diff(table["_r"]) >= 0.0).all()
    centre = SkyCoord(0.0, -20.0, unit="deg")
    expected = centre.separation(SkyCoord(table["_RAJ2000"], table["_DEJ2000"], unit="deg")).arcsec
    np.testing.assert_allclose(table["_r"], expected, rtol=1e-9)
    assert f'<INFO name="matches" value="{len(table)}"/>'.encode() in reply


def test_the_form_cuts_at_its_limit_and_says_so_in_both_ways(archive):
    reply = form(archive, "-source=J/x/0/list", "-c=0.0-20.0", "-c.rd=1", "-out.max=5")
    assert reply.count(b"<TR>") == 5
    assert b'<INFO name="Warning" value="truncated result (maxtup=5)"/>' in reply
    assert b'<INFO name="QUERY_STATUS" value="OVERFLOW"/>' in reply
    assert form(archive, "-source=J/x/0/list", "-c=0.0-20.0", "-c.rd=1").count(b"<TR>") == 50


def test_several_tables_get_one_resource_each_and_empty_ones_keep_their_fields(archive):
    reply = form(archive, "-source=J/x/0/list,J/x/1", "-source=J/x/unknown", "-c=0.0-20.0", "-c.rs=360")
    assert reply.count(b"<RESOURCE ") == reply.count(b"<TABLE ") == 2
    empty = reply[reply.index(b'name="J/x/1/list"') :]
    assert empty.count(b"<FIELD ") == 4
    assert b"<DATA>" not in empty


def test_an_unknown_table_or_column_or_a_missing_centre_is_answered_as_vizier_does(archive):
    assert b"<RESOURCE" not in form(archive, "-source=J/x/9/list", "-c=0.0-20.0", "-c.rs=10")
    odd = form(archive, "-source=J/x/0/list", "-c=0.0-20.0", "-c.rs=10", "-out=ID,Vmag")
    assert b"Column 'Vmag' unknown in 'J/x/0/list'" in odd
    assert b"No center provided" in form(archive, "-source=J/x/0/list", "-c.rs=10")


@pytest.mark.parametrize("path", ["/", f"/{HOST}/cone/9", "/elsewhere.example/cone/0", f"/{HOST}/viz-bin/votable"])
def test_other_addresses_are_not_found(archive, path):
    with pytest.raises(urllib.error.HTTPError) as fault:
        urllib.request.urlopen(archive.address + path, timeout=5.0)
    assert fault.value.code == 404
    fault.value.close()


def test_the_log_holds_what_was_asked(archive):
    form(archive, "-source=J/x/0/list", "-c=0.0-20.0", "-c.rs=10")
    (logged,) = archive.requests
    assert (logged.method, logged.path) == ("POST", f"/{HOST}/viz-bin/votable")
    assert logged.body.split("\n")[0] == "-source=J/x/0/list"


def test_faults_concern_one_table_some_number_of_times_and_can_be_forgotten(archive):
    archive.misbehave("J/x/0/list", Fault("html"), times=1)
    url = f"{archive.address}/{HOST}/cone/{{}}?RA=0&DEC=-20&SR=0.1"
    assert fetched(url.format(1)).startswith(b"<?xml")
    assert fetched(url.format(0)).startswith(b"<!DOCTYPE html>")
    assert fetched(url.format(0)).startswith(b"<?xml")
    archive.misbehave("*", Fault("empty body"))
    assert fetched(url.format(1)) == b""
    archive.behave()
    assert fetched(url.format(1)).startswith(b"<?xml")


def test_faults_add_up(archive):
    archive.misbehave("*", Fault("renamed column", column="Flux", to="F"))
    archive.misbehave("*", Fault("changed unit", column="F", to="Jy"))
    archive.misbehave("*", Fault("out of range", column="F", factor=10.0))
    table = parse_single_table(BytesIO(fetched(f"{archive.address}/{HOST}/cone/0?RA=0&DEC=-20&SR=1"))).to_table()
    assert str(table["F"].unit) == "Jy"
    assert np.nanmin(table["F"].filled(np.nan)) >= 10.0


def test_unknown_faults_are_refused():
    with pytest.raises(ConfigurationError, match="fault 'gremlin' is not known; use one of delay, "):
        Fault("gremlin")
    with pytest.raises(ConfigurationError, match="place 'attic' is not known"):
        Fault("overflow", place="attic")


def test_closing_does_not_wait_for_delays_or_drips(tables):
    for fault in (Fault("delay", seconds=60.0), Fault("drip", seconds=60.0)):
        begin = time.monotonic()
        with EmbeddedArchive(tables) as archive:
            archive.misbehave("*", fault)
            url = f"{archive.address}/{HOST}/cone/0?RA=0&DEC=-20&SR=1"
            client = threading.Thread(target=_ask_and_shrug, args=(url,), daemon=True)
            client.start()
            while not archive.requests and time.monotonic() - begin < 5.0:
                client.join(0.01)
        client.join(5.0)
        assert not client.is_alive()
        assert time.monotonic() - begin < 5.0


def _ask_and_shrug(url: str) -> None:
    with contextlib.suppress(OSError, http.client.HTTPException):
        fetched(url)


def test_a_table_is_read_from_ecsv_with_units_as_archives_spell_them(tmp_path):
    table = Table(
        {
            "Name": ["a", "b"], "RAJ2000": ["00 00 00.0", "00 00 01.0"], "S1.4": [1.5, np.nan],
            "Qual": np.array([1, 2], dtype=np.int16), "_ra": [0.0, 0.0042], "_dec": [-20.0, -20.0],
        },
        meta={"remote_table": "VIII/1/x", "ra": "_ra", "dec": "_dec", "cone_path": "/c", "description": "Invented."},
    )  # fmt: skip
    table["RAJ2000"].meta["unit"] = '"h:m:s"'
    table["S1.4"].unit = "mJy"
    table.write(tmp_path / "x.ecsv", format="ascii.ecsv")
    loaded = load_table(tmp_path / "x.ecsv")
    assert [(c.name, c.datatype, c.unit, c.arraysize) for c in loaded.columns] == [
        ("Name", "char", None, "*"), ("RAJ2000", "char", '"h:m:s"', "*"), ("S1.4", "double", "mJy", None),
        ("Qual", "short", None, None),
    ]  # fmt: skip
    with EmbeddedArchive([loaded]) as archive:
        reply = form(archive, "-source=VIII/1/x", "-c=0.0-20.0", "-c.rs=30", "-out.add=_RAJ2000", "-out=*")
        assert reply.count(b"<TR>") == 2
        assert b'unit="&quot;h:m:s&quot;"' in reply or b"unit='\"h:m:s\"'" in reply
        assert b"_ra" not in fetched(f"{archive.address}/{HOST}/c?RA=0&DEC=-20&SR=1")


def test_a_table_file_without_its_position_columns_is_refused(tmp_path):
    Table({"a": [1]}, meta={"remote_table": "x", "ra": "a"}).write(tmp_path / "x.ecsv", format="ascii.ecsv")
    with pytest.raises(ConfigurationError, match="lacks 'dec'"):
        load_table(tmp_path / "x.ecsv")
