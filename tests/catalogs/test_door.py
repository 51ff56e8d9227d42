"""The door: units, error meanings, epochs, limit flags, duplicates, missing values, 64-bit ids."""

from __future__ import annotations

from dataclasses import replace
from typing import Any

import numpy as np
import pytest

from xmatch.catalogs import Catalog, load_catalogs
from xmatch.catalogs.door import join, normalise
from xmatch.errors import MisreadError
from xmatch.records import Column, Reply, ReplyStatus

REGISTRY = load_catalogs()


def column(values: Any, unit: str | None = None, missing: Any = None) -> Column:
    array = np.asarray(values)
    return Column(array, unit, np.zeros(len(array), dtype=bool) if missing is None else np.asarray(missing, dtype=bool))


def reply(catalog: Catalog, columns: dict[str, Column]) -> Reply:
    question = catalog.question(catalog.tables[0], 10.0, -60.0, 60.0)
    n = len(next(iter(columns.values())).values)
    return Reply(question, ReplyStatus.WHOLE, "whole", "GET", "2026-12-01T00:00:00Z", 0.1, columns=columns, n_rows=n)


def nvss(**changes: Column) -> Reply:
    columns = {
        "NVSS": column(["a", "b"]),
        "_RAJ2000": column([10.0, 10.1], "deg"),
        "_DEJ2000": column([-60.0, -60.1], "deg"),
        "e_RAJ2000": column([0.1, 0.2], "s"),
        "e_DEJ2000": column([1.0, 2.0], "arcsec"),
        "S1.4": column([3.0, 4.0], "mJy"),
        "e_S1.4": column([0.4, 0.5], "mJy"),
    }
    return reply(REGISTRY["nvss"], columns | changes)


def test_seconds_of_time_become_arcsec_on_the_sky() -> None:
    # 0.1 s of time at Dec -60 is 0.1 x 15 x cos 60 = 0.75 arcsec; the file's floor of 0.5 is added
    rows = normalise(REGISTRY["nvss"], nvss())
    east = np.hypot(0.75, 0.5)
    assert rows.sigma_major_arcsec[0] == pytest.approx(np.hypot(1.0, 0.5))
    assert rows.sigma_minor_arcsec[0] == pytest.approx(east)
    assert rows.angle_deg[0] % 180.0 == pytest.approx(0.0)


def test_units_of_the_reply_rule() -> None:
    rows = normalise(REGISTRY["nvss"], nvss(**{"S1.4": column([0.003, 0.004], "Jy")}))
    assert rows.flux["1.4 GHz"].value == pytest.approx([3.0, 4.0])


def test_a_missing_unit_is_refused_not_guessed() -> None:
    with pytest.raises(MisreadError, match=r"S1\.4.*cannot be read as mJy"):
        normalise(REGISTRY["nvss"], nvss(**{"S1.4": column([3.0, 4.0])}))
    with pytest.raises(MisreadError, match="e_DEJ2000"):
        normalise(REGISTRY["nvss"], nvss(e_DEJ2000=column([1.0, 2.0])))


def test_a_wrong_unit_is_refused() -> None:
    with pytest.raises(MisreadError, match="'mag'"):
        normalise(REGISTRY["nvss"], nvss(**{"S1.4": column([3.0, 4.0], "mag")}))


def test_a_missing_column_is_named_with_those_received() -> None:
    bad = nvss()
    assert bad.columns is not None
    columns = {name: value for name, value in bad.columns.items() if name != "S1.4"}
    with pytest.raises(MisreadError, match=r"'S1\.4' is not in the reply, which holds NVSS"):
        normalise(REGISTRY["nvss"], replace(bad, columns=columns))


def test_names_in_another_case_are_found() -> None:
    good = nvss()
    assert good.columns is not None
    columns = {name.upper(): value for name, value in good.columns.items()}
    assert len(normalise(REGISTRY["nvss"], replace(good, columns=columns))) == 2


def test_rows_without_position_are_left_out() -> None:
    rows = normalise(REGISTRY["nvss"], nvss(_RAJ2000=column([10.0, 0.0], "deg", [False, True])))
    assert rows.key == ("a",)


def test_a_row_without_error_is_as_uncertain_as_the_worst() -> None:
    rows = normalise(REGISTRY["nvss"], nvss(e_DEJ2000=column([0.0, 6.0], "arcsec", [True, False])))
    assert rows.sigma_major_arcsec[0] == pytest.approx(np.hypot(6.0, 0.5))


def test_a_flux_of_zero_is_missing_not_a_measurement() -> None:
    rows = normalise(REGISTRY["nvss"], nvss(**{"S1.4": column([0.0, 4.0], "mJy")}))
    assert np.isnan(rows.flux["1.4 GHz"].value[0])


def gaia() -> Reply:
    big = 2**53 + 1
    columns = {
        "Source": column(np.array([big, big + 2], dtype=np.int64)),
        "RA_ICRS": column([10.0, 10.1], "deg"),
        "DE_ICRS": column([-60.0, -60.1], "deg"),
        "e_RA_ICRS": column([100.0, 100.0], "mas"),
        "e_DE_ICRS": column([100.0, 100.0], "mas"),
        "pmRA": column([0.0, -5.0], "mas/yr", [True, False]),
        "pmDE": column([0.0, 7.0], "mas/yr", [True, False]),
        "e_pmRA": column([0.0, 0.1], "mas/yr", [True, False]),
        "e_pmDE": column([0.0, 0.1], "mas/yr", [True, False]),
    } | {name: column([18.0, 19.0], "mag") for name in ("Gmag", "e_Gmag", "BPmag", "e_BPmag", "RPmag", "e_RPmag")}
    return reply(REGISTRY["gaia-dr3"], columns)


def test_ids_beyond_two_to_the_53_survive() -> None:
    rows = normalise(REGISTRY["gaia-dr3"], gaia())
    assert rows.key == (str(2**53 + 1), str(2**53 + 3))
    assert rows.raw[0]["Source"] == 2**53 + 1


def test_missing_motion_stays_missing_and_is_none_in_the_raw_row() -> None:
    rows = normalise(REGISTRY["gaia-dr3"], gaia())
    assert np.isnan(rows.pm_ra_mas_yr[0]) and rows.pm_ra_mas_yr[1] == -5.0
    assert rows.raw[0]["pmRA"] is None


def test_milliarcseconds_become_arcseconds() -> None:
    rows = normalise(REGISTRY["gaia-dr3"], gaia())
    assert rows.sigma_major_arcsec == pytest.approx([0.1, 0.1])
    assert rows.epoch_yr == pytest.approx([2016.0, 2016.0])


def twomass(**changes: Column) -> Reply:
    columns = {
        "2MASS": column(["17380000-3300000", "17380001-3300001"]),
        "RAJ2000": column([10.0, 10.1], "deg"),
        "DEJ2000": column([-60.0, -60.1], "deg"),
        "errMaj": column([0.3, 0.3], "arcsec"),
        "errMin": column([0.1, 0.1], "arcsec"),
        "errPA": column([45.0, 45.0], "deg"),
        "JD": column([2451545.0, 2451910.25], "d"),
        "Qflg": column(["UAA", "AAA"]),
    } | {name: column([14.0, 15.0], "mag") for name in ("Jmag", "e_Jmag", "Hmag", "e_Hmag", "Kmag", "e_Kmag")}
    return reply(REGISTRY["2mass-psc"], columns | changes)


def test_a_limit_in_the_magnitude_column_is_a_limit() -> None:
    rows = normalise(REGISTRY["2mass-psc"], twomass())
    assert rows.flux["J"].is_limit.tolist() == [True, False]
    assert rows.flux["Ks"].is_limit.tolist() == [False, False]


def test_julian_dates_become_years() -> None:
    rows = normalise(REGISTRY["2mass-psc"], twomass())
    assert rows.epoch_yr == pytest.approx([2000.0, 2001.0])


def test_the_floor_is_added_to_both_axes() -> None:
    rows = normalise(REGISTRY["2mass-psc"], twomass())
    assert rows.sigma_major_arcsec[0] == pytest.approx(np.hypot(0.3, 0.07))
    assert rows.sigma_minor_arcsec[0] == pytest.approx(np.hypot(0.1, 0.07))
    assert rows.angle_deg[0] == 45.0


def test_second_listings_are_left_out() -> None:
    columns = {
        "CompName": column(["one", "two"]),
        "RAJ2000": column([10.0, 10.1], "deg"),
        "DEJ2000": column([-20.0, -20.1], "deg"),
        "e_RAJ2000": column([1e-4, 1e-4], "deg"),
        "e_DEJ2000": column([1e-4, 1e-4], "deg"),
        "Ftot": column([1.0, 2.0], "mJy"),
        "e_Ftot": column([0.1, 0.1], "mJy"),
        "DupFlag": column([0, 2]),
    }
    rows = normalise(REGISTRY["vlass-ql1"], reply(REGISTRY["vlass-ql1"], columns))
    assert rows.key == ("one",)
    assert rows.sigma_minor_arcsec[0] == pytest.approx(np.hypot(0.36, 0.5))


def test_vizier_spelling_of_an_energy_flux_is_understood() -> None:
    columns = {
        "IAUName": column(["x"]),
        "RA_ICRS": column([260.0], "deg"),
        "DE_ICRS": column([-40.0], "deg"),
        "posErr": column([4.0], "arcsec"),
        "MLFlux1": column([2.0e-13], "mW/m2"),
    }
    rows = normalise(REGISTRY["erass1-main"], reply(REGISTRY["erass1-main"], columns))
    assert rows.flux["0.2-2.3 keV"].value == pytest.approx([2.0e-13])


def test_join_keeps_order_and_an_empty_join_is_empty() -> None:
    rows = normalise(REGISTRY["nvss"], nvss())
    both = join([rows, rows])
    assert both.key == ("a", "b", "a", "b")
    assert both.flux["1.4 GHz"].value.tolist() == [3.0, 4.0, 3.0, 4.0]
    assert len(join([])) == 0
