"""The kinds of test a class file may name. Each prints the numbers it compared."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np

from xmatch.classes.model import Prediction
from xmatch.classes.scene import Scene
from xmatch.constants import KEV_HZ
from xmatch.flux.absorption import transmitted_fraction
from xmatch.flux.extinction import band_extinction_mag
from xmatch.flux.luminosity import sphere_cm2
from xmatch.flux.spectra import Blackbody, PowerLaw, Spectrum, radio_band_flux_cgs
from xmatch.limits.bounds import z_one_sided
from xmatch.records import Floats, PhysicalLimit, RotationBudget

COLUMN_POINTS, KT_POINTS, AV_POINTS = 48, 16, 64
"""Grid points of the interpolated transmissions; tests hold their error below 2 %."""
BOLOMETRIC = np.pi**4 / 15.0
"""Integral of x^3 / (e^x - 1) over all x."""


@dataclass(frozen=True)
class Verdict:
    """What one test says: how much of each draw passes, or None when it could not be made."""

    name: str
    sentence: str
    passes: Floats | None
    source: str
    informs_only: bool = False


TestKind = Callable[[Scene, Prediction, np.random.Generator], Verdict]


def _not_made(prediction: Prediction, why: str) -> Verdict:
    return Verdict(prediction.name, f"not made: {why}", None, prediction.source)


def _span(values: Floats, unit: str) -> str:
    low, high = float(values.min()), float(values.max())
    return f"{low:.2g} {unit}" if low == high else f"{low:.2g} to {high:.2g} {unit}"


def _distance_text(scene: Scene) -> str:
    assert scene.target.distance is not None
    return f"{scene.target.distance.low_pc / 1e3:.3g}-{scene.target.distance.high_pc / 1e3:.3g} kpc"


def _budget(scene: Scene, star: str) -> RotationBudget | None:
    if scene.spin is None:
        return None
    return next((budget for budget in scene.spin.budgets if budget.star == star), None)


def missed(flux: Floats, limit: PhysicalLimit, value: float) -> Floats:
    """Chance that the catalog would not list sources of these fluxes.

    Notes
    -----
    1 - Phi((F - t s)/s), with the threshold t s and noise s that put the limit's confidence at the limit: Gaussian noise
    at the threshold of a source list.
    """
    from scipy.special import ndtr

    total = limit.limit.n_sigma or 5.0 + float(z_one_sided(limit.limit.confidence))
    threshold = total - float(z_one_sided(limit.limit.confidence))
    sigma = value / total
    return np.asarray(ndtr(threshold - np.minimum(flux / sigma, 1.0e6)))


def spin_down_budget(scene: Scene, prediction: Prediction, rng: np.random.Generator) -> Verdict:
    """Is the radio light more than the spin-down can pay?"""
    budget = _budget(scene, prediction.words["star"])
    if budget is None:
        return _not_made(prediction, "no period derivative, nor a limit on it")
    if scene.distance_pc is None or not scene.target.pulses:
        return _not_made(prediction, "it needs a distance range and a pulse")
    a = scene.assumptions
    pulse = max(scene.target.pulses, key=lambda one: one.peak_jy * one.nu_hz)
    flux = float(radio_band_flux_cgs(pulse.peak_jy, pulse.nu_hz, a.radio_index, a.radio_low_hz, a.radio_high_hz))
    duty = 1.0
    if prediction.words["flux_kind"] == "period average" and scene.target.spin is not None:
        duty = min(1.0, pulse.width_s / scene.target.spin.period_s)
    light = flux * duty * a.beam_fraction * sphere_cm2(scene.distance_pc)
    allowed = prediction.numbers["efficiency"] * budget.power_erg_s
    less = "<" if budget.is_limit else ""
    sentence = (
        f"radio power {_span(light, 'erg/s')} over {_distance_text(scene)} ({prediction.words['flux_kind']} "
        f"{pulse.peak_jy:g} Jy at {pulse.nu_hz / 1e6:g} MHz, index {a.radio_index:g}, {a.radio_low_hz / 1e6:g} MHz to "
        f"{a.radio_high_hz / 1e9:g} GHz, beam {a.beam_fraction:g} of the sphere) against spin-down power {less}{allowed:.2g} erg/s"
    )
    conditional = scene.spin is not None and bool(scene.spin.conditional)
    if conditional:
        sentence += "; informs only, since the period may be orbital"
    return Verdict(prediction.name, sentence, (light <= allowed).astype(float), prediction.source, conditional)


def xray_from_spin_down(scene: Scene, prediction: Prediction, rng: np.random.Generator) -> Verdict:
    """Would X-rays in proportion to the spin-down have been seen?"""
    budget = _budget(scene, prediction.words["star"])
    limits = scene.xray_limits
    if budget is None or scene.distance_pc is None or not limits:
        return _not_made(prediction, "it needs a period derivative, a distance range and an X-ray limit")
    p = prediction.numbers
    log_l = p["log_zero"] + p["slope"] * np.log10(budget.power_erg_s)
    light = 10.0 ** (log_l + p["scatter_dex"] * rng.standard_normal(scene.n))
    spectrum = PowerLaw(p["photon_index"])
    own = float(spectrum.band_integral(p["low_kev"], p["high_kev"]))
    passes = np.ones(scene.n)
    parts = []
    for limit in limits:
        low, high = limit.limit.band.nu_low_hz / KEV_HZ, limit.limit.band.nu_high_hz / KEV_HZ
        share = float(spectrum.band_integral(low, high)) / own
        flux = light / sphere_cm2(scene.distance_pc) * share * _through(spectrum, low, high, scene.column_cm2)
        passes = passes * missed(flux, limit, limit.flux_cgs)
        parts.append(
            f"{float(np.median(flux)):.1e} expected against < {limit.flux_cgs:.1e} in {limit.limit.band.label}"
        )
    most = "at most " if budget.is_limit else ""
    sentence = (
        f"X-ray luminosity {most}10^{log_l:.1f} +- {p['scatter_dex']:g} dex erg/s ({p['low_kev']:g}-{p['high_kev']:g} keV) "
        f"from the spin-down power; absorbed flux in erg/s/cm^2: {'; '.join(parts)}"
    )
    return Verdict(prediction.name, sentence, passes, prediction.source)


def xray_luminosity(scene: Scene, prediction: Prediction, rng: np.random.Generator) -> Verdict:
    """Would a thermal X-ray source of the class have been seen?"""
    limits = scene.xray_limits
    if scene.distance_pc is None or not limits:
        return _not_made(prediction, "it needs a distance range and an X-ray limit")
    p = prediction.numbers
    light = 10.0 ** (p["mean_log"] + p["scatter_dex"] * rng.standard_normal(scene.n))
    kt = p["kt_low_kev"] * (p["kt_high_kev"] / p["kt_low_kev"]) ** rng.uniform(size=scene.n)
    passes = np.ones(scene.n)
    parts = []
    for limit in limits:
        low, high = limit.limit.band.nu_low_hz / KEV_HZ, limit.limit.band.nu_high_hz / KEV_HZ
        flux = light / sphere_cm2(scene.distance_pc) * blackbody_share(kt, low, high, scene.column_cm2)
        passes = passes * missed(flux, limit, limit.flux_cgs)
        parts.append(
            f"{float(np.median(flux)):.1e} expected against < {limit.flux_cgs:.1e} in {limit.limit.band.label}"
        )
    sentence = (
        f"bolometric luminosity 10^{p['mean_log']:g} +- {p['scatter_dex']:g} dex erg/s, blackbody of "
        f"{p['kt_low_kev']:g}-{p['kt_high_kev']:g} keV, column {scene.assumptions.column_cm2 or 0.0:.2g} cm^-2 +- "
        f"{scene.assumptions.column_scatter_dex:g} dex, {_distance_text(scene)}; absorbed flux in erg/s/cm^2 (median): "
        f"{'; '.join(parts)}"
    )
    return Verdict(prediction.name, sentence, passes, prediction.source)


def _through(spectrum: Spectrum, low: float, high: float, column: Floats) -> Floats:
    """Transmitted fraction per draw, interpolated in the logarithm between exact values."""
    top = max(float(column.max()), 1.0)
    bottom = max(float(column.min()), top * 1.0e-6)
    grid = np.geomspace(bottom, top, COLUMN_POINTS) if top > bottom else np.array([top])
    exact = np.log(np.maximum(transmitted_fraction(spectrum, low, high, grid), 1.0e-300))
    return np.exp(np.interp(np.log(np.maximum(column, bottom)), np.log(grid), exact))


def blackbody_share(kt_kev: Floats, low_kev: float, high_kev: float, column_cm2: Floats) -> Floats:
    """Part of a blackbody's bolometric flux that arrives in a band through a column.

    Parameters
    ----------
    kt_kev, column_cm2 : ndarray, same shape
        Temperature and column of each draw.
    low_kev, high_kev : float
        Band, within 0.1-20 keV.

    Notes
    -----
    Bilinear in log(kT) and log(column) between exact values of the logarithm of the share.
    """
    grid_t = np.geomspace(float(kt_kev.min()), float(kt_kev.max()) * (1.0 + 1.0e-9), KT_POINTS)
    top = max(float(column_cm2.max()), 1.0)
    grid_n = np.geomspace(max(float(column_cm2.min()), top * 1.0e-4, 1.0e-3), top * (1.0 + 1.0e-9), COLUMN_POINTS)
    table = np.empty((KT_POINTS, COLUMN_POINTS))
    for i, kt in enumerate(grid_t):
        spectrum = Blackbody(float(kt))
        emitted = float(spectrum.band_integral(low_kev, high_kev)) / (float(kt) * BOLOMETRIC)
        table[i] = np.log(np.maximum(emitted * transmitted_fraction(spectrum, low_kev, high_kev, grid_n), 1.0e-300))
    x = np.interp(np.log(kt_kev), np.log(grid_t), np.arange(KT_POINTS))
    y = np.interp(np.log(np.maximum(column_cm2, grid_n[0])), np.log(grid_n), np.arange(COLUMN_POINTS))
    i, j = np.minimum(x.astype(int), KT_POINTS - 2), np.minimum(y.astype(int), COLUMN_POINTS - 2)
    u, v = x - i, y - j
    value = (1 - u) * ((1 - v) * table[i, j] + v * table[i, j + 1]) + u * (
        (1 - v) * table[i + 1, j] + v * table[i + 1, j + 1]
    )
    return np.exp(value)


def companion_magnitudes(scene: Scene, prediction: Prediction, rng: np.random.Generator) -> Verdict:
    """Which spectral types would have been seen?"""
    bands = list(prediction.types[0].magnitudes)
    limits = scene.limits_of(bands)
    if scene.distance_pc is None or not limits:
        return _not_made(prediction, f"it needs a distance range and a limit in {' or '.join(bands)}")
    modulus = 5.0 * np.log10(scene.distance_pc / 10.0)
    scatter = prediction.numbers["scatter_mag"] * rng.standard_normal(scene.n)
    a = scene.assumptions
    grid = np.linspace(0.0, max(float(scene.av_mag.max()), 1.0e-6), AV_POINTS)
    dimmed = {}
    for limit in limits:
        curve = band_extinction_mag(limit.limit.band, grid, law=a.extinction_law, r_v=a.r_v)
        magnitudes = modulus + scatter + np.interp(scene.av_mag, grid, curve) - limit.limit.value
        dimmed[limit.limit.band.label] = 10.0 ** (-0.4 * magnitudes)  # flux of M = 0 over the limit
    survive = np.empty((len(prediction.types), scene.n))
    for row, star in enumerate(prediction.types):
        # the bands of one star are not independent chances: the one that shows it best decides
        best = np.max([10.0 ** (-0.4 * star.magnitudes[label]) * flux for label, flux in dimmed.items()], axis=0)
        survive[row] = missed(best, limits[0], 1.0)
    by_type = survive.mean(axis=1)
    gone = [
        star.name
        for star, value in zip(prediction.types, by_type, strict=True)
        if value < scene.assumptions.ruled_out_below
    ]
    left = [
        star.name
        for star, value in zip(prediction.types, by_type, strict=True)
        if value >= scene.assumptions.strained_below
    ]
    depths = ", ".join(f"{limit.limit.band.label} < {limit.limit.value:.2f} mag" for limit in limits)
    sentence = (
        f"{f'seen if {gone[0]} to {gone[-1]}' if gone else 'no type would surely have been seen'}; "
        f"{f'still allowed: {left[0]} and later' if left else 'no listed type is still allowed'} ({depths}, "
        f"A_V {scene.assumptions.av_mag or 0.0:.2f}, {_distance_text(scene)}, flat over the types listed)"
    ).replace(" < ", " > ")
    return Verdict(prediction.name, sentence, survive.mean(axis=0), prediction.source)


def death_lines(scene: Scene, prediction: Prediction, rng: np.random.Generator) -> Verdict:
    """How many models stop making pairs here? They disagree and only inform."""
    if scene.spin is None or not scene.spin.death_lines:
        return _not_made(prediction, "no period derivative, nor a limit on it")
    lines = scene.spin.death_lines
    below = sum(line.says == "below" for line in lines)
    values = [line.log_derivative for line in lines]
    sentence = (
        f"below {below} of {len(lines)} death lines, which spread over {max(values) - min(values):.1f} dex in derivative at "
        f"this period; they inform and rule nothing out alone"
    )
    return Verdict(prediction.name, sentence, None, prediction.source, informs_only=True)


def period_range(scene: Scene, prediction: Prediction, rng: np.random.Generator) -> Verdict:
    """Does the period lie among those of the class?"""
    if scene.target.spin is None:
        return _not_made(prediction, "no period")
    p, low, high = scene.target.spin.period_s, prediction.numbers["low_s"], prediction.numbers["high_s"]
    where = (
        "inside"
        if low <= p <= high
        else (f"{p / high:.3g} times the longest" if p > high else f"{p / low:.3g} of the shortest")
    )
    sentence = (
        f"period {p:g} s is {where} of the known {low:g}-{high:g} s; it informs, since long periods are hard to find"
    )
    return Verdict(prediction.name, sentence.replace("inside of", "inside"), None, prediction.source, informs_only=True)


KINDS: dict[str, TestKind] = {
    "spin-down budget": spin_down_budget,
    "x-ray luminosity from spin-down": xray_from_spin_down,
    "x-ray luminosity": xray_luminosity,
    "companion magnitudes": companion_magnitudes,
    "death lines": death_lines,
    "period range": period_range,
}
