"""Standings: the words, the variants, the seed, and what never rules out."""

from __future__ import annotations

from collections.abc import Callable
from typing import Any

import pytest

from xmatch.assumptions import Assumptions
from xmatch.classes.engine import standings
from xmatch.classes.loader import load_classes
from xmatch.errors import RangeError
from xmatch.flux.physical import resolve
from xmatch.records import Distance, PhysicalLimit, Spin, Standing, StandingWord, Target
from xmatch.spin.figures import figures

QUICK = Assumptions(draws=20_000)


def ask(
    target: Target, limits: tuple[PhysicalLimit, ...] = (), classes: Any = None, assumptions: Assumptions = QUICK
) -> dict[str, Standing]:
    spin = figures(target.spin) if target.spin is not None else None
    found = standings(target, limits, (), spin, resolve(target, assumptions), classes or load_classes())
    return {standing.class_id: standing for standing in found}


def test_rotation_cannot_pay_for_the_invented_transient(make: Any) -> None:
    pulsar = ask(make.target())["rotation-powered-pulsar"]
    assert pulsar.word is StandingWord.RULED_OUT
    assert pulsar.survival == pytest.approx(3 / 20_000)
    assert pulsar.survival_high is not None
    assert 0.0 < pulsar.survival_high < 0.003
    assert all(fraction > 0.0 for fraction in pulsar.variants.values())
    assert "beam x0.1" in " ".join(pulsar.variants)
    assert all(test.source for test in pulsar.tests)
    assert "spin-down budget" in pulsar.reason
    assert "of the sky" in pulsar.would_overturn


def test_each_test_is_listed_and_only_the_budget_rules(make: Any) -> None:
    pulsar = ask(make.target())["rotation-powered-pulsar"]
    ruling = [test.test for test in pulsar.tests if not test.informs_only]
    assert [test.test for test in pulsar.tests] == [
        "spin-down budget", "x-ray luminosity from spin-down", "death lines", "period range",
    ]  # fmt: skip
    assert "spin-down budget" in ruling
    assert all(test.survival is None for test in pulsar.tests if test.informs_only)


def test_too_few_draws_cannot_rule_out(make: Any) -> None:
    assert ask(make.target(), assumptions=Assumptions(draws=500))["rotation-powered-pulsar"].word is not (
        StandingWord.RULED_OUT
    )


@pytest.mark.parametrize("draws", [0, -5])
def test_no_draws_are_refused(make: Any, draws: int) -> None:
    with pytest.raises(RangeError, match="draws"):
        ask(make.target(), assumptions=Assumptions(draws=draws))


def test_a_period_that_may_be_orbital_rules_nothing_out(make: Any) -> None:
    pulsar = ask(make.target(spin=Spin(2711.4, derivative_limit=2.4e-12, may_be_orbital=True)))[
        "rotation-powered-pulsar"
    ]
    assert pulsar.word is StandingWord.UNTESTED
    budget = next(test for test in pulsar.tests if test.test == "spin-down budget")
    assert budget.informs_only
    assert "may be orbital" in budget.sentence


def test_death_lines_alone_leave_a_class_untested(make: Any) -> None:
    pulsar = ask(make.target(pulses=()))["rotation-powered-pulsar"]
    assert any("below 8" in test.sentence for test in pulsar.tests)
    assert pulsar.word is StandingWord.UNTESTED
    assert "no pulse" in pulsar.reason


@pytest.mark.parametrize("changes", [{"distance": None}, {"spin": None, "pulses": ()}])
def test_without_what_a_test_needs_the_class_is_untested(make: Any, changes: dict[str, Any]) -> None:
    pulsar = ask(make.target(**changes))["rotation-powered-pulsar"]
    assert pulsar.word is StandingWord.UNTESTED
    assert (pulsar.survival, pulsar.survival_low, pulsar.survival_high) == (None, None, None)
    assert pulsar.variants == {}


def test_none_of_these_is_never_ruled_out(make: Any) -> None:
    target = make.target()
    deep = make.limit(make.xray_band(), 1e-25, target)
    standing = ask(target, (deep,))["none-of-these"]
    assert standing.word is StandingWord.OPEN
    assert "never ruled out" in standing.reason
    assert standing.tests == ()


@pytest.mark.parametrize(
    ("value", "word"),
    [(1e-20, StandingWord.RULED_OUT), (7e-15, StandingWord.STRAINED), (1e-11, StandingWord.OPEN)],
)
def test_the_word_follows_the_depth(make: Any, template: Callable[..., str], value: float, word: StandingWord) -> None:
    target = make.target()
    limit = make.limit(make.xray_band(), value, target)
    standing = ask(target, (limit,), (make.class_file(template(mean=33.0, scatter=0.5, low=0.2, high=0.4)),))[
        "invented"
    ]
    assert standing.word is word
    assert standing.survival is not None
    assert standing.survival_low is not None
    assert standing.survival_high is not None
    assert standing.survival_low <= standing.survival <= max(standing.survival_high, 3 / 20_000)
    assert len(standing.variants) == 4


def test_one_lenient_variant_keeps_a_class_from_being_ruled_out(make: Any, template: Callable[..., str]) -> None:
    # behind a heavy column, twice the column lets a soft class hide
    target = make.target(column_cm2=2.5e22)
    limit = make.limit(make.xray_band(), 1.0e-15, target)
    item = make.class_file(template(mean=33.0, scatter=0.1, low=0.12, high=0.14))
    standing = ask(target, (limit,), (item,))["invented"]
    plain = standing.variants["log-uniform distance"]
    lenient = standing.variants["log-uniform distance, column x2"]
    assert plain < lenient
    assert standing.survival_high is not None
    assert standing.survival_high >= lenient
    assert standing.survival_high >= max(standing.variants.values())


def test_a_doubtful_limit_leaves_the_class_untested(make: Any, template: Callable[..., str]) -> None:
    target = make.target()
    limit = make.limit(make.xray_band(), 1e-20, target, flag="covers 60% of the error region")
    standing = ask(target, (limit,), (make.class_file(template()),))["invented"]
    assert standing.word is StandingWord.UNTESTED
    assert standing.tests[0].informs_only
    assert "covers 60%" in standing.tests[0].sentence


def test_the_same_seed_gives_the_same_numbers_and_another_does_not(make: Any, template: Callable[..., str]) -> None:
    target = make.target()
    limits = (make.limit(make.xray_band(), 1e-13, target),)
    item = (make.class_file(template()),)
    first, again = ask(target, limits, item), ask(target, limits, item)
    assert first == again
    other = ask(target, limits, item, QUICK.but(seed=7))["invented"]
    mine = first["invented"]
    assert other.survival != mine.survival
    assert other.survival == pytest.approx(mine.survival, abs=0.02)


def test_another_class_changes_nothing_for_the_first(make: Any, template: Callable[..., str]) -> None:
    target = make.target()
    limits = (make.limit(make.xray_band(), 1e-13, target),)
    one = make.class_file(template(), "one")
    two = make.class_file(template(class_id="another", mean=31.0), "two")
    assert ask(target, limits, (one,))["invented"] == ask(target, limits, (two, one))["invented"]


def test_an_unsettled_column_is_settled_from_the_target(make: Any) -> None:
    target = make.target()
    limits = (make.limit(make.xray_band(), 1e-13, target),)
    spin = figures(target.spin)
    settled = standings(target, limits, (), spin, resolve(target, QUICK), load_classes())
    assert standings(target, limits, (), spin, QUICK, load_classes()) == settled


def test_two_tests_of_one_class_are_held_against_the_same_draws(make: Any, template: Callable[..., str]) -> None:
    # an X-ray limit and a companion: a joint survival lies below either one
    target = make.target(distance=Distance(500.0, 4000.0))
    companion = next(item for item in load_classes() if item.id == "main-sequence-companion")
    xray = make.class_file(template())
    both = type(xray)(
        id="both", title="both", summary="both", predictions=(*xray.predictions, *companion.predictions),
        never_ruled_out=False, path="",
    )  # fmt: skip
    limits = (make.limit(make.xray_band(), 3e-14, target), make.limit(make.light_band(), 18.0, target))
    found = ask(target, limits, (both,))["both"]
    parts = [test.survival for test in found.tests]
    assert found.survival is not None
    assert all(part is not None and found.survival < part for part in parts)
    assert "hardest test" in found.reason
