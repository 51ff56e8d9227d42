"""The answer for people: plain text in columns that fit any width, colour only as an extra.

Nothing is drawn with box characters and nothing is said by colour alone, so that a pipe, a log and a terminal show the
same words.
"""

from __future__ import annotations

import math
import re
import textwrap
from collections.abc import Iterable, Iterator, Sequence
from typing import TYPE_CHECKING

from xmatch.position import format_position
from xmatch.records import Finding, Look, Outcome, PhysicalLimit, Standing, StandingWord
from xmatch.report.words import age, answer, clean, gone, limit_text, number, percent, span

if TYPE_CHECKING:
    from rich.console import Console

STYLE = {
    Outcome.COUNTERPART: "bold",
    Outcome.AMBIGUOUS: "bold",
    Outcome.UNANSWERED: "reverse",
    Outcome.MISREAD: "reverse",
    Outcome.TRUNCATED: "reverse",
    StandingWord.RULED_OUT: "bold",
    StandingWord.FAVOURED: "bold",
}
HEADINGS = ("band", "limit", "observed <", "through", "corrected <", "luminosity <")
_TIED = re.compile(r"(?<=[<>]) (?=\S)|(?<=\d) (?=\.\. )|(?<= \.\.) (?=\d)")
"""Spaces in ``< 3.1e-13`` and ``1.2e31 .. 5.0e31``: a sign stays with its number, a range on one line."""
SHOWN_CANDIDATES = 5
ASSUMED = (
    ("confidence", "confidence of limits", ""),
    ("photon_index", "photon index of X-rays", ""),
    ("column_cm2", "column", "cm^-2"),
    ("column_origin", "  from", ""),
    ("column_scatter_dex", "  scatter in the class tests", "dex"),
    ("abundances", "abundances", ""),
    ("av_mag", "A_V", "mag"),
    ("av_origin", "  from", ""),
    ("extinction_law", "extinction law", ""),
    ("r_v", "R_V", ""),
    ("distance_prior", "distance prior", ""),
    ("radio_index", "radio spectral index", ""),
    ("beam_fraction", "beam, part of the sphere", ""),
    ("listed_fraction", "prior that a catalog lists it", ""),
    ("compatible_sigma", "compatible up to", "sigma"),
    ("population_motion_mas_yr", "motion of stars without one", "mas/yr"),
    ("target_speed_km_s", "the target's own speed", "km/s"),
    ("draws", "draws", ""),
    ("seed", "seed", ""),
)


def render(look: Look, console: Console) -> None:
    """Print the whole answer.

    Parameters
    ----------
    look : Look
        From :func:`xmatch.pipeline.look`.
    console : rich Console
        Its width is kept; styles are used only when it is a terminal.
    """
    from rich.text import Text

    for line, style in lines(look, console.width):
        console.print(Text(line, style=style), soft_wrap=True, highlight=False)


def lines(look: Look, width: int) -> Iterator[tuple[str, str]]:
    """The answer line by line, no line wider than ``width``, each with its style."""
    yield from _wrap(answer(look), width, style="bold")
    yield from _position(look, width)
    yield from _section("What each catalog says", width)
    waveband = None
    longest = max((len(finding.catalog_id) for finding in look.findings), default=0)
    for finding in look.findings:
        if finding.waveband is not waveband:
            waveband = finding.waveband
            yield f"{waveband}", "underline"
        yield from _finding(look, finding, width, longest)
    yield from _chance(look, width)
    yield from _limits(look, width)
    yield from _spin(look, width)
    yield from _standings(look, width)
    yield from _assumptions(look, width)


def _wrap(
    text: str, width: int, first: str = "", rest: str | None = None, style: str = ""
) -> Iterator[tuple[str, str]]:
    """Wrap one paragraph with a hanging indent; a word longer than the line is broken rather than run over."""
    rest = " " * len(first) if rest is None else rest
    if len(first) > 0.6 * width:  # a label too long to hang text from becomes part of the text
        indent = first[: len(first) - len(first.lstrip())]
        text, first = f"{first.strip()} {text}", indent
        rest = indent + "    " if len(rest) > 0.6 * width else rest
    text, first = _TIED.sub("\u00a0", clean(text)), clean(first)
    wrapped = textwrap.wrap(text, width, initial_indent=first, subsequent_indent=rest, break_on_hyphens=False)
    for line in wrapped or [first]:
        yield line.replace("\u00a0", " "), style


def _section(title: str, width: int) -> Iterator[tuple[str, str]]:
    yield "", ""
    head, _, tail = title.partition(" (")
    yield (head.upper() + (f" ({tail}" if tail else ""))[:width], "bold"


def _position(look: Look, width: int) -> Iterator[tuple[str, str]]:
    p = look.target.position
    epoch = "no epoch given: rows are not moved" if p.epoch_yr is None else f"epoch {p.epoch_yr:g}"
    yield from _wrap(f"{format_position(p.ra_deg, p.dec_deg)}, {epoch}", width, "at      ")
    yield from _wrap(
        f"{number(p.sigma_major_arcsec)} x {number(p.sigma_minor_arcsec)} arcsec at {p.angle_deg:g} deg, 1 sigma per axis "
        f"(stated: {p.stated})", width, "error   ",
    )  # fmt: skip
    asked = (
        "offline: nothing was asked"
        if look.offline
        else f"{look.n_asked} asked now, {look.n_from_store} from the store"
    )
    yield from _wrap(f"{look.made_at}, {asked}; {look.store}", width, "made    ")
    for remark in look.remarks:
        yield from _wrap(remark, width, "note    ")


def _finding(look: Look, finding: Finding, width: int, longest: int) -> Iterator[tuple[str, str]]:
    asked = finding.searches and not all(search.from_store for search in finding.searches)
    when = "asked now" if asked else f"from the store, {age(finding.age_s)}"
    head = f"  {finding.catalog_id:<{longest}} {str(finding.outcome).upper():<16} "
    yield from _wrap(f"{finding.release}; {when}", width, head, " " * 6, STYLE.get(finding.outcome, ""))
    yield from _wrap(finding.why, width, " " * 6)
    for candidate in finding.candidates[:SHOWN_CANDIDATES]:
        listed = ", ".join(
            f"{m.band.name} {'limit ' if m.is_limit else ''}{number(m.value, 4)} {m.band.unit}{f' = {number(m.flux_cgs)} erg/s/cm^2' if m.flux_cgs is not None else ''}"
            for m in candidate.photometry
        )
        yield from _wrap(
            f"{candidate.key}: {candidate.separation_arcsec:.2f} arcsec ({candidate.normalised_separation:.2f} sigma), "
            f"probability of a true match {number(candidate.odds)}, of chance {number(candidate.chance)}; {listed}",
            width, "      row ", " " * 10,
        )  # fmt: skip
    if len(finding.candidates) > SHOWN_CANDIDATES:
        yield from _wrap(f"and {len(finding.candidates) - SHOWN_CANDIDATES} more compatible rows", width, "      row ")
    for limit in finding.limits:
        unsure = "" if limit.verified_depth else "; unverified depth"
        flag = f"; {limit.flag}" if limit.flag else ""
        yield from _wrap(
            f"{limit.band.name} {limit_text(limit)}{flag}{unsure}. {limit.method}: {limit.note}",
            width,
            "      limit ",
            " " * 12,
        )


def _chance(look: Look, width: int) -> Iterator[tuple[str, str]]:
    yield from _wrap(
        f"Over all catalogs searched, {number(look.expected_chance)} unrelated rows are expected inside the error regions.",
        width,
    )


def _limits(look: Look, width: int) -> Iterator[tuple[str, str]]:
    if not look.limits:
        return
    distances = look.limits[0].distance_pc
    yield from _section("The limits in physical terms", width)
    where = (
        f"Luminosity at {' / '.join(number(d / 1e3, 3) for d in distances)} kpc (near, median, far)"
        if distances
        else "No distance was given, so there is no luminosity"
    )
    yield from _wrap(
        f"Fluxes in erg/s/cm^2 (X-rays: in the band; others: nu F_nu), luminosities in erg/s, isotropic. {where}.",
        width,
    )
    table = _table(look.limits)
    if max(len(row) for row in table) <= width:
        yield table[0], "underline"
        yield from ((row, "") for row in table[1:])
    else:
        for p in look.limits:
            yield from _wrap(_in_a_sentence(p), width, f" {_mark(p)}", " " * 6)
    yield from _wrap("These rest on:", width)
    for label, note in _notes(look.limits):
        yield from _wrap(f"{label}: {note}", width, "  ", " " * 6)


def _table(limits: Sequence[PhysicalLimit]) -> list[str]:
    """Heading and rows, each column as wide as what stands in it: a number is never cut."""
    cells = [HEADINGS] + [
        (
            clean(p.limit.band.label),
            clean(limit_text(p.limit).partition(" (")[0]),
            number(p.flux_cgs),
            number(p.transmitted),
            _uncorrected(p) or number(p.corrected_flux_cgs),
            span(p.luminosity_erg_s),
        )
        for p in limits
    ]
    widths = [max(len(row[i]) for row in cells) for i in range(len(HEADINGS) - 1)]
    marks = [" ", *(_mark(p) for p in limits)]
    return [
        f" {mark}{row[0]:<{widths[0]}}  "
        + "  ".join(f"{cell:>{size}}" for cell, size in zip(row[1:-1], widths[1:], strict=True))
        + f"  {row[-1]}"
        for mark, row in zip(marks, cells, strict=True)
    ]


def _in_a_sentence(p: PhysicalLimit) -> str:
    """One limit where the table does not fit."""
    luminosity = f", luminosity < {span(p.luminosity_erg_s)}" if p.luminosity_erg_s else ""
    value = limit_text(p.limit).partition(" (")[0]
    why = _uncorrected(p)
    corrected = f"corrected: {why}" if why else f"corrected < {number(p.corrected_flux_cgs)}"
    through = "an unknown part" if math.isnan(p.transmitted) else number(p.transmitted)
    return f"{p.limit.band.label} {value}: observed < {number(p.flux_cgs)}, {through} gets through, {corrected}{luminosity}"


def _uncorrected(p: PhysicalLimit) -> str:
    """Why there is no corrected flux; empty when there is one."""
    if p.corrected_flux_cgs is not None:
        return ""
    return "unknown" if math.isnan(p.transmitted) else "blind"


def _mark(p: PhysicalLimit) -> str:
    return "*" if p.limit.flag or not p.limit.verified_depth else " "


def _notes(limits: Iterable[PhysicalLimit]) -> Iterator[tuple[str, str]]:
    """Each distinct note once, with the bands it belongs to."""
    by_note: dict[str, list[str]] = {}
    for p in limits:
        by_note.setdefault(p.note, []).append(p.limit.band.label)
    for note, labels in by_note.items():
        yield ", ".join(labels), note
    if any(_mark(p) == "*" for p in limits):
        yield "*", "flagged or unverified, see the catalog above"


def _spin(look: Look, width: int) -> Iterator[tuple[str, str]]:
    spin = look.spin
    if spin is None:
        return
    yield from _section("What the period says", width)
    less = "< " if spin.derivative_is_limit else ""
    derivative = (
        f"derivative {less}{number(spin.derivative)} s/s" if spin.derivative is not None else "no spin-down known"
    )
    more = "> " if spin.derivative_is_limit else ""
    years = f", characteristic age {more}{number(spin.age_yr)} yr" if spin.age_yr is not None else ""
    yield from _wrap(
        f"period {spin.period_s:.8g} s, {derivative}{years}, light cylinder {number(spin.light_cylinder_cm / 1e5)} km. {spin.note}",
        width,
    )
    if spin.conditional:
        yield from _wrap(spin.conditional, width, style="bold")
    for budget in spin.budgets:
        yield from _wrap(
            f"spin-down power {less}{number(budget.power_erg_s)} erg/s; dipole field {less}{number(budget.field_equator_g)} G at the "
            f"equator, {less}{number(budget.field_pole_g)} G at the pole, {less}{number(budget.light_cylinder_field_g)} G at the light "
            f"cylinder (I = {number(budget.inertia_g_cm2)} g cm^2, R = {number(budget.radius_cm / 1e5)} km)", width, f"  {budget.star}: ", " " * 6,
        )  # fmt: skip
    for says, text in (
        ("above", "above"),
        ("below", "below"),
        ("nothing", "no statement (an upper limit above the line)"),
    ):
        chosen = [line for line in spin.death_lines if line.says == says]
        if chosen:
            listed = "; ".join(f"{line.model} {line.distance_dex:+.1f} dex" for line in chosen)
            yield from _wrap(f"{listed}", width, f"  death lines, {text}: ", " " * 6)
    if spin.death_lines:
        sources = "; ".join(dict.fromkeys(line.source for line in spin.death_lines))
        yield from _wrap(
            f"{sources}. They disagree by many orders of magnitude and rule nothing out alone.", width, "  ", " " * 6
        )


def _standings(look: Look, width: int) -> Iterator[tuple[str, str]]:
    if not look.standings:
        return
    yield from _section("What it could still be", width)
    yield from _wrap(gone(look), width)
    draws = int(str(look.assumptions.get("draws", 100_000)))
    for standing in sorted(look.standings, key=lambda s: list(StandingWord).index(s.word)):
        yield from _standing(standing, draws, width)


def _standing(standing: Standing, draws: int, width: int) -> Iterator[tuple[str, str]]:
    kept = ""
    if standing.survival is not None:
        kept = f": {percent(standing.survival, draws)} survives ({percent(standing.survival_low, draws)} to {percent(standing.survival_high, draws)} over the variants)"
    yield from _wrap(
        f"{standing.title}{kept}", width, f"  {str(standing.word).upper():<10} ", " " * 6, STYLE.get(standing.word, "")
    )
    if not standing.tests:
        yield from _wrap(standing.reason, width, " " * 6)
    for test in standing.tests:
        left = (
            " (informs only)"
            if test.informs_only
            else (f" ({percent(test.survival, draws)} survives)" if test.survival is not None else "")
        )
        yield from _wrap(f"{test.test}{left}: {test.sentence} [{test.source}]", width, "      test ", " " * 11)
    if standing.variants:
        listed = ", ".join(f"{name} {percent(value, draws)}" for name, value in standing.variants.items())
        yield from _wrap(listed, width, "      variants ", " " * 15)
    if standing.would_overturn:
        yield from _wrap(standing.would_overturn, width, "      would be overturned by ", " " * 11)


def _assumptions(look: Look, width: int) -> Iterator[tuple[str, str]]:
    yield from _section(f"Assumptions ({look.digest})", width)
    for key, label, unit in ASSUMED:
        value = look.assumptions.get(key)
        if value in (None, ""):
            continue
        shown = number(value, 3) if isinstance(value, float) else str(value)
        yield from _wrap(f"{shown} {unit}".strip(), width, f"  {label:<30} ", " " * 33)
    yield from _section("Before you publish", width)
    for caution in (
        "Every limit rests on the assumptions above; change them and it changes. This informs a judgement and does not replace it.",
        "Unverified facts about a catalog are marked. Read the catalogs' own papers (blankfield catalogs ID lists them).",
        "The limit of an image is not the limit of a pulse; radio limits say beside them what they mean for a pulse.",
    ):
        yield from _wrap(caution, width, "  - ", "    ")
