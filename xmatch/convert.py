"""One flux in every other term: what ``blankfield convert`` and ``blankfield luminosity`` print.

Units are read by astropy at this edge and nowhere behind it: a value of the wrong dimension is refused here.
"""

from __future__ import annotations

import math
import re
from dataclasses import dataclass, field, replace
from pathlib import Path
from typing import Any

import numpy as np

from xmatch.assumptions import Assumptions
from xmatch.constants import C_CM_S, KEV_HZ
from xmatch.errors import RangeError
from xmatch.flux import grid, magnitudes
from xmatch.flux.absorption import transmitted_through_all
from xmatch.flux.bands import FULL_CURVE_ABOVE_MAG, photon_flux
from xmatch.flux.column import DEFAULT_RELATION, WILMS, av_from_column_mag, column_from_av_cm2, column_from_dm_cm2
from xmatch.flux.distance import AS_GIVEN, k_factor_shape, quantiles_of
from xmatch.flux.extinction import HIGH_UM, LAWS, LOW_UM, MEAN_R_V, UM_CM, extinction_ratio, law_range
from xmatch.flux.physical import resolve
from xmatch.flux.shapes import Tabulated
from xmatch.flux.sightline import scattered
from xmatch.flux.spectra import PowerLaw, Spectrum, band_ratio, flux_density_jy, radio_scaled
from xmatch.records import Distance, Floats, Target

QUANTILES = (0.0, 0.5, 1.0)
"""Near end, median and far end."""
CURVE_LEVELS = np.linspace(0.0, 1.0, 9)
"""Probabilities at which the function over distance is given."""
RADIO_LOW_HZ, RADIO_HIGH_HZ = Assumptions().radio_low_hz, Assumptions().radio_high_hz
XRAY_FROM_KEV, XRAY_TO_KEV = 0.1, 500.0
"""Where gas absorbs and dust does not; above it neither (ranges of the tables)."""
_RANGE = re.compile(r"^\s*(?P<low>[\d.eE+]+?)\s*(?:\.\.|-)\s*(?P<high>[\d.eE+]+)\s*(?P<unit>[A-Za-z]+)\s*$")


@dataclass(frozen=True)
class Ask:
    """What is to be converted and under which assumptions."""

    flux: str
    band: str | None = None
    at: str | None = None
    to_band: str | None = None
    to_at: str | None = None
    system: str = "AB"
    zero_point_jy: float | None = None
    spectrum: Spectrum = field(default_factory=lambda: PowerLaw(2.0))
    index: float = -1.6
    """S ~ nu^index of a flux density."""
    integrate: str | None = None
    """Range over which a flux density is integrated."""
    column_cm2: float | None = None
    av_mag: float | None = None
    dm_pc_cm3: float | None = None
    law: str = LAWS[0]
    r_v: float = MEAN_R_V
    distance: Distance | None = None
    prior: str = "log-uniform"
    beam_fraction: float = 1.0
    duty_cycle: float | None = None
    blind_below: float = 0.01


@dataclass(frozen=True)
class Converted:
    """Values by name, with the unit in the name; luminosities are lists at the near, middle and far distance."""

    values: dict[str, float | list[float]]
    assumptions: list[str]
    remarks: list[str]

    def as_dict(self) -> dict[str, Any]:
        """For JSON."""
        return {"values": self.values, "assumptions": self.assumptions, "remarks": self.remarks}


def quantity(text: str, unit: str, what: str) -> float:
    """A number with its unit in the unit wanted; frequency, wavelength and energy of light are taken for each other.

    Raises
    ------
    RangeError
        When it does not parse, has another dimension, or is not finite.
    """
    import warnings

    import astropy.units as u

    try:
        with warnings.catch_warnings():
            warnings.simplefilter("ignore")  # "erg/s/cm2" has a slash too many for FITS, not for us
            value = float(u.Quantity(text).to_value(u.Unit(unit), equivalencies=u.spectral()))
    except (u.UnitsError, TypeError, ValueError) as fault:
        said = str(fault).splitlines()[0] if str(fault) else type(fault).__name__
        raise RangeError(
            f"{what} {text!r} is not allowed ({said}); give a number with a unit that converts to {unit}"
        ) from None
    if not math.isfinite(value):
        raise RangeError(f"{what} {text!r} is not allowed; it must be finite")
    return value


def light_range(text: str, unit: str, what: str) -> tuple[float, float]:
    """A range such as ``0.5..2 keV`` or ``1..10 GHz`` in the unit wanted, rising."""
    match = _RANGE.match(text)
    if match is None:
        raise RangeError(f"{what} {text!r} is not understood; give a range with its unit, such as '0.5..2 keV'")
    ends = sorted(quantity(f"{match[end]} {match['unit']}", unit, what) for end in ("low", "high"))
    if not 0.0 < ends[0] < ends[1]:
        raise RangeError(f"{what} {text!r} is not allowed; 0 < low < high is needed")
    return ends[0], ends[1]


def convert(ask: Ask) -> Converted:
    """One flux in every other term that the assumptions allow.

    Raises
    ------
    RangeError
        For a flux without a band or frequency, a wrong dimension, or a number outside a formula's range.
    """
    known: list[str] = []
    column, av = _line_of_sight(ask, known)
    if ask.band is not None and ask.at is not None:
        raise RangeError(
            "both a band and a frequency were given; a band flux needs --band, a flux density or magnitude --at"
        )
    if ask.band is not None:
        values, remarks = _band_flux(ask, column, known)
    elif ask.at is not None:
        values, remarks = _density(ask, column, av, known)
    else:
        raise RangeError("the flux has no place in the spectrum; give --band for a band flux, --at for a flux density")
    return Converted({name: _plain(value) for name, value in values.items()}, known, remarks)


def _plain(value: float | Floats) -> float | list[float]:
    array = np.asarray(value, dtype=float)
    return float(array) if array.ndim == 0 else [float(v) for v in array]


def _line_of_sight(ask: Ask, known: list[str]) -> tuple[float, float]:
    column, av = ask.column_cm2, ask.av_mag
    if column is None and ask.dm_pc_cm3 is not None:
        nominal, low, high = (float(v) for v in column_from_dm_cm2(ask.dm_pc_cm3))
        column = nominal
        known.append(
            f"column {column:.3g} cm^-2 from DM {ask.dm_pc_cm3:g}, He, Ng & Kaspi 2013 (range {low:.3g} to {high:.3g})"
        )
    elif column is None and av is not None:
        column = float(column_from_av_cm2(av))
        known.append(f"column {column:.3g} cm^-2 from A_V, {DEFAULT_RELATION}")
    else:
        known.append("no column given: taken as zero" if column is None else f"column {column:.3g} cm^-2 as given")
    if av is None and column:
        av = float(av_from_column_mag(column))
        known.append(f"A_V {av:.3g} mag from the column, {DEFAULT_RELATION}")
    else:
        known.append(
            "no extinction given: taken as zero" if not av and ask.av_mag is None else f"A_V {av:g} mag as given"
        )
    return column or 0.0, av or 0.0


def _distances(ask: Ask, known: list[str], values: dict[str, Any]) -> tuple[Floats | None, float]:
    if ask.distance is None:
        known.append("no distance given: no luminosity")
        return None, 0.0
    found = quantiles_of(ask.distance, ask.prior, np.asarray(QUANTILES))
    filled = AS_GIVEN if ask.distance.quantiles_pc else f"{ask.prior} prior"
    known.append(f"distance {ask.distance.origin or 'range'}, {filled}; near end, median, far end")
    values["distance_pc"] = found
    z = ask.distance.redshift or 0.0
    known.append(f"K-corrected to the same band at rest, z {z:g}, {ask.distance.cosmology}" if z else "no redshift")
    known.append(f"beam: {ask.beam_fraction:g} of the sphere; isotropic luminosities assume all of it")
    return found, z


def _band_flux(ask: Ask, column: float, known: list[str]) -> tuple[dict[str, Any], list[str]]:
    band = light_range(ask.band or "", "keV", "band")
    flux = quantity(ask.flux, "erg s-1 cm-2", "flux")
    spectrum, remarks = ask.spectrum, []
    known.append(f"spectrum {describe(spectrum)}")
    values: dict[str, Any] = {"flux_observed_cgs": flux}
    through = 1.0
    if band[0] < XRAY_TO_KEV:
        through = transmitted_through_all(spectrum, *band, column)
        known.append(f"photoelectric absorption, abundances of {WILMS}; the flux given is the observed one")
    values["transmitted"] = through
    if not through >= ask.blind_below:
        remarks.append(_blind(through, ask.blind_below))
        return values, remarks
    corrected = flux / through
    values["flux_corrected_cgs"] = corrected
    centre = math.sqrt(band[0] * band[1])
    at_kev = quantity(ask.to_at, "keV", "energy") if ask.to_at else centre
    values["at_kev"] = at_kev
    jy = float(flux_density_jy(spectrum, corrected, band, at_kev))
    values["density_corrected_jy"] = jy
    values["nu_density_corrected_cgs"] = float(magnitudes.nu_f_nu_cgs(jy, at_kev * KEV_HZ))
    values["photons_corrected_per_cm2_s"] = float(photon_flux(spectrum, corrected, band))
    if ask.to_band:
        other = light_range(ask.to_band, "keV", "second band")
        moved = corrected * band_ratio(spectrum, band, other)
        values["second_band_corrected_cgs"] = moved
        second = transmitted_through_all(spectrum, *other, column) if other[0] < XRAY_TO_KEV else 1.0
        values["second_band_observed_cgs"] = moved * second
    distance, z = _distances(ask, known, values)
    if distance is not None:
        k_factor = k_factor_shape(z, spectrum, band)
        lumi = grid.band_luminosities(corrected, distance, beam_fraction=ask.beam_fraction, k_factor=k_factor)
        values |= {f"luminosity_{name}": value for name, value in lumi.items()}
    return values, remarks


def _density(ask: Ask, column: float, av: float, known: list[str]) -> tuple[dict[str, Any], list[str]]:
    nu = quantity(ask.at or "", "Hz", "frequency")
    if not nu > 0.0:
        raise RangeError(f"frequency {ask.at!r} is not allowed; it must be above 0")
    um, remarks = C_CM_S / nu / UM_CM, []
    jy = _flux_density(ask, um, known)
    if ask.to_at or ask.integrate or (ask.distance is not None and ask.distance.redshift):
        known.append(f"S ~ nu^{ask.index:g}")
    values: dict[str, Any] = {"frequency_hz": nu, "wavelength_um": um, "density_observed_jy": jy}
    values["magnitude_ab"] = float(magnitudes.jy_to_ab(jy))
    values["magnitude_st"] = float(magnitudes.jy_to_st(jy, um * 1.0e4))
    values["nu_density_observed_cgs"] = float(magnitudes.nu_f_nu_cgs(jy, nu))
    through = 1.0
    if LOW_UM <= um <= HIGH_UM:
        through = 10.0 ** (-0.4 * av * float(extinction_ratio(um, law=ask.law, r_v=ask.r_v)))
        low, high = (av * v for v in law_range(um))
        known.append(
            f"dust by {ask.law}, R_V {ask.r_v:g}, at one wavelength; published laws give {low:.2f} to {high:.2f} mag"
        )
        if av > FULL_CURVE_ABOVE_MAG:
            remarks.append(
                f"A_V is above {FULL_CURVE_ABOVE_MAG:g}: a broad filter loses less than this wavelength says, by its spectrum"
            )
    elif um < LOW_UM and nu / KEV_HZ < XRAY_TO_KEV:
        kev = nu / KEV_HZ
        through = transmitted_through_all(PowerLaw(1.0 - ask.index), kev, kev * 1.0001, column)
        known.append(f"photoelectric absorption, abundances of {WILMS}")
    else:
        known.append("neither gas nor dust absorbs at this frequency (free-free absorption not counted)")
    values["transmitted"] = through
    if not through >= ask.blind_below:
        remarks.append(_blind(through, ask.blind_below))
        return values, remarks
    corrected = jy / through
    values["density_corrected_jy"] = corrected
    if ask.to_at:
        other = quantity(ask.to_at, "Hz", "second frequency")
        values["second_density_corrected_jy"] = float(radio_scaled(corrected, nu, other, ask.index))
    distance, z = _distances(ask, known, values)
    if distance is not None:
        span = light_range(ask.integrate, "Hz", "range of integration") if ask.integrate else None
        if span:
            known.append(f"integrated over {span[0]:.3g} to {span[1]:.3g} Hz")
        lumi = grid.density_luminosities(
            corrected, nu, distance, index=ask.index, band_hz=span, beam_fraction=ask.beam_fraction,
            duty_cycle=ask.duty_cycle, z=z,
        )  # fmt: skip
        if ask.duty_cycle is not None:
            known.append(f"the flux is the peak of a pulse that fills {ask.duty_cycle:g} of the period")
        values |= {f"luminosity_{name}": value for name, value in lumi.items()}
    return values, remarks


def _flux_density(ask: Ask, um: float, known: list[str]) -> float:
    """Jy of a flux density or a magnitude."""
    match = re.match(r"^\s*([-+]?[\d.]+)\s*mag\s*$", ask.flux)
    if match is None:
        return quantity(ask.flux, "Jy", "flux density")
    try:
        mag = float(match[1])
    except ValueError:
        raise RangeError(f"magnitude {ask.flux!r} is not a number; give one such as '20.5 mag'") from None
    if ask.system == "Vega":
        known.append(f"Vega magnitude, zero point {ask.zero_point_jy} Jy as given")
        return float(magnitudes.vega_to_jy(mag, ask.zero_point_jy))
    if ask.zero_point_jy is not None:
        raise RangeError(
            f"a zero point belongs to Vega magnitudes; {ask.system} has its own; give --system Vega, or none"
        )
    known.append(f"{ask.system} magnitude")
    return float(magnitudes.ab_to_jy(mag) if ask.system == "AB" else magnitudes.st_to_jy(mag, um * 1.0e4))


def _blind(through: float, floor: float) -> str:
    if not math.isfinite(through):
        return "no table reaches this band: no corrected flux and no luminosity"
    return (
        f"blind: only {through:.1e} of the light gets through, less than {floor:g}: no corrected flux and no luminosity"
    )


def describe(spectrum: Spectrum) -> str:
    """A spectrum in words."""
    if isinstance(spectrum, Tabulated):
        return f"tabulated at {len(spectrum.e_kev)} energies, {spectrum.e_kev[0]:g} to {spectrum.e_kev[-1]:g} keV"
    name = re.sub(r"(?<=[a-z])(?=[A-Z])", " ", type(spectrum).__name__).lower()
    return f"{name} ({', '.join(f'{key} {value}' for key, value in vars(spectrum).items())})".replace("_", " ")


def read_spectrum(path: str | Path) -> Tabulated:
    """A spectrum from a text file: energy in keV and E N(E) in any unit, one pair a line; ``#`` begins a remark.

    Raises
    ------
    RangeError
        For a file or a line that cannot be read, or a table that is no spectrum.
    """
    try:
        lines = Path(path).read_text(encoding="utf-8").splitlines()
    except (OSError, UnicodeDecodeError) as fault:
        raise RangeError(f"spectrum {path} cannot be read ({fault}); give a text file of two columns") from None
    pairs = []
    for number, line in enumerate(lines, 1):
        cells = line.partition("#")[0].replace(",", " ").split()
        if cells:
            try:
                energy, value = (float(cell) for cell in cells)
            except ValueError:
                raise RangeError(f"{path}, line {number}: {line[:40]!r} is not two numbers; mend it") from None
            pairs.append((energy, value))
    return Tabulated(tuple(e for e, _ in pairs), tuple(v for _, v in pairs))


def plain(value: Any) -> Any:
    """The same for JSON, which has no word for a number that is not there."""
    if isinstance(value, dict):
        return {key: plain(item) for key, item in value.items()}
    if isinstance(value, list):
        return [plain(item) for item in value]
    return None if isinstance(value, float) and not math.isfinite(value) else value


def luminosities(target: Target, asked: Ask) -> dict[str, Converted]:
    """Luminosities of a target's pulses and of the flux asked for, if any.

    Parameters
    ----------
    target : Target
        Its distance, column, extinction and dispersion measure are used; it needs a distance.
    asked : Ask
        The rest of the assumptions; what it sets itself goes before the target's. An empty flux asks for the pulses only.

    Returns
    -------
    dict
        By flux in words. ``over_distance`` values are added: the function, not three points of it.
    """
    if target.distance is None:
        raise RangeError(f"{target.name} has no distance; write one into its section [distance]")
    settled = resolve(
        target, Assumptions(column_cm2=asked.column_cm2, av_mag=asked.av_mag, distance_prior=asked.prior, r_v=asked.r_v)
    )
    common = replace(
        asked,
        distance=target.distance,
        prior=settled.distance_prior,
        column_cm2=settled.column_cm2,
        av_mag=settled.av_mag,
    )
    told = [f"column: {settled.column_origin}", f"extinction: {settled.av_origin}"]
    found: dict[str, Converted] = {}
    for pulse in target.pulses:
        # widths of several pulses a period are the user's own sum
        duty = None if target.spin is None else min(1.0, pulse.width_s / target.spin.period_s)
        one = replace(
            common, flux=f"{pulse.peak_jy!r} Jy", at=f"{pulse.nu_hz!r} Hz", band=None, duty_cycle=duty, to_at=None, to_band=None,
            integrate=asked.integrate or f"{RADIO_LOW_HZ:g}..{RADIO_HIGH_HZ:g} Hz",
        )  # fmt: skip
        found[f"pulse of {pulse.peak_jy:g} Jy at {pulse.nu_hz / 1e6:g} MHz"] = _told(convert(one), told)
    if asked.flux:
        found[asked.flux] = _told(convert(common), told + _over_columns(common, settled))
    if not found:
        raise RangeError(f"{target.name} has no pulses, and no flux was given; give --flux with --band or --at")
    dist = quantiles_of(target.distance, settled.distance_prior, CURVE_LEVELS)
    for name, answer in found.items():
        at = answer.values.get("distance_pc")
        if isinstance(
            at, list
        ):  # every luminosity goes with d^2: the function needs no more than its value at one distance
            curve: dict[str, float | list[float]] = {"over_distance_pc": [float(d) for d in dist]}
            for key, value in answer.values.items():
                if key.startswith("luminosity_") and isinstance(value, list):
                    curve[f"over_distance_{key}"] = [float(value[1] * (d / at[1]) ** 2) for d in dist]
            found[name] = replace(answer, values=answer.values | curve)
    return found


def _told(answer: Converted, more: list[str]) -> Converted:
    return replace(answer, assumptions=answer.assumptions + more)


def _over_columns(asked: Ask, settled: Assumptions) -> list[str]:
    """What the scatter of the column makes of a band flux, in words."""
    column = settled.column_cm2 or 0.0
    if asked.band is None or column == 0.0:
        return []
    band = light_range(asked.band, "keV", "band")
    sigmas = np.array([-1.0, 1.0])
    ends = scattered(column, settled.column_scatter_dex, sigmas, settled.column_total_cm2)
    through = [transmitted_through_all(asked.spectrum, *band, float(end)) for end in ends]
    return [
        f"column one scatter of {settled.column_scatter_dex:g} dex lower and higher: {ends[0]:.3g} and {ends[1]:.3g} cm^-2 let "
        f"{through[0]:.3g} and {through[1]:.3g} of the flux through"
    ]
