"""What a class file says, as frozen dataclasses."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass


@dataclass(frozen=True)
class Prediction:
    """One prediction of a class: the kind of test, its numbers, and their source."""

    kind: str
    name: str
    numbers: Mapping[str, float]
    words: Mapping[str, str]
    types: tuple[StarType, ...]
    source: str


@dataclass(frozen=True)
class StarType:
    """Absolute magnitudes of one spectral type, by band name; Vega."""

    name: str
    magnitudes: Mapping[str, float]


@dataclass(frozen=True)
class ClassFile:
    """One kind of object."""

    id: str
    title: str
    summary: str
    source: str
    tests: tuple[Prediction, ...]
    would_overturn: str
    path: str
