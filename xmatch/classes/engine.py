"""Hold every class against limits and spin figures, by joint draws over distance, column and the class's own light.

A class survives with the mean, over draws, of the product of what its tests let through. Distance, column and
extinction of a draw are shared by all tests. Every number is given with its binomial error and its range over the
variants of the assumptions; zero survivors are never printed as zero.
"""

from __future__ import annotations

import zlib
from collections.abc import Sequence

import numpy as np

from xmatch.assumptions import Assumptions
from xmatch.classes.model import ClassFile
from xmatch.classes.scene import Scene, make_scene
from xmatch.classes.kinds import KINDS, Verdict
from xmatch.records import ClassTest, Finding, PhysicalLimit, SpinFigures, Standing, StandingWord, Target

WILSON_Z = 1.96
"""Two-sided 95 % of the binomial interval (Wilson 1927, JASA 22, 209)."""
VARIANTS: dict[str, dict[str, object]] = {
    "as assumed": {},
    "distances by volume": {"distance_prior": "volume"},
    "distances uniform": {"distance_prior": "uniform"},
    "column doubled": {"column_factor": 2.0},
    "column halved": {"column_factor": 0.5},
}


def standings(
    target: Target,
    limits: Sequence[PhysicalLimit],
    findings: Sequence[Finding],
    spin: SpinFigures | None,
    assumptions: Assumptions,
    classes: Sequence[ClassFile],
) -> tuple[Standing, ...]:
    """Return what the tests leave of each class.

    Parameters
    ----------
    target : Target
        With a distance range, otherwise nothing that needs a luminosity can be tested.
    limits : sequence of PhysicalLimit
        Limits that are flagged as unproven or conditional are not used.
    findings : sequence of Finding
        For counterparts found.
    spin : SpinFigures or None
        Spin-down figures.
    assumptions : Assumptions
        Resolved; draws and seed come from here.
    classes : sequence of ClassFile
        From :func:`xmatch.classes.loader.load_classes`.

    Notes
    -----
    Ruled out: less than ``ruled_out_below`` survives under every variant, binomial error included.
    """
    scenes = {}
    for name, change in VARIANTS.items():
        factor = float(change.get("column_factor", 1.0))  # type: ignore[arg-type]
        prior = str(change.get("distance_prior", assumptions.distance_prior))
        scenes[name] = make_scene(target, limits, spin, assumptions.but(distance_prior=prior), factor)
    return tuple(_standing(one, scenes, assumptions) for one in classes)


def wilson(survivors: float, n: int) -> tuple[float, float]:
    """Binomial interval of a fraction (Wilson 1927, JASA 22, 209); with no survivors the upper end is about 3.8/n."""
    p, z2 = survivors / n, WILSON_Z**2
    middle = (p + z2 / (2 * n)) / (1 + z2 / n)
    half = WILSON_Z / (1 + z2 / n) * float(np.sqrt(p * (1 - p) / n + z2 / (4 * n * n)))
    return max(0.0, middle - half), min(1.0, middle + half)


def _standing(one: ClassFile, scenes: dict[str, Scene], assumptions: Assumptions) -> Standing:
    n = assumptions.draws
    survival: dict[str, float] = {}
    lows, highs = [], []
    first: list[Verdict] = []
    for name, scene in scenes.items():
        # each class has its own stream, so that adding a class changes no other
        rng = np.random.default_rng([assumptions.seed, zlib.crc32(one.id.encode())])
        verdicts = [KINDS[prediction.kind](scene, prediction, rng) for prediction in one.tests]
        if name == "as assumed":
            first = verdicts
        passing = [verdict.passes for verdict in verdicts if verdict.passes is not None and not verdict.informs_only]
        if passing:
            weight = np.ones(n)
            for passes in passing:
                weight = weight * passes
            survival[name] = float(weight.mean())
            low, high = wilson(float(weight.sum()), n)
            lows.append(low)
            highs.append(high)
    tests = tuple(_class_test(one.id, verdict, n) for verdict in first)
    if not survival:
        reason = "no test could be made" if one.tests else "it makes no prediction, so it stays in the list"
        word = StandingWord.UNTESTED if one.tests else StandingWord.OPEN
        return Standing(one.id, one.title, word, reason, None, None, None, tests, {}, one.would_overturn)
    low, high = min(lows), max(highs)
    if all(value < assumptions.ruled_out_below for value in highs):
        word = StandingWord.RULED_OUT
    elif all(value < assumptions.strained_below for value in highs):
        word = StandingWord.STRAINED
    else:
        word = StandingWord.OPEN
    return Standing(
        class_id=one.id,
        title=one.title,
        word=word,
        reason=_reason(first),
        survival=survival["as assumed"],
        survival_low=low,
        survival_high=high,
        tests=tests,
        variants=survival,
        would_overturn=one.would_overturn,
    )


def _reason(verdicts: Sequence[Verdict]) -> str:
    """The test that takes most away."""
    made = [verdict for verdict in verdicts if verdict.passes is not None and not verdict.informs_only]
    worst = min(made, key=lambda verdict: float(np.mean(verdict.passes)))  # type: ignore[arg-type]
    return worst.sentence


def _class_test(class_id: str, verdict: Verdict, n: int) -> ClassTest:
    if verdict.passes is None:
        return ClassTest(class_id, verdict.name, verdict.sentence, None, None, None, verdict.source, verdict.informs_only)
    low, high = wilson(float(verdict.passes.sum()), n)
    return ClassTest(
        class_id=class_id,
        test=verdict.name,
        sentence=verdict.sentence,
        survival=float(verdict.passes.mean()),
        survival_low=low,
        survival_high=high,
        source=verdict.source,
        informs_only=verdict.informs_only,
    )
