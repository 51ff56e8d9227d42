"""Reading positions and quantities: what is understood, what is refused, and why."""

from __future__ import annotations

import numpy as np
import pytest
from astropy.coordinates import SkyCoord
from hypothesis import given
from hypothesis import strategies as st

from xmatch.errors import InputError, PositionError, TargetError
from xmatch.position import (
    format_position,
    parse_distance,
    parse_error,
    parse_period,
    parse_position,
    parse_pulse,
    sigma_per_axis,
)


@pytest.mark.parametrize(
    ("text", "unit"),
    [
        ("12:34:56.7 -45:06:07.8", ("hourangle", "deg")),
        ("12h34m56.7s -45d06m07.8s", ("hourangle", "deg")),
        ("00:00:00.01 +00:00:00.1", ("hourangle", "deg")),
        ("23:59:59.99 -00:12:13", ("hourangle", "deg")),
        ("188.73625 -45.10217", ("deg", "deg")),
        ("188 -45 deg", ("deg", "deg")),
        ("188d -45d", ("deg", "deg")),
        ("0.0 90.0", ("deg", "deg")),
        ("12:34:56,-45:06:07", ("hourangle", "deg")),
    ],
)
def test_the_forms_we_read_agree_with_astropy(text: str, unit: tuple[str, str]) -> None:
    words = text.replace(",", " ").replace("deg", "").replace("188d", "188").replace("-45d ", "-45").split()
    expected = SkyCoord(words[0], words[1].rstrip("d") if unit[0] == "deg" else words[1], unit=unit)
    ra, dec = parse_position(text)
    assert ra == pytest.approx(expected.ra.deg, abs=1e-10)
    assert dec == pytest.approx(expected.dec.deg, abs=1e-10)


def test_a_negative_zero_keeps_its_sign() -> None:
    assert parse_position("12:34:56 -00:12:13")[1] == pytest.approx(-(12 / 60 + 13 / 3600))
    assert parse_position("12:34:56 −00:12:13")[1] < 0.0  # a typographic minus


@pytest.mark.parametrize("text", ["12 34", "188 -45", "12 34 56 -45 06 07", "12 34 56.7 +45 06 07"])
def test_a_bare_form_is_refused_and_echoed_in_both_readings(text: str) -> None:
    with pytest.raises(PositionError) as caught:
        parse_position(text)
    assert "in hours gives" in str(caught.value) and "in degrees gives" in str(caught.value)


@pytest.mark.parametrize(
    "text",
    [
        "", "12:34:56", "360.0 1.0", "400.0 1.0", "-1.0 1.0", "10.0 90.1", "10.0 -91.0", "nan 1.0 deg", "inf 1.0 deg",
        "24:00:00 1:00:00", "12:60:00 1:00:00", "12:34:60 1:00:00", "12:34:56 1:60:00", "12:34:56 91:00:00",
        "-12:34:56 1:00:00", "12:34:56 45.5", "12:34:56 -45:06:07 deg", "M31", "12h34m 45d", "1e400 1.0 deg",
    ],
)  # fmt: skip
def test_what_is_out_of_range_or_not_ours_is_refused(text: str) -> None:
    with pytest.raises(PositionError):
        parse_position(text)


@given(st.floats(0.0, 359.9999999), st.floats(-90.0, 90.0))
def test_both_notations_say_the_same_and_never_print_sixty(ra: float, dec: float) -> None:
    text = format_position(ra, dec)
    sexagesimal, degrees = text.removesuffix(" (ICRS)").split(" = ")
    assert ":60" not in sexagesimal
    back, again = parse_position(sexagesimal), parse_position(degrees)
    assert SkyCoord(*back, unit="deg").separation(SkyCoord(ra, dec, unit="deg")).arcsec < 0.02
    assert SkyCoord(*again, unit="deg").separation(SkyCoord(ra, dec, unit="deg")).arcsec < 0.005


@pytest.mark.parametrize(
    ("text", "low", "high"),
    [
        ("1.6..4.1 kpc", 1600.0, 4100.0),
        ("1600..4100 pc", 1600.0, 4100.0),
        ("5.0 +- 1.0 kpc", 4000.0, 6000.0),
        ("5.0±1.0 kpc", 4000.0, 6000.0),
        ("18000..18000 ly", 5518.8, 5518.8),
        ("1..2 Mpc", 1.0e6, 2.0e6),
        ("2..3 kly", 613.2, 919.8),
    ],
)
def test_distances(text: str, low: float, high: float) -> None:
    assert parse_distance(text) == pytest.approx((low, high), rel=1e-5)


@pytest.mark.parametrize(
    "text", ["4.1..1.6 kpc", "4", "4 kpc", "1..2", "-1..2 kpc", "0..2 kpc", "1+-2 kpc", "nan..2 kpc", "1..2 miles"]
)
def test_distances_that_are_refused(text: str) -> None:
    with pytest.raises(TargetError):
        parse_distance(text)


def test_periods_and_pulses() -> None:
    assert parse_period("2711.4 s") == 2711.4
    assert parse_period("45.2 min") == pytest.approx(2712.0)
    assert parse_pulse("2.1 Jy @ 200 MHz for 35 s") == pytest.approx((2.0e8, 2.1, 35.0))
    assert parse_pulse("12 mJy @ 1.4 GHz for 0.5 min") == pytest.approx((1.4e9, 0.012, 30.0))


def test_capitals_of_a_unit_count() -> None:
    assert parse_pulse("2 µJy @ 800 kHz for 35 s") == pytest.approx((8.0e5, 2.0e-6, 35.0))  # micro sign
    assert parse_pulse("2 μJy @ 800 kHz for 35 s") == pytest.approx((8.0e5, 2.0e-6, 35.0))  # Greek mu
    for text in ("2 MJy @ 200 MHz for 35 s", "2 Jy @ 200 mHz for 35 s"):
        with pytest.raises(TargetError, match="capitals count"):
            parse_pulse(text)
    with pytest.raises(TargetError, match="capitals count"):
        parse_distance("1..2 mpc")


def test_a_rounded_zero_declination_has_the_same_sign_in_both_notations() -> None:
    assert format_position(10.0, -1e-9) == "00:40:00.000 +00:00:00.00 = 10.000000 +0.000000 deg (ICRS)"


@pytest.mark.parametrize("text", ["2711.4", "-5 s", "0 s", "nan s", "5 parsec", ""])
def test_periods_that_are_refused(text: str) -> None:
    with pytest.raises(TargetError):
        parse_period(text)


@pytest.mark.parametrize(
    "text", ["2.1 Jy", "2.1 Jy @ 200 for 35 s", "-1 Jy @ 200 MHz for 35 s", "1 Jy @ 0 MHz for 35 s"]
)
def test_pulses_that_are_refused(text: str) -> None:
    with pytest.raises(TargetError):
        parse_pulse(text)


# radius of a two-dimensional Gaussian, Rayleigh distribution
@pytest.mark.parametrize(
    ("level", "factor"), [("1 sigma", 1.0), ("2 sigma", 2.0), ("68%", 1.50959), ("90%", 2.14597), ("95 %", 2.44775)]
)
def test_what_an_error_holds(level: str, factor: float) -> None:
    assert sigma_per_axis(3.0, level) == pytest.approx(3.0 / factor, rel=1e-5)


def test_ellipses_and_what_is_refused() -> None:
    assert parse_error("1.8", "1 sigma") == (1.8, 1.8, 0.0)
    assert parse_error("1.8,1.2,200", "1 sigma") == (1.8, 1.2, 20.0)
    for text, level in (("1.2,1.8,0", "1 sigma"), ("-1", "1 sigma"), ("nan", "1 sigma"), ("1,2", "1 sigma"),
                        ("1", "120%"), ("1", "0%"), ("1", "high"), ("1", "-1 sigma"), ("x", "1 sigma"),
                        ("1", "1e400 sigma"), ("1_8", "1 sigma"), ("inf", "1 sigma"), ("1,1,nan", "1 sigma")):  # fmt: skip
        with pytest.raises(InputError):
            parse_error(text, level)
    assert np.isfinite(sigma_per_axis(1.0, "99.9%"))
