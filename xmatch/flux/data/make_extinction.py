"""Make extinction.csv: A(lambda)/A(V) of published Milky Way laws.

    python xmatch/flux/data/make_extinction.py

Columns a and b give A(lambda)/A(V) = a + b (1/R_V - 1/3.1) for Gordon et al. 2023, ApJ 950, 86 (0.0912-32 um), which is
linear in 1/R_V; column cardelli gives Cardelli, Clayton & Mathis 1989, ApJ 345, 245 at R_V = 3.1 (0.1-3.3 um, empty
elsewhere), kept to show how far published laws disagree; so are fitzpatrick99 and fitzpatrick19 (Fitzpatrick 1999, PASP
111, 63; Fitzpatrick et al. 2019, ApJ 886, 108; 0.115-3.3 um), all evaluated by the dust_extinction package (BSD-3), and
wang (Wang & Chen 2019, ApJ 877, 116, their formulas, 0.3-3.3 um), evaluated here.
"""

from __future__ import annotations

from pathlib import Path
from typing import Any

import numpy as np
from dust_extinction.parameter_averages import CCM89, F19, F99, G23

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
    columns = [wavelength, a, b, cardelli]
    for law in (F99, F19):
        column = np.full(ROWS, np.nan)
        covered = (x > 0.3) & (x < 8.7)
        column[covered] = np.asarray(law(Rv=MEAN_RV)(x[covered] / _um()))
        columns.append(column)
    columns.append(wang_chen(wavelength))
    path = Path(__file__).with_name("extinction.csv")
    with path.open("w", encoding="utf-8") as file:
        for line in (__doc__ or "").strip().splitlines():
            file.write(f"# {line}".rstrip() + "\n")
        file.write("wavelength_um,a,b,cardelli,fitzpatrick99,fitzpatrick19,wang\n")
        for row in zip(*columns, strict=True):
            file.write(",".join("" if np.isnan(value) else f"{value:.7g}" for value in row) + "\n")
    print(f"{path}: {ROWS} rows")


def wang_chen(um: np.ndarray[Any, Any]) -> np.ndarray[Any, Any]:
    """A(lambda)/A(V) of Wang & Chen 2019, ApJ 877, 116: a polynomial to 1 um, a power law beyond."""
    y = 1.0 / um - 1.82
    coefficients = (1.0, 0.7499, -0.1086, -0.08909, 0.02905, 0.01069, 0.001707, -0.001002)
    optical = sum(c * y**n for n, c in enumerate(coefficients))
    curve = np.where(um < 1.0, optical, 0.3722 * um**-2.07)
    return np.where((um >= 0.3) & (um <= 3.33), curve, np.nan)


def _um() -> Any:
    import astropy.units as u

    return u.micron


if __name__ == "__main__":
    main()
