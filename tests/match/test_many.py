"""Many targets at once: the same numbers as one at a time; and calibrated where it matters."""

from __future__ import annotations

import importlib.util
import sys
from pathlib import Path
from typing import Any

import numpy as np
import pytest
from scipy.stats import binom, kstest

from xmatch.assumptions import Assumptions
from xmatch.errors import RangeError
from xmatch.match.decide import weigh
from xmatch.match.ellipse import covariance
from xmatch.match.many import Many, weigh_many
from xmatch.match.motion import move
from xmatch.match.separation import offsets_arcsec
from xmatch.records import Floats, Position, Rows

A = Assumptions(population_motion_mas_yr=0.0)
RADIUS = 30.0


def fields(targets: int, density: float, seed: int, q: float = 0.5, sigma: float = 1.0) -> dict[str, Any]:
    """Targets on the equator with Poisson rows around them, and with probability q a true counterpart."""
    rng = np.random.default_rng(seed)
    area = np.pi * RADIUS**2
    count = rng.poisson(density * area, targets)
    has = rng.uniform(size=targets) < q
    start = np.concatenate([[0], np.cumsum(count + has)])
    which = np.repeat(np.arange(targets), count + has)
    r, phi = RADIUS * np.sqrt(rng.uniform(size=start[-1])), rng.uniform(0, 2 * np.pi, start[-1])
    east, north = r * np.sin(phi), r * np.cos(phi)
    true = np.zeros(start[-1], dtype=bool)
    at = start[1:][has] - 1
    true[at] = True
    east[at], north[at] = rng.normal(0, sigma, (2, len(at)))
    ra0, dec0 = rng.uniform(0, 360, targets), np.zeros(targets)
    return {
        "ra": ra0, "dec": dec0, "start": start, "true": true, "has": has, "which": which, "density": density,
        "row_ra": (ra0[which] + east / 3600.0) % 360.0, "row_dec": north / 3600.0,
    }  # fmt: skip


def weighed(f: dict[str, Any], sigma: float = 1.0, **facts: Any) -> Many:
    half = np.full(len(f["row_ra"]), 0.5 * sigma**2)
    t = np.full(len(f["ra"]), 0.5 * sigma**2)
    base = {"radius_arcsec": RADIUS, "inner_arcsec": 5.0, "listed_fraction": 0.5}
    return weigh_many(
        f["ra"],
        f["dec"],
        (t, t, 0 * t),
        f["start"],
        f["row_ra"],
        f["row_dec"],
        (half, half, 0 * half),
        **(base | facts),
    )


@pytest.mark.parametrize("dec0", [-89.99, -60.0, 0.0, 33.0, 84.0, 90.0])
def test_one_pass_gives_what_one_target_at_a_time_gives(dec0: float) -> None:
    rng = np.random.default_rng(3)
    ra0 = np.array([0.001, 359.9995, 180.0, 77.0])
    count = np.array([30, 0, 1, 55])
    start = np.concatenate([[0], np.cumsum(count)])
    n = int(start[-1])
    which = np.repeat(np.arange(4), count)
    east, north = rng.uniform(-20, 20, (2, n))
    ra, dec = move(ra0[which], np.full(n, dec0), 1e3 * east, 1e3 * north, 1.0)
    major, minor, angle = rng.uniform(0.3, 2, n), rng.uniform(0.1, 0.3, n), rng.uniform(0, 180, n)
    target = Position(0.0, dec0, 1.5, 0.7, 30.0, 2020.0)
    t = [np.full(4, float(v)) for v in covariance(1.5, 0.7, 30.0)]
    inner = 5.0
    many = weigh_many(
        ra0, np.full(4, dec0), (t[0], t[1], t[2]), start, ra, dec, covariance(major, minor, angle),
        radius_arcsec=RADIUS, inner_arcsec=inner, listed_fraction=0.5, frame_sigma_arcsec=0.05, heavy_tail=1e-3,
    )  # fmt: skip
    for i in (0, 2, 3):
        here = slice(int(start[i]), int(start[i + 1]))
        nan = np.full(count[i], np.nan)
        rows = Rows(("x",) * count[i], ra[here], dec[here], major[here], minor[here], angle[here], np.full(count[i], 2020.0), nan, nan, nan, nan)  # fmt: skip
        one = weigh(Position(float(ra0[i]), dec0, 1.5, 0.7, 30.0, 2020.0), rows, radius_arcsec=RADIUS, assumptions=A)
        assert many.normalised[here] == pytest.approx(one.normalised, rel=1e-6)
        # the ring of a single target is as wide as its rows are uncertain: bring both to one density
        mine = many.odds[here] / many.none_listed[i] * many.density_per_arcsec2[i]
        theirs = one.odds / one.none_listed * one.density_per_deg2 / 3600.0**2
        assert mine == pytest.approx(theirs, rel=1e-4)
    assert many.none_listed[1] == 1.0
    assert target.epoch_yr is not None


@pytest.mark.parametrize("dec0", [-80.0, -30.0, 0.0, 60.0, 82.0])
def test_the_series_is_as_good_as_trigonometry_over_a_degree(dec0: float) -> None:
    from xmatch.match.many import _offsets

    rng = np.random.default_rng(4)
    east, north = rng.uniform(-600, 600, (2, 500))
    ra, dec = move(np.full(500, 0.01), np.full(500, dec0), 1e3 * east, 1e3 * north, 1.0)
    exact = offsets_arcsec(0.01, dec0, ra, dec)
    quick = _offsets(np.radians([0.01]), np.radians([dec0]), np.zeros(500, dtype=np.intp), ra, dec)
    assert np.abs(np.subtract(exact, quick)).max() < 1e-4


def test_what_does_not_fit_is_refused() -> None:
    f = fields(3, 0.01, 1)
    with pytest.raises(RangeError, match="do not fit"):
        weighed(f | {"start": f["start"][:-1]})
    with pytest.raises(RangeError, match="not allowed"):
        weighed(f, inner_arcsec=70.0)
    with pytest.raises(RangeError, match="floor above 0"):
        weighed(f, sigma=0.0)
    with pytest.raises(RangeError, match="not allowed"):
        weighed(f, listed_fraction=1.0)


def calibrated(targets: int, density: float, seed: int) -> None:
    """Of the rows whose odds fall in a decile, that share is true, within the binomial error of each decile."""
    f = fields(targets, density, seed)
    # the density is known in the simulation: a ring of few rows is noisy, which is its own test
    many = weighed(f)
    odds = with_density(f, many, density)
    for low in np.arange(0.0, 1.0, 0.1):
        inside = (odds > max(low, 1e-3)) & (odds <= low + 0.1)
        n, said = int(inside.sum()), float(odds[inside].sum())
        if n < 100:
            continue
        seen, mean = int(f["true"][inside].sum()), said / n
        p = 2 * min(binom.cdf(seen, n, mean), binom.sf(seen - 1, n, mean))
        assert p > 1e-4, (density, low, n, seen / n, mean)


def with_density(f: dict[str, Any], many: Many, density: float) -> Floats:
    """The odds at a known density instead of the ring's."""
    t = f["which"]
    ratio = many.odds / many.none_listed[t] * many.density_per_arcsec2[t] / density
    total = np.bincount(t, weights=ratio, minlength=len(f["ra"])) + 1.0
    return np.asarray(ratio / total[t])


DENSITIES = (0.0005, 0.01, 0.1)
"""Rows per square arcsec: a sparse sky, the plane, the bulge (6.5e3, 1.3e5 and 1.3e6 per square degree)."""


@pytest.mark.parametrize("density", DENSITIES)
def test_the_posterior_is_calibrated_in_every_decile(density: float) -> None:
    """Sutherland & Saunders 1992: of rows with reliability R a fraction R are true."""
    calibrated(6_000, density, 11)


@pytest.mark.long
@pytest.mark.parametrize("density", DENSITIES)
def test_the_posterior_is_calibrated_over_a_hundred_thousand_fields(density: float) -> None:
    for seed in range(10):  # in parts, to stay small
        calibrated(10_000, density, 100 + seed)


def chance_is_uniform(targets: int, density: float, seed: int) -> None:
    f = fields(targets, density, seed, q=0.0)
    many = weighed(f)
    filled = np.flatnonzero(np.diff(f["start"]) > 0)
    nearest = np.minimum.reduceat(many.chance, f["start"][filled])
    # at the density that is known in the simulation instead of the ring's
    nearest = -np.expm1(np.log1p(-nearest) * density / many.density_per_arcsec2[filled])
    # in the sparse sky some fields are empty: there the chance is 1 minus what is left
    highest = 1.0 - np.exp(-density * np.pi * RADIUS**2)
    kept = nearest[nearest < 0.5 * highest]
    assert kstest(kept / (0.5 * highest), "uniform").pvalue > 1e-4
    share = kept.size / targets
    assert abs(share - 0.5 * highest) < 4.0 * np.sqrt(0.25 / targets)


@pytest.mark.parametrize("density", DENSITIES)
def test_the_chance_of_the_nearest_row_is_uniform_where_nothing_is_true(density: float) -> None:
    chance_is_uniform(5_000, density, 21)


@pytest.mark.long
@pytest.mark.parametrize("density", DENSITIES)
def test_chance_is_uniform_over_a_hundred_thousand_fields(density: float) -> None:
    for seed in range(10):
        chance_is_uniform(10_000, density, 200 + seed)


@pytest.mark.parametrize("density", [0.01, 0.1])
def test_a_density_from_the_ring_keeps_the_posterior_honest(density: float) -> None:
    f = fields(6_000, density, 31)
    odds = weighed(f).odds
    strong = odds > 0.9
    n = int(strong.sum())
    if n > 100:
        mean = float(odds[strong].mean())
        assert abs(float(f["true"][strong].mean()) - mean) < 4.0 * np.sqrt(mean * (1 - mean) / n) + 0.01
    middle = (odds > 0.3) & (odds < 0.7)
    n, mean = int(middle.sum()), float(odds[middle].mean())
    assert n > 100
    assert abs(float(f["true"][middle].mean()) - mean) < 4.0 * np.sqrt(0.25 / n) + 0.03


def test_faster_than_a_loop_over_sky_coordinates() -> None:
    """Loose form of tests/benchmarks/bench_match.py: fifty times there, ten times asked for here."""
    path = Path(__file__).parent.parent / "benchmarks" / "bench_match.py"
    spec = importlib.util.spec_from_file_location("bench_match", path)
    assert spec is not None and spec.loader is not None
    bench = importlib.util.module_from_spec(spec)
    sys.modules["bench_match"] = bench
    spec.loader.exec_module(bench)
    facts = bench.sky(3000, 100)
    bench.loop(facts, 3)
    assert bench.loop(facts, 40) / 40 * 3000 > 10.0 * bench.best(facts)
