"""Companions: which bands are the same, which types are excluded, and how distance and dust count."""

from __future__ import annotations

from typing import Any

import numpy as np
import pytest

from xmatch.assumptions import Assumptions
from xmatch.catalogs import load_catalogs
from xmatch.classes.companion_tests import companion_magnitudes, extinction_of_draws, match_band
from xmatch.classes.draws import Variant
from xmatch.classes.loader import load_classes
from xmatch.classes.model import MagnitudeTable, Prediction
from xmatch.flux.extinction import band_extinction_mag
from xmatch.records import Candidate, Distance, Finding, MagnitudeSystem, Measured, Outcome, Waveband

NO_DUST = Assumptions(draws=30_000, column_cm2=0.0, av_mag=0.0)


def prediction() -> Prediction:
    companion = next(item for item in load_classes() if item.id == "main-sequence-companion")
    return companion.predictions[0]


def table() -> MagnitudeTable:
    found = prediction().magnitudes
    assert found is not None
    return found


def test_only_the_bands_that_are_the_same_are_compared() -> None:
    matched = {
        band.label: known.name
        for catalog in load_catalogs().values()
        for band in catalog.band_list
        if (known := match_band(table(), band)) is not None
    }
    # J and K of other cameras differ from those of 2MASS by less than 0.1 mag (2001AJ....121.2851C)
    assert matched == {
        "gaia-dr3 G": "G", "2mass-psc J": "J", "2mass-psc Ks": "Ks",
        "ukidss-gps J": "J", "ukidss-gps K": "Ks", "vvv-virac2 J": "J", "vvv-virac2 Ks": "Ks",
    }  # fmt: skip


def test_x_ray_and_radio_bands_match_nothing(make: Any) -> None:
    assert match_band(table(), make.xray_band()) is None


def test_a_deeper_limit_pushes_the_earliest_type_later(make: Any) -> None:
    target = make.target(dm_pc_cm3=None)
    earliest, means = [], []
    for mag in (16.0, 17.5, 19.0, 20.5, 22.0, 24.0):
        limit = make.limit(make.light_band(), mag, target, assumptions=NO_DUST)
        evidence = make.evidence(target, (limit,), assumptions=NO_DUST)
        found = companion_magnitudes(prediction(), evidence, make.draws(evidence))
        assert found.weights is not None
        means.append(found.weights.mean())
        name = found.sentence.removeprefix("earliest type still allowed ").split(",")[0]
        earliest.append(list(table().types).index(name))
    assert earliest == sorted(earliest)
    assert earliest[-1] > earliest[0] + 10
    assert means == sorted(means, reverse=True)


def test_all_or_nothing_is_said_so(make: Any) -> None:
    target = make.target(dm_pc_cm3=None)
    for mag, words in ((5.0, "no type from A0V to T8V is excluded"), (40.0, "every type from A0V to T8V would")):
        limit = make.limit(make.light_band(), mag, target, assumptions=NO_DUST)
        evidence = make.evidence(target, (limit,), assumptions=NO_DUST)
        assert companion_magnitudes(prediction(), evidence, make.draws(evidence)).sentence.startswith(words)


def test_every_type_weighs_the_same(make: Any) -> None:
    # one distance, no dust, no scatter, a step in completeness: the survivors are the types fainter than the limit
    text = """
id = "a"
title = "a"
summary = "a"
[[predictions]]
test = "companion magnitudes"
scatter = { value = 0.0, unit = "mag", source = "invented" }
[predictions.magnitudes]
unit = "mag at 10 pc"
flux_kind = "steady"
solid_angle = "4 pi"
source = "invented"
[predictions.magnitudes.bands.J]
wavelength_um = 1.235
width_um = 0.162
zero_point_jy = 1594.0
system = "Vega"
source = "invented"
[predictions.magnitudes.types]
bright = { J = 4.0 }
middle = { J = 7.0 }
faint = { J = 9.0 }
"""
    target = make.target(distance=Distance(999.999, 1000.0), dm_pc_cm3=None)
    # absolute 8 at 1 kpc is apparent 18 (definition)
    limit = make.sharp(make.light_band(), 18.0, target)
    evidence = make.evidence(target, (limit,), assumptions=NO_DUST)
    found = companion_magnitudes(make.class_file(text).predictions[0], evidence, make.draws(evidence))
    assert found.weights is not None
    assert found.weights.mean() == pytest.approx(1 / 3)
    assert "earliest type still allowed faint, latest faint" in found.sentence


def test_dust_lets_more_survive_and_most_in_the_bluest_band(make: Any) -> None:
    target = make.target()
    limits = {
        name: make.limit(band, 18.0, target)
        for name, band in {
            "G": make.light_band("G", 0.5822, 0.4053, 3228.75, "invented-g"),
            "Ks": make.light_band("Ks", 2.159, 0.262, 666.7, "invented-k"),
        }.items()
    }
    gains = {}
    for name, limit in limits.items():
        evidence = make.evidence(target, (limit,))
        one, ten = (
            companion_magnitudes(prediction(), evidence, make.draws(evidence, Variant("volume", factor))).weights
            for factor in (1.0, 5.0)
        )
        assert one is not None
        assert ten is not None
        gains[name] = ten.mean() - one.mean()
    assert 0.0 < gains["Ks"] < gains["G"]


def test_an_ab_limit_and_the_same_vega_limit_agree(make: Any) -> None:
    target = make.target()
    vega = make.limit(make.light_band(), 18.0, target)
    # AB - Vega = 2.5 log10(3630.78 / 1594) (definition)
    ab_mag = 18.0 + 2.5 * np.log10(3630.7805 / 1594.0)
    ab = make.limit(make.light_band(zero_jy=3630.7805, system=MagnitudeSystem.AB), float(ab_mag), target)
    found = []
    for limit in (vega, ab):
        evidence = make.evidence(target, (limit,))
        applied = companion_magnitudes(prediction(), evidence, make.draws(evidence))
        assert "> 18.00 mag (Vega, 95%)" in applied.sentence
        found.append(applied.weights)
    assert found[0] == pytest.approx(found[1], abs=1e-5)


def test_the_extinction_grid_is_as_good_as_it_says(make: Any) -> None:
    av = np.random.default_rng(3).uniform(0.0, 30.0, 500)
    band = make.light_band("G", 0.5822, 0.4053, 3228.75)
    assert extinction_of_draws(band, av, Assumptions()) == pytest.approx(band_extinction_mag(band, av), abs=1e-3)
    assert np.all(extinction_of_draws(band, np.zeros(3), Assumptions()) == 0.0)


def test_a_type_without_a_magnitude_in_the_band_cannot_be_excluded_there(make: Any) -> None:
    target = make.target(dm_pc_cm3=None)
    limit = make.limit(make.light_band("G", 0.5822, 0.4053, 3228.75), 40.0, target, assumptions=NO_DUST)
    evidence = make.evidence(target, (limit,), assumptions=NO_DUST)
    found = companion_magnitudes(prediction(), evidence, make.draws(evidence))
    assert "earliest type still allowed L8V, latest T8V" in found.sentence


@pytest.mark.parametrize(
    ("changes", "words"), [({"distance": None}, "no distance range"), ({}, "no limit in a band with listed magnitudes")]
)
def test_what_is_missing_is_said(make: Any, changes: dict[str, Any], words: str) -> None:
    evidence = make.evidence(make.target(**changes))
    found = companion_magnitudes(prediction(), evidence, make.draws(evidence))
    assert found.weights is None
    assert words in found.sentence


def counterpart(make: Any, mag: float, outcome: Outcome = Outcome.COUNTERPART) -> Finding:
    measured = Measured(make.light_band(), mag, 0.02, False)
    candidate = Candidate("invented-ir", "k1", 264.5, -33.8, 0.1, 0.2, 0.9, 1e-3, 0.97, (measured,))
    return Finding(
        "invented-ir", "invented", Waveband.NEAR_INFRARED, "1", outcome, "", (), 1.0, candidates=(candidate,)
    )


@pytest.mark.parametrize(
    ("mag", "outcome", "favours"),
    [
        (20.0, Outcome.COUNTERPART, True),
        (20.0, Outcome.AMBIGUOUS, False),
        (5.0, Outcome.COUNTERPART, False),
    ],
)
def test_a_counterpart_as_bright_as_a_star_speaks_for_one(
    make: Any, mag: float, outcome: Outcome, favours: bool
) -> None:
    evidence = make.evidence(make.target(), findings=(counterpart(make, mag, outcome),))
    found = companion_magnitudes(prediction(), evidence, make.draws(evidence))
    assert found.favours == favours
    assert ("the counterpart in" in found.sentence) == (outcome is Outcome.COUNTERPART)
