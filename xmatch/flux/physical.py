"""The front door of the flux room: limits and measurements in the common physical terms."""

from __future__ import annotations

import math

import numpy as np

from xmatch.assumptions import Assumptions
from xmatch.constants import C_CM_S, KEV_HZ
from xmatch.flux.absorption import HIGH_KEV, LOW_KEV, transmitted_through_all
from xmatch.flux.column import DEFAULT_RELATION, column_from_dm_cm2, column_per_av_cm2
from xmatch.flux.distance import AS_GIVEN, quantiles_of
from xmatch.flux.extinction import HIGH_UM, UM_CM, band_extinction_mag, law_range
from xmatch.flux.luminosity import luminosity_erg_s
from xmatch.flux.magnitudes import nu_f_nu_cgs, to_flux_density_jy
from xmatch.flux.spectra import PowerLaw, flux_density_jy
from xmatch.records import Band, Limit, PhysicalLimit, Quantity, Target, Waveband

QUANTILES = (0.0, 0.5, 1.0)
"""Near end, median under the prior, far end of the distance range."""
NO_COLUMN = "no column, dispersion measure or extinction given: taken as zero"
ZERO_COLUMN = "from the column, which is zero"


def resolve(target: Target, assumptions: Assumptions) -> Assumptions:
    """Settle the column and the extinction of a target into the assumptions.

    Parameters
    ----------
    target : Target
        With a column, an extinction, a dispersion measure, or none of them.
    assumptions : Assumptions
        Values already set here are kept.

    Returns
    -------
    Assumptions
        ``column_cm2``, ``av_mag`` and where each came from are filled.

    Notes
    -----
    In order of trust: the user's own; the column from DM (He, Ng & Kaspi 2013, ApJ 768, 64); one from the other with the
    relation of the abundances in use (Foight et al. 2016, ApJ 826, 66). Nothing exceeds the total of the line of sight,
    where that is given. A target's own distance prior replaces that of the assumptions.
    """
    per_av = column_per_av_cm2(DEFAULT_RELATION, assumptions.abundances)
    column, column_origin = assumptions.column_cm2, assumptions.column_origin or "set in the assumptions"
    av, av_origin = assumptions.av_mag, assumptions.av_origin or "set in the assumptions"
    if column is None:
        if target.column_cm2 is not None:
            column, column_origin = target.column_cm2, target.column_origin or "given with the target"
        elif target.dm_pc_cm3 is not None:
            nominal, low, high = (float(v) for v in column_from_dm_cm2(target.dm_pc_cm3))
            column = nominal
            column_origin = (
                f"from DM {target.dm_pc_cm3:g} pc cm^-3, He, Ng & Kaspi 2013 (range {low:.2g} to {high:.2g} cm^-2)"
            )
        elif target.av_mag is not None:
            column, column_origin = target.av_mag * per_av, f"from A_V {target.av_mag:g}, {DEFAULT_RELATION}"
        else:
            column, column_origin = 0.0, NO_COLUMN
    if av is None:
        if target.av_mag is not None:
            av, av_origin = target.av_mag, target.av_origin or "given with the target"
        elif column > 0.0:
            av, av_origin = column / per_av, f"from the column, {DEFAULT_RELATION}"
        else:
            av, av_origin = 0.0, NO_COLUMN if column_origin == NO_COLUMN else ZERO_COLUMN
    column_total, av_total = totals(target, assumptions)
    if column_total is not None and column > column_total:
        column, column_origin = column_total, f"the total column: less than {column:.2g} cm^-2 {column_origin}"
    if av_total is not None and av > av_total:
        av, av_origin = av_total, f"the total extinction: less than {av:.2f} mag {av_origin}"
    prior = assumptions.distance_prior
    if target.distance is not None:
        prior = AS_GIVEN if target.distance.quantiles_pc else target.distance.prior or prior
    return assumptions.but(
        column_cm2=column,
        column_origin=column_origin,
        av_mag=av,
        av_origin=av_origin,
        column_total_cm2=column_total,
        av_total_mag=av_total,
        distance_prior=prior,
    )


def totals(target: Target, assumptions: Assumptions) -> tuple[float | None, float | None]:
    """Column (cm^-2) and extinction (mag) of the whole line of sight; one from the other where only one is given.

    The relation is that of the abundances in use (Foight et al. 2016, ApJ 826, 66).
    """
    column = assumptions.column_total_cm2 if target.column_total_cm2 is None else target.column_total_cm2
    av = assumptions.av_total_mag if target.av_total_mag is None else target.av_total_mag
    per_av = column_per_av_cm2(DEFAULT_RELATION, assumptions.abundances)
    if column is None and av is not None:
        column = av * per_av
    elif av is None and column is not None:
        av = column / per_av
    return column, av


def edges_kev(band: Band) -> tuple[float, float]:
    """Edges of a band, keV."""
    return band.nu_low_hz / KEV_HZ, band.nu_high_hz / KEV_HZ


def observed_flux_cgs(value: float, band: Band) -> float:
    """Flux as observed, erg s^-1 cm^-2, of a value in the band's unit: in the band for X-rays, nu F_nu otherwise."""
    if band.quantity is Quantity.BAND_FLUX:
        return value
    return float(nu_f_nu_cgs(to_flux_density_jy(value, band), band.nu_hz))


def observed_density_jy(value: float, band: Band, assumptions: Assumptions) -> float:
    """Flux density as observed at ``band.nu_hz``, Jy; a band flux is spread by the assumed power law."""
    if band.quantity is Quantity.BAND_FLUX:
        spectrum = PowerLaw(assumptions.photon_index)
        return float(flux_density_jy(spectrum, value, edges_kev(band), band.nu_hz / KEV_HZ))
    return float(to_flux_density_jy(value, band))


def band_transmission(band: Band, assumptions: Assumptions) -> tuple[float, str]:
    """Fraction of the light that gets through, and by what assumptions, in words."""
    if band.waveband is Waveband.GAMMA:
        return 1.0, "gamma rays: neither gas nor dust absorbs them"
    if band.is_xray or (band.waveband is Waveband.OBJECT_LIST and band.nu_low_hz >= LOW_KEV * KEV_HZ):
        column = assumptions.column_cm2 or 0.0
        low, high = edges_kev(band)
        through = transmitted_through_all(PowerLaw(assumptions.photon_index), low, high, column)
        if not math.isfinite(through):
            return through, f"the absorption table starts at {LOW_KEV:g} keV: not corrected"
        note = (
            f"power law of photon index {assumptions.photon_index:g}, {low:.3g}-{high:.3g} keV, column {column:.2g} cm^-2 "
            f"({assumptions.column_origin}), {assumptions.abundances} abundances"
        )
        if high > HIGH_KEV:
            note += f", held at its {HIGH_KEV:g} keV cross-section above"
        if band.assumed_index is not None:
            note += (
                f"; the catalog folded photon index {band.assumed_index:g} behind {band.assumed_column_cm2 or 0.0:.2g} cm^-2, "
                "its flux is taken as the observed one"
            )
        return through, note
    if band.waveband is Waveband.RADIO or C_CM_S / band.nu_high_hz / UM_CM > HIGH_UM:
        return 1.0, "nu F_nu at the quoted frequency, nothing absorbed"
    av = assumptions.av_mag or 0.0
    magnitudes = float(band_extinction_mag(band, av, law=assumptions.extinction_law, r_v=assumptions.r_v))
    if not math.isfinite(magnitudes):
        return math.nan, "no extinction curve reaches this band: not corrected"
    note = (
        f"nu F_nu at the pivot; A_V {av:.2f} ({assumptions.av_origin}), {assumptions.extinction_law}, "
        f"R_V {assumptions.r_v:g}, averaged over the band for a flat F_nu"
    )
    if av > 0.0:
        low, high = (av * ratio for ratio in law_range(C_CM_S / band.nu_hz / UM_CM))
        if math.isfinite(low) and high > low:
            note += f"; published laws give {low:.2f} to {high:.2f} mag at the pivot"
    return 10.0 ** (-0.4 * magnitudes), note


def physical_limit(limit: Limit, target: Target, assumptions: Assumptions) -> PhysicalLimit:
    """Put a limit into the common physical terms.

    Parameters
    ----------
    limit : Limit
        In its band's own unit, as observed.
    target : Target
        For the distance range.
    assumptions : Assumptions
        Resolved: column and extinction are filled.

    Returns
    -------
    PhysicalLimit
        Corrected flux and luminosity are left out where less than ``blind_transmission`` gets through, and the luminosity
        without a distance.
    """
    band = limit.band
    jy, flux = observed_density_jy(limit.value, band, assumptions), observed_flux_cgs(limit.value, band)
    through, note = band_transmission(band, assumptions)
    blind = not through >= assumptions.blind_transmission
    corrected = None if blind else flux / through
    if blind and math.isfinite(through):
        note += (
            f"; blind: only {through:.1e} of the light gets through, less than {assumptions.blind_transmission:g}, "
            "so no corrected flux is given"
        )
    luminosity: tuple[float, ...] = ()
    distance: tuple[float, ...] = ()
    if target.distance is not None:
        d = quantiles_of(target.distance, assumptions.distance_prior, np.array(QUANTILES))
        distance = tuple(float(v) for v in d)
        if corrected is not None:
            luminosity = tuple(float(v) for v in luminosity_erg_s(corrected, d))
    return PhysicalLimit(
        limit=limit,
        flux_density_jy=jy,
        flux_cgs=flux,
        transmitted=through,
        corrected_flux_cgs=corrected,
        luminosity_erg_s=luminosity,
        distance_pc=distance,
        note=note,
    )
