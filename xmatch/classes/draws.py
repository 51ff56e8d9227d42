"""Joint draws: every class and band sees the same distances and the same columns."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, field
from zlib import crc32

import numpy as np

from xmatch.assumptions import Assumptions
from xmatch.flux.distance import AS_GIVEN, quantiles_of
from xmatch.records import Distance, Floats

VARIANT_PRIORS = ("log-uniform", "volume")
"""Distance priors that every standing is tried under, besides the one assumed."""
COLUMN_FACTORS = (1.0, 2.0)
"""The column as assumed and twice that: relations between dispersion measure, extinction and column scatter by about
a factor 2 (He, Ng & Kaspi 2013, ApJ 768, 64)."""
BEAM_FACTORS = (1.0, 0.1)
"""The beam as assumed and a tenth of it (radio pulsars light about a tenth of the sky; from memory)."""


@dataclass(frozen=True)
class Variant:
    """One choice of the assumptions that nobody knows better."""

    prior: str
    column_factor: float = 1.0
    beam_factor: float = 1.0

    @property
    def name(self) -> str:
        """In words, as reports print it."""
        parts = [f"distance {self.prior}" if self.prior == AS_GIVEN else f"{self.prior} distance"]
        if self.column_factor != 1.0:
            parts.append(f"column x{self.column_factor:g}")
        if self.beam_factor != 1.0:
            parts.append(f"beam x{self.beam_factor:g}")
        return ", ".join(parts)


def variants(assumptions: Assumptions, *, uses_column: bool, uses_beam: bool) -> tuple[Variant, ...]:
    """Every variant that can change a class's survival, the one assumed first.

    Parameters
    ----------
    assumptions : Assumptions
        Its own distance prior comes first.
    uses_column, uses_beam : bool
        Whether a test of the class depends on them; otherwise they are not varied.
    """
    priors: tuple[str, ...] = (assumptions.distance_prior,)
    if assumptions.distance_prior != AS_GIVEN:  # a posterior needs no prior of ours
        priors = tuple(dict.fromkeys((*priors, *VARIANT_PRIORS)))
    empty = not assumptions.column_cm2 and not assumptions.av_mag
    columns = COLUMN_FACTORS if uses_column and not empty else (1.0,)
    beams = BEAM_FACTORS if uses_beam else (1.0,)
    return tuple(Variant(prior, column, beam) for beam in beams for column in columns for prior in priors)


@dataclass(frozen=True)
class Draws:
    """One draw of the line of sight per element; arrays of shape (n,).

    ``dist_pc`` is empty without a distance range. ``seed`` and ``class_id`` make each class's own numbers, which do not
    change when another class is added.
    """

    n: int
    dist_pc: Floats
    column_cm2: Floats
    av_mag: Floats
    variant: Variant
    seed: int
    class_id: str

    def own(self, purpose: str) -> np.random.Generator:
        """A generator of this class for one purpose, the same under every variant."""
        return np.random.default_rng([self.seed, crc32(self.class_id.encode()), crc32(purpose.encode())])


@dataclass(frozen=True)
class Deviates:
    """The random numbers of the line of sight, shared by all classes and variants."""

    quantile: Floats
    column_sigma: Floats
    worked_out: dict[tuple[str, float], tuple[Floats, Floats, Floats]] = field(default_factory=dict, compare=False)
    """Lines of sight by distance prior and column factor, so that every class and beam shares them."""

    @classmethod
    def drawn(cls, assumptions: Assumptions) -> Deviates:
        """Draw them once: the seed and the number are in the assumptions."""
        rng = np.random.default_rng(assumptions.seed)
        return cls(quantile=rng.uniform(size=assumptions.draws), column_sigma=rng.standard_normal(assumptions.draws))


def draw(
    deviates: Deviates, distance: Distance | None, assumptions: Assumptions, variant: Variant, class_id: str
) -> Draws:
    """Turn the shared random numbers into distances, columns and extinctions of one variant.

    Parameters
    ----------
    deviates : Deviates
    distance : Distance or None
    assumptions : Assumptions
        With column and extinction settled; None counts as 0.
    variant : Variant
    class_id : str

    Notes
    -----
    The column is log-normal about the assumed one with ``column_scatter_dex`` (He, Ng & Kaspi 2013, ApJ 768, 64), and
    the extinction scales with it: dust and gas come together. Neither exceeds the whole Galaxy's, where that is given.
    """
    place = (variant.prior, variant.column_factor)
    if place not in deviates.worked_out:
        factor = variant.column_factor * 10.0 ** (assumptions.column_scatter_dex * deviates.column_sigma)
        column_cap, av_cap = (
            np.inf if cap is None else cap for cap in (assumptions.column_total_cm2, assumptions.av_total_mag)
        )
        dist = np.empty(0)
        if distance is not None:
            dist = quantiles_of(distance, variant.prior, deviates.quantile)
        deviates.worked_out[place] = (
            dist,
            np.minimum((assumptions.column_cm2 or 0.0) * factor, column_cap),
            np.minimum((assumptions.av_mag or 0.0) * factor, av_cap),
        )
    dist_pc, column_cm2, av_mag = deviates.worked_out[place]
    return Draws(
        n=len(deviates.quantile),
        dist_pc=dist_pc,
        column_cm2=column_cm2,
        av_mag=av_mag,
        variant=variant,
        seed=assumptions.seed,
        class_id=class_id,
    )


def middle(values: Floats, q: Sequence[float] = (0.05, 0.95)) -> tuple[float, float]:
    """Quantiles that a sentence quotes; the 5 % and 95 % ones unless told."""
    low, high = np.quantile(values, q)
    return float(low), float(high)
