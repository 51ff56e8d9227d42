"""Bounds and counts: monotonic, vectorised, and what is refused."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from xmatch.errors import RangeError
from xmatch.limits import bounds, counts, pulses
from xmatch.records import Quantity


@given(st.floats(-8.0, 20.0), st.floats(0.01, 10.0), st.floats(0.5, 0.999))
def test_a_gaussian_bound_is_positive_and_grows_with_confidence(value: float, sigma: float, level: float) -> None:
    low = float(bounds.gaussian_bound(value, sigma, level))
    assert low > 0.0
    assert float(bounds.gaussian_bound(value, sigma, min(level + 0.0005, 0.9995))) > low


@given(st.integers(0, 60), st.floats(0.0, 40.0), st.floats(0.5, 0.99))
def test_the_shortest_interval_is_ordered_and_inside_the_one_sided_bound(
    n: int, background: float, level: float
) -> None:
    low, high = (float(v) for v in counts.kraft_interval(n, background, level))
    assert 0.0 <= low < high < np.inf
    one_sided = float(counts.bayesian_upper(n, background, level))
    assert one_sided > 0.0
    assert low > 0.0 or high == pytest.approx(one_sided, rel=1e-6)


def test_counts_are_vectorised() -> None:
    n = np.arange(6)
    low, high = counts.kraft_interval(n, 1.5, 0.95)
    assert low.shape == high.shape == (6,)
    one = [counts.kraft_interval(int(i), 1.5, 0.95) for i in n]
    assert high == pytest.approx([float(pair[1]) for pair in one])


@pytest.mark.parametrize("quantity", [Quantity.MAGNITUDE, Quantity.FLUX_DENSITY])
def test_restating_there_and_back_is_nothing(quantity: Quantity) -> None:
    there = bounds.restate(15.0, 5.0, 6.64, quantity)
    assert float(bounds.restate(there, 6.64, 5.0, quantity)) == pytest.approx(15.0)


def test_more_beams_raise_the_threshold() -> None:
    thresholds = [float(bounds.trials_threshold(5.0, n)) for n in (1, 10, 1000)]
    assert thresholds[0] == pytest.approx(5.0)
    assert thresholds == sorted(thresholds)


@pytest.mark.parametrize(
    "call",
    [
        lambda: bounds.gaussian_bound(1.0, 0.0, 0.9),
        lambda: bounds.z_one_sided(1.0),
        lambda: counts.gehrels_upper(-1, 0.9),
        lambda: counts.kraft_interval(1, -0.1, 0.9),
        lambda: counts.counts_to_flux(3.0, 0.0, 0.8, 1e11),
        lambda: pulses.pulse_peak_limit(3.0, 5.0, 35.0),
        lambda: pulses.overlaps_pulse_probability(0.0, 1.0, 1.0),
        lambda: pulses.all_blank_probability(1.1, 0.5, 3),
        lambda: bounds.restate(1.0, 0.0, 5.0, Quantity.FLUX_DENSITY),
    ],
)
def test_values_outside_validity_are_refused(call: object) -> None:
    with pytest.raises(RangeError, match=r"needed|allowed|must be"):
        call()  # type: ignore[operator]


def test_a_pulse_longer_than_the_image_is_not_diluted() -> None:
    with pytest.raises(RangeError, match="nothing is diluted"):
        pulses.pulse_peak_limit(1.0, 5.0, 35.0)
