"""Fields of a pointing mission, unions of parts, and evidence from rows on all sides."""

from __future__ import annotations

import numpy as np
import pytest

from xmatch.limits.coverage import Region, covered_fraction, sides_with_rows, touches
from xmatch.limits.pointings import exposure_factor, exposures, holds
from xmatch.records import Pointings, Position

HERE = Position(180.0, 0.0, 1.0, 1.0)


def log(*fields: tuple[float, float, float, float]) -> Pointings:
    ra, dec, exposure, reach = (
        (np.array(column, dtype=float) for column in zip(*fields, strict=True)) if fields else [np.empty(0)] * 4
    )
    n = len(fields)
    return Pointings(tuple(f"o{i}" for i in range(n)), ra, dec, exposure, reach, ("",) * n, ("",) * n)


def test_a_position_is_held_by_any_field_that_reaches_it() -> None:
    fields = log((180.0, 0.2, 1.0e3, 15.0), (0.0, 0.0, 1.0e3, 15.0))
    assert holds(fields, np.array([180.0, 180.0, 0.1]), np.array([0.0, -0.1, 0.0])).tolist() == [True, False, True]
    assert not holds(log(), np.array([1.0]), np.array([1.0])).any()


def test_the_longest_exposure_comes_first_with_its_angle() -> None:
    found = exposures(log((180.0, 0.1, 1.0e3, 15.0), (180.0, -0.2, 9.0e3, 15.0), (180.0, 1.0, 5.0e4, 15.0)), 180.0, 0.0)
    assert [(one.key, one.exposure_s) for one in found] == [("o1", 9.0e3), ("o0", 1.0e3)]
    assert found[0].off_axis_arcmin == pytest.approx(12.0)


def test_across_ra_zero_and_at_the_pole() -> None:
    assert holds(log((359.9, 0.0, 1.0, 15.0)), np.array([0.1]), np.array([0.0])).all()
    assert holds(log((10.0, 89.95, 1.0, 15.0)), np.array([190.0]), np.array([89.9])).all()


@pytest.mark.parametrize("kind", ["footprint", "pointed", "unstated"])
def test_what_the_file_alone_cannot_decide_is_unknown_inside_its_bounds_and_nothing_outside(kind: str) -> None:
    region = Region(kind, dec_deg=(-10.0, 10.0))
    assert covered_fraction(HERE, region, 3.0) is None
    assert covered_fraction(Position(180.0, 50.0, 1.0, 1.0), region, 3.0) == 0.0
    assert covered_fraction(HERE, region, 3.0, lambda ra, dec: np.ones(ra.shape, dtype=bool)) == 1.0


def test_a_field_whose_edge_runs_through_the_error_region_covers_half_of_it() -> None:
    edge = log((180.0, 15.0 / 60.0, 1.0e3, 15.0))
    position = Position(180.0, 0.0, 2.0, 2.0)
    fraction = covered_fraction(position, Region("pointed"), 3.0, lambda ra, dec: holds(edge, ra, dec))
    assert fraction == pytest.approx(0.5, abs=0.02)


def test_a_union_holds_what_any_part_holds() -> None:
    union = Region(
        "galactic box", l_deg=(350.0, 10.0), b_deg=(-1.0, 1.0), also=(Region("declination", dec_deg=(60.0, 90.0)),)
    )
    # the Galactic centre, the celestial pole, and neither
    assert union.contains([266.4, 0.0, 180.0], [-28.94, 80.0, 0.0]).tolist() == [True, True, False]
    assert touches(180.0, 59.9, 3600.0, union) and not touches(180.0, 0.0, 3600.0, union)


def test_rows_on_all_sides_and_rows_on_one_side() -> None:
    rng = np.random.default_rng(1)
    ra, dec = 180.0 + rng.uniform(-0.1, 0.1, 400), rng.uniform(-0.1, 0.1, 400)
    assert sides_with_rows(HERE, ra, dec, 3.0, 3) == 8
    assert sides_with_rows(HERE, ra[dec > 0.0], dec[dec > 0.0], 3.0, 3) == 4
    assert sides_with_rows(HERE, ra[:7], dec[:7], 3.0, 3) < 8
    assert sides_with_rows(HERE, ra, dec, 3600.0, 3) == 0


@pytest.mark.parametrize(
    ("exposure_s", "off_axis_arcmin", "factor"),
    [
        (2.0e4, 0.0, 1.0),
        (8.0e4, 0.0, 0.5),  # four times the exposure: half the flux where the background decides
        (5.0e3, 0.0, 4.0),  # a quarter: four times the flux where counts decide
        (4.0e4, 10.0, 1.0),  # half of the area is left at the edge
        (2.0e4, 5.0, 1.0 / 0.75),
    ],
)
def test_a_depth_follows_exposure_and_angle_by_the_pessimistic_law(
    exposure_s: float, off_axis_arcmin: float, factor: float
) -> None:
    got, effective = exposure_factor(exposure_s, off_axis_arcmin, 2.0e4, 10.0, 0.5)
    assert got == pytest.approx(factor)
    assert effective == pytest.approx(exposure_s * (1.0 - 0.05 * off_axis_arcmin))


def test_a_longer_exposure_is_never_shallower_and_a_larger_angle_never_deeper() -> None:
    t, angle = np.geomspace(10.0, 1.0e6, 200), np.linspace(0.0, 10.0, 50)
    assert (np.diff(exposure_factor(t, 0.0, 2.0e4, 10.0, 0.4)[0]) < 0.0).all()
    assert (np.diff(exposure_factor(2.0e4, angle, 2.0e4, 10.0, 0.4)[0]) > 0.0).all()
