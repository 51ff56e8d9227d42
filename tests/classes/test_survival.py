"""Fractions with their interval, and the probability that a blank hides a source."""

from __future__ import annotations

import numpy as np
import pytest
from astropy.stats import binom_conf_interval
from hypothesis import given
from hypothesis import strategies as st

from xmatch.classes.survival import floored, miss_probability, say_fraction, wilson
from xmatch.errors import RangeError


# live reference: astropy.stats.binom_conf_interval, interval "wilson"
@given(st.integers(1, 100_000), st.floats(0.0, 1.0))
def test_the_interval_equals_the_one_of_astropy(n: int, part: float) -> None:
    survivors = round(part * n)
    low, high = binom_conf_interval(survivors, n, confidence_level=0.95, interval="wilson")
    assert wilson(survivors, n) == pytest.approx((float(low), float(high)), abs=1e-9)


def test_no_survivor_still_has_an_upper_end() -> None:
    low, high = wilson(0.0, 100_000)
    assert low == 0.0
    assert 3e-5 < high < 5e-5


@pytest.mark.parametrize(("survivors", "n"), [(-1.0, 10), (11.0, 10), (0.0, 0)])
def test_impossible_counts_are_refused(survivors: float, n: int) -> None:
    with pytest.raises(RangeError):
        wilson(survivors, n)


def test_a_survival_is_never_printed_as_zero() -> None:
    assert floored(0.0, 100_000) == 3e-5
    assert floored(0.0, 2) == 1.0
    assert floored(0.2, 100_000) == 0.2
    assert say_fraction(0.0, 100_000) == "< 3e-05"
    assert say_fraction(1e-9, 100_000) == "< 3e-05"
    assert say_fraction(4e-5, 100_000) == "4.0e-05"
    assert say_fraction(0.004, 100_000) == "0.4 %"
    assert say_fraction(0.43, 100_000) == "43 %"


def test_a_source_at_the_limit_is_missed_with_what_confidence_leaves() -> None:
    assert float(miss_probability(2.0, 2.0, 6.644854, 0.95)) == pytest.approx(0.05, abs=1e-6)


def test_a_source_at_the_threshold_is_missed_half_the_time() -> None:
    assert float(miss_probability(5.0 / 6.644854, 1.0, 6.644854, 0.95)) == pytest.approx(0.5, abs=1e-6)


def test_a_limit_without_its_sigma_is_read_as_a_five_sigma_threshold() -> None:
    flux = np.linspace(0.0, 2.0, 9)
    assert miss_probability(flux, 1.0, None, 0.95) == pytest.approx(miss_probability(flux, 1.0, 6.6448536, 0.95))


@given(st.floats(0.5, 50.0), st.floats(0.5, 0.999))
def test_no_source_is_always_missed_and_brighter_ones_less(n_sigma: float, confidence: float) -> None:
    missed = miss_probability(np.linspace(0.0, 5.0, 60), 1.0, n_sigma, confidence)
    assert missed[0] == 1.0
    assert np.all(np.diff(missed) <= 1e-12)
    assert np.all((missed >= 0.0) & (missed <= 1.0))


def test_a_bound_of_few_sigma_still_spares_the_faint() -> None:
    assert float(miss_probability(0.0, 1.0, 1.644854, 0.95)) == 1.0
    assert float(miss_probability(1.0, 1.0, 1.644854, 0.95)) == pytest.approx(0.1, abs=1e-4)


@pytest.mark.parametrize(("limit", "confidence"), [(0.0, 0.95), (-1.0, 0.95), (1.0, 0.0), (1.0, 1.0)])
def test_a_limit_that_means_nothing_is_refused(limit: float, confidence: float) -> None:
    with pytest.raises(RangeError):
        miss_probability(1.0, limit, 6.6, confidence)
