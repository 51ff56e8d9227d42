"""What is said of a spin, depending on what is known of its derivative."""

from __future__ import annotations

import math

import pytest

from xmatch.errors import RangeError
from xmatch.records import Spin
from xmatch.spin.figures import figures


def test_a_measured_derivative_gives_values_for_both_stars() -> None:
    found = figures(Spin(75.885547, derivative=2.25e-13))
    assert [budget.star for budget in found.budgets] == ["neutron star", "white dwarf"]
    assert not any(budget.is_limit for budget in found.budgets)
    star, dwarf = found.budgets
    assert dwarf.power_erg_s == pytest.approx(1e5 * star.power_erg_s)
    assert star.field_pole_g == pytest.approx(2 * star.field_equator_g)
    assert star.light_cylinder_field_g < star.field_equator_g
    assert not found.derivative_is_limit
    assert not found.conditional
    assert found.age_yr == pytest.approx(75.885547 / 2 / 2.25e-13 / 3.15576e7)


def test_an_upper_limit_makes_every_figure_a_limit() -> None:
    found = figures(Spin(1318.0, derivative_limit=3.6e-13))
    assert found.derivative_is_limit
    assert all(budget.is_limit for budget in found.budgets)
    assert "above" not in {line.says for line in found.death_lines}
    assert "upper limit" in found.note
    assert "lower limit" in found.note


def test_a_measurement_is_used_before_a_limit() -> None:
    found = figures(Spin(1318.0, derivative=1e-13, derivative_limit=3.6e-13))
    assert (found.derivative, found.derivative_is_limit) == (1e-13, False)


@pytest.mark.parametrize("derivative", [0.0, -9.0e-12])
def test_no_spin_down_pays_for_nothing(derivative: float) -> None:
    found = figures(Spin(841.0, derivative=derivative))
    assert found.derivative is None
    assert (found.budgets, found.death_lines, found.age_yr) == ((), (), None)
    assert "no spin-down is measured" in found.note
    assert found.light_cylinder_cm > 0.0


def test_a_limit_beside_a_spin_up_is_used() -> None:
    found = figures(Spin(841.0, derivative=-9.0e-12, derivative_limit=2e-11))
    assert (found.derivative, found.derivative_is_limit) == (2e-11, True)
    assert "no spin-down is measured" in found.note


def test_a_period_alone_gives_a_light_cylinder_and_says_what_is_missing() -> None:
    found = figures(Spin(1800.0))
    assert found.light_cylinder_cm == pytest.approx(8.588421e12, rel=1e-6)
    assert found.budgets == ()
    assert found.note == "no period derivative is known"


def test_a_period_that_may_be_orbital_makes_the_figures_conditional() -> None:
    found = figures(Spin(7532.0, derivative_limit=1.7e-11, may_be_orbital=True))
    assert "orbital" in found.conditional
    assert found.budgets


@pytest.mark.parametrize(
    "spin",
    [
        Spin(0.0),
        Spin(-1.0),
        Spin(math.nan),
        Spin(math.inf),
        Spin(10.0, derivative=math.nan),
        Spin(10.0, derivative_limit=0.0),
        Spin(10.0, derivative_limit=-1e-13),
        Spin(10.0, derivative_limit=math.nan),
    ],
)
def test_numbers_that_mean_nothing_are_refused(spin: Spin) -> None:
    with pytest.raises(RangeError, match="is not allowed"):
        figures(spin)
