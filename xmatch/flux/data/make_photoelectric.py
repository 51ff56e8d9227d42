"""Make photoelectric_wilms2000.csv: the photoelectric cross-section of interstellar matter per hydrogen atom.

    python xmatch/flux/data/make_photoelectric.py

Sum over elements of abundance x photoelectric cross-section of the free atom. Abundances: Wilms, Allen & McCray
2000, ApJ 542, 914, table 2. Cross-sections: Elam, Ravel & Sieber 2002, Radiat. Phys. Chem. 63, 121, through the
xraydb package (MIT licence). One fifth of the hydrogen is molecular and absorbs 2.85 times as much per molecule as one
atom (Wilms, Allen & McCray 2000, section 2; both digits from memory). Grains are left out: they lower the
cross-section by a few per cent below 1 keV.

The energy grid is logarithmic and has a pair of points around every absorption edge of every element, 0.01 eV to either
side, so that straight lines in log-log between neighbours follow the curve to 0.2 per cent.
"""

from __future__ import annotations

from pathlib import Path

import numpy as np
import xraydb

ABUNDANCE = {
    "H": 1.0, "He": 9.77e-2, "C": 2.40e-4, "N": 7.59e-5, "O": 4.90e-4, "Ne": 8.71e-5, "Na": 1.45e-6, "Mg": 2.51e-5,
    "Al": 2.14e-6, "Si": 1.86e-5, "P": 2.63e-7, "S": 1.23e-5, "Cl": 1.32e-7, "Ar": 2.57e-6, "Ca": 1.58e-6,
    "Ti": 6.46e-8, "Cr": 3.24e-7, "Mn": 2.19e-7, "Fe": 2.69e-5, "Co": 8.32e-8, "Ni": 1.12e-6,
}  # fmt: skip
MOLECULAR_FRACTION = 0.2
MOLECULE_OVER_ATOM = 2.85
AVOGADRO = 6.02214076e23  # SI Brochure 9 (2019), exact
LOW_EV, HIGH_EV = 100.0, 20000.0
STEP = 0.007  # of the logarithm
BESIDE_EDGE_EV = 0.01


def sigma_cm2(energy_ev: np.ndarray) -> np.ndarray:
    """Cross-section per hydrogen atom, cm^2."""
    total = np.zeros_like(energy_ev)
    for element, abundance in ABUNDANCE.items():
        mu = xraydb.mu_elam(element, energy_ev, kind="photo")  # cm^2/g
        atom = mu * xraydb.atomic_mass(element) / AVOGADRO
        if element == "H":
            atom = atom * (1.0 - MOLECULAR_FRACTION + MOLECULAR_FRACTION * MOLECULE_OVER_ATOM / 2.0)
        total += abundance * atom
    return total


def grid_ev() -> tuple[np.ndarray, list[float]]:
    """Energies, and the edges among them."""
    edges = sorted(
        edge.energy
        for element in ABUNDANCE
        for edge in xraydb.xray_edges(element).values()
        if LOW_EV < edge.energy < HIGH_EV
    )
    smooth = np.exp(np.arange(np.log(LOW_EV), np.log(HIGH_EV) + STEP, STEP))
    around = [edge + side for edge in edges for side in (-BESIDE_EDGE_EV, BESIDE_EDGE_EV)]
    return np.unique(np.clip(np.round(np.concatenate([smooth, around]), 3), LOW_EV, HIGH_EV)), edges


def main() -> None:
    energy, edges = grid_ev()
    sigma = sigma_cm2(energy)
    path = Path(__file__).with_name("photoelectric_wilms2000.csv")
    doc = (__doc__ or "").strip().splitlines()
    with path.open("w", encoding="utf-8") as file:
        for line in doc:
            file.write(f"# {line}".rstrip() + "\n")
        file.write("#\n# edges_kev: " + " ".join(f"{edge / 1e3:.5f}" for edge in edges) + "\n")
        file.write("energy_kev,sigma_cm2_per_h\n")
        for e, s in zip(energy, sigma, strict=True):
            file.write(f"{e / 1e3:.8f},{s:.6e}\n")
    print(f"{path}: {len(energy)} rows, {len(edges)} edges")


if __name__ == "__main__":
    main()
