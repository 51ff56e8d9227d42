"""Column and extinction from each other."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from xmatch.errors import RangeError
from xmatch.flux.column import ANDERS, av_from_column_mag, column_from_av_cm2, column_from_dm_cm2


@given(st.floats(0.0, 100.0), st.sampled_from(["Foight et al. 2016", "Bahramian et al. 2015"]))
def test_extinction_comes_back(av: float, relation: str) -> None:
    assert float(av_from_column_mag(column_from_av_cm2(av, relation), relation)) == pytest.approx(av)


def test_a_relation_of_other_abundances_is_refused_unless_they_are_named() -> None:
    with pytest.raises(RangeError, match="belongs to the abundances"):
        av_from_column_mag(1e22, "Guver & Ozel 2009")
    assert float(av_from_column_mag(2.21e21, "Guver & Ozel 2009", ANDERS)) == pytest.approx(1.0)


@pytest.mark.parametrize("bad", [-1.0, np.nan])
def test_values_below_zero_are_refused_by_name(bad: float) -> None:
    for function, word in (
        (av_from_column_mag, "column"), (column_from_av_cm2, "A_V"), (column_from_dm_cm2, "dispersion measure"),
    ):  # fmt: skip
        with pytest.raises(RangeError, match=word):
            function(bad)
