"""Ratios of the match room, all measured in one run.

    python tests/benchmarks/bench_match.py [--targets N] [--rows N]

- weighing every row of many targets with full covariances and odds (goal: 1e5 targets x 100 rows under 2 s)
- the same offsets and normalised separations from a loop over astropy SkyCoord objects, one target at a time, timed on a
  sample and scaled (goal: at least 50 times slower)
- time and memory over twice the targets (goal: linear, up to 2.3)

Exit code 1 when a goal is missed by more than the noise of a busy machine allows (factor 1.5).
"""

from __future__ import annotations

import argparse
import sys
import time
import tracemalloc

import numpy as np

from xmatch.match.many import Many, weigh_many

NOISE = 1.5
SAMPLE = 200
RADIUS = 120.0


def sky(targets: int, rows: int) -> dict[str, object]:
    """Targets anywhere, each with rows spread over a cone of 120 arcsec."""
    rng = np.random.default_rng(1)
    ra, dec = rng.uniform(0, 360, targets), np.degrees(np.arcsin(rng.uniform(-0.99, 0.99, targets)))
    n = targets * rows
    r, phi = RADIUS / 3600.0 * np.sqrt(rng.uniform(size=n)), rng.uniform(0, 2 * np.pi, n)
    which = np.repeat(np.arange(targets), rows)
    row_dec = dec[which] + r * np.cos(phi)
    row_ra = (ra[which] + r * np.sin(phi) / np.cos(np.radians(row_dec))) % 360.0
    a, b = rng.uniform(0.1, 0.5, n) ** 2, rng.uniform(0.1, 0.5, n) ** 2
    one = np.ones(targets)
    return {
        "ra_deg": ra, "dec_deg": dec, "covariance_arcsec2": (one, 2.0 * one, 0.3 * one),
        "start": np.arange(0, n + 1, rows), "row_ra_deg": row_ra, "row_dec_deg": row_dec,
        "row_covariance_arcsec2": (a, b, 0.3 * np.sqrt(a * b)),
    }  # fmt: skip


def weighed(facts: dict[str, object]) -> Many:
    return weigh_many(
        **facts, radius_arcsec=RADIUS, inner_arcsec=6.0, listed_fraction=0.5, frame_sigma_arcsec=0.05, heavy_tail=1e-3
    )  # type: ignore[arg-type]


def loop(facts: dict[str, object], targets: int) -> float:
    """Seconds for a loop of one SkyCoord a target, doing the same work with library calls."""
    from astropy import units as u
    from astropy.coordinates import SkyCoord

    start = time.perf_counter()
    for i in range(targets):
        here = slice(int(facts["start"][i]), int(facts["start"][i + 1]))  # type: ignore[index]
        target = SkyCoord(facts["ra_deg"][i], facts["dec_deg"][i], unit="deg")  # type: ignore[index]
        rows = SkyCoord(facts["row_ra_deg"][here], facts["row_dec_deg"][here], unit="deg")  # type: ignore[index]
        east, north = (v.to_value(u.arcsec) for v in target.spherical_offsets_to(rows))
        xx, yy, xy = (facts["row_covariance_arcsec2"][c][here] + facts["covariance_arcsec2"][c][i] for c in range(3))  # type: ignore[index]
        det = xx * yy - xy**2
        square = (east**2 * yy - 2 * east * north * xy + north**2 * xx) / det
        r = target.separation(rows).arcsec
        rho = max(np.count_nonzero(r > 6.0), 1) / (np.pi * (RADIUS**2 - 36.0))
        ratio = 0.5 * np.exp(-0.5 * square) / (2 * np.pi * np.sqrt(det)) / rho
        ratio / (ratio.sum() + 0.5)
    return time.perf_counter() - start


def best(facts: dict[str, object], rounds: int = 3) -> float:
    times = []
    for _ in range(rounds):
        start = time.perf_counter()
        weighed(facts)
        times.append(time.perf_counter() - start)
    return min(times)


def main() -> int:
    parser = argparse.ArgumentParser(description=__doc__)
    parser.add_argument("--targets", type=int, default=100_000)
    parser.add_argument("--rows", type=int, default=100)
    options = parser.parse_args()
    facts = sky(options.targets, options.rows)
    loop(facts, 5)  # imports and caches
    seconds = best(facts)
    sample = min(SAMPLE, options.targets)
    slow = loop(facts, sample) / sample * options.targets
    half = best(sky(options.targets // 2, options.rows))
    tracemalloc.start()
    weighed(facts)
    peak = tracemalloc.get_traced_memory()[1]
    tracemalloc.stop()
    answer = 8 * 3 * options.targets * options.rows
    goals = [
        ("all targets, seconds for 1e5 x 100 rows", seconds * 1e7 / (options.targets * options.rows), 2.0, False),
        ("a loop over SkyCoord objects, times slower", slow / seconds, 50.0, True),
        ("twice the targets, times longer", seconds / half, 2.3, False),
        ("peak memory over the size of the answer", peak / answer, 1.5, False),
    ]
    missed = 0
    for name, value, goal, at_least in goals:
        met = value >= goal / NOISE if at_least else value <= goal * NOISE
        missed += not met
        print(f"{name:<48} {value:8.2f}   goal {'>=' if at_least else '<='} {goal:g}{'' if met else '   MISSED'}")
    return int(missed > 0)


if __name__ == "__main__":
    sys.exit(main())
