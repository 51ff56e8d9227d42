"""Budget, death lines and period range: who survives, and what the sentence says."""

from __future__ import annotations

import math
import re
from typing import Any

import numpy as np
import pytest

from xmatch.assumptions import Assumptions
from xmatch.classes.draws import Variant
from xmatch.classes.loader import load_classes
from xmatch.classes.model import Prediction
from xmatch.classes.rotation_tests import death_lines, period_range, spin_down_budget
from xmatch.records import Distance, Pulse, Spin

BUDGET = """
id = "a"
title = "a"
summary = "a"

[[predictions]]
test = "spin-down budget"
star = "{star}"
efficiency = {{ value = {value}, unit = "1", flux_kind = "{kind}", solid_angle = "{angle}", source = "invented" }}
"""


def shipped(test: str) -> Prediction:
    pulsar = next(item for item in load_classes() if item.id == "rotation-powered-pulsar")
    return next(prediction for prediction in pulsar.predictions if prediction.test == test)


def budget(
    make: Any, *, star: str = "neutron star", value: float = 1.0, kind: str = "peak", angle: str = "4 pi"
) -> Prediction:
    found: Prediction = make.class_file(BUDGET.format(star=star, value=value, kind=kind, angle=angle)).predictions[0]
    return found


def test_no_draw_of_the_invented_transient_can_be_paid_for(make: Any) -> None:
    evidence = make.evidence(make.target())
    found = spin_down_budget(shipped("spin-down budget"), evidence, make.draws(evidence))
    assert found.weights is not None
    assert found.weights.sum() == 0.0
    assert not found.informs_only
    for piece in ("erg/s over 1.6-4.1 kpc", "peak 2.1 Jy at 200 MHz", "index -1.6", "10 MHz-10 GHz", "isotropic",
                  "averaged over the period: 35 s every 2711.4 s", "spin-down power < 4.8e+24 erg/s"):  # fmt: skip
        assert piece in found.sentence
    for piece in ("of the sky", "distance below", "derivative above"):
        assert piece in found.overturn


def test_a_budget_that_suffices_up_to_some_distance_keeps_the_nearer_draws(make: Any) -> None:
    # L = 4 pi d^2 F equals Edot at d0; log-uniform between d0/2 and 2 d0 leaves one half (definition)
    target = make.target(distance=Distance(500.0, 2000.0), spin=Spin(10.0, derivative=1e-15))
    power = 4 * math.pi**2 * 1e45 * 1e-15 / 1e3
    flux = power / (4 * math.pi * (1000.0 * 3.0856775814913673e18) ** 2)
    # flat spectrum: F = S (high - low)
    assumptions = Assumptions(draws=20_000, radio_index=0.0)
    peak = flux / (1.0e10 - 1.0e7) / 1e-23
    evidence = make.evidence(
        make.target(distance=target.distance, spin=target.spin, pulses=(Pulse(1e9, peak, 1.0),)),
        assumptions=assumptions,
    )
    found = spin_down_budget(budget(make), evidence, make.draws(evidence))
    assert found.weights is not None
    assert found.weights.mean() == pytest.approx(0.5, abs=0.015)
    assert np.all(found.weights[make.draws(evidence).dist_pc < 999.0] == 1.0)
    assert "at the peak" in found.sentence
    assert "spin-down power = " in found.sentence


def radio_power(sentence: str) -> float:
    found = re.search(r"radio power ([0-9.e+]+)", sentence)
    assert found is not None
    return float(found[1])


def test_averaging_takes_the_duty_cycle_off(make: Any) -> None:
    evidence = make.evidence(make.target())
    draws = make.draws(evidence)
    peak = radio_power(spin_down_budget(budget(make), evidence, draws).sentence)
    mean = radio_power(spin_down_budget(budget(make, kind="period average"), evidence, draws).sentence)
    assert mean / peak == pytest.approx(35.0 / 2711.4, rel=0.1)


def test_a_narrow_beam_needs_less(make: Any) -> None:
    evidence = make.evidence(make.target())
    full = spin_down_budget(budget(make), evidence, make.draws(evidence))
    tenth = spin_down_budget(budget(make), evidence, make.draws(evidence, Variant("log-uniform", beam_factor=0.1)))
    assert radio_power(tenth.sentence) / radio_power(full.sentence) == pytest.approx(0.1, rel=0.1)
    assert "beamed into 0.1 of the sky" in tenth.sentence


def test_the_pulse_that_asks_most_is_taken(make: Any) -> None:
    pulses = (Pulse(2e8, 2.1, 35.0), Pulse(2e8, 3.0, 1.0))
    evidence = make.evidence(make.target(pulses=pulses))
    draws = make.draws(evidence)
    assert "peak 3 Jy" in spin_down_budget(budget(make), evidence, draws).sentence
    assert "peak 2.1 Jy" in spin_down_budget(budget(make, kind="period average"), evidence, draws).sentence


def test_an_efficiency_per_steradian_allows_four_pi_as_much(make: Any) -> None:
    evidence = make.evidence(make.target(spin=Spin(2711.4, derivative_limit=2.0e-7)))
    draws = make.draws(evidence)
    whole = spin_down_budget(budget(make, kind="period average", value=1.0), evidence, draws).weights
    part = spin_down_budget(
        budget(make, kind="period average", value=1 / (4 * math.pi), angle="per steradian"), evidence, draws
    ).weights
    assert whole is not None
    assert part is not None
    assert 0.05 < whole.mean() < 0.95
    assert np.array_equal(whole, part)


def test_a_white_dwarf_has_its_own_budget(make: Any) -> None:
    evidence = make.evidence(make.target())
    found = spin_down_budget(budget(make, star="white dwarf", kind="period average"), evidence, make.draws(evidence))
    assert "(white dwarf, 1e+50 g cm^2)" in found.sentence
    assert found.weights is not None
    assert 0.0 < found.weights.mean() < 1.0


@pytest.mark.parametrize(
    ("changes", "words"),
    [
        ({"spin": None}, "no spin-down is known"),
        ({"spin": Spin(2711.4)}, "no spin-down is known"),
        ({"spin": Spin(2711.4, derivative=-1e-12)}, "no spin-down is known"),
        ({"pulses": ()}, "no pulse"),
        ({"distance": None}, "no distance range"),
    ],
)
def test_what_is_missing_is_said_and_nothing_is_tested(make: Any, changes: dict[str, Any], words: str) -> None:
    evidence = make.evidence(make.target(**changes))
    found = spin_down_budget(shipped("spin-down budget"), evidence, make.draws(evidence))
    assert found.weights is None
    assert words in found.sentence


def test_death_lines_only_inform_and_count_every_model(make: Any) -> None:
    evidence = make.evidence(make.target())
    found = death_lines(shipped("death lines"), evidence, make.draws(evidence))
    assert found.informs_only
    assert found.weights is None
    counts = [int(n) for n in re.findall(r"(?:above|below|from) (\d+) \(", found.sentence)]
    assert sum(counts) == 12
    assert "no statement from" in found.sentence
    assert "never rule out alone" in found.sentence


@pytest.mark.parametrize(
    ("period", "words"), [(760.0, "10 times the longest known"), (1e-3, "0.71 times the shortest"), (5.0, "inside")]
)
def test_the_period_is_placed_among_those_known(make: Any, period: float, words: str) -> None:
    evidence = make.evidence(make.target(spin=Spin(period)))
    found = period_range(shipped("period range"), evidence, make.draws(evidence))
    assert found.informs_only
    assert found.weights is None
    assert words in found.sentence
