"""Target files: round trips, and faults that name file, key and what is allowed."""

from __future__ import annotations

from pathlib import Path
from tempfile import TemporaryDirectory

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from xmatch.demo.scene import demo_target
from xmatch.errors import InputError, TargetError
from xmatch.records import Distance, Position, Pulse, Spin, Target
from xmatch.target import build_target, read_target, template, write_target

LEAST = "[position]\nra_deg = 10.5\ndec_deg = -20.25\nerror_arcsec = 2.0\n"


def written(folder: Path, text: str) -> Path:
    path = folder / "mine.toml"
    path.write_text(text, encoding="utf-8")
    return path


def test_the_least_a_file_can_say(tmp_path: Path) -> None:
    target = read_target(written(tmp_path, LEAST))
    assert target.name == "mine"
    assert target.position.sigma_major_arcsec == target.position.sigma_minor_arcsec == 2.0
    assert target.distance is None and target.spin is None and target.pulses == ()


def test_the_template_loads_and_says_what_it_shows(tmp_path: Path) -> None:
    target = read_target(written(tmp_path, template()))
    assert target.distance == Distance(1600.0, 4100.0, target.distance.origin if target.distance else "")
    assert target.spin is not None and target.spin.derivative_limit == pytest.approx(2.3766e-12, rel=1e-4)


@pytest.mark.parametrize(
    "target",
    [
        demo_target(),
        Target("bare", Position(359.9999999, -0.0000001, 3.0, 0.1, 179.9)),
        Target(
            'na"me\\ ☄ [red]', Position(0.1, 89.9, 1.0, 1.0, 0.0, 2000.5), Distance(1.0, 2.0e6, "a\nb"), 12.5, 1e21, "x", 0.2, "y",
            Spin(1318.2, 1e-14, None, "z", True), (Pulse(1.5e8, 0.1, 30.0), Pulse(1.4e9, 0.01, 20.0)), "note",
        ),
    ],
    ids=["demo", "bare", "everything"],
)  # fmt: skip
def test_round_trip(tmp_path: Path, target: Target) -> None:
    from dataclasses import replace

    back = read_target(written(tmp_path, write_target(target)))
    same = replace(back, position=replace(back.position, stated=target.position.stated))
    assert same == target


@pytest.mark.parametrize(
    ("text", "says"),
    [
        ("", "[position] is missing"),
        (LEAST + "[distence]\nlow = 1", "did you mean distance?"),
        (LEAST.replace("error_arcsec", "eror_arcsec"), "did you mean error_arcsec?"),
        (LEAST.replace("error_arcsec = 2.0", ""), "without an error means nothing"),
        (LEAST.replace("2.0", "-2.0"), "must be above 0"),
        (LEAST.replace("10.5", "370.5"), "out of range"),
        (LEAST.replace("10.5", "nan"), "finite"),
        (LEAST.replace("10.5", "'x'"), "finite number"),
        (LEAST + "error_major_arcsec = 1.0\nerror_minor_arcsec = 1.0", "give one of them"),
        (LEAST + "ra = '10:00:00'", "either"),
        (LEAST + "epoch = 20265", "Julian year"),
        (LEAST + "[distance]\nlow = '2 kpc'\nhigh = '1 kpc'", "low <= high"),
        (LEAST + "[distance]\nlow = 2\nhigh = 3", "quotes"),
        (LEAST + "[distance]\nlow = '2 kpc'", "needs low and high"),
        (LEAST + "[dispersion]\ndm_pc_cm3 = -1", "0 or more"),
        (LEAST + "[absorption]\ncolumn_cm2 = -1e20", "0 or more"),
        (LEAST + "[spin]\nderivative = 1e-13", "period_s is missing"),
        (LEAST + "[spin]\nperiod_s = 0", "above 0"),
        (LEAST + "[spin]\nperiod_s = 10\nperiod_change_ms = 1", "give both"),
        (LEAST + "[spin]\nperiod_s = 10\nmay_be_orbital = 'yes'", "true or false"),
        (LEAST + "[[pulses]]\npeak_jy = 1.0\nwidth_s = 1.0", "pulses.frequency_mhz"),
        (LEAST + "[[pulses]]\nfrequency_mhz = 100\npeak_jy = true\nwidth_s = 1.0", "finite number"),
        (LEAST + "[pulses]\nfrequency_mhz = 100\npeak_jy = 1.0\nwidth_s = 1.0", "[[pulses]]"),
        (LEAST + "[dispersion]\ndm_pc_cm3 = 1" + "0" * 400, "finite number"),
        ("[position\n", "not readable as TOML"),
    ],
)
def test_a_fault_names_the_file_and_what_is_allowed(tmp_path: Path, text: str, says: str) -> None:
    path = written(tmp_path, text)
    with pytest.raises(InputError) as caught:
        read_target(path)
    assert str(path) in str(caught.value)
    assert says in str(caught.value)


def test_names_and_numbers_that_toml_cannot_take_as_they_are(tmp_path: Path) -> None:
    target = Target("a\x7fb\x1b", Position(np.float64(10.5), np.float64(-20.25), np.float64(2.0), 1.0))
    back = read_target(written(tmp_path, write_target(target)))
    assert back.name == target.name
    assert (back.position.ra_deg, back.position.dec_deg, back.position.sigma_major_arcsec) == (10.5, -20.25, 2.0)


@given(st.floats(1.0e7, 1.0e11), st.floats(1.0e-4, 1.0e3), st.floats(1.0e-3, 1.0e4))
def test_pulses_come_back(nu_hz: float, peak_jy: float, width_s: float) -> None:
    target = Target("a", Position(1.0, 2.0, 3.0, 1.0), pulses=(Pulse(nu_hz, peak_jy, width_s),))
    with TemporaryDirectory() as folder:
        back = read_target(written(Path(folder), write_target(target))).pulses[0]
    assert (back.peak_jy, back.width_s) == (peak_jy, width_s)
    assert back.nu_hz == pytest.approx(nu_hz, rel=4e-16)  # the file holds MHz: two roundings


def test_a_missing_file_is_said(tmp_path: Path) -> None:
    with pytest.raises(TargetError, match="cannot be read"):
        read_target(tmp_path / "none.toml")


def test_a_target_from_the_command_line() -> None:
    target = build_target(
        "17:38:01.50 -33:48:57.0", error="3.0", error_level="90%", distance="1..2 kpc", dm=100.0, period="1318.2 s",
        derivative_limit=3.6e-13, pulses=["0.3 Jy @ 154 MHz for 60 s"],
    )  # fmt: skip
    assert target.position.sigma_major_arcsec == pytest.approx(3.0 / 2.145966, rel=1e-6)
    assert target.name.startswith("17:38:01.500")
    assert target.spin is not None and target.spin.derivative_limit == 3.6e-13
    assert target.pulses[0].nu_hz == 1.54e8


def test_a_default_error_is_said_to_be_ours() -> None:
    assert "our default" in build_target("17:38:01.50 -33:48:57.0").position.stated


def test_a_derivative_without_a_period_is_refused() -> None:
    with pytest.raises(TargetError, match="without a period"):
        build_target("17:38:01.50 -33:48:57.0", derivative=1e-13)
