"""Test that asks which stars of the main sequence the blank optical and infrared catalogs would have shown."""

from __future__ import annotations

from collections.abc import Mapping

import numpy as np

from xmatch.assumptions import Assumptions
from xmatch.classes.draws import Draws, middle
from xmatch.classes.evidence import Applied, Evidence, exposures_of, joint_miss, set_aside, sorted_out, span, span_kpc
from xmatch.classes.model import MagnitudeTable, Prediction, TemplateBand
from xmatch.classes.rotation_tests import NO_DISTANCE
from xmatch.classes.survival import miss_probability
from xmatch.constants import C_CM_S
from xmatch.errors import RangeError
from xmatch.flux.extinction import band_extinction_mag
from xmatch.flux.luminosity import absolute_magnitude
from xmatch.flux.magnitudes import ab_to_jy, jy_to_ab, jy_to_vega, to_flux_density_jy, vega_to_jy
from xmatch.records import Band, Floats, MagnitudeSystem, Outcome, PhysicalLimit, Quantity, Waveband

UM_CM = 1.0e-4
SAME_WAVELENGTH, SAME_WIDTH = 0.04, 0.4
"""Two bands are the same when their pivots agree to 4 % and their widths to 40 % (our choice: it joins the J or K bands
of different cameras and keeps a broad G apart from a narrow r)."""
LIGHT = (Waveband.ULTRAVIOLET, Waveband.OPTICAL, Waveband.NEAR_INFRARED, Waveband.MID_INFRARED)
EXTINCTION_NODES = 64
TAIL_SIGMA = 2.0
"""Intrinsic scatters by which a detection may lie beyond the table's brightest and faintest star (our choice)."""
MOST = 0.5
"""Part of the draws that must put a counterpart among the listed stars for it to speak for the class (our choice)."""


def match_band(table: MagnitudeTable, band: Band) -> TemplateBand | None:
    """The template band that a catalog's band is the same as, if any."""
    if band.waveband not in LIGHT or band.quantity is Quantity.BAND_FLUX:
        return None
    wavelength = C_CM_S / band.nu_hz / UM_CM
    width = C_CM_S / band.nu_low_hz / UM_CM - C_CM_S / band.nu_high_hz / UM_CM
    for known in table.bands:
        same_place = abs(wavelength / known.wavelength_um - 1.0) <= SAME_WAVELENGTH
        if same_place and abs(width / known.width_um - 1.0) <= SAME_WIDTH:
            return known
    return None


def extinction_of_draws(band: Band, av_mag: Floats, assumptions: Assumptions) -> Floats:
    """Extinction of a band for every draw, mag; read from a grid over A_V, which is exact to 0.001 mag."""
    highest = float(av_mag.max(initial=0.0))
    if highest <= 0.0:
        return np.zeros_like(av_mag)
    grid = np.linspace(0.0, np.sqrt(highest), EXTINCTION_NODES) ** 2
    known = band_extinction_mag(band, grid, law=assumptions.extinction_law, r_v=assumptions.r_v)
    return np.interp(av_mag, grid, known)


def companion_magnitudes(prediction: Prediction, evidence: Evidence, draws: Draws) -> Applied:
    """Ask which spectral types the blank catalogs would have shown over distance and extinction.

    Notes
    -----
    Every listed type is taken as equally likely and holds the same number of draws; survival is the mean over all. A
    type is still allowed where at least ``strained_below`` of its draws are missed. Colours within a band are ignored.
    """
    table = prediction.magnitudes
    if table is None:
        raise RangeError("companion magnitudes without a table are not allowed; give one in the class file")
    if not len(draws.dist_pc):
        return Applied(NO_DISTANCE)
    matched: list[tuple[PhysicalLimit, TemplateBand]] = []
    for limit in evidence.limits:
        known = match_band(table, limit.limit.band)
        if known is not None and limit.flux_density_jy is not None and limit.flux_density_jy > 0.0:
            matched.append((limit, known))
    favours, seen = _counterpart(table, prediction.facts["scatter"].value, evidence, draws)
    limits, doubt = sorted_out([limit for limit, _ in matched])
    bands = ", ".join(band.name for band in table.bands)
    if not limits:
        return Applied(f"no limit in a band with listed magnitudes ({bands}){seen}", favours=favours)
    names = list(table.types)
    rng = draws.own("companion magnitudes")
    # every type holds the same number of draws, spread evenly over the shared distances
    kind = rng.permutation(np.arange(draws.n) % len(names))
    offset = prediction.facts["scatter"].value * rng.standard_normal(draws.n) + 5.0 * np.log10(draws.dist_pc / 10.0)
    misses = []
    compared = []
    for limit, known in matched:
        if limit not in limits:
            continue
        listed = np.array([table.types[name].get(known.name, np.nan) for name in names])
        apparent = listed[kind] + offset + extinction_of_draws(limit.limit.band, draws.av_mag, evidence.assumptions)
        flux = np.nan_to_num(_to_jy(apparent, known))  # a type without a magnitude here cannot be seen here
        misses.append(
            (
                exposures_of(limit),
                miss_probability(flux, limit.flux_density_jy or 0.0, limit.limit.n_sigma, limit.limit.confidence),
            )
        )
        compared.append(
            f"{limit.limit.band.label} > {_to_mag(limit.flux_density_jy or 0.0, known):.2f} mag ({known.system}, "
            f"{limit.limit.confidence:.0%})"
        )
    weights = joint_miss(misses, draws.n)
    per_type = np.bincount(kind, weights, minlength=len(names)) / np.maximum(np.bincount(kind, minlength=len(names)), 1)
    av_low, av_high = middle(draws.av_mag)
    dust = f"A_V {span(av_low, av_high)} mag" if av_high > 0.0 else "no extinction"
    sentence = (
        f"{_says_types(dict(zip(names, per_type, strict=True)), evidence.assumptions.strained_below)} over "
        f"{span_kpc(draws.dist_pc)}, {dust}, scatter {prediction.facts['scatter'].value:g} mag, against "
        f"{', '.join(compared)}{set_aside([limit for limit, _ in matched])}{seen}"
    )
    if doubt:
        sentence += f"; informs only: {doubt}"
    return Applied(
        sentence,
        weights=weights,
        informs_only=bool(doubt),
        overturn="a larger extinction or distance, or a star fainter than its type",
        favours=favours,
    )


def _says_types(missed: Mapping[str, float], strained_below: float) -> str:
    """Which types are excluded and which remain, in the order of the file."""
    allowed = [name for name, fraction in missed.items() if fraction >= strained_below]
    first, last = next(iter(missed)), list(missed)[-1]
    if not allowed:
        return f"every type from {first} to {last} would have been seen"
    if len(allowed) == len(missed):
        return f"no type from {first} to {last} is excluded"
    return f"earliest type still allowed {allowed[0]}, latest {allowed[-1]} (of {first} to {last})"


def _to_jy(mag: Floats, band: TemplateBand) -> Floats:
    return ab_to_jy(mag) if band.system is MagnitudeSystem.AB else vega_to_jy(mag, band.zero_point_jy)


def _to_mag(flux_jy: float, band: TemplateBand) -> float:
    return float(jy_to_ab(flux_jy) if band.system is MagnitudeSystem.AB else jy_to_vega(flux_jy, band.zero_point_jy))


def _counterpart(table: MagnitudeTable, scatter: float, evidence: Evidence, draws: Draws) -> tuple[bool, str]:
    """Whether an accepted counterpart has the absolute magnitude of a listed star, and the words for it."""
    for finding in evidence.findings:
        if finding.outcome is not Outcome.COUNTERPART or not finding.candidates:
            continue
        best = max(finding.candidates, key=lambda candidate: candidate.odds)
        for measured in best.photometry:
            known = match_band(table, measured.band)
            if known is None or measured.is_limit or not np.isfinite(measured.value):
                continue
            apparent = _to_mag(float(to_flux_density_jy(measured.value, measured.band)), known)
            dust = extinction_of_draws(measured.band, draws.av_mag, evidence.assumptions)
            absolute = absolute_magnitude(apparent, draws.dist_pc, dust)
            listed = [row[known.name] for row in table.types.values() if known.name in row]
            tail = TAIL_SIGMA * scatter
            inside = (absolute >= min(listed) - tail) & (absolute <= max(listed) + tail)
            low, high = middle(absolute)
            return (
                bool(inside.mean() >= MOST),
                f"; the counterpart in {measured.band.label} ({apparent:.2f} mag) has absolute magnitude {low:.1f} to "
                f"{high:.1f}: {inside.mean():.0%} of the draws among the listed stars",
            )
    return False, ""
