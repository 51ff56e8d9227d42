"""Read and check class files. A fault names file, key, value and what is allowed."""

from __future__ import annotations

import math
import tomllib
from collections.abc import Iterable, Mapping, Sequence
from enum import StrEnum
from pathlib import Path
from typing import Any, TypeVar

from xmatch.classes.model import (
    ClassFile,
    Fact,
    FluxKind,
    MagnitudeTable,
    Prediction,
    SolidAngle,
    TemplateBand,
)
from xmatch.classes.schema import RANGE, TESTS, FactRule, TestRule
from xmatch.errors import FactError
from xmatch.records import MagnitudeSystem

SHIPPED = Path(__file__).parent / "files"
MAGNITUDE_UNIT = "mag at 10 pc"
W = TypeVar("W", bound=StrEnum)


def load_classes(extra_dirs: Sequence[str | Path] = ()) -> tuple[ClassFile, ...]:
    """Read every class file that ships with blankfield and in the user's folders.

    Parameters
    ----------
    extra_dirs : sequence of path
        Folders with the user's own ``*.toml`` class files.

    Returns
    -------
    tuple of ClassFile
        By file name within each folder; classes that are never ruled out stand last.

    Raises
    ------
    FactError
        When a folder does not exist, a file breaks the rules, or two files claim one id.
    """
    found: dict[str, ClassFile] = {}
    for folder in (SHIPPED, *map(Path, extra_dirs)):
        if not folder.is_dir():
            raise FactError(f"no class folder at {folder}; give a folder that holds class files (*.toml)")
        for path in sorted(folder.glob("*.toml")):
            read = read_class(path)
            if read.id in found:
                raise FactError(
                    f"{path}: id = {read.id!r} is taken by {found[read.id].path}; every class needs its own id"
                )
            found[read.id] = read
    return tuple(sorted(found.values(), key=lambda item: item.never_ruled_out))


def read_class(path: str | Path) -> ClassFile:
    """Read and check one class file.

    Raises
    ------
    FactError
        Naming the file, the key, the value seen and what is allowed.
    """
    path = Path(path)
    try:
        content = tomllib.loads(path.read_text(encoding="utf-8"))
    except (tomllib.TOMLDecodeError, UnicodeDecodeError) as fault:
        # tomllib refuses duplicate keys by itself
        raise FactError(f"{path}: not readable as TOML ({fault}); mend that line") from None
    return _Reader(path).class_file(content)


class _Reader:
    """One file being read: keeps the path for messages."""

    def __init__(self, path: Path) -> None:
        self.path = path

    def fault(self, key: str, seen: object, allowed: str) -> FactError:
        return FactError(f"{self.path}: {key} = {seen!r} is not allowed; {allowed}")

    # --- pieces ----------------------------------------------------------------------------
    def table(self, where: str, content: object, known: Iterable[str]) -> dict[str, Any]:
        names = list(known)
        if not isinstance(content, dict):
            raise self.fault(where, content, "a table of keys is needed here")
        for key, seen in content.items():
            if key not in names:
                raise self.fault(_join(where, key), seen, f"known keys are {', '.join(names) or 'none'}")
        return content

    def text(self, where: str, content: Mapping[str, Any], key: str) -> str:
        seen = content.get(key)
        if not isinstance(seen, str) or not seen.strip():
            raise self.fault(_join(where, key), seen, "a text is needed")
        return seen.strip()

    def source(self, where: str, content: Mapping[str, Any]) -> str:
        seen = content.get("source")
        if not isinstance(seen, str) or not seen.strip():
            raise self.fault(
                _join(where, "source"),
                seen,
                "every number needs a source: a bibcode, 'from memory' or 'common practice'",
            )
        return seen.strip()

    def word(self, where: str, content: Mapping[str, Any], key: str, kind: type[W], among: Iterable[W]) -> W:
        seen = content.get(key)
        allowed = list(among)
        if not isinstance(seen, str) or seen not in allowed:
            raise self.fault(_join(where, key), seen, f"one of {', '.join(allowed)} is needed")
        return kind(seen)

    def number(self, where: str, content: Mapping[str, Any], key: str, low: float | None = None) -> float:
        seen = content.get(key)
        if isinstance(seen, bool) or not isinstance(seen, int | float) or not math.isfinite(seen):
            raise self.fault(_join(where, key), seen, "a finite number is needed")
        if low is not None and seen < low:
            raise self.fault(_join(where, key), seen, f"{low:g} or more is needed")
        return float(seen)

    def fact(self, where: str, content: object, rule: FactRule) -> Fact:
        values = ("low", "high") if rule.shape == RANGE else ("value",)
        words = ("flux_kind", "solid_angle") if rule.flux_kinds else ()
        found = self.table(where, content, (*values, "unit", *words, "source", "note"))
        if found.get("unit") != rule.unit:
            raise self.fault(_join(where, "unit"), found.get("unit"), f"the unit must be written, and be {rule.unit!r}")
        numbers = [self.number(where, found, key, rule.low) for key in values]
        if len(numbers) == 2 and not numbers[0] < numbers[1]:
            raise self.fault(_join(where, "low"), numbers[0], f"it must be below high = {numbers[1]:g}")
        return Fact(
            low=numbers[0],
            high=numbers[-1],
            unit=rule.unit,
            source=self.source(where, found),
            flux_kind=self.word(where, found, "flux_kind", FluxKind, rule.flux_kinds) if words else None,
            solid_angle=self.word(where, found, "solid_angle", SolidAngle, SolidAngle) if words else None,
            note=self.text(where, found, "note") if "note" in found else "",
        )

    # --- the whole -------------------------------------------------------------------------
    def class_file(self, content: dict[str, Any]) -> ClassFile:
        top = self.table("", content, ("id", "title", "summary", "never_ruled_out", "predictions"))
        never = top.get("never_ruled_out", False)
        if not isinstance(never, bool):
            raise self.fault("never_ruled_out", never, "true or false is needed")
        listed = top.get("predictions", [])
        if not isinstance(listed, list) or bool(listed) == never:
            raise self.fault(
                "predictions", listed, "a class predicts something, or has none and says never_ruled_out = true"
            )
        return ClassFile(
            id=self.text("", top, "id"),
            title=self.text("", top, "title"),
            summary=self.text("", top, "summary"),
            predictions=tuple(self.prediction(f"predictions[{n}]", item) for n, item in enumerate(listed)),
            never_ruled_out=never,
            path=str(self.path),
        )

    def prediction(self, where: str, content: object) -> Prediction:
        name = content.get("test") if isinstance(content, dict) else None
        if not isinstance(name, str) or name not in TESTS:
            raise self.fault(_join(where, "test"), name, f"one of {', '.join(TESTS)} is needed")
        rule: TestRule = TESTS[name]
        known = ("test", *rule.facts, *rule.choices, *(("magnitudes",) if rule.magnitudes else ()))
        found = self.table(where, content, known)
        choices = {}
        for key, allowed in rule.choices.items():
            if found.get(key) not in allowed:
                raise self.fault(_join(where, key), found.get(key), f"one of {', '.join(allowed)} is needed")
            choices[key] = str(found[key])
        return Prediction(
            test=name,
            facts={key: self.fact(_join(where, key), found.get(key), fact) for key, fact in rule.facts.items()},
            choices=choices,
            magnitudes=self.magnitudes(_join(where, "magnitudes"), found.get("magnitudes"))
            if rule.magnitudes
            else None,
        )

    def magnitudes(self, where: str, content: object) -> MagnitudeTable:
        found = self.table(where, content, ("unit", "flux_kind", "solid_angle", "source", "bands", "types"))
        if found.get("unit") != MAGNITUDE_UNIT:
            raise self.fault(_join(where, "unit"), found.get("unit"), f"absolute magnitudes are in {MAGNITUDE_UNIT!r}")
        listed = found.get("bands")
        if not isinstance(listed, dict) or not listed:
            raise self.fault(_join(where, "bands"), listed, "at least one band is needed")
        bands = tuple(self.band(_join(where, f"bands.{name}"), name, item) for name, item in listed.items())
        types = found.get("types")
        if not isinstance(types, dict) or not types:
            raise self.fault(_join(where, "types"), types, "at least one spectral type is needed")
        rows: dict[str, dict[str, float]] = {}
        for name, item in types.items():
            spot = _join(where, f"types.{name}")
            row = self.table(spot, item, [band.name for band in bands])
            if not row:
                raise self.fault(spot, item, "a magnitude in at least one band is needed")
            rows[name] = {band: self.number(spot, row, band) for band in row}
        return MagnitudeTable(
            bands=bands,
            types=rows,
            unit=MAGNITUDE_UNIT,
            flux_kind=self.word(where, found, "flux_kind", FluxKind, (FluxKind.STEADY,)),
            solid_angle=self.word(where, found, "solid_angle", SolidAngle, (SolidAngle.FULL,)),
            source=self.source(where, found),
        )

    def band(self, where: str, name: str, content: object) -> TemplateBand:
        keys = ("wavelength_um", "width_um", "zero_point_jy")
        found = self.table(where, content, (*keys, "system", "source"))
        wavelength, width, zero = (self.number(where, found, key, low=1.0e-6) for key in keys)
        return TemplateBand(
            name=name,
            wavelength_um=wavelength,
            width_um=width,
            zero_point_jy=zero,
            system=self.word(where, found, "system", MagnitudeSystem, (MagnitudeSystem.VEGA, MagnitudeSystem.AB)),
            source=self.source(where, found),
        )


def _join(where: str, key: str) -> str:
    return f"{where}.{key}" if where else key
