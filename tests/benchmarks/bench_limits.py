"""Ratios of the limits room: bounds in bulk against a root-finder per value, and a million mixed limits.

Run: python tests/benchmarks/bench_limits.py
"""

from __future__ import annotations

import time
from collections.abc import Callable

import numpy as np
from scipy.optimize import brentq
from scipy.special import gammaincc

from xmatch.limits import bounds, counts

MILLION = 1_000_000
FEW = 300


def timed(call: Callable[[], object]) -> float:
    """Seconds of one call."""
    began = time.perf_counter()
    call()
    return time.perf_counter() - began


def main() -> None:
    """Print the figures."""
    rng = np.random.default_rng(1)
    back = rng.uniform(0.0, 8.0, MILLION)
    seen = rng.poisson(back + 1.0).astype(float)
    few = list(zip(seen[:FEW], back[:FEW], strict=True))

    def roots() -> list[float]:
        return [
            brentq(lambda u, n=n, b=b: gammaincc(n + 1, u + b) - 0.05 * gammaincc(n + 1, b), 0.0, 100.0, xtol=1e-10)
            for n, b in few
        ]

    def classical_roots() -> list[float]:
        return [brentq(lambda u, n=n: gammaincc(n + 1, u) - 0.05, 0.0, 100.0, xtol=1e-10) for n, _ in few]

    for name, slow, fast in (
        ("Bayesian, known background", roots, lambda: counts.bayesian_upper(seen, back, 0.95)),
        ("Gehrels", classical_roots, lambda: counts.gehrels_upper(seen, 0.95)),
    ):
        ratio = (timed(slow) / FEW) / (timed(fast) / MILLION)
        print(f"{name}: {ratio:.0f} times faster than a root-finder per value")
    part = 20_000
    print(
        f"shortest interval: {timed(lambda: counts.kraft_interval(seen[:part], back[:part], 0.95)) / part * 1e6:.1f} us each"
    )

    quarter = MILLION // 4
    flux = rng.normal(size=quarter)

    def mixed() -> None:
        bounds.gaussian_bound(flux, 1.0, 0.95)
        counts.gehrels_upper(seen[:quarter], 0.95)
        counts.bayesian_upper(seen[:quarter], back[:quarter], 0.95)
        bounds.completeness_sigma(np.full(quarter, 5.0), 0.95)

    print(f"{MILLION} mixed limits (no shortest intervals): {timed(mixed):.2f} s")


if __name__ == "__main__":
    main()
