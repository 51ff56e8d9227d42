"""Errors that grow with the epoch step, and the parallax that is allowed for."""

from __future__ import annotations

import numpy as np
import pytest

from xmatch.assumptions import Assumptions
from xmatch.match.decide import row_covariance
from xmatch.match.motion import covariance_at, parallax_covariance
from xmatch.records import Rows

A = Assumptions(frame_sigma_arcsec=0.0)


def row(pm: float, error: float, correlated: float = 0.0) -> Rows:
    one = np.array([1.0])
    return Rows(("a",), 10 * one, 20 * one, 0.1 * one, 0.1 * one, 0 * one, 2000 * one, pm * one, pm * one, error * one, error * one)  # fmt: skip


def test_covariance_is_that_of_drawn_stars() -> None:
    rng = np.random.default_rng(1)
    full = np.array([[4.0, 1.0, 0.5, 0.2], [1.0, 3.0, -0.3, 0.4], [0.5, -0.3, 2.0, 0.6], [0.2, 0.4, 0.6, 1.0]])
    drawn = rng.multivariate_normal(np.zeros(4), full, 400_000)
    dt = -1500.0
    at = np.cov(drawn[:, :2].T + dt * 1e-3 * drawn[:, 2:].T)
    cxx, cyy, cxy = covariance_at(
        4.0, 3.0, 1.0, dt, np.sqrt(2.0), 1.0, 0.6 / np.sqrt(2.0), (full[0, 2], full[0, 3], full[1, 2], full[1, 3])
    )
    assert [float(cxx), float(cyy), float(cxy)] == pytest.approx([at[0, 0], at[1, 1], at[0, 1]], rel=0.02, abs=0.05)


def test_no_step_changes_nothing() -> None:
    assert [float(v) for v in covariance_at(1.0, 2.0, 0.3, 0.0, 5.0, 5.0, 0.9)] == pytest.approx([1.0, 2.0, 0.3])


@pytest.mark.parametrize(
    ("pm", "error", "spread"),
    [(np.nan, np.nan, 30.0), (np.nan, 2.0, 30.0), (10.0, 2.0, 2.0), (10.0, np.nan, 5.0)],
)
def test_what_is_not_listed_gets_a_stated_spread(pm: float, error: float, spread: float) -> None:
    cxx, cyy, _ = row_covariance(row(pm, error), np.array([20.0]), A)
    expected = 0.1**2 + (20.0 * spread / 1e3) ** 2
    assert [float(cxx[0]), float(cyy[0])] == pytest.approx([expected, expected])


def test_parallax_at_the_pole_of_the_ecliptic_is_round_and_in_its_plane_flat() -> None:
    pole = [float(v) for v in parallax_covariance(1000.0, 270.0, 90.0 - 23.4392794)]
    assert pole == pytest.approx([0.5, 0.5, 0.0], abs=1e-6)
    cxx, cyy, cxy = (float(v) for v in parallax_covariance(1000.0, 0.0, 0.0))  # vernal equinox
    assert cxx * cyy - cxy**2 == pytest.approx(0.0, abs=1e-12)
    assert cxx + cyy == pytest.approx(0.5)
    with_it = row_covariance(row(0.0, 0.0), np.array([0.0]), A.but(parallax_mas=500.0))
    assert float(with_it[0][0]) > 0.1**2
