"""Class files: what ships is whole, what breaks the rules is refused by name."""

from __future__ import annotations

import shutil
from collections.abc import Callable
from pathlib import Path

import pytest

from xmatch.classes.engine import KINDS
from xmatch.classes.loader import SHIPPED, load_classes, read_class
from xmatch.classes.model import FluxKind, SolidAngle
from xmatch.classes.schema import TESTS
from xmatch.errors import FactError

IDS = {"rotation-powered-pulsar", "magnetar-quiescent", "main-sequence-companion", "none-of-these"}


def test_the_shipped_classes_load_and_the_open_one_stands_last() -> None:
    classes = load_classes()
    assert {item.id for item in classes} == IDS
    assert classes[-1].id == "none-of-these"
    assert [item.id for item in classes if item.never_ruled_out] == ["none-of-these"]


def test_every_number_of_the_shipped_classes_has_its_source_and_meaning() -> None:
    for item in load_classes():
        for prediction in item.predictions:
            for fact in prediction.facts.values():
                assert fact.source
                assert fact.unit
                assert (fact.flux_kind is None) == (fact.solid_angle is None)
                assert ("erg" not in fact.unit) or fact.flux_kind is not None or fact.unit == "erg/s"
            if prediction.magnitudes is not None:
                assert prediction.magnitudes.source
                assert all(band.source for band in prediction.magnitudes.bands)


def test_every_test_that_a_file_may_name_can_be_done() -> None:
    assert set(KINDS) == set(TESTS)


def test_magnitudes_grow_fainter_along_the_list() -> None:
    table = next(p.magnitudes for item in load_classes() for p in item.predictions if p.magnitudes is not None)
    for band in table.bands:
        values = [row[band.name] for row in table.types.values() if band.name in row]
        assert values == sorted(values)
        assert len(values) > 20


def test_a_new_class_is_one_file(tmp_path: Path, template: Callable[..., str]) -> None:
    (tmp_path / "mine.toml").write_text(template(class_id="mine"), encoding="utf-8")
    classes = load_classes([tmp_path])
    assert {item.id for item in classes} == IDS | {"mine"}
    mine = next(item for item in classes if item.id == "mine")
    fact = mine.predictions[0].facts["luminosity"]
    assert (fact.value, fact.flux_kind, fact.solid_angle) == (33.0, FluxKind.STEADY, SolidAngle.FULL)


def test_two_files_with_one_id_are_refused(tmp_path: Path) -> None:
    shutil.copy(SHIPPED / "none-of-these.toml", tmp_path / "copy.toml")
    with pytest.raises(FactError, match=r"id = 'none-of-these' is taken by .*none-of-these\.toml"):
        load_classes([tmp_path])


def test_a_folder_that_is_not_there_is_refused(tmp_path: Path) -> None:
    with pytest.raises(FactError, match="no class folder"):
        load_classes([tmp_path / "nowhere"])


@pytest.mark.parametrize(
    ("cut", "put", "key", "allowed"),
    [
        ('summary = "invented"', 'summary = "invented"\nsumary = "x"', "sumary", "known keys are"),
        ('title = "invented class"', 'title = ""', "title", "a text is needed"),
        ('test = "x-ray luminosity"', 'test = "x-ray brightness"', r"predictions\[0\].test", "spin-down budget"),
        ('unit = "log10 erg/s", ', "", "luminosity.unit", "log10 erg/s"),
        ('unit = "log10 erg/s"', 'unit = "erg/s"', "luminosity.unit", "log10 erg/s"),
        ('flux_kind = "steady", ', "", "luminosity.flux_kind", "steady"),
        ('flux_kind = "steady"', 'flux_kind = "peak"', "luminosity.flux_kind", "period average"),
        ('solid_angle = "4 pi", ', "", "luminosity.solid_angle", "per steradian"),
        ('solid_angle = "4 pi"', 'solid_angle = "2 pi"', "luminosity.solid_angle", "per steradian"),
        (', source = "invented" }\nscatter', " }\nscatter", "luminosity.source", "every number needs a source"),
        ("value = 33.0", "value = true", "luminosity.value", "finite number"),
        ("value = 33.0", "value = nan", "luminosity.value", "finite number"),
        ("value = 1.0", "value = -1.0", "scatter.value", "0 or more"),
        ("low = 0.3,", "low = 0.7,", "temperature.low", "below high"),
        ('spectrum = "blackbody"', 'spectrum = "line"', "spectrum", "blackbody"),
        ("scatter = {", "spread = {", "spread", "known keys are"),
        ("low = 0.3,", "low = 0.3, middle = 0.4,", "temperature.middle", "known keys are"),
    ],
)
def test_a_fault_names_file_key_value_and_what_is_allowed(
    tmp_path: Path, template: Callable[..., str], cut: str, put: str, key: str, allowed: str
) -> None:
    good = template()
    assert cut in good
    path = tmp_path / "bad.toml"
    path.write_text(good.replace(cut, put, 1), encoding="utf-8")
    with pytest.raises(FactError, match=f"bad.toml: .*{key} = .*{allowed}"):
        read_class(path)


@pytest.mark.parametrize(
    ("cut", "put", "key"),
    [
        ('unit = "mag at 10 pc"', 'unit = "mag"', "magnitudes.unit"),
        ('flux_kind = "steady"\n', "", "magnitudes.flux_kind"),
        ('solid_angle = "4 pi"\n', "", "magnitudes.solid_angle"),
        ('system = "Vega"', 'system = "vegan"', "bands.G.system"),
        ("zero_point_jy = 3228.75\n", "", "bands.G.zero_point_jy"),
        ("{ G = 1.00, J = 0.95, Ks = 0.949 }", "{ }", "types.A0V"),
        ("{ G = 1.00,", "{ R = 1.00,", "types.A0V.R"),
    ],
)
def test_a_fault_in_a_magnitude_table_is_named(tmp_path: Path, cut: str, put: str, key: str) -> None:
    good = (SHIPPED / "main-sequence-companion.toml").read_text(encoding="utf-8")
    assert cut in good
    path = tmp_path / "bad.toml"
    path.write_text(good.replace(cut, put, 1), encoding="utf-8")
    with pytest.raises(FactError, match=f"{key} = .* is not allowed"):
        read_class(path)


@pytest.mark.parametrize(
    "text",
    [
        "id = 'a'\ntitle = 'a'\nsummary = 'a'\n",
        "id = 'a'\ntitle = 'a'\nsummary = 'a'\nnever_ruled_out = 1\n",
        "id = 'a'\ntitle = 'a'\nsummary = 'a'\nnever_ruled_out = true\n[[predictions]]\ntest = 'death lines'\n",
        "id = 'a'\nid = 'b'\n",
        "not toml",
    ],
)
def test_a_class_predicts_something_or_says_that_it_does_not(tmp_path: Path, text: str) -> None:
    path = tmp_path / "bad.toml"
    path.write_text(text, encoding="utf-8")
    with pytest.raises(FactError, match=r"bad\.toml"):
        read_class(path)
