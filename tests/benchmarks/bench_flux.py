"""Ratios of the flux room: the limit grid, and band integrals against adaptive quadrature.

python tests/benchmarks/bench_flux.py
"""

from __future__ import annotations

import time
import warnings
from collections.abc import Callable

import astropy.units as u
import numpy as np
from scipy.integrate import quad

from xmatch.flux.absorption import cross_section_cm2, transmitted_fraction
from xmatch.flux.grid import limit_grid
from xmatch.flux.spectra import PowerLaw

LIMITS, DISTANCES, COLUMNS = 100_000, 60, 20
SUBSET = 2_000
BAND = (0.5, 2.0)


def best_s(function: Callable[[], object], times: int = 3) -> float:
    """Shortest of some runs, seconds."""
    taken = []
    for _ in range(times):
        start = time.perf_counter()
        function()
        taken.append(time.perf_counter() - start)
    return min(taken)


def main() -> None:
    rng = np.random.default_rng(1)
    flux, dist = 10.0 ** rng.uniform(-15, -12, LIMITS), np.geomspace(500.0, 15000.0, DISTANCES)
    columns, spectrum = np.geomspace(1e20, 1e22, COLUMNS), PowerLaw(2.0)
    out = np.empty((LIMITS, DISTANCES, COLUMNS))
    out[...] = 0.0  # the buffer is ready: its pages are there
    factor = rng.uniform(size=(DISTANCES, COLUMNS))

    def built() -> object:
        return limit_grid(flux, dist, columns, spectrum, BAND, 0.01)

    grid = built()
    outer = best_s(lambda: np.multiply(flux[:, None, None], factor, out=out))
    full = best_s(lambda: limit_grid(flux, dist, columns, spectrum, BAND, 0.01).expanded(out=out))
    print(f"grid of {out.size:.2g} luminosities / numpy outer product into the same buffer: {full / outer:.2f}")
    print(f"factors alone / the same outer product: {best_s(built) / outer:.4f}")

    def by_quantity() -> None:
        for f in flux[:SUBSET]:
            d = dist[0] * u.pc
            (4.0 * np.pi * d**2 * (f * u.erg / u.s / u.cm**2) / 0.5).to(u.erg / u.s)

    each = best_s(by_quantity, 1) / SUBSET
    print(f"astropy Quantity per element / the grid per element: {each / (full / out.size):.3g}")
    assert np.allclose(grid.expanded(slice(0, 3)), out[:3])

    n = 200
    lows, n_h = rng.uniform(0.3, 1.0, n), 10.0 ** rng.uniform(20, 22, n)

    def by_quad() -> None:
        with warnings.catch_warnings():
            warnings.simplefilter("ignore")
            for low, column in zip(lows, n_h, strict=True):
                quad(lambda e, c=column: np.exp(-c * float(cross_section_cm2(e))) / e, low, 10.0, limit=200)

    many = np.geomspace(1e20, 1e22, 20_000)
    mine = best_s(lambda: transmitted_fraction(spectrum, *BAND, many)) / len(many)
    print(f"scipy quad per band integral / ours: {best_s(by_quad, 1) / n / mine:.3g}")


if __name__ == "__main__":
    main()
