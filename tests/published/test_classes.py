"""Class files and standings against published numbers and closed formulas."""

from __future__ import annotations

from pathlib import Path
from typing import Any

import numpy as np
import pytest
from checking import rows

from xmatch.assumptions import Assumptions
from xmatch.classes.engine import standings
from xmatch.classes.loader import load_classes, read_class
from xmatch.classes.model import ClassFile, Prediction
from xmatch.constants import C_CM_S, KEV_HZ
from xmatch.flux.physical import physical_limit
from xmatch.records import (
    Band,
    Distance,
    Limit,
    LimitKind,
    LimitMethod,
    MagnitudeSystem,
    PhysicalLimit,
    Position,
    Pulse,
    Quantity,
    Spin,
    Standing,
    StandingWord,
    Target,
    Waveband,
)
from xmatch.spin.figures import figures

ROWS = rows("classes")
CLEAR = Assumptions(column_cm2=0.0, av_mag=0.0)
FRACTION = 0.965382
"""Part of a blackbody of 0.3 keV in 0.3-10 keV, computed with scipy 1.17.1."""


def prediction(class_id: str, test: str) -> Prediction:
    item = next(item for item in load_classes() if item.id == class_id)
    return next(one for one in item.predictions if one.test == test)


def target(distance: Distance, **more: Any) -> Target:
    return Target("check", Position(100.0, 10.0, 1.0, 1.0), distance=distance, **more)


def step(band: Band, value: float, own: Target) -> PhysicalLimit:
    """A limit whose completeness is a step, so that closed formulas hold."""
    limit = Limit(band, value, LimitKind.COMPLETENESS, 0.5, 1.0e6, LimitMethod.NOMINAL, "check value")
    return physical_limit(limit, own, CLEAR)


def j_band(system: MagnitudeSystem, zero_jy: float) -> Band:
    low, high = C_CM_S / 1.316e-4, C_CM_S / 1.154e-4
    return Band(
        "deep-j", "J", Waveband.NEAR_INFRARED, Quantity.MAGNITUDE, "mag", low, high, C_CM_S / 1.235e-4, system, zero_jy
    )


def stand(
    own: Target, limits: tuple[PhysicalLimit, ...], classes: tuple[ClassFile, ...], assumptions: Assumptions = CLEAR
) -> Standing:
    spin = figures(own.spin) if own.spin is not None else None
    return standings(own, limits, (), spin, assumptions, classes)[0]


def written(folder: Path, text: str) -> ClassFile:
    path = folder / "check.toml"
    path.write_text(f'id = "check"\ntitle = "check"\nsummary = "check"\n[[predictions]]\n{text}', encoding="utf-8")
    return read_class(path)


def log_normal_survival(folder: Path, mean: float, scatter: float, limit_cgs: float, dist_pc: float) -> float:
    words = 'flux_kind = "steady", solid_angle = "4 pi", source = "check"'
    item = written(
        folder,
        f"""test = "x-ray luminosity"
spectrum = "blackbody"
luminosity_of = "bolometric"
luminosity = {{ value = {mean}, unit = "log10 erg/s", {words} }}
scatter = {{ value = {scatter}, unit = "dex", source = "check" }}
temperature = {{ low = 0.3, high = 0.3000001, unit = "keV", source = "check" }}
""",
    )
    band = Band(
        "deep-x", "0.3-10 keV", Waveband.SOFT_XRAY, Quantity.BAND_FLUX, "erg s-1 cm-2",
        0.3 * KEV_HZ, 10.0 * KEV_HZ, 1.7 * KEV_HZ,
    )  # fmt: skip
    own = target(Distance(dist_pc * (1 - 1e-9), dist_pc))
    survival = stand(own, (step(band, limit_cgs * FRACTION, own),), (item,)).survival
    assert survival is not None
    return survival


def survival_beyond(folder: Path, prior: str, low_pc: float, high_pc: float, beyond_pc: float) -> float:
    item = written(
        folder,
        """test = "companion magnitudes"
scatter = { value = 0.0, unit = "mag", source = "check" }
[predictions.magnitudes]
unit = "mag at 10 pc"
flux_kind = "steady"
solid_angle = "4 pi"
source = "check"
[predictions.magnitudes.bands.J]
wavelength_um = 1.235
width_um = 0.162
zero_point_jy = 1594.0
system = "Vega"
source = "check"
[predictions.magnitudes.types]
only = { J = 10.0 }
""",
    )
    own = target(Distance(low_pc, high_pc))
    mag = 10.0 + 5.0 * np.log10(beyond_pc / 10.0)
    limit = step(j_band(MagnitudeSystem.VEGA, 1594.0), float(mag), own)
    survival = stand(own, (limit,), (item,), CLEAR.but(distance_prior=prior)).survival
    assert survival is not None
    return survival


def value(folder: Path, quantity: str, inputs: dict[str, Any]) -> float:
    if quantity == "absolute magnitude":
        table = prediction("main-sequence-companion", "companion magnitudes").magnitudes
        assert table is not None
        return table.types[inputs["type"]][inputs["band"]]
    if quantity == "log X-ray luminosity from spin-down":
        facts = prediction("rotation-powered-pulsar", "x-ray luminosity from spin-down").facts
        return float(facts["intercept"].value + facts["slope"].value * np.log10(inputs["power_erg_s"]))
    if quantity.startswith("magnetar"):
        facts = prediction("magnetar-quiescent", "x-ray luminosity").facts
        return facts["scatter" if "scatter" in quantity else "luminosity"].value
    if quantity == "survival of a log-normal luminosity":
        return log_normal_survival(folder, **inputs)
    if quantity == "survival beyond a distance":
        return survival_beyond(folder, **inputs)
    raise AssertionError(quantity)


@pytest.mark.parametrize("row", ROWS, ids=[str(row["id"]) for row in ROWS])
def test_published_value(row: dict[str, Any], tmp_path: Path) -> None:
    found = value(tmp_path, row["quantity"], row["inputs"])
    assert found == pytest.approx(row["expected"], abs=row["tolerance"]), row["source"]


# arXiv:2507.05078: an AB limit of 24.7 at the 841 s source excludes every main-sequence star and ultracool dwarf
# earlier than M7; with M_J(M7) = 10.70 (2013ApJS..208....9P, on-line table) and AB - Vega = 0.8938
# (2003AJ....126.1090C) that statement reaches to 4180 pc
@pytest.mark.parametrize(("dist_pc", "earliest"), [(4150.0, "M8V"), (4210.0, "M7V")])
def test_a_deep_infrared_limit_leaves_m7_and_later(tmp_path: Path, dist_pc: float, earliest: str) -> None:
    own = target(Distance(dist_pc * (1 - 1e-9), dist_pc))
    limit = step(j_band(MagnitudeSystem.AB, 3630.7805), 24.7, own)
    shipped = next(item for item in load_classes() if item.id == "main-sequence-companion")
    text = Path(shipped.path).read_text(encoding="utf-8").replace("value = 0.5", "value = 0.001")
    path = tmp_path / "narrow.toml"
    path.write_text(text, encoding="utf-8")
    sentence = stand(own, (limit,), (read_class(path),)).tests[0].sentence
    assert sentence.startswith(f"earliest type still allowed {earliest}, latest T8V")
    assert "deep-j J > 23.81 mag (Vega" in sentence


# LPT-1318, 2023Natur.619..487H: P = 1318.1957 s, derivative < 3.6e-13, 5.3-5.7 kpc; pulses of 30 s and more, 0.35 Jy at
# 0.9 GHz (L_nu 1e22 erg/s/Hz with 4 pi): the paper's conclusion is that spin-down falls short of the radio power
def test_rotation_of_a_neutron_star_cannot_power_lpt_1318() -> None:
    own = target(
        Distance(5300.0, 5700.0),
        spin=Spin(1318.1957, derivative_limit=3.6e-13),
        pulses=(Pulse(9.0e8, 0.35, 30.0),),
    )
    pulsar = tuple(item for item in load_classes() if item.id == "rotation-powered-pulsar")
    standing = stand(own, (), pulsar)
    assert standing.word is StandingWord.RULED_OUT
    assert "spin-down power < 6.2e+24 erg/s" in standing.tests[0].sentence


# 2022NatAs...6..828C: the 76 s pulsar, Edot = 2.0e28 erg/s, within 0.5 kpc, is radio-loud and spins down: it must stay
# open. Mean flux 0.4 mJy over 75.9 s; as a pulse of 0.3 s (from memory) its peak is 0.1 Jy at 1.3 GHz
def test_the_76_second_pulsar_stays_a_pulsar() -> None:
    own = target(Distance(300.0, 500.0), spin=Spin(75.885547, derivative=2.25e-13), pulses=(Pulse(1.3e9, 0.1, 0.3),))
    pulsar = tuple(item for item in load_classes() if item.id == "rotation-powered-pulsar")
    standing = stand(own, (), pulsar)
    assert standing.word is StandingWord.OPEN
    assert standing.survival == pytest.approx(1.0)


# LPT-7532, 2025NatAs...9..672D: the period is that of an orbit, so rotation says nothing
def test_an_orbital_period_says_nothing_of_rotation() -> None:
    own = target(
        Distance(400.0, 600.0),
        spin=Spin(7531.78, derivative_limit=1.71e-11, may_be_orbital=True),
        pulses=(Pulse(1.5e8, 0.1, 60.0),),
    )
    pulsar = tuple(item for item in load_classes() if item.id == "rotation-powered-pulsar")
    assert stand(own, (), pulsar).word is StandingWord.UNTESTED
