"""Rows of several catalogs as physical objects."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest

from xmatch.assumptions import Assumptions
from xmatch.match.decide import weigh
from xmatch.match.distinct import Field, new_shares
from xmatch.match.groups import Grouped, Listed, group
from xmatch.match.motion import move
from xmatch.match.nearby import pairs
from xmatch.records import Floats, Position, Rows

A = Assumptions()
HERE = Position(264.5, -33.8, 1.0, 1.0, epoch_yr=2026.0)
RADIUS = 300.0


def rows(places: list[tuple[float, float]], sigma: float, epoch: float = 2026.0, pm: float = np.nan, field: int = 40, seed: int = 1) -> Rows:  # fmt: skip
    """Rows at offsets, and a sparse field around, far from them."""
    rng = np.random.default_rng(seed)
    r, phi = np.sqrt(rng.uniform(60.0**2, RADIUS**2, field)), rng.uniform(0, 2 * np.pi, field)
    east = np.append([p[0] for p in places], r * np.sin(phi))
    north = np.append([p[1] for p in places], r * np.cos(phi))
    ra, dec = move(HERE.ra_deg, HERE.dec_deg, 1e3 * east, 1e3 * north, 1.0)
    one = np.ones(len(ra))
    error = np.where(np.isfinite(pm), 0.5, np.nan)
    return Rows(tuple(f"k{i}" for i in range(len(ra))), ra, dec, sigma * one, sigma * one, 0 * one, epoch * one, pm * one, np.where(np.isfinite(pm), 0.0, np.nan) * one, error * one, error * one)  # fmt: skip


def grouped(catalogs: dict[str, Rows], position: Position = HERE) -> Grouped:
    listed = [Listed(name, r, weigh(position, r, radius_arcsec=RADIUS, assumptions=A)) for name, r in catalogs.items()]
    return group(position, listed, radius_arcsec=RADIUS, assumptions=A)


def names(found: Grouped, catalogs: dict[str, Rows]) -> list[set[tuple[str, str]]]:
    ids = list(catalogs)
    return [{(ids[c], catalogs[ids[c]].key[i]) for c, i in one.members} for one in found.groups]


def test_one_star_in_three_catalogs_is_one_object_and_another_stays_apart() -> None:
    catalogs = {
        "a": rows([(0.5, 0.0), (-2.0, 1.0)], 0.1),
        "b": rows([(0.55, 0.05)], 0.1, seed=2),
        "c": rows([(0.3, -0.1), (-2.1, 1.1)], 0.3, seed=3),
    }
    found = grouped(catalogs)
    assert names(found, catalogs) == [
        {("a", "k0"), ("b", "k0"), ("c", "k0")},
        {("a", "k1"), ("c", "k1")},
    ]
    best, second = found.groups
    assert best.odds > second.odds
    assert best.log10_bayes > second.log10_bayes > 5.0
    assert best.together > 0.99
    assert best.sigma_major_arcsec < 0.1
    assert sum(one.odds for one in found.groups) + found.none_listed == pytest.approx(1.0, abs=1e-12)


def test_no_row_belongs_to_two_objects_and_no_catalog_lists_one_object_twice() -> None:
    rng = np.random.default_rng(7)
    catalogs = {
        name: rows([(float(e), float(n)) for e, n in rng.normal(0, 1.5, (12, 2))], 0.4, seed=i)
        for i, name in enumerate("abcd")
    }
    found = grouped(catalogs)
    members = [member for one in found.groups for member in one.members]
    assert len(members) == len(set(members))
    for one in found.groups:
        assert len({c for c, _ in one.members}) == len(one.members)
    # every compatible row is in exactly one object
    listed = {
        (i, int(j))
        for i, r in enumerate(catalogs.values())
        for j in np.flatnonzero(weigh(HERE, r, radius_arcsec=RADIUS, assumptions=A).compatible)
    }
    assert listed <= set(members)


def test_the_order_of_rows_and_of_catalogs_changes_nothing() -> None:
    rng = np.random.default_rng(11)
    catalogs = {
        name: rows([(float(e), float(n)) for e, n in rng.normal(0, 1.2, (6, 2))], 0.3, seed=i)
        for i, name in enumerate("abc")
    }
    first = grouped(catalogs)
    for seed in range(5):
        turn = np.random.default_rng(seed)
        shuffled = {}
        for name in turn.permutation(list(catalogs)):
            order = turn.permutation(len(catalogs[str(name)]))
            r = catalogs[str(name)]
            arrays = {k: v[order] for k, v in vars(r).items() if isinstance(v, np.ndarray)}
            shuffled[str(name)] = replace(r, key=tuple(r.key[i] for i in order), **arrays)
        again = grouped(shuffled)
        assert names(again, shuffled) == names(first, catalogs)
        assert [g.odds for g in again.groups] == pytest.approx([g.odds for g in first.groups], rel=1e-9)


def test_a_moving_star_takes_its_old_place_in_a_catalog_without_motions() -> None:
    # 1000 mas/yr east: at the target in 2026, 10 arcsec west in 2016, 26 arcsec west in 2000
    catalogs = {
        "new": rows([(-10.0, 0.0)], 0.05, 2016.0, 1000.0),
        "old": rows([(-26.0, 0.0)], 0.2, 2000.0, seed=2),
    }
    found = grouped(catalogs)
    assert names(found, catalogs) == [{("new", "k0"), ("old", "k0")}]
    assert found.groups[0].separation_arcsec < 0.1
    # a row that stayed where the star is now is not the star of 2000
    stayed = catalogs | {"old": rows([(0.0, 0.0)], 0.2, 2000.0, seed=2)}
    assert sorted(map(len, names(grouped(stayed), stayed))) == [1, 1]


def test_in_a_crowd_a_poor_position_is_not_tied_to_one_of_many_stars() -> None:
    rng = np.random.default_rng(3)
    crowd = rows([(float(e), float(n)) for e, n in rng.uniform(-5, 5, (80, 2))], 0.1, field=60_000)
    catalogs = {"x-rays": rows([(1.0, 0.0)], 1.5, seed=5), "stars": crowd}
    found = grouped(catalogs)
    assert all(len(members) == 1 for members in names(found, catalogs))


def test_a_target_without_an_epoch_and_catalogs_without_rows() -> None:
    still = replace(HERE, epoch_yr=None)
    catalogs = {"a": rows([(0.5, 0.0)], 0.1, 2016.0, 3.0), "b": rows([(0.5, 0.0)], 0.1, 2010.0, seed=4)}
    assert names(grouped(catalogs, still), catalogs) == [{("a", "k0"), ("b", "k0")}]
    nothing = grouped({"a": rows([], 0.1, field=0), "b": rows([], 0.1, field=30)})
    assert nothing.groups == () and nothing.none_listed == pytest.approx(1.0)


def field(east: Floats, north: Floats, expected: float) -> Field:
    one = np.full(len(east), 0.1)
    return Field(east, north, one, one, 0 * one, expected)


def test_catalogs_of_the_same_stars_count_once_and_others_whole() -> None:
    rng = np.random.default_rng(5)
    e, n = rng.uniform(-120, 120, (2, 300))
    e2, n2 = rng.uniform(-120, 120, (2, 300))
    jitter = rng.normal(0, 0.3, (2, 300))
    same = field(e + jitter[0], n + jitter[1], 0.1)
    half = field(np.append(e[:150], e2[:150]), np.append(n[:150], n2[:150]), 0.05)
    shares = new_shares([field(e, n, 0.2), same, field(e2, n2, 0.04), half], 3.4393)
    assert shares[0] == 1.0
    assert shares[1] < 0.05
    assert shares[2] < 0.6  # half of it stands in the one before
    assert abs(shares[3] - 0.5) < 0.15
    independent = new_shares([field(e, n, 0.2), field(e2, n2, 0.1)], 3.4393)
    assert independent[1] > 0.9
    assert new_shares([field(e, n, 0.2), field(e[:5], n[:5], 0.1)], 3.4393)[1] == 1.0  # too few to tell
    assert new_shares([], 3.0).shape == (0,)


def test_pairs_are_those_of_trying_all() -> None:
    rng = np.random.default_rng(6)
    a, b, reach = rng.uniform(-9, 9, 40), rng.uniform(-9, 9, 70), rng.uniform(0, 2, 40)
    i, j = pairs(a, reach, b)
    assert set(zip(i.tolist(), j.tolist(), strict=True)) == {
        (x, y) for x in range(40) for y in range(70) if abs(a[x] - b[y]) <= reach[x]
    }
