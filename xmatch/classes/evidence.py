"""What the tests are given, and what each gives back."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass

import numpy as np

from xmatch.assumptions import Assumptions
from xmatch.classes.draws import Draws
from xmatch.classes.model import Prediction
from xmatch.classes.survival import usable
from xmatch.records import Finding, Floats, PhysicalLimit, RotationBudget, SpinFigures, Target


@dataclass(frozen=True)
class Evidence:
    """Everything known of the target, with column and extinction settled in the assumptions."""

    target: Target
    limits: tuple[PhysicalLimit, ...]
    findings: tuple[Finding, ...]
    spin: SpinFigures | None
    assumptions: Assumptions

    def budget(self, star: str) -> RotationBudget | None:
        """Spin-down figures of one kind of star, if a spin-down is known."""
        if self.spin is None:
            return None
        return next((budget for budget in self.spin.budgets if budget.star == star), None)


@dataclass(frozen=True)
class Applied:
    """One prediction held against the evidence under one variant.

    ``weights`` holds, per draw, the probability that the draw agrees with what was seen; None where the test could not
    be made. ``overturn`` says what would change it.
    """

    sentence: str
    weights: Floats | None = None
    informs_only: bool = False
    overturn: str = ""
    favours: bool = False


Apply = Callable[[Prediction, Evidence, Draws], Applied]


def sorted_out(limits: Sequence[PhysicalLimit]) -> tuple[list[PhysicalLimit], str]:
    """Limits that may rule out; if there are none, those that may not, with the words that say so.

    Returns
    -------
    list of PhysicalLimit, str
        The words are empty when the limits may rule out; a test with words may only inform.
    """
    good = [limit for limit in limits if usable(limit)]
    if good or not limits:
        return good, ""
    flags = ", ".join(dict.fromkeys(f"{limit.limit.band.label}: {limit.limit.flag}" for limit in limits))
    return list(limits), f"no limit is free of doubt ({flags})"


def set_aside(limits: Sequence[PhysicalLimit]) -> str:
    """Words for the limits that were left out because of their flag."""
    flagged = [limit for limit in limits if not usable(limit)]
    if not flagged or len(flagged) == len(limits):
        return ""
    return "; not used: " + ", ".join(f"{limit.limit.band.label} ({limit.limit.flag})" for limit in flagged)


def exposures_of(limit: PhysicalLimit) -> str:
    """Which exposures a limit rests on: those its catalog file names, or the catalog's own."""
    return limit.limit.band.exposures or limit.limit.band.catalog_id


def joint_miss(misses: Sequence[tuple[str, Floats]], n: int) -> Floats:
    """Probability that every set of exposures missed the source, from (exposures, miss probability) pairs.

    Bands of one catalog, and catalogs made from the same exposures, share what they saw, so the smallest of their
    probabilities counts once; the others are independent and multiply.
    """
    by_exposures: dict[str, Floats] = {}
    for name, miss in misses:
        by_exposures[name] = np.minimum(by_exposures[name], miss) if name in by_exposures else miss
    together = np.ones(n)
    for miss in by_exposures.values():
        together = together * miss
    return together


def span(low: float, high: float, digits: int = 2) -> str:
    """Two numbers as a range, or one where they print alike."""
    a, b = f"{low:.{digits}g}", f"{high:.{digits}g}"
    return a if a == b else f"{a}-{b}"


def span_kpc(dist_pc: Floats) -> str:
    """The distances drawn, in kpc."""
    return f"{span(float(dist_pc.min()) / 1e3, float(dist_pc.max()) / 1e3)} kpc"
