"""Tests that hold an X-ray luminosity, drawn from a class, against blank X-ray catalogs."""

from __future__ import annotations

import math
from collections.abc import Callable, Sequence

import numpy as np

from xmatch.classes.draws import Draws, middle
from xmatch.classes.evidence import Applied, Evidence, exposures_of, joint_miss, set_aside, sorted_out, span, span_kpc
from xmatch.classes.model import Prediction
from xmatch.classes.rotation_tests import NO_DISTANCE, NO_SPIN, isotropic_log10, say_power
from xmatch.classes.survival import miss_probability
from xmatch.flux.absorption import HIGH_KEV, LOW_KEV, transmitted_fraction, transmitted_fractions
from xmatch.flux.luminosity import sphere_cm2
from xmatch.flux.physical import edges_kev
from xmatch.flux.spectra import Blackbody, PowerLaw
from xmatch.records import Floats, PhysicalLimit

TEMPERATURE_NODES = 32
COLUMN_NODES = 48
"""Grid on which absorbed fractions are computed; between nodes their logarithm is read linearly in log kT and log N_H.
For 0.13-0.6 keV, or a power law, behind 1e20-1e23 cm^-2 the flux is good to 1 % (measured in
tests/classes/test_xray_tests.py)."""
LOWEST_COLUMN_CM2 = 1.0e16
"""Below this nothing is absorbed above 0.1 keV."""
TINY = 1.0e-300
BOLOMETRIC = math.pi**4 / 15.0
"""Integral of x^3 / (e^x - 1): what a blackbody's band integral is divided by (definition)."""


def xray_limits(evidence: Evidence) -> tuple[list[PhysicalLimit], list[PhysicalLimit]]:
    """X-ray limits within the range of the absorption table, and those outside it."""
    inside: list[PhysicalLimit] = []
    outside: list[PhysicalLimit] = []
    for limit in evidence.limits:
        if not limit.limit.band.is_xray or not limit.flux_cgs > 0.0:
            continue
        low, high = edges_kev(limit.limit.band)
        fits = low >= LOW_KEV * (1 - 1e-9) and high <= HIGH_KEV * (1 + 1e-9)
        (inside if fits else outside).append(limit)
    return inside, outside


def column_nodes(column_cm2: Floats, n: int = COLUMN_NODES) -> Floats:
    """Columns that span the draws, evenly in the logarithm."""
    low = max(float(column_cm2.min()), LOWEST_COLUMN_CM2)
    high = max(float(column_cm2.max()), low * 1.0001)
    return np.geomspace(low, high, n)


def blackbody_fraction(kt_kev: Floats, column_cm2: Floats, band_kev: tuple[float, float]) -> Floats:
    """Part of a blackbody's whole flux that arrives in a band behind a column.

    Parameters
    ----------
    kt_kev, column_cm2 : ndarray
        Temperature and equivalent hydrogen column of each draw, same shape (n,).
    band_kev : tuple of float
        Edges, within 0.1-20 keV.

    Notes
    -----
    Read from a grid, linearly in the logarithms; error in :data:`COLUMN_NODES`.
    """
    low_kt = float(kt_kev.min())
    temperatures = np.geomspace(low_kt, max(float(kt_kev.max()), low_kt * 1.0001), TEMPERATURE_NODES)
    columns = column_nodes(column_cm2)
    # in units of kT every blackbody is the same: one call integrates all temperatures
    emitted = Blackbody(1.0).band_integral(band_kev[0] / temperatures, band_kev[1] / temperatures) / BOLOMETRIC
    through = transmitted_fractions([Blackbody(float(kt)) for kt in temperatures], *band_kev, columns)
    grid = np.log(np.maximum(emitted[:, None] * through, TINY))
    x, i = _place(np.log(kt_kev), np.log(temperatures))
    y, j = _place(np.log(np.maximum(column_cm2, columns[0])), np.log(columns))
    below = grid[i, j] * (1 - y) + grid[i, j + 1] * y
    above = grid[i + 1, j] * (1 - y) + grid[i + 1, j + 1] * y
    return np.exp(below * (1 - x) + above * x)


def power_law_fraction(
    photon_index: float, column_cm2: Floats, band_kev: tuple[float, float], reference_kev: tuple[float, float]
) -> Floats:
    """Flux of a power law in a band behind a column, over its unabsorbed flux in a reference band. Shape (n,)."""
    spectrum = PowerLaw(photon_index)
    ratio = float(spectrum.band_integral(*band_kev) / spectrum.band_integral(*reference_kev))
    columns = column_nodes(column_cm2)
    through = np.maximum(transmitted_fraction(spectrum, *band_kev, columns), TINY)
    log_column = np.log(np.maximum(column_cm2, columns[0]))
    return ratio * np.exp(np.interp(log_column, np.log(columns), np.log(through)))


def _place(values: Floats, nodes: Floats) -> tuple[Floats, np.ndarray]:
    """Fraction of the way into an evenly spaced cell, and the cell."""
    step = (nodes[-1] - nodes[0]) / (len(nodes) - 1)
    position = np.clip((values - nodes[0]) / step, 0.0, len(nodes) - 1.0)
    cell = np.minimum(position.astype(np.intp), len(nodes) - 2)
    return position - cell, cell


def luminosity_template(prediction: Prediction, evidence: Evidence, draws: Draws) -> Applied:
    """Hold a log-normal X-ray luminosity with a blackbody spectrum against the X-ray limits.

    Notes
    -----
    Temperature drawn evenly in its logarithm over the file's range; luminosity log-normal; each draw is absorbed by
    its own column and put at its own distance.
    """
    if not len(draws.dist_pc):
        return Applied(NO_DISTANCE)
    rng = draws.own("x-ray luminosity")
    temperature, scatter = prediction.facts["temperature"], prediction.facts["scatter"].value
    mean = isotropic_log10(prediction.facts["luminosity"])
    kt = temperature.low * (temperature.high / temperature.low) ** rng.uniform(size=draws.n)
    log_l = mean + scatter * rng.standard_normal(draws.n)
    says = (
        f"log luminosity {mean:.2f} +- {scatter:g} erg/s bolometric, "
        f"blackbody {temperature.low:g}-{temperature.high:g} keV"
    )
    flux = 10.0**log_l / sphere_cm2(draws.dist_pc)

    def arriving(band_kev: tuple[float, float]) -> Floats:
        return flux * blackbody_fraction(kt, draws.column_cm2, band_kev)

    return _against_limits(arriving, says, evidence, draws)


def luminosity_from_spin_down(prediction: Prediction, evidence: Evidence, draws: Draws) -> Applied:
    """Hold the X-ray luminosity that a spin-down power implies against the X-ray limits.

    Notes
    -----
    log L = intercept + slope log Edot with log-normal scatter (Possenti et al. 2002, A&A 387, 993). An upper limit of
    the power predicts no more than an upper limit, and a power outside the calibrated range is an extrapolation: either
    way the test only informs.
    """
    facts = prediction.facts
    budget = evidence.budget(prediction.choices["star"])
    if budget is None:
        return Applied(NO_SPIN)
    if not len(draws.dist_pc):
        return Applied(NO_DISTANCE)
    calibrated = facts["calibrated"]
    mean = isotropic_log10(facts["intercept"]) + facts["slope"].value * math.log10(budget.power_erg_s)
    log_l = mean + facts["scatter"].value * draws.own("x-ray from spin-down").standard_normal(draws.n)
    band = (facts["band"].low, facts["band"].high)
    index = facts["photon_index"].value
    says = (
        f"log luminosity {mean:.1f} +- {facts['scatter'].value:g} erg/s in {band[0]:g}-{band[1]:g} keV from "
        f"{say_power(budget)}, photon index {index:g}"
    )
    doubts = []
    if not calibrated.low <= budget.power_erg_s <= calibrated.high:
        doubts.append(
            f"the relation was measured over {calibrated.low:.0e}-{calibrated.high:.0e} erg/s: this extrapolates it"
        )
    if budget.is_limit:
        doubts.append("the power is an upper limit, and so is the prediction")
    flux = 10.0**log_l / sphere_cm2(draws.dist_pc)

    def arriving(band_kev: tuple[float, float]) -> Floats:
        return flux * power_law_fraction(index, draws.column_cm2, band_kev, band)

    return _against_limits(arriving, says, evidence, draws, doubts)


def _against_limits(
    arriving: Callable[[tuple[float, float]], Floats],
    says: str,
    evidence: Evidence,
    draws: Draws,
    doubts: Sequence[str] = (),
) -> Applied:
    """Miss probability over all X-ray catalogs, and the sentence with the numbers."""
    inside, outside = xray_limits(evidence)
    limits, doubt = sorted_out(inside)
    beyond = ", ".join(limit.limit.band.label for limit in outside)
    if not limits:
        why = f"no X-ray limit within {LOW_KEV:g}-{HIGH_KEV:g} keV"
        return Applied(f"predicted {says}; {why}" + (f" ({beyond} lies outside)" if beyond else ""))
    misses: list[tuple[str, Floats]] = []
    compared = []
    for limit in limits:
        flux = arriving(edges_kev(limit.limit.band))
        miss = miss_probability(flux, limit.flux_cgs, limit.limit.n_sigma, limit.limit.confidence)
        misses.append((exposures_of(limit), miss))
        low, high = middle(flux)
        compared.append(
            f"{low:.1e} to {high:.1e} erg/s/cm^2 (5-95 %) in {limit.limit.band.label} against < {limit.flux_cgs:.1e} "
            f"at {limit.limit.confidence:.0%}: {_percent(float(miss.mean()))} missed"
        )
    column_low, column_high = middle(draws.column_cm2)
    column = f"column {span(column_low, column_high)} cm^-2" if column_high > 0.0 else "no column"
    sentence = f"predicted {says}, {column}, {span_kpc(draws.dist_pc)}: {'; '.join(compared)}{set_aside(inside)}"
    if beyond:
        sentence += f"; not used: {beyond} (outside {LOW_KEV:g}-{HIGH_KEV:g} keV)"
    reasons = [*doubts, *([doubt] if doubt else [])]
    if reasons:
        sentence += f"; informs only: {'; '.join(reasons)}"
    return Applied(
        sentence,
        weights=joint_miss(misses, draws.n),
        informs_only=bool(reasons),
        overturn="a larger column, or a class that is fainter in X-rays than its known members",
    )


def _percent(fraction: float) -> str:
    return "under 0.1 %" if fraction < 1.0e-3 else f"{100.0 * fraction:.{1 if fraction < 0.1 else 0}f} %"
