"""Tests that hold a class against period and derivative: budget, death lines, period range."""

from __future__ import annotations

import math

from xmatch.classes.draws import Draws
from xmatch.classes.evidence import Applied, Evidence, span, span_kpc
from xmatch.classes.model import Fact, FluxKind, Prediction, SolidAngle
from xmatch.flux.luminosity import sphere_cm2
from xmatch.flux.spectra import radio_band_flux_cgs
from xmatch.records import Pulse, RotationBudget

NO_SPIN = "no spin-down is known: a period and its derivative, or a limit of it, are needed"
NO_DISTANCE = "no distance range is given: fluxes cannot be turned into luminosities"


def say_power(budget: RotationBudget) -> str:
    """``spin-down power < 5.4e24 erg/s (neutron star, 1e+45 g cm^2)``."""
    sign = "<" if budget.is_limit else "="
    return f"spin-down power {sign} {budget.power_erg_s:.2g} erg/s ({budget.star}, {budget.inertia_g_cm2:.0e} g cm^2)"


def isotropic_log10(fact: Fact) -> float:
    """log10 of a luminosity over all directions, whichever way the file quotes it."""
    return fact.value + (math.log10(4.0 * math.pi) if fact.solid_angle is SolidAngle.PER_STERADIAN else 0.0)


def brightest(evidence: Evidence, *, averaged: bool) -> tuple[Pulse, float] | None:
    """The pulse that asks most of the budget, and its flux over the assumed radio spectrum, erg s^-1 cm^-2.

    ``averaged`` spreads each pulse over the period before they are compared.
    """
    a = evidence.assumptions
    period = evidence.spin.period_s if evidence.spin is not None else 1.0
    found = []
    for pulse in evidence.target.pulses:
        if pulse.peak_jy > 0.0:
            flux = radio_band_flux_cgs(pulse.peak_jy, pulse.nu_hz, a.radio_index, a.radio_low_hz, a.radio_high_hz)
            found.append((pulse, float(flux) * (min(1.0, pulse.width_s / period) if averaged else 1.0)))
    return max(found, key=lambda item: item[1], default=None)


def spin_down_budget(prediction: Prediction, evidence: Evidence, draws: Draws) -> Applied:
    """Can rotation pay for the radio emission? A draw survives when its radio power is within the budget.

    Notes
    -----
    Radio power: 4 pi d^2 times the flux integrated over the assumed power law and edges, times the beam's part of the
    sky; as a period average times width over period (definitions). Against efficiency times spin-down power. With an
    upper limit of the derivative the survival is itself an upper limit.
    """
    efficiency = prediction.facts["efficiency"]
    budget = evidence.budget(prediction.choices["star"])
    averaged = efficiency.flux_kind is FluxKind.PERIOD_AVERAGE
    chosen = brightest(evidence, averaged=averaged)
    if evidence.spin is None or budget is None:
        return Applied(NO_SPIN)
    if chosen is None:
        return Applied("no pulse with a flux density is given: there is no radio power to pay for")
    if not len(draws.dist_pc):
        return Applied(NO_DISTANCE)
    a = evidence.assumptions
    pulse, flux = chosen
    beam = a.beam_fraction * draws.variant.beam_factor
    power = sphere_cm2(draws.dist_pc) * flux * beam
    allowed = efficiency.value * budget.power_erg_s
    if efficiency.solid_angle is SolidAngle.PER_STERADIAN:
        allowed *= 4.0 * math.pi
    low, high = float(power.min()), float(power.max())
    emission = "isotropic" if beam == 1.0 else f"beamed into {beam:.2g} of the sky"
    kind = (
        f"averaged over the period: {pulse.width_s:g} s every {evidence.spin.period_s:g} s"
        if averaged
        else "at the peak"
    )
    sentence = (
        f"radio power {span(low, high)} erg/s over {span_kpc(draws.dist_pc)} (peak {pulse.peak_jy:g} Jy at "
        f"{pulse.nu_hz / 1e6:g} MHz, index {a.radio_index:g}, {a.radio_low_hz / 1e6:g} MHz-"
        f"{a.radio_high_hz / 1e9:g} GHz, {emission}, {kind}) against {say_power(budget)}"
    )
    if efficiency.value != 1.0:
        sentence += f" times {efficiency.value:g}"
    return Applied(
        sentence,
        weights=(power <= allowed).astype(float),
        overturn=_budget_overturn(low, high, allowed, float(draws.dist_pc.min()), beam, evidence, budget),
    )


def _budget_overturn(
    low: float, high: float, allowed: float, nearest_pc: float, beam: float, evidence: Evidence, budget: RotationBudget
) -> str:
    derivative = evidence.spin.derivative if evidence.spin is not None else None
    if low > allowed and derivative is not None:
        needed = low / allowed
        return (
            f"emission into less than {beam / needed:.1g} of the sky, a distance below "
            f"{_pc(nearest_pc / math.sqrt(needed))}, a derivative above {derivative * needed:.1g}, or radio waves "
            "over a far narrower range of frequencies"
        )
    if high <= allowed:
        reach = (
            f"a limit of the derivative {high / allowed:.1g} times as large"
            if budget.is_limit
            else "other energy needs"
        )
        return f"{reach}, or a distance above the range given"
    return "a narrower distance range or a tighter derivative"


def _pc(dist_pc: float) -> str:
    return f"{dist_pc:.2g} pc" if dist_pc < 1000.0 else f"{dist_pc / 1e3:.2g} kpc"


def death_lines(prediction: Prediction, evidence: Evidence, draws: Draws) -> Applied:
    """Say which death lines the star lies above and below. They disagree by many dex: they only inform."""
    if evidence.spin is None or not evidence.spin.death_lines:
        return Applied(NO_SPIN, informs_only=True)
    lines = evidence.spin.death_lines
    parts = []
    for word, text in (("above", "above"), ("below", "below"), ("nothing", "no statement from")):
        names = [line.model.split(":")[0] for line in lines if line.says == word]
        if names:
            parts.append(f"{text} {len(names)} ({', '.join(names)})")
    heights = [line.log_derivative for line in lines]
    sign = "<" if evidence.spin.derivative_is_limit else "="
    return Applied(
        f"period {evidence.spin.period_s:g} s, derivative {sign} {evidence.spin.derivative:.2g}: {'; '.join(parts)} of "
        f"{len(lines)} death lines, which spread over log derivative {min(heights):.1f} to {max(heights):.1f} at this "
        "period and never rule out alone",
        informs_only=True,
    )


def period_range(prediction: Prediction, evidence: Evidence, draws: Draws) -> Applied:
    """Say where the period lies among those known for the class. It only informs: a new member may be the first."""
    known = prediction.facts["period"]
    if evidence.spin is None:
        return Applied("no period is given", informs_only=True)
    period = evidence.spin.period_s
    if period > known.high:
        place = f"{period / known.high:.2g} times the longest known"
    elif period < known.low:
        place = f"{period / known.low:.2g} times the shortest known"
    else:
        place = "inside the range"
    note = f"; {known.note}" if known.note else ""
    return Applied(
        f"period {period:g} s against {known.low:g}-{known.high:g} s known for the class: {place}{note}",
        informs_only=True,
    )
