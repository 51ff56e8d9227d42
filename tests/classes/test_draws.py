"""Joint draws: one line of sight for all, and the variants it is tried under."""

from __future__ import annotations

from typing import Any

import numpy as np
import pytest

from xmatch.assumptions import Assumptions
from xmatch.classes.draws import Deviates, Variant, draw, variants
from xmatch.records import Distance

A = Assumptions(draws=50_000, column_cm2=1.0e22, av_mag=3.5)
RANGE = Distance(1000.0, 4000.0)


def drawn(variant: Variant, class_id: str = "a", assumptions: Assumptions = A) -> Any:
    return draw(Deviates.drawn(assumptions), RANGE, assumptions, variant, class_id)


def test_every_class_sees_the_same_line_of_sight() -> None:
    one, other = drawn(Variant("volume"), "a"), drawn(Variant("volume"), "b")
    assert np.array_equal(one.dist_pc, other.dist_pc)
    assert np.array_equal(one.column_cm2, other.column_cm2)
    assert one.own("x").uniform() != other.own("x").uniform()


def test_a_class_keeps_its_own_numbers_under_every_variant() -> None:
    assert drawn(Variant("volume")).own("x").uniform() == drawn(Variant("log-uniform", 2.0)).own("x").uniform()


def test_dust_follows_gas() -> None:
    found = drawn(Variant("uniform"))
    assert found.av_mag / found.column_cm2 == pytest.approx(np.full(found.n, 3.5e-22))


def test_the_column_scatters_as_assumed_and_the_factor_moves_it() -> None:
    plain, twice = drawn(Variant("uniform")), drawn(Variant("uniform", 2.0))
    assert np.median(plain.column_cm2) == pytest.approx(1e22, rel=0.01)
    assert np.std(np.log10(plain.column_cm2)) == pytest.approx(0.3, rel=0.02)
    assert twice.column_cm2 == pytest.approx(2.0 * plain.column_cm2)


@pytest.mark.parametrize(
    ("prior", "median"),
    # medians of the three densities between 1 and 4 kpc (definition)
    [("log-uniform", 2000.0), ("uniform", 2500.0), ("volume", (65 / 2) ** (1 / 3) * 1000.0)],
)
def test_distances_fill_the_range_as_the_prior_says(prior: str, median: float) -> None:
    found = drawn(Variant(prior)).dist_pc
    assert np.median(found) == pytest.approx(median, rel=0.01)
    assert found.min() >= 1000.0
    assert found.max() <= 4000.0


def test_variants_start_with_what_is_assumed_and_vary_only_what_matters() -> None:
    plain = variants(A, uses_column=False, uses_beam=False)
    assert [variant.name for variant in plain] == ["log-uniform distance", "volume distance"]
    assert [v.prior for v in variants(A.but(distance_prior="uniform"), uses_column=False, uses_beam=False)] == [
        "uniform", "log-uniform", "volume",
    ]  # fmt: skip
    full = variants(A, uses_column=True, uses_beam=True)
    assert len(full) == 8
    assert len({variant.name for variant in full}) == 8
    assert full[-1].name == "volume distance, column x2, beam x0.1"
    empty = A.but(column_cm2=0.0, av_mag=0.0)
    assert len(variants(empty, uses_column=True, uses_beam=False)) == 2


def test_without_a_distance_nothing_is_drawn_for_it() -> None:
    assert len(draw(Deviates.drawn(A), None, A, Variant("volume"), "a").dist_pc) == 0
