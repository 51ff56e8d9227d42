"""Replies that nobody here wrote: stored answers of real archives in the wheels of pyvo, astroquery and astropy."""

from __future__ import annotations

from pathlib import Path

import astropy
import astroquery
import numpy as np
import pytest
import pyvo

from xmatch.archives.reading import judge
from xmatch.archives.structure import skeleton_of
from xmatch.catalogs import load_catalogs
from xmatch.catalogs.check import Compared, Served, compare
from xmatch.errors import MisreadError
from xmatch.records import Question, ReplyStatus, WantedColumn

PYVO, ASTROQUERY, ASTROPY = (Path(str(module.__file__)).parent for module in (pyvo, astroquery, astropy))
WHOLE, CUT = ReplyStatus.WHOLE, ReplyStatus.TRUNCATED
POSITION = {"ra_deg": 0.0, "dec_deg": 0.0, "radius_arcsec": 179.0 * 3600.0}


def asked(remote_table: str = "", limit: int = 5000, *columns: WantedColumn, **place: float) -> Question:
    """A question by VizieR's form where a table is named, by cone search otherwise."""
    return Question(
        catalog_id="c", release="1", table="t", protocol="vizier" if remote_table else "cone",
        address="https://a.example/x", remote_table=remote_table, columns=columns, row_limit=limit,
        **(POSITION | place),
    )  # fmt: skip


def deg(ra: str, dec: str) -> tuple[WantedColumn, WantedColumn]:
    return WantedColumn(ra, "deg", low=0.0, high=360.0), WantedColumn(dec, "deg", low=-90.0, high=90.0)


READABLE = [
    # 1273 ROSAT photons in half a degree, in BINARY
    (PYVO / "dal/tests/data/scs/result.xml", asked("", 5000, *deg("raj2000", "dej2000"),
        WantedColumn("energy_cor", "eV"), ra_deg=78.0, dec_deg=2.0, radius_arcsec=1800.0), WHOLE, 1273),
    (PYVO / "dal/tests/data/scs/result.xml", asked("", 1272), CUT, 1273),
    # VizieR in 2025: URAT1 with its count of matches
    (PYVO / "mivot/tests/data/test.header_extraction.xml", asked("I/329/urat1", 5000, *deg("RAICRS", "DEICRS"),
        WantedColumn("kmag", "mag"), ra_deg=52.26708, dec_deg=59.94027, radius_arcsec=180.0), WHOLE, 174),
    (PYVO / "mivot/tests/data/simbad-cone-mivot.xml", asked(), CUT, 1),
    (PYVO / "dal/tests/data/query/basic.xml", asked(), WHOLE, 3),
    (PYVO / "dal/tests/data/query/tableinfo.xml", asked(), WHOLE, 3),
    (PYVO / "dal/tests/data/query/rootinfo.xml", asked(), WHOLE, 3),
    (PYVO / "dal/tests/data/query/overflowstatus.xml", asked(), CUT, 3),
    # the answer behind astroquery#638: 50 of 737 rows, and only its own limit tells
    (ASTROQUERY / "vizier/tests/data/kang2010.xml", asked("J/ApJ/706/83", 5000, WantedColumn("AV", "mag")), CUT, 50),
    (ASTROQUERY / "vizier/tests/data/afgl2591_iram.xml", asked("B/iram/pdbi", 5000, *deg("_RAJ2000", "_DEJ2000"),
        ra_deg=307.353875, dec_deg=40.188583, radius_arcsec=300.0), WHOLE, 14),
    # 360 tables around Sirius, at most five rows of each
    (ASTROQUERY / "vizier/tests/data/viz.xml", asked("VIII/65/nvss", 5000, *deg("_RAJ2000", "_DEJ2000"),
        ra_deg=101.287155, dec_deg=-16.716116, radius_arcsec=120.0), WHOLE, 1),
    (ASTROQUERY / "vizier/tests/data/viz.xml", asked("II/246/out"), CUT, 5),
    (ASTROQUERY / "vizier/tests/data/viz.xml", asked("I/62C/catalog"), WHOLE, 0),
    (ASTROQUERY / "ipac/irsa/tests/data/Cone.xml", asked("", 9, WantedColumn("err_maj")), WHOLE, 1),
    (ASTROQUERY / "ipac/ned/tests/data/query_near_position.xml", asked(), WHOLE, 475),
    (ASTROQUERY / "gaia/tests/data/job_1.vot", asked(), WHOLE, 3),
    (ASTROPY / "io/votable/tests/data/vizier_b2_votable.xml", asked(), CUT, 20),
    (ASTROPY / "io/votable/tests/data/empty_table.xml", asked(), WHOLE, 0),
]  # fmt: skip

UNREADABLE = [
    (ASTROQUERY / "vo_conesearch/tests/data/conesearch_error1.xml", asked(), "Error in input RA value: as3f"),
    (ASTROQUERY / "vo_conesearch/tests/data/conesearch_error2.xml", asked(), "Error in input RA value: as3f"),
    (ASTROQUERY / "vo_conesearch/tests/data/conesearch_error3.xml", asked(), "Invalid data type: text/html"),
    (ASTROQUERY / "vo_conesearch/tests/data/conesearch_error4.xml", asked(), "Invalid data type: text/html"),
    (ASTROQUERY / "ipac/ned/tests/data/error.xml", asked(), r"reports an error .*No note found"),
    (ASTROPY / "io/votable/tests/data/irsa-nph-error.xml", asked(), "wrong or missing coordinate"),
    (PYVO / "dal/tests/data/query/errorstatus.xml", asked(), "reports an error"),
    (PYVO / "dal/tests/data/query/missingcolumns.xml", asked(), "0 are declared|no columns"),
    (PYVO / "dal/tests/data/query/missingresource.xml", asked(), "no table in the reply"),
    (PYVO / "dal/tests/data/query/missingtable.xml", asked(), "no table in the reply"),
    # a list of tables, with all columns of the one that was asked for, is no answer
    (ASTROQUERY / "vizier/tests/data/find_kangapj70683.xml", asked("J/ApJ/706/83/ysos"), "only a description"),
    (ASTROQUERY / "vizier/tests/data/viz.xml", asked("I/355/gaiadr3"), "holds 360"),
    (PYVO / "mivot/tests/data/test.header_extraction.1.xml", asked(), "left the position out"),
    (PYVO / "dal/tests/data/tap/capabilities.xml", asked(), "not a VOTable"),
    (PYVO / "dal/tests/data/tap/examples.htm", asked(), "a web page|not a VOTable|not XML"),
    # a cone of URAT1 is no answer about another place
    (PYVO / "mivot/tests/data/test.header_extraction.xml", asked("I/329/urat1", 5000, *deg("RAICRS", "DEICRS"),
        ra_deg=152.0, dec_deg=59.9, radius_arcsec=180.0), "174 of 174 rows lie outside the cone"),
]  # fmt: skip


@pytest.mark.parametrize(("path", "question", "status", "rows"), READABLE, ids=lambda part: getattr(part, "name", None))
def test_a_stored_reply_is_read_for_what_it_is(path, question, status, rows):
    judged = judge(path.read_bytes(), 200, "text/xml", question)
    assert (judged.status, judged.n_rows) == (status, rows)
    assert all(len(column.values) == len(column.missing) == rows for column in judged.columns.values())


@pytest.mark.parametrize(("path", "question", "words"), UNREADABLE, ids=lambda part: getattr(part, "name", None))
def test_a_stored_failure_is_never_an_empty_answer(path, question, words):
    with pytest.raises(MisreadError, match=words):
        judge(path.read_bytes(), 200, "text/xml", question)


def test_the_identifiers_of_gaia_dr3_are_exact():
    raw = (ASTROQUERY / "gaia/tests/data/1710099405832VAL-result.vot").read_bytes()
    column = judge(raw, 200, "text/xml", asked("", 5000, WantedColumn("source_id"))).columns["source_id"]
    assert column.values.dtype == np.int64
    # read off the file as text, not through a parser
    assert all(f"<TD>{identifier}</TD>".encode() in raw for identifier in column.values.tolist())
    assert int(column.values.min()) > 2**53


def test_masked_magnitudes_of_a_stored_reply_are_missing():
    raw = (PYVO / "mivot/tests/data/test.header_extraction.xml").read_bytes()
    column = judge(raw, 200, "text/xml", asked("I/329/urat1", 5000, WantedColumn("Bmag", "mag"))).columns["Bmag"]
    assert 0 < column.missing.sum() < len(column.values)
    assert np.isfinite(column.values[~column.missing]).all()


# ------------------------------------------------------------------------------------------------
# the catalog files against what archives really served
# ------------------------------------------------------------------------------------------------
def test_simbads_own_description_has_every_column_that_its_file_names():
    raw = (ASTROQUERY / "simbad/tests/data/simbad_basic_columns.xml").read_bytes()
    columns = judge(raw, 200, "text/xml", asked("", 5000)).columns
    values = [columns[name].values.tolist() for name in ("column_name", "unit", "ucd", "datatype")]
    served = [Served(name, unit or None, ucd, datatype) for name, unit, ucd, datatype in zip(*values, strict=True)]
    catalog = load_catalogs()["simbad-basic"]
    assert compare(catalog, catalog.wanted_columns(), served) == Compared({}, ())


def test_a_stored_answer_of_vizier_spells_the_columns_of_gaia_dr3_as_our_file_does():
    skeleton = skeleton_of((PYVO / "mivot/tests/data/test.mango_annoter.xml").read_bytes())
    served = {field.name for table in skeleton.tables for field in table.fields}
    ours = {column.name for column in load_catalogs()["gaia-dr3"].wanted_columns()}
    lower = {name.lower() for name in served}
    assert {name for name in ours if name.lower() in lower} <= served
    assert len(ours & served) >= 8


def test_the_sentinels_of_an_old_archive_are_not_believed():
    raw = (ASTROQUERY / "ukidss/tests/data/votable.xml").read_bytes()
    wanted = WantedColumn("jAperMag3", "mag", low=-5.0, high=32.0)
    with pytest.raises(MisreadError, match=r"lie outside -5 to 32|no unit"):
        judge(raw, 200, "text/xml", asked("", 5000, wanted))
