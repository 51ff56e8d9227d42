"""From limits and spin figures to standings: joint draws, tests, variants, words."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from concurrent.futures import ThreadPoolExecutor
from dataclasses import dataclass, replace

import numpy as np

from xmatch.assumptions import Assumptions
from xmatch.classes.companion_tests import companion_magnitudes
from xmatch.classes.draws import Deviates, Draws, Variant, draw, variants
from xmatch.classes.evidence import Applied, Apply, Evidence
from xmatch.classes.model import ClassFile
from xmatch.classes.rotation_tests import death_lines, period_range, spin_down_budget
from xmatch.classes.survival import floored, say_fraction, wilson
from xmatch.classes.xray_tests import luminosity_from_spin_down, luminosity_template
from xmatch.errors import RangeError
from xmatch.flux.physical import resolve
from xmatch.records import (
    ClassTest,
    Finding,
    Floats,
    PhysicalLimit,
    SpinFigures,
    Standing,
    StandingWord,
    Target,
)


@dataclass(frozen=True)
class Kind:
    """One test that class files may name: what does it, and which variants of the assumptions it depends on."""

    apply: Apply
    uses_column: bool = False
    uses_beam: bool = False
    of_rotation: bool = False
    """Meaningless when the period is an orbit's."""
    source: str = ""
    """Source of the formula, printed after the sources of the class file's numbers."""


KINDS: Mapping[str, Kind] = {
    "spin-down budget": Kind(
        spin_down_budget, uses_beam=True, of_rotation=True, source="spin-down power: Lorimer & Kramer 2005, ch. 3"
    ),
    "x-ray luminosity from spin-down": Kind(luminosity_from_spin_down, uses_column=True, of_rotation=True),
    "x-ray luminosity": Kind(luminosity_template, uses_column=True),
    "death lines": Kind(
        death_lines,
        of_rotation=True,
        source="Chen & Ruderman 1993, ApJ 402, 264; Zhang, Harding & Muslimov 2000, ApJ 531, L135",
    ),
    "companion magnitudes": Kind(companion_magnitudes, uses_column=True),
    "period range": Kind(period_range, of_rotation=True),
}
"""Every test by the name in :data:`xmatch.classes.schema.TESTS`; a new class needs none of its own."""


@dataclass(frozen=True)
class _Under:
    """What one variant leaves of a class."""

    variant: Variant
    applied: tuple[Applied, ...]
    weights: Floats | None
    """Product over the tests that may rule out; None when there is none."""


def standings(
    target: Target,
    limits: Sequence[PhysicalLimit],
    findings: Sequence[Finding],
    spin: SpinFigures | None,
    assumptions: Assumptions,
    classes: Sequence[ClassFile],
) -> tuple[Standing, ...]:
    """Say what the limits and the spin leave of each class.

    Parameters
    ----------
    target : Target
        For distance, pulses, column.
    limits : sequence of PhysicalLimit
        One or more per band; those whose flag says that a source could have gone unseen never rule out.
    findings : sequence of Finding
        For counterparts.
    spin : SpinFigures or None
    assumptions : Assumptions
        Number of draws, seed, thresholds; column and extinction are settled here if they are not yet.
    classes : sequence of ClassFile

    Returns
    -------
    tuple of Standing
        In the order of the classes. ``survival`` is the fraction of draws that agrees with everything seen, under the
        assumptions as given; 3/N stands for anything smaller. ``survival_low`` and ``survival_high`` are the extremes
        over the variants, binomial error (Wilson 1927, 95 %) included.

    Raises
    ------
    RangeError
        For less than one draw.

    Notes
    -----
    A class is ruled out when ``survival_high`` is below ``ruled_out_below``, that is under every variant, and strained
    when it is below ``strained_below``. The same distances, columns and extinctions serve every class and band.
    """
    if assumptions.draws < 1:
        raise RangeError(f"{assumptions.draws} draws is not allowed; give 1000 or more")
    settled = resolve(target, assumptions)
    evidence = Evidence(target, tuple(limits), tuple(findings), spin, settled)
    deviates = Deviates.drawn(settled)
    return tuple(_standing(item, evidence, deviates) for item in classes)


def _standing(item: ClassFile, evidence: Evidence, deviates: Deviates) -> Standing:
    a = evidence.assumptions
    if item.never_ruled_out:
        return Standing(
            class_id=item.id,
            title=item.title,
            word=StandingWord.OPEN,
            reason="it predicts nothing that could be held against a limit: never ruled out",
            survival=None,
            survival_low=None,
            survival_high=None,
            tests=(),
            would_overturn="an identification as one of the other classes",
        )
    first = Variant(a.distance_prior)
    base = _under(item, evidence, draw(deviates, evidence.target.distance, a, first, item.id))
    tests = tuple(_class_test(item, number, applied, a.draws) for number, applied in enumerate(base.applied))
    favoured = any(applied.favours for applied in base.applied)
    if base.weights is None:
        return Standing(
            class_id=item.id,
            title=item.title,
            word=StandingWord.FAVOURED if favoured else StandingWord.UNTESTED,
            reason=_why_favoured(tests, base) if favoured else _why_untested(tests),
            survival=None,
            survival_low=None,
            survival_high=None,
            tests=tests,
            would_overturn="" if favoured else "what the tests say is missing",
        )
    tried = _variants(item, evidence, deviates, base)
    fractions = {under.variant.name: _mean(under) for under in tried}
    intervals = [wilson(fraction * a.draws, a.draws) for fraction in fractions.values()]
    low, high = min(pair[0] for pair in intervals), max(pair[1] for pair in intervals)
    word = StandingWord.OPEN
    if high < a.ruled_out_below:
        word = StandingWord.RULED_OUT
    elif high < a.strained_below:
        word = StandingWord.STRAINED
    elif favoured:
        word = StandingWord.FAVOURED
    decider = _decider(base)
    return Standing(
        class_id=item.id,
        title=item.title,
        word=word,
        reason=_why_favoured(tests, base)
        if word is StandingWord.FAVOURED
        else _why(word, tests[decider], fractions, a),
        survival=floored(next(iter(fractions.values())), a.draws),
        survival_low=low,
        survival_high=high,
        tests=tests,
        variants={name: floored(fraction, a.draws) for name, fraction in fractions.items()},
        would_overturn=base.applied[decider].overturn,
    )


def _variants(item: ClassFile, evidence: Evidence, deviates: Deviates, base: _Under) -> list[_Under]:
    """The class under every variant its ruling tests depend on, the one assumed first.

    What only informs is said once, under the assumptions as given, and is not worked out again.
    """
    ruling = tuple(
        prediction
        for prediction, one in zip(item.predictions, base.applied, strict=True)
        if one.weights is not None and not one.informs_only
    )
    kinds = [KINDS[prediction.test] for prediction in ruling]
    a = evidence.assumptions
    tried = variants(
        a, uses_column=any(kind.uses_column for kind in kinds), uses_beam=any(kind.uses_beam for kind in kinds)
    )
    only = replace(item, predictions=ruling)
    others = [draw(deviates, evidence.target.distance, a, variant, item.id) for variant in tried[1:]]
    # each variant has its own generators, so that the order in which they end changes nothing; numpy lets go of the
    # interpreter inside its loops
    with ThreadPoolExecutor(max_workers=max(1, len(others))) as pool:
        return [base, *pool.map(lambda draws: _under(only, evidence, draws), others)]


def _under(item: ClassFile, evidence: Evidence, draws: Draws) -> _Under:
    """Apply every prediction of a class under one variant."""
    applied = []
    for prediction in item.predictions:
        kind = KINDS[prediction.test]
        result = kind.apply(prediction, evidence, draws)
        if kind.of_rotation and evidence.spin is not None and evidence.spin.conditional and not result.informs_only:
            result = replace(
                result, sentence=f"{result.sentence}; informs only: {evidence.spin.conditional}", informs_only=True
            )
        applied.append(result)
    ruling = [one.weights for one in applied if one.weights is not None and not one.informs_only]
    return _Under(draws.variant, tuple(applied), np.prod(ruling, axis=0) if ruling else None)


def _mean(under: _Under) -> float:
    return 0.0 if under.weights is None else float(under.weights.mean())


def _decider(base: _Under) -> int:
    """The test that removes most of the class."""
    ruling = {
        number: float(one.weights.mean())
        for number, one in enumerate(base.applied)
        if one.weights is not None and not one.informs_only
    }
    return min(ruling, key=lambda number: ruling[number])


def _class_test(item: ClassFile, number: int, applied: Applied, n: int) -> ClassTest:
    prediction = item.predictions[number]
    survival = low = high = None
    sentence = applied.sentence
    informs = applied.informs_only
    if applied.weights is not None and not informs:
        fraction = float(applied.weights.mean())
        low, high = wilson(fraction * n, n)
        survival = floored(fraction, n)
        sentence = f"{sentence}; survival {say_fraction(fraction, n)}"
    return ClassTest(
        class_id=item.id,
        test=prediction.test,
        sentence=sentence,
        survival=survival,
        survival_low=low,
        survival_high=high,
        source="; ".join(part for part in (prediction.sources, KINDS[prediction.test].source) if part),
        informs_only=informs,
    )


def _why(word: StandingWord, test: ClassTest, fractions: Mapping[str, float], a: Assumptions) -> str:
    values = [floored(fraction, a.draws) for fraction in fractions.values()]
    low, high = say_fraction(min(values), a.draws), say_fraction(max(values), a.draws)
    spread = low if low == high else f"{low} to {high}"
    over = f"over {len(values)} variants of the assumptions" if len(values) > 1 else "under the assumptions"
    meaning = {
        StandingWord.RULED_OUT: f"below {a.ruled_out_below:g} in every variant",
        StandingWord.STRAINED: f"below {a.strained_below:g} in every variant",
    }.get(word, "enough of the class passes in at least one variant")
    return f"survival {spread} {over}, {meaning}; hardest test: {test.test}"


def _why_untested(tests: Sequence[ClassTest]) -> str:
    said = next((test.sentence for test in tests if not test.informs_only), None)
    return f"no test could be made: {said or 'every test only informs'}"


def _why_favoured(tests: Sequence[ClassTest], base: _Under) -> str:
    number = next(number for number, applied in enumerate(base.applied) if applied.favours)
    return f"a counterpart agrees with it: {tests[number].sentence}"
