"""Epochs, predicted phases and measured backgrounds."""

from __future__ import annotations

import time

import numpy as np
import pytest
from scipy.integrate import quad
from scipy.optimize import brentq
from scipy.special import gammaincc
from scipy.stats import poisson

from xmatch.errors import RangeError
from xmatch.limits import counts, epochs, pulses


def test_constant_source_is_the_inverse_variance_mean() -> None:
    mean, error = epochs.constant_source([1.0, 1.0, 1.0], [1.0, 2.0, 0.5])
    assert mean == pytest.approx(1.0)
    assert error == pytest.approx(0.4364358, abs=1e-6)  # (1 + 1/4 + 4)^-1/2, by hand


def test_best_epoch_is_chosen_by_error_not_by_bound() -> None:
    index, bound = epochs.best_single_epoch([-4.0, 0.0], [1.0, 0.9], 0.95)
    assert index == 1
    assert bound == pytest.approx(0.9 * 1.959964, abs=1e-5)
    with pytest.raises(RangeError, match="not allowed"):
        epochs.best_single_epoch([], [], 0.95)


@pytest.mark.parametrize(("on", "off", "ratio"), [(0, 0, 1.0), (0, 9, 3.0), (3, 4, 2.0), (12, 30, 2.5)])
def test_measured_background_agrees_with_the_integrated_likelihood(on: int, off: int, ratio: float) -> None:
    def density(s: float) -> float:
        return float(quad(lambda b: poisson.pmf(on, s + b) * poisson.pmf(off, ratio * b), 0.0, 80.0, limit=200)[0])

    bound = float(counts.bayesian_upper_measured(on, off, ratio, 0.9))
    below = quad(density, 0.0, bound, limit=200)[0]
    whole = below + quad(density, bound, 80.0, limit=200)[0]
    assert below / whole == pytest.approx(0.9, abs=1e-6)


def test_measured_background_tends_to_the_known_one() -> None:
    known = float(counts.bayesian_upper(3, 2.0, 0.95))
    assert float(counts.bayesian_upper_measured(3, 2_000_000, 1.0e6, 0.95)) == pytest.approx(known, rel=1e-4)


def test_bounds_in_bulk_match_a_root_finder_and_outrun_it() -> None:
    rng = np.random.default_rng(6)
    b = rng.uniform(0.0, 8.0, 200_000)
    n = rng.poisson(b + 1.0).astype(float)
    few = 60
    began = time.perf_counter()
    slow = [
        brentq(lambda u, k=k, x=x: gammaincc(k + 1, u + x) - 0.05 * gammaincc(k + 1, x), 0.0, 100.0, xtol=1e-12)
        for k, x in zip(n[:few], b[:few], strict=True)
    ]
    per_slow = (time.perf_counter() - began) / few
    began = time.perf_counter()
    fast = counts.bayesian_upper(n, b, 0.95)
    per_fast = (time.perf_counter() - began) / len(n)
    assert fast[:few] == pytest.approx(slow, abs=1e-6)
    assert per_slow > 5.0 * per_fast  # loose: the machine may be busy


def test_prediction_is_sure_or_empty_with_a_good_ephemeris_and_random_with_a_bad_one() -> None:
    sure = pulses.predicted_pulse_probability(9 * 1318.0 - 150.0, 300.0, 1318.0, 1e-6, 0.1, 60.0)
    empty = pulses.predicted_pulse_probability(9.5 * 1318.0 - 150.0, 300.0, 1318.0, 1e-6, 0.1, 60.0)
    lost = pulses.predicted_pulse_probability(1e9, 300.0, 1318.0, 1.0, 0.1, 60.0)
    assert [float(sure), float(empty)] == pytest.approx([1.0, 0.0], abs=1e-9)
    assert float(lost) == pytest.approx(240.0 / 1318.0)
    nearly = pulses.predicted_pulse_probability(0.4 * 1318.0, 300.0, 1318.0, 0.0, 1318.0, 60.0)
    assert float(nearly) == pytest.approx(240.0 / 1318.0, abs=1e-6)


def test_forms_of_a_pulse_limit_stay_apart() -> None:
    peak = float(pulses.pulse_peak_limit(3.0, 720.0, 60.0))
    assert peak == 36.0
    assert float(pulses.period_averaged_limit(peak, 60.0, 720.0)) == pytest.approx(3.0)
    assert float(pulses.pulse_averaged_limit(3.0, 720.0, 120.0)) == pytest.approx(18.0)
    assert float(pulses.not_missed_confidence(0.03, 1.0, 20)) == pytest.approx(1.0 - 0.543794, abs=1e-6)
    with pytest.raises(RangeError, match="no longer than"):
        pulses.period_averaged_limit(1.0, 800.0, 720.0)
