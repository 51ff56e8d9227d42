"""The draws that all tests of all classes share: where the object is and what lies in front of it."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from xmatch.assumptions import Assumptions
from xmatch.flux.luminosity import draw_distances_pc
from xmatch.records import Floats, PhysicalLimit, SpinFigures, Target

UNUSABLE = ("unproven", "holds only", "of the error region")
"""Words in a limit's flag that keep it from ruling anything out."""


@dataclass(frozen=True)
class Scene:
    """One set of draws under one variant of the assumptions."""

    target: Target
    assumptions: Assumptions
    spin: SpinFigures | None
    limits: tuple[PhysicalLimit, ...]
    """Usable ones only."""
    left_out: tuple[PhysicalLimit, ...]
    distance_pc: Floats | None
    column_cm2: Floats
    av_mag: Floats

    @property
    def n(self) -> int:
        """Number of draws."""
        return self.assumptions.draws

    def limits_of(self, labels: Sequence[str]) -> list[PhysicalLimit]:
        """Usable limits of the named bands, each band once."""
        return [limit for limit in self.limits if limit.limit.band.label in labels]

    @property
    def xray_limits(self) -> list[PhysicalLimit]:
        """The deepest usable X-ray limit of each catalog: limits of one instrument are not independent."""
        best: dict[str, PhysicalLimit] = {}
        for limit in self.limits:
            band = limit.limit.band
            if band.is_xray and (band.catalog_id not in best or limit.flux_cgs < best[band.catalog_id].flux_cgs):
                best[band.catalog_id] = limit
        return list(best.values())


def make_scene(
    target: Target,
    limits: Sequence[PhysicalLimit],
    spin: SpinFigures | None,
    assumptions: Assumptions,
    column_factor: float,
) -> Scene:
    """Draw distance, column and extinction; the same seed gives the same draws."""
    rng = np.random.default_rng(assumptions.seed)
    n = assumptions.draws
    distance = None
    if target.distance is not None:
        distance = draw_distances_pc(
            rng, n, target.distance.low_pc, target.distance.high_pc, assumptions.distance_prior
        )
    scatter = 10.0 ** (assumptions.column_scatter_dex * rng.standard_normal(n))
    usable = [limit for limit in limits if not any(word in limit.limit.flag for word in UNUSABLE)]
    return Scene(
        target=target,
        assumptions=assumptions,
        spin=spin,
        limits=tuple(usable),
        left_out=tuple(limit for limit in limits if limit not in usable),
        distance_pc=distance,
        column_cm2=(assumptions.column_cm2 or 0.0) * column_factor * scatter,
        av_mag=(assumptions.av_mag or 0.0) * column_factor * scatter,
    )
