"""The report: the first line is honest, every width holds, nothing from an archive reaches the terminal raw."""

from __future__ import annotations

import io
import json
from dataclasses import fields, replace

import numpy as np
import pytest
from report_build import HOSTILE, candidate, finding, look
from rich.console import Console

from xmatch.records import Finding, Look, Outcome
from xmatch.report.asjson import FORMAT, to_json
from xmatch.report.terminal import lines, render
from xmatch.report.words import age, answer, clean, limit_text, number, percent, share, span

BLANKS = (finding("2mass-psc", Outcome.BLANK), finding("nvss", Outcome.BLANK))


def text(found: Look, width: int = 100) -> str:
    return "\n".join(line for line, _ in lines(found, width))


def test_a_blank_sky_in_words() -> None:
    said = answer(look(BLANKS))
    assert said == "Tern-9: nothing that can be called a counterpart. 2 catalogs are blank (near-infrared, radio)."


def test_one_is_singular() -> None:
    assert "1 catalog is blank (radio)" in answer(look(BLANKS[1:]))


@pytest.mark.parametrize("word", [Outcome.UNANSWERED, Outcome.MISREAD, Outcome.TRUNCATED])
def test_a_failure_is_never_hidden_and_never_a_non_detection(word: Outcome) -> None:
    said = answer(look((*BLANKS, finding("gaia-dr3", word))))
    assert "in what did answer" in said
    assert "1 of 3 gave no usable answer (gaia-dr3): that is not a non-detection" in said


@pytest.mark.parametrize(
    "found",
    [
        (),
        (finding("nvss", Outcome.UNANSWERED), finding("2mass-psc", Outcome.MISREAD)),
        (finding("ps1-dr1", Outcome.NOT_COVERED),),
        (finding("ps1-dr1", Outcome.NOT_COVERED), finding("nvss", Outcome.TRUNCATED)),
    ],
    ids=["nothing asked", "all failed", "none covers", "both"],
)
def test_silence_is_not_a_blank_sky(found: tuple[Finding, ...]) -> None:
    said = answer(look(found))
    assert said.startswith("Tern-9: nothing was learnt about this position")
    assert "counterpart" not in said


@pytest.mark.parametrize(
    ("word", "one", "two"),
    [
        (Outcome.PARTLY_COVERED, "1 covers only part", "2 cover only part"),
        (Outcome.COVERAGE_UNKNOWN, "1 cannot prove that it looked", "2 cannot prove that they looked"),
        (Outcome.CHANCE, "1 shows only", "2 show only"),
    ],
)
def test_singular_and_plural(word: Outcome, one: str, two: str) -> None:
    both = (finding("nvss", word), finding("2mass-psc", word))
    assert one in answer(look(both[:1])) and two in answer(look(both))


def test_a_counterpart_comes_first() -> None:
    said = answer(look((finding("gaia-dr3", Outcome.COUNTERPART), *BLANKS, finding("ps1-dr1", Outcome.AMBIGUOUS))))
    assert said.startswith("Tern-9: a counterpart in gaia-dr3 and also a possible one in ps1-dr1.")


@pytest.mark.parametrize("word", list(Outcome))
def test_every_outcome_is_said_in_the_first_line_and_below(word: Outcome) -> None:
    found = look((finding("catwise2020", word),))
    assert "catwise2020" in answer(found) or "mid-infrared" in answer(found)
    assert str(word).upper() in text(found)


@pytest.mark.parametrize("width", [60, 72, 80, 100, 104, 160, 200])
def test_no_line_is_wider_than_the_terminal(width: int) -> None:
    found = look(
        (finding("gaia-dr3", Outcome.CHANCE, candidates=(candidate("gaia-dr3", "x" * 300),)), *BLANKS), name="n" * 150
    )
    assert max(len(line) for line, _ in lines(found, width)) <= width


@pytest.mark.parametrize("distance", [True, False])
@pytest.mark.parametrize("width", [60, 80, 104, 108, 112, 114, 160])
def test_no_number_of_a_limit_is_cut_at_any_width(width: int, distance: bool) -> None:
    found = look(BLANKS, distance=distance)
    shown = text(found, width).partition("PHYSICAL TERMS")[2].partition("These rest on:")[0]
    assert len(found.limits) > 10
    for p in found.limits:
        if distance:
            assert span(p.luminosity_erg_s) in shown
        assert limit_text(p.limit).partition(" (")[0] in " ".join(shown.split())
        assert number(p.flux_cgs) in shown and number(p.corrected_flux_cgs) in shown
    assert not any(
        line.rstrip().endswith(("<", ">", "..")) for line in shown.splitlines()[2:] if "luminosity <" not in line
    )


@pytest.mark.parametrize("width", [80, 160])
def test_a_blind_band_and_a_flag_show_in_table_and_sentence(width: int) -> None:
    found = look(BLANKS)
    blind = replace(found.limits[0], corrected_flux_cgs=None, luminosity_erg_s=(), transmitted=1e-5)
    flagged = replace(blind, limit=replace(blind.limit, flag="raised by a neighbour"))
    shown = text(replace(found, limits=(flagged,)), width).partition("PHYSICAL TERMS")[2]
    assert "blind" in shown and f"*{flagged.limit.band.label}" in shown and "*: flagged" in shown
    assert "luminosity < -" not in shown
    unknown = text(replace(found, limits=(replace(blind, transmitted=float("nan")),)), width).partition(
        "PHYSICAL TERMS"
    )[2]
    assert "unknown" in unknown and "blind" not in unknown.partition("These rest on:")[0]


@pytest.mark.parametrize("width", [70, 140])
def test_a_pipe_gets_plain_text_and_a_terminal_the_same_words(width: int) -> None:
    found = look(BLANKS)
    piped, shown = io.StringIO(), io.StringIO()
    render(found, Console(file=piped, width=width))
    render(found, Console(file=shown, width=width, force_terminal=True, color_system="standard"))
    assert "\x1b" not in piped.getvalue() and "\x1b" in shown.getvalue()
    assert piped.getvalue().splitlines()[0].startswith("Tern-9:")
    import re

    assert re.sub(r"\x1b\[[0-9;]*m", "", shown.getvalue()).split() == piped.getvalue().split()
    assert not set(piped.getvalue()) & set("─│┌┐└┘━┃")


def test_what_an_archive_names_cannot_reach_the_terminal_raw() -> None:
    found = look(
        (finding("gaia-dr3", Outcome.AMBIGUOUS, candidates=(candidate("gaia-dr3", HOSTILE),), why=HOSTILE),),
        name=HOSTILE,
    )
    shown = io.StringIO()
    render(found, Console(file=shown, width=100))
    assert not set(shown.getvalue()) & set("\x1b\x07\r\u202e\u2028\x85\x9b")
    assert "[red]name[/red]" in shown.getvalue()


def test_without_a_distance_it_says_so() -> None:
    said = " ".join(text(look(BLANKS, distance=False)).split())
    assert "No distance was given, so there is no luminosity" in said


def test_every_number_of_a_limit_stands_with_its_meaning_and_the_assumptions() -> None:
    limit = look(BLANKS).limits[-1].limit
    said = text(look((*BLANKS, finding("vlass-ql1", Outcome.BLANK, limits=(limit,)))), 160)
    for part in (
        "95% of such sources are listed",
        "photon index 2",
        "He, Ng & Kaspi 2013",
        "Gordon et al. 2023",
        "isotropic",
        "log-uniform",
    ):
        assert part in " ".join(said.split())


def test_survival_is_never_zero() -> None:
    assert percent(0.0, 100_000) == "< 3e-5"
    assert percent(0.5, 100_000) == "0.50"
    assert percent(3.8e-5, 100_000) == "3.8e-5"
    assert "0.0 survives" not in text(look(BLANKS))


@pytest.mark.parametrize(
    ("value", "shown"),
    [
        (0.0, "0"),
        (1.234, "1.2"),
        (123.4, "123"),
        (1.2345e-13, "1.2e-13"),
        (-1.2345e-13, "-1.2e-13"),
        (9.96, "10"),
        (99_999.0, "1.0e5"),
        (9.996e-4, "0.0010"),
        (2.0e-100, "2.0e-100"),
        (float("inf"), "-"),
        (4.4e21, "4.4e21"),
        (None, "-"),
        (float("nan"), "-"),
    ],
)
def test_numbers(value: float | None, shown: str) -> None:
    assert number(value) == shown


def test_ages_and_spans() -> None:
    assert [age(v) for v in (None, 5.0, 7300.0, 86400.0 * 9)] == ["never asked", "fresh", "2 h old", "9 d old"]
    assert span((1e30, 2e30, 3e30)) == "1.0e30 .. 2.0e30 .. 3.0e30"
    assert clean("a\tb\x00c\u2028d\x9be") == "a bc de"


def test_a_confidence_is_never_rounded_to_certainty() -> None:
    assert [share(value) for value in (0.95, 0.9, 0.57, 0.9973, 0.999999)] == [
        "95%",
        "90%",
        "57%",
        "99.73%",
        "99.9999%",
    ]


def test_json_is_complete_and_finite() -> None:
    found = look(
        (
            finding(
                "gaia-dr3",
                Outcome.CHANCE,
                candidates=(candidate("gaia-dr3"),),
                coverage_fraction=float("nan"),
                n_rows=np.int64(7),
                age_s=np.float64("inf"),
            ),
            *BLANKS,
        )
    )
    body = json.loads(json.dumps(to_json(found), allow_nan=False))
    assert body["format"] == FORMAT and body["format_version"] == 1
    assert {field.name for field in fields(Look)} <= body.keys()
    assert body["findings"][0]["outcome"] == "chance" and body["findings"][0]["coverage_fraction"] is None
    assert body["findings"][0]["n_rows"] == 7 and body["findings"][0]["age_s"] is None
    assert body["limits"][0]["flux_cgs"] == found.limits[0].flux_cgs
    assert body["answer"] == answer(found)


def test_json_names_what_failed() -> None:
    assert to_json(look((finding("nvss", Outcome.MISREAD), BLANKS[0])))["failed"] == ["nvss"]
