"""Our words and the trade's, as enums: what a reply, a limit, a standing may be called."""

from __future__ import annotations

from enum import StrEnum


class Waveband(StrEnum):
    """Part of the spectrum, in order of falling energy; ``object list`` for class compilations."""

    GAMMA = "gamma ray"
    HARD_XRAY = "hard X-ray"
    SOFT_XRAY = "soft X-ray"
    ULTRAVIOLET = "ultraviolet"
    OPTICAL = "optical"
    NEAR_INFRARED = "near-infrared"
    MID_INFRARED = "mid-infrared"
    RADIO = "radio"
    OBJECT_LIST = "object list"


class Outcome(StrEnum):
    """What a reply may be called."""

    COUNTERPART = "counterpart"
    AMBIGUOUS = "ambiguous"
    CHANCE = "chance"
    BLANK = "blank"
    HIDDEN = "hidden"
    PARTLY_COVERED = "partly covered"
    NOT_COVERED = "not covered"
    COVERAGE_UNKNOWN = "coverage unknown"
    TRUNCATED = "truncated"
    UNANSWERED = "unanswered"
    MISREAD = "misread"

    @property
    def permits_limit(self) -> bool:
        """Whether an upper limit may be drawn from this outcome."""
        return self in _PERMITS_LIMIT


_PERMITS_LIMIT = frozenset(
    {
        Outcome.AMBIGUOUS,
        Outcome.CHANCE,
        Outcome.BLANK,
        Outcome.HIDDEN,
        Outcome.PARTLY_COVERED,
        Outcome.COVERAGE_UNKNOWN,
    }
)


class ReplyStatus(StrEnum):
    """What came back from one question, before anything astronomical is concluded."""

    WHOLE = "whole"
    TRUNCATED = "truncated"
    UNANSWERED = "unanswered"
    MISREAD = "misread"


class Quantity(StrEnum):
    """What a band's column holds."""

    MAGNITUDE = "magnitude"
    FLUX_DENSITY = "flux density"
    BAND_FLUX = "band flux"


class MagnitudeSystem(StrEnum):
    """Magnitude systems are never interchangeable."""

    VEGA = "Vega"
    AB = "AB"
    ST = "ST"


class LimitKind(StrEnum):
    """Three different things that are all called upper limit."""

    BOUND = "bound"
    """From a measurement at the position."""
    DETECTION = "detection limit"
    """Faintest source that the procedure would have found."""
    COMPLETENESS = "completeness limit"
    """Flux above which the stated fraction of sources is listed."""


class LimitMethod(StrEnum):
    """How a limit was found, most trusted first."""

    OWN_MEASUREMENT = "own measurement"
    LISTED_LIMIT = "listed limit"
    LOCAL_ERRORS = "local depth from quoted errors"
    LOCAL_FAINT_END = "local depth from the faint end"
    NOMINAL = "nominal depth"


class StandingWord(StrEnum):
    """What the tests leave of a class."""

    RULED_OUT = "ruled out"
    STRAINED = "strained"
    OPEN = "open"
    FAVOURED = "favoured"
    UNTESTED = "untested"
