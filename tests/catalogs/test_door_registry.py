"""The door for the registry's odd tables: error levels, text positions, lists without names or units, logs, corners."""

from __future__ import annotations

from dataclasses import replace
from typing import Any

import numpy as np
import pytest

from xmatch.catalogs import Catalog, load_catalogs
from xmatch.catalogs.door import normalise, pointings_of, within
from xmatch.errors import MisreadError
from xmatch.records import Column, Reply, ReplyStatus, Rows

REGISTRY = load_catalogs()
# sqrt(-2 ln(1 - p)): how many sigma per axis a circle that holds p of a round Gaussian is wide (Rayleigh distribution)
WIDE = {0.68: 1.5096, 0.90: 2.1460, 0.95: 2.4477}


def column(values: Any, unit: str | None = None, missing: Any = None) -> Column:
    array = np.asarray(values)
    return Column(array, unit, np.zeros(len(array), dtype=bool) if missing is None else np.asarray(missing, dtype=bool))


def reply(catalog: Catalog, **columns: Column) -> Reply:
    question = catalog.question(catalog.tables[0], 10.0, -60.0, 60.0)
    n = len(next(iter(columns.values())).values)
    return Reply(question, ReplyStatus.WHOLE, "whole", "GET", "2026-12-01T00:00:00Z", 0.1, columns=columns, n_rows=n)


def served(name: str, **changes: Column) -> Rows:
    """A catalog's wanted columns, two rows, numbers where numbers are wanted; with changes."""
    catalog = REGISTRY[name]
    columns: dict[str, Column] = {}
    for wanted in catalog.wanted_columns():
        columns[wanted.name] = column([1.0, 2.0], wanted.unit)
    for name_of_error in catalog.error.columns:
        columns[name_of_error] = column([1.0, 2.0], "arcsec")
    for band in catalog.bands:
        if band.error is not None:
            columns[band.error] = column([0.1, 0.2], band.band.unit)
    columns[catalog.ra], columns[catalog.dec] = column([10.0, 10.1], "deg"), column([-60.0, -60.1], "deg")
    if catalog.key is not None:
        columns[catalog.key] = column(["a", "b"])
    return normalise(catalog, reply(catalog, **(columns | changes)))


def test_an_ellipse_of_95_percent_becomes_one_sigma() -> None:
    rows = served(
        "chandra-csc21", r0=column([1.0, 2.0], "arcsec"), r1=column([0.5, 2.0], "arcsec"), PA=column([30.0, 0.0], "deg")
    )
    assert rows.sigma_major_arcsec == pytest.approx(np.array([1.0, 2.0]) / WIDE[0.95], rel=1e-4)
    assert rows.sigma_minor_arcsec == pytest.approx(np.array([0.5, 2.0]) / WIDE[0.95], rel=1e-4)
    assert rows.angle_deg.tolist() == [30.0, 0.0]


def test_a_radius_of_90_percent_becomes_one_sigma_per_axis() -> None:
    rows = served("swift-2sxps", err90=column([4.0, 6.0], "arcsec"))
    assert rows.sigma_major_arcsec == pytest.approx(np.array([4.0, 6.0]) / WIDE[0.90], rel=1e-4)


def test_a_radial_error_is_shared_by_two_axes() -> None:
    rows = served("xmm-4xmm-dr13", ePos=column([1.0, 2.0], "arcsec"))
    assert rows.sigma_major_arcsec == pytest.approx(np.array([1.0, 2.0]) / np.sqrt(2.0))


def test_degrees_in_an_error_column_become_arcsec() -> None:
    rows = served(
        "fermi-4fgl-dr4", semi_major_axis_95=column([0.1, 0.2], "deg"), semi_minor_axis_95=column([0.1, 0.2], "deg"),
        position_angle_95=column([0.0, 0.0], "deg"),
    )  # fmt: skip
    assert rows.sigma_major_arcsec == pytest.approx(np.array([360.0, 720.0]) / WIDE[0.95], rel=1e-4)


def test_a_list_without_names_is_named_by_position() -> None:
    assert served("sumss").key == ("10.00000-60.00000", "10.10000-60.10000")


def test_a_band_without_a_column_has_no_flux_but_stands() -> None:
    rows = served("rosat-2rxs")
    assert np.isnan(rows.flux["0.1-2.4 keV"].value).all() and not rows.flux["0.1-2.4 keV"].is_limit.any()


def test_units_of_the_file_stand_in_where_the_service_gives_none() -> None:
    # 3631 Jy x 1e-6: a flux in units of AB magnitude zero, 1983ApJ...266..713O
    rows = served("decaps2", mean_g=column([1.0e-6, 2.0e-6]))
    assert rows.flux["g"].value == pytest.approx([3.631e-3, 7.262e-3])
    rows = served("decaps2", mean_g=column([1.0, 2.0], "mJy"))
    assert rows.flux["g"].value == pytest.approx([1.0e-3, 2.0e-3])


def test_text_positions_are_hours_and_degrees() -> None:
    rows = served(
        "mcgill-magnetars", RA=column(["01 46 22.41", "18 09 51.087"]), Decl=column(["+61 45 03.2", "-19 43 51.93"])
    )
    # worked by hand: 15 (1 + 46/60 + 22.41/3600), 61 + 45/60 + 3.2/3600
    assert rows.ra_deg[0] == pytest.approx(26.593375) and rows.dec_deg[0] == pytest.approx(61.7508889)
    assert rows.dec_deg[1] == pytest.approx(-19.7310917)


def test_errors_in_brackets_and_rows_that_are_no_position() -> None:
    rows = served("lpt-cat", **{"R.A.": column(["18h39m02.0(4)s", "TBD"]), "Dec.": column(["-10d31m49.5(6)s", "-"])})
    assert (
        len(rows) == 1
        and rows.ra_deg[0] == pytest.approx(279.7583333)
        and rows.dec_deg[0] == pytest.approx(-10.5304167)
    )


@pytest.mark.parametrize("dec", ["-00 12 13", "\u221200 12 13"])
def test_the_sign_of_a_declination_of_zero_degrees_survives(dec: str) -> None:
    rows = served("mcgill-magnetars", RA=column(["00 00 00", "00 00 00"]), Decl=column([dec, dec]))
    assert rows.dec_deg == pytest.approx([-0.2036111, -0.2036111])


def test_a_list_whose_positions_cannot_be_read_is_misread() -> None:
    with pytest.raises(MisreadError, match="none of 2 rows has a position that can be read, such as '25 00 00'"):
        served("mcgill-magnetars", RA=column(["25 00 00", "x"]), Decl=column(["+10 00 00", "y"]))


def test_a_log_becomes_pointings_without_those_that_took_no_data() -> None:
    catalog = REGISTRY["swift-2sxps"]
    log = reply(
        catalog, obsid=column(["1", "2", "3"]), ra=column([10.0, 10.0, 10.0], "deg"), dec=column([-60.0, -60.0, -60.0], "deg"),
        xrt_exposure=column([1.5, 0.0, 2.0], "ks", [False, False, True]), start_time=column([55555.5, 55556.0, 55557.0]),
    )  # fmt: skip
    found = pointings_of(catalog, log)
    assert (found.key, found.exposure_s.tolist()) == (("1",), [1500.0])
    assert found.field_radius_arcmin.tolist() == [11.8]


def test_a_log_in_another_unit_is_refused() -> None:
    catalog = REGISTRY["swift-2sxps"]
    log = reply(
        catalog, obsid=column(["1"]), ra=column([10.0], "deg"), dec=column([-60.0], "deg"), xrt_exposure=column([1.5], "arcsec"),
        start_time=column([1.0]),
    )  # fmt: skip
    with pytest.raises(MisreadError, match=r"'xrt_exposure' came in 'arcsec', which cannot be read as s"):
        pointings_of(catalog, log)


def test_rows_of_a_box_are_cut_to_the_cone() -> None:
    catalog = REGISTRY["sumss"]
    rows = served("sumss")
    question = replace(catalog.question(catalog.tables[0], 10.0, -60.0, 60.0), geometry="box")
    assert within(rows, question).key == ("10.00000-60.00000",)
    assert within(rows, replace(question, radius_arcsec=3600.0)) is rows
