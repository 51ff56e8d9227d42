"""Comparing a file with what is served; names found by UCD; catalogs kept back until then; the template."""

from __future__ import annotations

from dataclasses import replace
from pathlib import Path

import pytest

from xmatch.catalogs import load_catalogs
from xmatch.catalogs.check import Served, compare
from xmatch.catalogs.footprint import Footprint
from xmatch.catalogs.loader import read_catalog
from xmatch.catalogs.resolving import with_names
from xmatch.catalogs.template import write_template
from xmatch.errors import FactError, MisreadError
from xmatch.records import WantedColumn

NVSS = load_catalogs()["nvss"]


def served(*columns: tuple[str, str | None, str]) -> list[Served]:
    return [Served(name, unit, ucd, "double") for name, unit, ucd in columns]


def test_case_does_not_matter_and_computed_columns_need_no_description() -> None:
    wanted = [WantedColumn("S1.4", "mJy"), WantedColumn("_RAJ2000", "deg"), WantedColumn("Opt", required=False)]
    assert compare(NVSS, wanted, served(("s1.4", "Jy", ""))).problems == ()


def test_a_missing_column_is_named_with_what_is_near() -> None:
    (problem,) = compare(NVSS, [WantedColumn("e_S1.4")], served(("S1.4", "mJy", ""), ("eS1.4", "mJy", ""))).problems
    assert problem == "column 'e_S1.4' is not served; near it: eS1.4, S1.4"


def test_a_unit_of_the_file_stands_in_only_where_none_is_served() -> None:
    catalog = replace(NVSS, units={"S": "mJy"})
    assert compare(catalog, [WantedColumn("S", "mJy")], served(("S", None, ""))).problems == ()
    (problem,) = compare(catalog, [WantedColumn("S", "mJy")], served(("S", "mag", ""))).problems
    assert "comes in mag, which cannot be converted to mJy" in problem


@pytest.mark.parametrize(
    ("ucds", "found"),
    [
        (("pos.eq.ra;meta.main",), {"ucd:pos.eq.ra;meta.main": "c0"}),
        (("POS.EQ.RA;META.MAIN", "pos.eq.ra"), {"ucd:pos.eq.ra;meta.main": "c0"}),
        (("pos.eq.ra",), {}),
        (("pos.eq.ra;meta.main", "pos.eq.ra;meta.main"), {}),
    ],
)
def test_a_ucd_must_fit_exactly_one_column(ucds: tuple[str, ...], found: dict[str, str]) -> None:
    columns = served(*[(f"c{i}", "deg", ucd) for i, ucd in enumerate(ucds)])
    compared = compare(NVSS, [WantedColumn("ucd:pos.eq.ra;meta.main", "deg")], columns)
    assert compared.resolved == found
    assert (len(compared.problems) == 0) == bool(found)


def test_names_found_go_everywhere_in_a_catalog() -> None:
    catalog = load_catalogs()["smgps-compact"]
    assert len(catalog.unresolved) == 3
    found = with_names(catalog, {name: f"C{i}" for i, name in enumerate(catalog.unresolved)})
    assert not found.needs_check and not found.unresolved
    assert (found.ra, found.dec, found.bands[0].value) == ("C0", "C1", "C2")
    assert found.fingerprint == catalog.fingerprint


def test_the_template_loads_as_it_stands(tmp_path: Path) -> None:
    catalog = read_catalog(write_template("mine-1.2", tmp_path / "new"))
    assert catalog.needs_check and catalog.id == "mine-1.2" and catalog.control is not None


@pytest.mark.parametrize("name", ["My Survey", "", "../x", "a/b", "-a"])
def test_a_name_that_is_no_id_is_refused(tmp_path: Path, name: str) -> None:
    with pytest.raises(FactError, match="is not allowed; use lower-case letters"):
        write_template(name, tmp_path)


def test_a_template_never_overwrites(tmp_path: Path) -> None:
    path = write_template("mine", tmp_path)
    path.write_text("precious")
    with pytest.raises(FactError, match="left alone"):
        write_template("mine", tmp_path)
    assert path.read_text() == "precious"


@pytest.mark.parametrize(
    ("old", "new", "says"),
    [
        ('kind = "declination"', 'kind = "footprint"', "a footprint needs the address of its MOC"),
        (
            'kind = "declination"',
            'kind = "footprint"\nmoc = "https://a.example/viz-bin/moc/II/246/out"',
            "where objects are, not where",
        ),
        ('kind = "declination"', 'kind = "pointed"', "pointed coverage needs its observation log"),
        ('state = "needs check"', 'state = "fine"', "the only state is 'needs check'"),
        ('protocol = "vizier"', 'protocol = "gopher"', "one of cone, vizier, tap, simbad, file is needed"),
        ('# geometry = "box"', 'geometry = "triangle"  #', "one of circle, box is needed"),
        ("# positions", 'positions = "roman"  #', "one of decimal, sexagesimal is needed"),
        ("# [mirror] ", "[mirror]\n# ", "every fact needs a source"),
    ],
)
def test_a_fault_names_what_is_allowed(tmp_path: Path, old: str, new: str, says: str) -> None:
    path = write_template("mine", tmp_path)
    text = path.read_text()
    assert old in text
    path.write_text(text.replace(old, new, 1))
    with pytest.raises(FactError) as fault:
        read_catalog(path)
    assert says in str(fault.value) and str(path) in str(fault.value)


@pytest.mark.parametrize("body", [b"", b"<html>no</html>", b"{}", b'{"0":[]}', b"SIMPLE  =  T"])
def test_what_is_no_footprint_covers_nothing_and_says_so(body: bytes) -> None:
    with pytest.raises(MisreadError, match="footprint"):
        assert Footprint(body).sky_fraction >= 0.0


def test_a_footprint_says_which_positions_are_inside() -> None:
    import numpy as np

    # cell 0 of order 0 of the nested scheme holds RA 45, Dec 0 to 90 (2005ApJ...622..759G, figure 5): 1/12 of the sky
    footprint = Footprint(b'{"0":[0]}')
    assert footprint.sky_fraction == pytest.approx(1.0 / 12.0)
    assert footprint.contains(np.array([45.0, 225.0]), np.array([30.0, -30.0])).tolist() == [True, False]
