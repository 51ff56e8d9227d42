"""What each test may find in a class file. The loader checks files against this; a new class needs no code."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field

from xmatch.classes.model import FluxKind

RANGE, NUMBER = "range", "number"
STEADY_LIKE = (FluxKind.STEADY, FluxKind.PERIOD_AVERAGE)
"""Kinds of flux that a blank image can be held against."""


@dataclass(frozen=True)
class FactRule:
    """One fact of a test: number or range, unit, and which kinds of flux it may be (none: not a flux)."""

    shape: str
    unit: str
    flux_kinds: tuple[FluxKind, ...] = ()
    low: float | None = None
    """Smallest value allowed, in ``unit``."""


@dataclass(frozen=True)
class TestRule:
    """Everything one test reads from a file."""

    __test__ = False  # not a test of ours, whatever the name suggests to pytest

    facts: Mapping[str, FactRule] = field(default_factory=dict)
    choices: Mapping[str, tuple[str, ...]] = field(default_factory=dict)
    magnitudes: bool = False


STARS = ("neutron star", "white dwarf")
TESTS: Mapping[str, TestRule] = {
    "spin-down budget": TestRule(
        facts={
            "efficiency": FactRule(NUMBER, "1", (FluxKind.PEAK, FluxKind.PERIOD_AVERAGE), low=1.0e-12),
        },
        choices={"star": STARS},
    ),
    "x-ray luminosity from spin-down": TestRule(
        facts={
            "intercept": FactRule(NUMBER, "log10 erg/s", STEADY_LIKE),
            "slope": FactRule(NUMBER, "dex per dex"),
            "scatter": FactRule(NUMBER, "dex", low=0.0),
            "band": FactRule(RANGE, "keV", low=0.1),
            "photon_index": FactRule(NUMBER, "1"),
            "calibrated": FactRule(RANGE, "erg/s", low=0.0),
        },
        choices={"star": STARS},
    ),
    "x-ray luminosity": TestRule(
        facts={
            "luminosity": FactRule(NUMBER, "log10 erg/s", STEADY_LIKE),
            "scatter": FactRule(NUMBER, "dex", low=0.0),
            "temperature": FactRule(RANGE, "keV", low=1.0e-3),
        },
        choices={"spectrum": ("blackbody",), "luminosity_of": ("bolometric",)},
    ),
    "death lines": TestRule(),
    "companion magnitudes": TestRule(facts={"scatter": FactRule(NUMBER, "mag", low=0.0)}, magnitudes=True),
    "period range": TestRule(facts={"period": FactRule(RANGE, "s", low=0.0)}),
}
"""Every test by the name that class files use."""
