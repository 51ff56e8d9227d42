"""Objects in words."""

from __future__ import annotations

from dataclasses import replace

from report_build import candidate, finding, look

from xmatch.objects import Source, Unseen
from xmatch.records import Outcome
from xmatch.report.asjson import to_json
from xmatch.report.objects import SHOWN_OBJECTS, object_lines
from xmatch.report.terminal import lines

MEASURED = replace(candidate("gaia-dr3").photometry[0], flux_cgs=3.1e-13)
OTHER = replace(candidate("2mass-psc").photometry[0], flux_cgs=8.2e-13)
STAR = Source(
    (("gaia-dr3", "17"), ("2mass-psc", "J1")), 1.0, 2.0, 0.05, 0.05, 0.0, 0.41, 0.6, 0.004, 0.97, 12.3, 0.9996,
    (OTHER, MEASURED),
    (Unseen("vvv-virac2", "Ks", 1e-14, 8e-13, True), Unseen("nvss", "1.4 GHz", 1e-16, None, None)),
)  # fmt: skip
LOOK = look((finding("gaia-dr3", Outcome.COUNTERPART),), sources=(STAR,), none_listed=0.02, expected_distinct=0.11)


def test_an_object_is_told_with_its_rows_bands_and_where_it_is_missing() -> None:
    text = " ".join(f"{label}{words}" for label, words in object_lines(LOOK))
    for part in ("gaia-dr3 17, 2mass-psc J1: 0.41 arcsec", "probability of being the target 0.97", "one object with probability 1.00", "1e12",
                 "vvv-virac2 Ks should list it", "not listed in nvss", "none of them: 0.020"):  # fmt: skip
        assert part in text
    assert text.index("8.2e-13") < text.index("3.1e-13")


def test_the_answer_holds_the_objects_at_any_width() -> None:
    for width in (60, 100, 200):
        printed = [line for line, _ in lines(LOOK, width)]
        assert all(len(line) <= width for line in printed)
        assert any("THE ROWS AS OBJECTS" in line for line in printed)
        assert "0.11 counting an object once" in " ".join(" ".join(printed).split())
    assert not any("AS OBJECTS" in line for line, _ in lines(look(()), 80))


def test_a_crowd_is_cut_and_says_so() -> None:
    crowd = replace(LOOK, sources=(replace(STAR, members=(("gaia-dr3", "1"),), unseen=()),) * (SHOWN_OBJECTS + 3))
    told = list(object_lines(crowd))
    assert ("  ", "and 3 more") in told
    assert not any("one object with probability" in text for _, text in told)


def test_json_holds_them_whole() -> None:
    body = to_json(LOOK)
    sources = body["sources"]
    assert isinstance(sources, list) and sources[0]["members"][0] == ["gaia-dr3", "17"]
    assert sources[0]["unseen"][0]["should_be_seen"] is True
    assert body["none_listed"] == 0.02
