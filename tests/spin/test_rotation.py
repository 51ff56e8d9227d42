"""Rotation formulas: scaling, conventions, and what is refused."""

from __future__ import annotations

import math
from collections.abc import Callable
from typing import Any

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from xmatch.errors import RangeError
from xmatch.spin import rotation

PERIODS = st.floats(1e-3, 1e5)
DERIVATIVES = st.floats(1e-21, 1e-8)


@given(PERIODS, DERIVATIVES, st.floats(1e44, 1e51))
def test_power_is_the_loss_of_rotational_energy(period: float, derivative: float, inertia: float) -> None:
    # the same from frequency: -I Omega dOmega/dt (definition)
    omega, omega_dot = 2 * math.pi / period, -2 * math.pi * derivative / period**2
    found = float(rotation.spin_down_power(period, derivative, inertia))
    assert found == pytest.approx(-inertia * omega * omega_dot, rel=1e-12)


@given(PERIODS, DERIVATIVES)
def test_the_polar_field_is_twice_the_equatorial_one(period: float, derivative: float) -> None:
    ratio = rotation.polar_field(period, derivative) / rotation.equatorial_field(period, derivative)
    assert float(ratio) == pytest.approx(2.0, rel=1e-12)


@given(PERIODS, DERIVATIVES, st.floats(1e44, 1e51), st.floats(5e5, 2e9))
def test_dipole_radiation_of_the_field_gives_the_power_back(
    period: float, derivative: float, inertia: float, radius: float
) -> None:
    # Larmor: 2/3 mu^2 Omega^4 / c^3 with mu = B R^3 (definition)
    field = float(rotation.equatorial_field(period, derivative, inertia, radius))
    omega = 2 * math.pi / period
    radiated = 2.0 / 3.0 * (field * radius**3) ** 2 * omega**4 / 2.99792458e10**3
    assert radiated == pytest.approx(float(rotation.spin_down_power(period, derivative, inertia)), rel=1e-9)


def test_the_field_at_the_light_cylinder_is_the_surface_field_for_a_star_that_fills_it() -> None:
    radius = float(rotation.light_cylinder_radius_cm(10.0))
    found = rotation.light_cylinder_field(10.0, 1e-12, 1e45, radius)
    assert float(found) == pytest.approx(float(rotation.equatorial_field(10.0, 1e-12, 1e45, radius)), rel=1e-12)


def test_a_derivative_that_lasts_its_age_changes_the_period_by_half() -> None:
    age = float(rotation.characteristic_age_yr(100.0, 1e-13))
    assert float(rotation.derivative_from_period_change(50.0, age)) == pytest.approx(1e-13, rel=1e-12)


@given(st.floats(1.0, 1e4), st.floats(1e-3, 0.4), st.floats(0.1, 50.0))
def test_the_phase_limit_is_the_derivative_that_shifts_an_arrival_by_the_error(
    period: float, part: float, years: float
) -> None:
    shift = part * period
    derivative = float(rotation.derivative_from_phase(period, shift, years))
    cycles = years * 3.15576e7 / period
    # arrival time of cycle n: n P + n^2 P Pdot / 2 (definition)
    assert 0.5 * cycles**2 * period * derivative == pytest.approx(shift, rel=1e-9)


def test_a_phase_error_of_half_a_period_loses_the_count() -> None:
    with pytest.raises(RangeError, match="half the period"):
        rotation.derivative_from_phase(100.0, 50.0, 10.0)


def test_a_uniform_sphere_and_break_up_of_a_star_of_known_density() -> None:
    # P_min = sqrt(3 pi / (G rho)) (Kepler; definition)
    mass, radius = 1.0e33, 7.0e8
    density = mass / (4 / 3 * math.pi * radius**3)
    expected = math.sqrt(3 * math.pi / (6.67430e-8 * density))
    assert float(rotation.break_up_period_s(mass, radius)) == pytest.approx(expected, rel=1e-12)
    assert float(rotation.moment_of_inertia(mass, radius)) == pytest.approx(0.4 * mass * radius**2)


def test_arrays_broadcast_and_nan_stays_nan() -> None:
    periods = np.array([1.0, math.nan, 100.0])[:, None]
    derivatives = np.array([1e-15, 1e-13])
    found = rotation.equatorial_field(periods, derivatives)
    assert found.shape == (3, 2)
    assert np.isnan(found[1]).all()
    assert np.isfinite(found[[0, 2]]).all()


def test_a_star_that_spins_up_loses_negative_power() -> None:
    assert float(rotation.spin_down_power(1.0, -1e-15)) < 0.0


@pytest.mark.parametrize("bad", [0.0, -1.0, math.inf])
@pytest.mark.parametrize(
    "formula",
    [
        lambda bad: rotation.spin_down_power(bad, 1e-13),
        lambda bad: rotation.spin_down_power(1.0, 1e-13, bad),
        lambda bad: rotation.equatorial_field(1.0, bad),
        lambda bad: rotation.equatorial_field(1.0, 1e-13, 1e45, bad),
        lambda bad: rotation.characteristic_age_yr(1.0, bad),
        lambda bad: rotation.light_cylinder_radius_cm(bad),
        lambda bad: rotation.shklovskii_derivative(1.0, 1.0, bad),
        lambda bad: rotation.derivative_from_period_change(bad, 1.0),
        lambda bad: rotation.derivative_from_period_change(1.0, bad),
        lambda bad: rotation.break_up_period_s(bad, 1.0),
        lambda bad: rotation.brightness_temperature_k(1.0, 1.0, 1.0, bad),
    ],
)
def test_what_must_be_positive_is_refused_with_a_remedy(formula: Callable[[float], Any], bad: float) -> None:
    with pytest.raises(RangeError, match="is not allowed"):
        formula(bad)


def test_an_infinite_derivative_or_flux_is_refused() -> None:
    with pytest.raises(RangeError, match="finite"):
        rotation.spin_down_power(1.0, math.inf)
    with pytest.raises(RangeError, match="finite"):
        rotation.brightness_temperature_k(math.inf, 1.0, 1.0, 1.0)
