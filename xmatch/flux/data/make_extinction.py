"""Make extinction.csv: A(lambda)/A(V) of two published Milky Way laws.

    python xmatch/flux/data/make_extinction.py

Columns a and b give A(lambda)/A(V) = a + b (1/R_V - 1/3.1) for Gordon et al. 2023, ApJ 950, 86 (0.0912-32 um), which is
linear in 1/R_V; column cardelli gives Cardelli, Clayton & Mathis 1989, ApJ 345, 245 at R_V = 3.1 (0.1-3.3 um, empty
elsewhere), kept to show how far published laws disagree. Both evaluated by the dust_extinction package (BSD-3).
"""

from __future__ import annotations

from pathlib import Path
from typing import Any

import numpy as np
from dust_extinction.parameter_averages import CCM89, G23

LOW_UM, HIGH_UM = 0.0913, 31.9
ROWS = 700
MEAN_RV, OTHER_RV = 3.1, 5.0


def main() -> None:
    wavelength = np.geomspace(LOW_UM, HIGH_UM, ROWS)
    x = 1.0 / wavelength
    a = np.asarray(G23(Rv=MEAN_RV)(x / _um()))
    other = np.asarray(G23(Rv=OTHER_RV)(x / _um()))
    b = (other - a) / (1.0 / OTHER_RV - 1.0 / MEAN_RV)
    inside = (x > 0.3) & (x < 10.0)
    cardelli = np.full(ROWS, np.nan)
    cardelli[inside] = np.asarray(CCM89(Rv=MEAN_RV)(x[inside] / _um()))
    path = Path(__file__).with_name("extinction.csv")
    with path.open("w", encoding="utf-8") as file:
        for line in (__doc__ or "").strip().splitlines():
            file.write(f"# {line}".rstrip() + "\n")
        file.write("wavelength_um,a,b,cardelli\n")
        for row in zip(wavelength, a, b, cardelli, strict=True):
            file.write(",".join("" if np.isnan(value) else f"{value:.7g}" for value in row) + "\n")
    print(f"{path}: {ROWS} rows")


def _um() -> Any:
    import astropy.units as u

    return u.micron


if __name__ == "__main__":
    main()
