"""The answer in words, and numbers as people write them."""

from __future__ import annotations

import math
import unicodedata
from collections.abc import Iterable, Sequence

from xmatch.records import Finding, LimitKind, Look, Outcome, Quantity, StandingWord, Waveband
from xmatch.records import Limit as LimitRecord

_BREAKS = "\n\t\x0b\x0c\x85\u2028\u2029"
"""What a terminal or a reader of lines may take for the end of a line."""
FAILED = (Outcome.UNANSWERED, Outcome.MISREAD, Outcome.TRUNCATED)


def answer(look: Look) -> str:
    """The first line: what the archives say about the target, failures never hidden."""
    by = {word: [f for f in look.findings if f.outcome is word] for word in Outcome}
    failed = [finding for word in FAILED for finding in by[word]]
    n = len(look.findings)
    parts: list[str] = []
    if by[Outcome.COUNTERPART]:
        parts.append(f"a counterpart in {_names(by[Outcome.COUNTERPART])}")
    if by[Outcome.AMBIGUOUS]:
        parts.append(
            f"{'a possible counterpart' if not parts else 'also a possible one'} in {_names(by[Outcome.AMBIGUOUS])}"
        )
    if not parts and len(failed) + len(by[Outcome.NOT_COVERED]) == n:
        # silence of the archives must not read like a blank sky
        parts.append(f"nothing was learnt about this position{'' if n else ': no catalog was asked'}")
    if not parts:
        whole = "nothing that can be called a counterpart"
        parts.append(f"{whole} in what did answer" if failed else whole)
    details: list[str] = []
    if by[Outcome.BLANK]:
        details.append(
            f"{_count(len(by[Outcome.BLANK]), 'catalog is', 'catalogs are')} blank ({_wavebands(by[Outcome.BLANK])})"
        )
    if by[Outcome.CHANCE]:
        details.append(
            f"{len(by[Outcome.CHANCE])} show{'s' if len(by[Outcome.CHANCE]) == 1 else ''} only what crowding explains ({_wavebands(by[Outcome.CHANCE])})"
        )
    if by[Outcome.HIDDEN]:
        details.append(
            f"a neighbour hides the position in {len(by[Outcome.HIDDEN])} ({_wavebands(by[Outcome.HIDDEN])})"
        )
    if by[Outcome.PARTLY_COVERED]:
        details.append(
            f"{_count(len(by[Outcome.PARTLY_COVERED]), 'covers', 'cover')} only part of the error region ({_wavebands(by[Outcome.PARTLY_COVERED])})"
        )
    if by[Outcome.NOT_COVERED]:
        details.append(f"{len(by[Outcome.NOT_COVERED])} never looked here ({_names(by[Outcome.NOT_COVERED])})")
    lists = [f for f in by[Outcome.COVERAGE_UNKNOWN] if f.waveband is Waveband.OBJECT_LIST]
    by[Outcome.COVERAGE_UNKNOWN] = [f for f in by[Outcome.COVERAGE_UNKNOWN] if f not in lists]
    if lists:
        details.append(f"no known object at the position ({_names(lists)}, which proves nothing)")
    if by[Outcome.COVERAGE_UNKNOWN]:
        details.append(
            f"{_count(len(by[Outcome.COVERAGE_UNKNOWN]), 'cannot prove that it', 'cannot prove that they')} looked ({_names(by[Outcome.COVERAGE_UNKNOWN])})"
        )
    text = (
        f"{look.target.name}: {' and '.join(parts)}. {'; '.join(details)}."
        if details
        else f"{look.target.name}: {' and '.join(parts)}."
    )
    if failed:
        text += f" {len(failed)} of {n} gave no usable answer ({_names(failed)}): that is not a non-detection."
    if look.waiting:
        n_waiting = _count(len(look.waiting), "catalog waits", "catalogs wait")
        text += f" {n_waiting} for a check and {'was' if len(look.waiting) == 1 else 'were'} not asked."
    return clean(text)


def gone(look: Look) -> str:
    """What the tests leave, in one sentence."""
    words = {word: [s.title for s in look.standings if s.word is word] for word in StandingWord}
    parts = [
        f"{label}: {', '.join(words[word])}"
        for word, label in (
            (StandingWord.RULED_OUT, "ruled out"),
            (StandingWord.STRAINED, "strained"),
            (StandingWord.FAVOURED, "favoured"),
            (StandingWord.OPEN, "open"),
            (StandingWord.UNTESTED, "untested"),
        )
        if words[word]
    ]
    return clean("; ".join(parts))


def _count(n: int, one: str, many: str) -> str:
    return f"{n} {one if n == 1 else many}"


def _names(findings: Iterable[Finding]) -> str:
    return ", ".join(finding.catalog_id for finding in findings)


def _wavebands(findings: Iterable[Finding]) -> str:
    return ", ".join(dict.fromkeys(str(finding.waveband) for finding in findings))


def clean(text: str) -> str:
    """Text on one line and without control characters: names from archives may hold anything."""
    return "".join(" " if c in _BREAKS else c for c in text if unicodedata.category(c)[0] != "C" or c in _BREAKS)


def number(value: float | None, digits: int = 2) -> str:
    """A number with a few significant digits; powers of ten outside 0.001 to 100000; a dash when there is none."""
    if value is None or not math.isfinite(value):
        return "-"
    if value == 0.0:
        return "0"
    mantissa, _, exponent = f"{value:.{digits - 1}e}".partition("e")
    power = int(exponent)  # of the rounded value: 9.96 is written 10, not 10.0
    return f"{value:.{max(0, digits - 1 - power)}f}" if -3 <= power < 5 else f"{mantissa}e{power}"


def limit_text(limit: LimitRecord) -> str:
    """A limit with its unit, sign and meaning: ``> 15.99 mag (Vega), 95 % complete``."""
    band = limit.band
    if band.quantity is Quantity.MAGNITUDE:
        value = f"> {limit.value:.2f} mag {band.system}"
    else:
        value = f"< {number(limit.value, 3)} {band.unit}"
    meaning = {
        LimitKind.COMPLETENESS: f"{share(limit.confidence)} of such sources are listed",
        LimitKind.BOUND: f"bound at {share(limit.confidence)}, one-sided",
        LimitKind.DETECTION: f"found with probability {share(limit.confidence)}",
    }[limit.kind]
    return f"{value} ({meaning})"


def share(fraction: float) -> str:
    """A confidence in per cent with the digits it has: 0.9973 is 99.73%, never 100%."""
    return f"{100.0 * fraction:.6g}%"


def age(seconds: float | None) -> str:
    """An age in the unit a person would use."""
    if seconds is None:
        return "never asked"
    for size, name in ((86400.0, "d"), (3600.0, "h"), (60.0, "min")):
        if seconds >= 2.0 * size:
            return f"{seconds / size:.0f} {name} old"
    return "fresh"


def percent(value: float | None, draws: int) -> str:
    """A survival fraction; never 0: below three survivors it is a bound."""
    if value is None:
        return "-"
    floor = 3.0 / draws
    if value <= floor * (1.0 + 1.0e-9):
        return f"< {floor:.0e}".replace("e-0", "e-")
    return number(value) if value < 0.1 else f"{value:.2f}"


def span(values: Sequence[float]) -> str:
    """Low, middle and high with dots between."""
    return " .. ".join(number(value) for value in values) if values else "-"
