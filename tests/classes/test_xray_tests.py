"""X-ray templates against blank catalogs: the grid, the column, the survival, the sentence."""

from __future__ import annotations

import math
from collections.abc import Callable
from typing import Any

import numpy as np
import pytest
from scipy.integrate import quad
from scipy.stats import norm

from xmatch.assumptions import Assumptions
from xmatch.classes.draws import Variant
from xmatch.classes.loader import load_classes
from xmatch.classes.xray_tests import (
    blackbody_fraction,
    luminosity_from_spin_down,
    luminosity_template,
    power_law_fraction,
)
from xmatch.flux.absorption import cross_section_cm2, transmitted_fraction
from xmatch.flux.spectra import PowerLaw
from xmatch.records import Distance, Spin

NO_COLUMN = Assumptions(draws=50_000, column_cm2=0.0, av_mag=0.0)


# error of the grid against scipy 1.17.1 quad over the same cross-section
@pytest.mark.parametrize("band", [(0.2, 2.3), (0.5, 2.0), (2.0, 10.0)])
def test_the_grid_is_good_to_the_error_it_states(band: tuple[float, float]) -> None:
    rng = np.random.default_rng(5)
    kt = 0.13 * (0.6 / 0.13) ** rng.uniform(size=12)
    column = 10 ** rng.uniform(20, 23, size=12)
    kt[:2], column[:2] = [0.13, 0.6], [1e20, 1e23]
    found = blackbody_fraction(kt, column, band)
    for own, t, n in zip(found, kt, column, strict=True):
        e = np.geomspace(*band, 20_001)
        shape = (e / t) ** 3 / np.expm1(e / t) * np.exp(-n * cross_section_cm2(e)) / t
        expected = np.trapezoid(shape, e) / (math.pi**4 / 15)
        assert own == pytest.approx(expected, rel=0.01)


def test_a_power_law_behind_a_column_is_read_from_its_grid_to_the_error_it_states() -> None:
    column = np.geomspace(1e20, 1e23, 37)
    found = power_law_fraction(1.7, column, (0.5, 2.0), (2.0, 10.0))
    spectrum = PowerLaw(1.7)
    ratio = spectrum.band_integral(0.5, 2.0) / spectrum.band_integral(2.0, 10.0)
    expected = ratio * transmitted_fraction(spectrum, 0.5, 2.0, column)
    assert found == pytest.approx(expected, rel=0.01)


def test_no_column_takes_nothing_off() -> None:
    zero = np.zeros(4)
    # fraction of a blackbody of 0.3 keV in 0.3-10 keV, computed with scipy 1.17.1
    assert blackbody_fraction(np.full(4, 0.3), zero, (0.3, 10.0)) == pytest.approx(np.full(4, 0.965382), rel=1e-5)


# computed here with scipy 1.17.1 quad over the luminosity, without draws
@pytest.mark.parametrize("value", [1e-15, 1e-13, 1e-11])
def test_survival_equals_the_integral_over_the_luminosity(
    make: Any, template: Callable[..., str], value: float
) -> None:
    target = make.target(distance=Distance(4999.999, 5000.0), dm_pc_cm3=None)
    limit = make.limit(make.xray_band(0.3, 10.0), value, target, assumptions=NO_COLUMN)
    evidence = make.evidence(target, (limit,), assumptions=NO_COLUMN)
    prediction = make.class_file(template()).predictions[0]
    found = luminosity_template(prediction, evidence, make.draws(evidence)).weights
    sphere = 4 * math.pi * (5000.0 * 3.0856775814913673e18) ** 2

    def integrand(log_l: float) -> float:
        flux = 10**log_l * 0.965382 / sphere
        return norm.pdf(log_l, 33.0, 1.0) * norm.sf(flux / value * 6.645 - (6.645 - 1.644854))

    expected, _ = quad(integrand, 25.0, 41.0, limit=400, points=[math.log10(value * sphere)])
    assert found is not None
    assert found.mean() == pytest.approx(expected, abs=4e-3)


def test_a_larger_column_hides_more(make: Any, template: Callable[..., str]) -> None:
    target = make.target()
    limit = make.limit(make.xray_band(), 1e-13, target)
    evidence = make.evidence(target, (limit,))
    prediction = make.class_file(template(low=0.1, high=0.2)).predictions[0]
    means = []
    for factor in (0.5, 1.0, 2.0, 10.0):
        weights = luminosity_template(prediction, evidence, make.draws(evidence, Variant("volume", factor))).weights
        assert weights is not None
        means.append(weights.mean())
    assert means == sorted(means)
    assert means[-1] > means[0] + 0.1


def test_a_luminosity_per_steradian_is_four_pi_times_as_bright(make: Any, template: Callable[..., str]) -> None:
    target = make.target()
    evidence = make.evidence(target, (make.limit(make.xray_band(), 1e-13, target),))
    draws = make.draws(evidence)
    whole = make.class_file(template(mean=33.0), "whole").predictions[0]
    part = make.class_file(
        template(mean=33.0 - math.log10(4 * math.pi), solid_angle="per steradian"), "part"
    ).predictions[0]
    one, other = (luminosity_template(prediction, evidence, draws).weights for prediction in (whole, part))
    assert one is not None
    assert one == pytest.approx(other)


def test_bands_of_one_catalog_count_once_and_catalogs_multiply(make: Any, template: Callable[..., str]) -> None:
    target = make.target()
    prediction = make.class_file(template()).predictions[0]
    band, again = make.xray_band(0.5, 2.0), make.xray_band(0.5, 2.0, catalog="another-x")
    one = make.limit(band, 1e-13, target)

    def mean(*limits: Any) -> Any:
        evidence = make.evidence(target, limits)
        return luminosity_template(prediction, evidence, make.draws(evidence)).weights

    assert mean(one, one) == pytest.approx(mean(one))
    assert mean(one, make.limit(again, 1e-13, target)) == pytest.approx(mean(one) ** 2)


def test_a_doubtful_limit_informs_only_and_is_left_out_beside_a_good_one(
    make: Any, template: Callable[..., str]
) -> None:
    target = make.target()
    prediction = make.class_file(template()).predictions[0]
    doubtful = make.limit(make.xray_band(), 1e-15, target, flag="coverage unproven")
    good = make.limit(make.xray_band(catalog="another-x"), 1e-13, target)
    evidence = make.evidence(target, (doubtful,))
    alone = luminosity_template(prediction, evidence, make.draws(evidence))
    assert alone.informs_only
    assert "informs only: no limit is free of doubt" in alone.sentence
    evidence = make.evidence(target, (doubtful, good))
    both = luminosity_template(prediction, evidence, make.draws(evidence))
    assert not both.informs_only
    assert "not used: invented-x 0.2-2.3 keV (coverage unproven)" in both.sentence
    only = make.evidence(target, (good,))
    assert both.weights == pytest.approx(luminosity_template(prediction, only, make.draws(only)).weights)


def test_a_limit_that_a_neighbour_raised_is_used(make: Any, template: Callable[..., str]) -> None:
    target = make.target()
    limit = make.limit(make.xray_band(), 1e-13, target, flag="raised 3 times by a neighbour")
    evidence = make.evidence(target, (limit,))
    assert not luminosity_template(
        make.class_file(template()).predictions[0], evidence, make.draws(evidence)
    ).informs_only


def test_a_band_beyond_the_absorption_table_is_left_out_by_name(make: Any, template: Callable[..., str]) -> None:
    target = make.target()
    soft = make.limit(make.xray_band(), 1e-13, target)
    hard = make.limit(make.xray_band(0.3, 10.0, catalog="hard-x"), 1e-11, target)
    band = make.xray_band(14.0, 195.0, catalog="hard-x")
    hard = type(hard)(**{**hard.__dict__, "limit": type(hard.limit)(**{**hard.limit.__dict__, "band": band})})
    prediction = make.class_file(template()).predictions[0]
    evidence = make.evidence(target, (hard,))
    assert luminosity_template(prediction, evidence, make.draws(evidence)).weights is None
    evidence = make.evidence(target, (soft, hard))
    found = luminosity_template(prediction, evidence, make.draws(evidence))
    assert "not used: hard-x 14-195 keV (outside 0.1-20 keV)" in found.sentence


def test_without_distance_or_limit_nothing_is_tested(make: Any, template: Callable[..., str]) -> None:
    prediction = make.class_file(template()).predictions[0]
    for target, words in ((make.target(distance=None), "no distance"), (make.target(), "no X-ray limit")):
        evidence = make.evidence(target)
        found = luminosity_template(prediction, evidence, make.draws(evidence))
        assert found.weights is None
        assert words in found.sentence


@pytest.mark.parametrize(
    ("spin", "doubts"),
    [
        (Spin(0.1, derivative=1e-13), []),
        (Spin(0.1, derivative_limit=1e-13), ["upper limit"]),
        (Spin(2711.4, derivative=1e-12), ["extrapolates"]),
        (Spin(2711.4, derivative_limit=1e-12), ["extrapolates", "upper limit"]),
    ],
)
def test_x_rays_from_spin_down_rule_only_where_the_relation_holds(make: Any, spin: Spin, doubts: list[str]) -> None:
    pulsar = next(item for item in load_classes() if item.id == "rotation-powered-pulsar")
    prediction = next(p for p in pulsar.predictions if p.test == "x-ray luminosity from spin-down")
    target = make.target(spin=spin)
    evidence = make.evidence(target, (make.limit(make.xray_band(), 1e-13, target),))
    found = luminosity_from_spin_down(prediction, evidence, make.draws(evidence))
    assert found.informs_only == bool(doubts)
    assert all(doubt in found.sentence for doubt in doubts)
    assert ("informs only" in found.sentence) == bool(doubts)
