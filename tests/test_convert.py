"""One flux in every other term, by function and by command."""

from __future__ import annotations

import json
import math
from dataclasses import replace
from pathlib import Path

import pytest
from click.testing import CliRunner

from xmatch.cli import group
from xmatch.convert import Ask, Converted, convert, luminosities
from xmatch.errors import RangeError
from xmatch.flux.spectra import Blackbody
from xmatch.records import Distance, Position, Pulse, Spin, Target

XRAY = Ask("1e-14 erg s-1 cm-2", band="0.5..2 keV", column_cm2=4e21, distance=Distance(1000.0, 4000.0))
RADIO = Ask("2 mJy", at="150 MHz", distance=Distance(1000.0, 4000.0))


def at_median(answer: Converted, name: str) -> float:
    value = answer.values[name]
    assert isinstance(value, list)
    return value[1]


@pytest.mark.parametrize("flux", ["1e-14 erg s-1 cm-2", "1e-17 W m-2", "1e-14 erg/s/cm2", "6.2415e-6 keV s-1 cm-2"])
@pytest.mark.parametrize("band", ["0.5..2 keV", "500..2000 eV", "0.5-2 keV"])
def test_units_change_nothing(flux: str, band: str) -> None:
    found = convert(replace(XRAY, flux=flux, band=band)).values
    assert found == {name: pytest.approx(value, rel=1e-4) for name, value in convert(XRAY).values.items()}


@pytest.mark.parametrize("at", ["150 MHz", "0.15 GHz", "1.998616 m"])
def test_frequency_and_wavelength_are_the_same_place(at: str) -> None:
    found = convert(replace(RADIO, at=at)).values
    assert found["density_corrected_jy"] == pytest.approx(2e-3)
    assert found["frequency_hz"] == pytest.approx(1.5e8, rel=1e-6)


@pytest.mark.parametrize(
    ("ask", "says"),
    [
        (replace(XRAY, flux="1 Jy"), "not convertible"),
        (replace(RADIO, flux="1 erg s-1 cm-2"), "not convertible"),
        (replace(RADIO, flux="2"), "not convertible"),
        (replace(RADIO, flux="nan Jy"), "finite"),
        (replace(RADIO, flux="two Jy"), "not allowed"),
        (replace(RADIO, at="150 s"), "not convertible"),
        (replace(XRAY, band="0.5..2"), "range"),
        (replace(XRAY, band="0.5..2 furlong"), "not allowed"),
        (replace(XRAY, band="2..2 keV"), "low < high"),
        (replace(XRAY, band=None), "--band"),
        (replace(XRAY, at="1 keV"), "both"),
        (replace(XRAY, column_cm2=-1.0), "0 or more"),
        (replace(RADIO, flux="20 mag", system="Vega"), "zero point"),
        (replace(RADIO, flux="20 mag", zero_point_jy=3631.0), "Vega"),
        (replace(RADIO, duty_cycle=2.0), "duty"),
        (replace(XRAY, beam_fraction=0.0), "beam"),
    ],
)
def test_a_wrong_dimension_or_number_is_refused(ask: Ask, says: str) -> None:
    with pytest.raises(RangeError, match=says):
        convert(ask)


def test_a_blind_band_gets_no_corrected_flux() -> None:
    found = convert(replace(XRAY, spectrum=Blackbody(0.05), column_cm2=3e22))
    assert not [name for name in found.values if "corrected" in name or "luminosity" in name]
    assert "blind" in found.remarks[0]
    assert "blind" in convert(Ask("20 mag", at="0.55 um", av_mag=30.0)).remarks[-1]
    assert "no table" in convert(replace(XRAY, band="0.01..0.05 keV")).remarks[0]


def test_there_and_back_between_two_bands() -> None:
    there = convert(replace(XRAY, to_band="2..10 keV"))
    back = convert(
        replace(
            XRAY, flux=f"{there.values['second_band_observed_cgs']} erg s-1 cm-2", band="2..10 keV", to_band=XRAY.band
        )
    )
    assert back.values["second_band_observed_cgs"] == pytest.approx(1e-14, rel=1e-9)


def test_magnitudes_go_round() -> None:
    asked = Ask("20 mag", at="0.55 um", system="ST")
    found = convert(asked).values
    assert found["magnitude_st"] == pytest.approx(20.0, abs=1e-9)
    again = convert(replace(asked, flux=f"{found['magnitude_ab']} mag", system="AB")).values
    assert again["density_observed_jy"] == pytest.approx(found["density_observed_jy"], rel=1e-9)


def test_no_luminosity_goes_by_the_name_of_another() -> None:
    found = convert(replace(RADIO, integrate="10..10000 MHz", beam_fraction=0.1, duty_cycle=0.02))
    names = [name for name in found.values if name.startswith("luminosity_")]
    numbers = {round(math.log10(at_median(found, name)), 6) for name in names}
    assert len(names) == len(numbers) == 10
    for name in names:
        if "_peak_" in name:
            average = at_median(found, name.replace("_peak_", "_average_"))
            assert average == pytest.approx(0.02 * at_median(found, name), rel=1e-12)


def test_every_assumption_is_said() -> None:
    told = " ".join(convert(replace(XRAY, column_cm2=None, dm_pc_cm3=148.0)).assumptions)
    for word in ("DM 148", "He, Ng & Kaspi 2013", "Wilms", "photon index 2", "log-uniform", "beam", "no redshift"):
        assert word in told
    assert "taken as zero" in " ".join(convert(RADIO).assumptions)


TARGET = Target(
    "t", Position(264.5, -33.8, 1.0, 1.0), distance=Distance(1600.0, 4100.0), dm_pc_cm3=148.0,
    spin=Spin(2711.4), pulses=(Pulse(2e8, 2.1, 35.0),),
)  # fmt: skip


def test_a_target_gives_its_pulses_and_the_function_of_distance() -> None:
    found = luminosities(TARGET, Ask(""))
    (pulse,) = found.values()
    curve, dist = pulse.values["over_distance_luminosity_peak_pseudo_mjy_kpc2"], pulse.values["over_distance_pc"]
    assert isinstance(curve, list) and isinstance(dist, list)
    assert curve == pytest.approx([2100.0 * (d / 1e3) ** 2 for d in dist], rel=1e-9)
    assert (dist[0], dist[-1]) == pytest.approx((1600.0, 4100.0))


def test_a_total_column_caps_the_one_of_the_dispersion_measure() -> None:
    asked = replace(XRAY, distance=None, column_cm2=None)
    free = luminosities(TARGET, asked)[XRAY.flux]
    capped = luminosities(replace(TARGET, column_total_cm2=1e21), asked)[XRAY.flux]
    assert at_median(capped, "luminosity_band_isotropic_erg_s") < at_median(free, "luminosity_band_isotropic_erg_s")
    assert any("total column" in line for line in capped.assumptions)
    assert any("lower and higher" in line for line in free.assumptions)


def test_without_a_distance_or_a_flux_there_is_nothing_to_say() -> None:
    with pytest.raises(RangeError, match="distance"):
        luminosities(replace(TARGET, distance=None), Ask(""))
    with pytest.raises(RangeError, match="--flux"):
        luminosities(replace(TARGET, pulses=()), Ask(""))


def told(*args: str) -> str:
    done = CliRunner().invoke(group, list(args), catch_exceptions=False)
    assert done.exit_code == 0, done.output
    return done.output


def test_the_commands_print_what_the_functions_say() -> None:
    call = ["convert", "1e-14 erg s-1 cm-2", "--band", "0.5..2 keV", "--column", "4e21", "--distance", "1..4 kpc"]
    answer = json.loads(told(*call, "--json"))["1e-14 erg s-1 cm-2"]
    assert answer["values"] == convert(XRAY).values
    text = told(*call)
    for word in ("luminosity_band_isotropic_erg_s", "assumed:", "Wilms"):
        assert word in text
    far = json.loads(
        told("convert", "1e-14 erg s-1 cm-2", "--band", "2..10 keV", "--redshift", "1", "--blackbody", "2", "--json")
    )
    assert "K-corrected" in json.dumps(far)
    assert "null" in told("convert", "1e-14 erg s-1 cm-2", "--band", "0.01..0.05 keV", "--json")


def test_the_luminosity_command_reads_a_target_file(tmp_path: Path) -> None:
    path = tmp_path / "mine.toml"
    path.write_text(told("target"), encoding="utf-8")
    text = told("luminosity", str(path), "--flux", "1e-14 erg s-1 cm-2", "--band", "0.5..2 keV")
    assert "pulse of 2.1 Jy at 200 MHz" in text
    assert "over_distance" not in text
    assert "over_distance_pc" in told("luminosity", str(path), "--json")


@pytest.mark.parametrize(
    "args",
    [
        ("convert", "1 Jy", "--band", "0.5..2 keV"),
        ("convert", "1 Jy", "--at", "1 GHz", "--distance", "1..2 kpc", "--redshift", "1"),
        ("convert", "1e-14 erg s-1 cm-2", "--band", "0.5..2 keV", "--photon-index", "2", "--blackbody", "1"),
        ("luminosity", "nowhere.toml"),
    ],
)
def test_bad_input_ends_with_exit_code_2(args: tuple[str, ...]) -> None:
    from xmatch.cli import main

    with pytest.raises(SystemExit) as stop:
        main(args)
    assert stop.value.code == 2


def test_a_tabulated_spectrum_comes_from_a_file(tmp_path: Path) -> None:
    path = tmp_path / "law.txt"
    path.write_text(
        "# keV, E N(E)\n" + "".join(f"{e} {e**-0.7!r}\n" for e in (0.1, 0.3, 1.0, 3.0, 15.0)), encoding="utf-8"
    )
    call = [
        "convert",
        "1e-14 erg s-1 cm-2",
        "--band",
        "0.5..2 keV",
        "--to-band",
        "2..10 keV",
        "--column",
        "4e21",
        "--json",
    ]
    (table,) = json.loads(told(*call, "--spectrum-file", str(path))).values()
    (law,) = json.loads(told(*call, "--photon-index", "1.7")).values()
    assert table["values"] == pytest.approx(law["values"], rel=1e-6)
    assert "tabulated at 5 energies" in " ".join(table["assumptions"])
    path.write_text("1.0 2.0 3.0\n", encoding="utf-8")
    with pytest.raises(RangeError, match="line 1"):
        told(*call, "--spectrum-file", str(path))
    with pytest.raises(RangeError, match="cannot be read"):
        told(*call, "--spectrum-file", str(tmp_path / "nowhere.txt"))
