"""Death lines: what an upper limit may say, one convention, and the radius of the star."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from xmatch.errors import RangeError
from xmatch.spin.death_lines import (
    CONVENTION_B0,
    DERIVATIVE_LINES,
    FIELD_LINES,
    held_against,
    log_derivative_on_line,
    log_field_on_line,
)
from xmatch.spin.rotation import equatorial_field


def test_there_are_four_and_eight_lines_with_sources_and_their_own_names() -> None:
    lines = (*FIELD_LINES, *DERIVATIVE_LINES)
    assert (len(FIELD_LINES), len(DERIVATIVE_LINES)) == (4, 8)
    assert len({line.model for line in lines}) == 12
    assert all("ApJ" in line.source for line in lines)


@given(st.floats(1e-3, 1e5), st.floats(1e-22, 1e-6))
def test_a_limit_never_puts_a_star_above_a_line(period: float, derivative: float) -> None:
    measured = held_against(period, derivative, False)
    limit = held_against(period, derivative, True)
    for one, other in zip(measured, limit, strict=True):
        assert one.says in ("above", "below")
        assert other.says == {"above": "nothing", "below": "below"}[one.says]
        assert (one.distance_dex >= 0.0) == (one.says == "above")


@given(st.floats(1e-3, 1e5))
def test_the_field_of_the_derivative_on_a_line_is_the_field_on_the_line(period: float) -> None:
    for line in FIELD_LINES:
        derivative = 10.0 ** float(log_derivative_on_line(line, period))
        field = CONVENTION_B0 * np.sqrt(period * derivative)
        assert np.log10(field) == pytest.approx(float(log_field_on_line(line, period)), abs=1e-9)


def test_another_star_is_turned_into_the_derivative_with_its_own_field() -> None:
    radius, inertia, period = 7.0e8, 1.0e50, 300.0
    line = FIELD_LINES[1]
    derivative = 10.0 ** float(log_derivative_on_line(line, period, radius_cm=radius, inertia_g_cm2=inertia))
    field = float(equatorial_field(period, derivative, inertia, radius))
    assert np.log10(field) == pytest.approx(float(log_field_on_line(line, period, radius)), abs=1e-9)


def test_a_line_for_neutron_stars_is_refused_to_a_white_dwarf() -> None:
    with pytest.raises(RangeError, match="neutron star"):
        log_derivative_on_line(DERIVATIVE_LINES[0], 300.0, radius_cm=7.0e8)


def test_the_curvature_of_a_multipole_moves_only_the_multipole_lines() -> None:
    for line in DERIVATIVE_LINES:
        shift = float(log_derivative_on_line(line, 10.0, curvature_cm=1e7) - log_derivative_on_line(line, 10.0))
        assert shift == pytest.approx(line.slope_rho)
        assert (line.slope_rho > 0.0) == ("multipole" in line.model)


@pytest.mark.parametrize(("period", "derivative"), [(0.0, 1e-13), (10.0, 0.0), (10.0, -1e-13)])
def test_a_period_or_derivative_of_zero_or_less_has_no_place_on_the_diagram(period: float, derivative: float) -> None:
    with pytest.raises(RangeError, match="above 0"):
        held_against(period, derivative, False)
