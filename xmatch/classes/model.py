"""What a class file says, as frozen dataclasses."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field
from enum import StrEnum

from xmatch.records import MagnitudeSystem


class FluxKind(StrEnum):
    """Which flux or luminosity a number is; these differ by the duty cycle or are not the same quantity at all."""

    PEAK = "peak"
    PERIOD_AVERAGE = "period average"
    FLUENCE = "fluence"
    STEADY = "steady"


class SolidAngle(StrEnum):
    """Whether a luminosity holds the factor 4 pi."""

    FULL = "4 pi"
    PER_STERADIAN = "per steradian"


@dataclass(frozen=True)
class Fact:
    """One number, or a range, with everything needed to compare it.

    ``flux_kind`` and ``solid_angle`` are None for what is neither a flux nor a luminosity.
    """

    low: float
    high: float
    unit: str
    source: str
    flux_kind: FluxKind | None = None
    solid_angle: SolidAngle | None = None
    note: str = ""

    @property
    def value(self) -> float:
        """The number; of a range, its lower end."""
        return self.low


@dataclass(frozen=True)
class TemplateBand:
    """A band in which absolute magnitudes are listed, and how a catalog's band is recognised as the same."""

    name: str
    wavelength_um: float
    width_um: float
    zero_point_jy: float
    system: MagnitudeSystem
    source: str


@dataclass(frozen=True)
class MagnitudeTable:
    """Absolute magnitudes by spectral type, in the order of the file (early to late)."""

    bands: tuple[TemplateBand, ...]
    types: Mapping[str, Mapping[str, float]]
    unit: str
    flux_kind: FluxKind
    solid_angle: SolidAngle
    source: str


@dataclass(frozen=True)
class Prediction:
    """One prediction of a class: the test that holds it against the sky, and its facts."""

    test: str
    facts: Mapping[str, Fact] = field(default_factory=dict)
    choices: Mapping[str, str] = field(default_factory=dict)
    magnitudes: MagnitudeTable | None = None

    @property
    def sources(self) -> str:
        """Every source behind the prediction, each once."""
        found = [fact.source for fact in self.facts.values()]
        if self.magnitudes is not None:
            found += [self.magnitudes.source, *(band.source for band in self.magnitudes.bands)]
        return "; ".join(dict.fromkeys(found))


@dataclass(frozen=True)
class ClassFile:
    """One kind of object. ``never_ruled_out`` marks the class that predicts nothing."""

    id: str
    title: str
    summary: str
    predictions: tuple[Prediction, ...]
    never_ruled_out: bool
    path: str
