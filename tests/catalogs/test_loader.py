"""The catalog loader: the shipped files load, and a fault names file, key, value and what is allowed."""

from __future__ import annotations

from pathlib import Path

import pytest

from xmatch.catalogs import load_catalogs
from xmatch.catalogs.loader import SHIPPED, read_catalog
from xmatch.constants import C_CM_S, KEV_HZ
from xmatch.errors import FactError
from xmatch.records import MagnitudeSystem, Quantity, Waveband

GOOD = (SHIPPED / "2mass-psc.toml").read_text(encoding="utf-8")


def written(folder: Path, text: str, name: str = "2mass-psc") -> Path:
    path = folder / f"{name}.toml"
    path.write_text(text, encoding="utf-8")
    return path


def test_every_waveband_of_the_main_street_is_there() -> None:
    registry = load_catalogs()
    assert len(registry) == 49
    assert {catalog.waveband for catalog in registry.values()} == set(Waveband)


def test_order_is_that_of_falling_energy() -> None:
    order = list(Waveband)
    places = [order.index(catalog.waveband) for catalog in load_catalogs().values()]
    assert places == sorted(places)


def test_every_shipped_file_cites_and_acknowledges() -> None:
    for catalog in load_catalogs().values():
        assert catalog.cite and catalog.acknowledgement and catalog.sources, catalog.id


def test_racs_low_is_one_catalog_with_two_tables() -> None:
    racs = load_catalogs()["racs-low"]
    assert [table.remote_table.rsplit("/", 1)[1] for table in racs.tables] == ["galcut", "galreg"]
    assert all(table.holds is not None for table in racs.tables)


def test_band_edges_become_frequencies() -> None:
    registry = load_catalogs()
    ks = registry["2mass-psc"].bands[2].band
    assert ks.nu_hz == pytest.approx(C_CM_S / 2.159e-4, rel=1e-12)
    assert ks.nu_low_hz < ks.nu_hz < ks.nu_high_hz
    xray = registry["erass1-main"].bands[0].band
    assert (xray.nu_low_hz / KEV_HZ, xray.nu_high_hz / KEV_HZ) == pytest.approx((0.2, 2.3))


def test_magnitude_systems_are_kept_apart() -> None:
    registry = load_catalogs()
    assert {columns.band.system for columns in registry["ps1-dr1"].bands} == {MagnitudeSystem.AB}
    assert {columns.band.system for columns in registry["2mass-psc"].bands} == {MagnitudeSystem.VEGA}
    assert {c.band.system for c in registry["nvss"].bands} == {None}
    assert registry["nvss"].bands[0].band.quantity is Quantity.FLUX_DENSITY


def test_wanted_columns_hold_each_name_once() -> None:
    for catalog in load_catalogs().values():
        names = [column.name for column in catalog.wanted_columns()]
        assert len(names) == len(set(names)), catalog.id
        assert {catalog.key, catalog.ra, catalog.dec} - {None} <= set(names)


def test_sexagesimal_tables_are_asked_for_decimal_positions() -> None:
    for name in ("nvss", "atnf-psr"):
        catalog = load_catalogs()[name]
        assert (catalog.ra, catalog.dec) == ("_RAJ2000", "_DEJ2000")


@pytest.mark.parametrize(
    ("old", "new", "says"),
    [
        ('waveband = "near-infrared"', 'waveband = "infrared"', ["waveband", "'infrared'", "near-infrared"]),
        ('system = "Vega"', 'system = "vega"', ["bands[0].system", "'vega'", "Vega, AB, ST"]),
        ("zero_point_jy = 1594.0", "zero_point_jy = -1.0", ["zero_point_jy", "-1.0", "a number from"]),
        ('unit = "mag"', 'unit = "magnitude"', ["bands[0].unit", "'magnitude'", "mag"]),
        ('meaning = "ellipse"', 'meaning = "circle"', ["columns.error.meaning", "'circle'", "per axis"]),
        ('title = "2MASS All-Sky Point Source Catalog"', "titel = 1\ntitle = 'x'", ["titel", "known keys are"]),
        ("row_limit = 5000", "row_limit = 0", ["neighbourhood.row_limit", "0", "from 10"]),
        ("low = 1.1540", "low = 9.0", ["bands[0].low", "9.0", "low < high"]),
        ('protocol = "vizier"', 'protocol = "gopher"', ["tables[0].protocol", "'gopher'", "cone, vizier"]),
        ("value = 15.8, n_sigma = 10.0", "value = 15.8", ["depth", "n_sigma or completeness"]),
        ('cite = ["2006AJ....131.1163S", "2003yCat.2246....0C"]', "cite = []", ["cite", "bibcodes"]),
        ('id = "2mass-psc"', 'id = "2mass"', ["id", "'2mass'", "'2mass-psc'"]),
    ],
)
def test_a_fault_names_file_key_value_and_what_is_allowed(tmp_path: Path, old: str, new: str, says: list[str]) -> None:
    assert old in GOOD
    path = written(tmp_path, GOOD.replace(old, new, 1))
    with pytest.raises(FactError) as caught:
        read_catalog(path)
    for part in (str(path), *says):
        assert part in str(caught.value)


def test_a_fact_without_source_does_not_load(tmp_path: Path) -> None:
    text = GOOD.replace(
        '[coverage]\nkind = "all sky"\nsource = "2006AJ....131.1163S (99.998 % of the sky)"',
        '[coverage]\nkind = "all sky"',
    )
    assert text != GOOD
    with pytest.raises(FactError, match="every fact needs a source"):
        read_catalog(written(tmp_path, text))


def test_a_duplicate_key_does_not_load(tmp_path: Path) -> None:
    with pytest.raises(FactError, match="not readable as TOML"):
        read_catalog(written(tmp_path, GOOD.replace('release = "', 'release = "x"\nrelease = "', 1)))


def test_a_users_folder_is_read_and_its_ids_may_not_clash(tmp_path: Path) -> None:
    written(tmp_path, GOOD.replace('id = "2mass-psc"', 'id = "mine"'), "mine")
    assert "mine" in load_catalogs([tmp_path])
    written(tmp_path, GOOD)
    with pytest.raises(FactError, match="is taken by"):
        load_catalogs([tmp_path])


def test_a_missing_folder_is_said(tmp_path: Path) -> None:
    with pytest.raises(FactError, match="no catalog folder"):
        load_catalogs([tmp_path / "nowhere"])


def test_unverified_facts_are_marked() -> None:
    assert load_catalogs()["vlass-ql1"].unverified
