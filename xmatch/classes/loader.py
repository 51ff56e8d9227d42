"""Read and check class files. A number without unit, flux kind, solid angle and source does not load."""

from __future__ import annotations

import tomllib
from collections.abc import Sequence
from functools import lru_cache
from pathlib import Path
from typing import Any

from xmatch.classes.model import ClassFile, Prediction, StarType
from xmatch.errors import FactError

SHIPPED = Path(__file__).parent / "files"
FLUX_KINDS = ("peak", "period average", "fluence", "steady")
SOLID_ANGLES = ("4 pi", "per steradian", "none")
TOP_KEYS = ("id", "title", "summary", "source", "would_overturn", "tests")
COMMON_KEYS = ("kind", "name", "source", "unit", "flux_kind", "solid_angle")
NUMBERS = {
    "spin-down budget": ("efficiency",),
    "x-ray luminosity from spin-down": ("log_zero", "slope", "scatter_dex", "low_kev", "high_kev", "photon_index"),
    "x-ray luminosity": ("mean_log", "scatter_dex", "kt_low_kev", "kt_high_kev"),
    "death lines": (),
    "companion magnitudes": ("scatter_mag",),
    "period range": ("low_s", "high_s"),
}
"""The kinds of test the engine knows, and the numbers each needs."""
WORDS = {"spin-down budget": ("star",), "x-ray luminosity from spin-down": ("star",)}


@lru_cache(maxsize=8)
def load_classes(extra_folders: tuple[str, ...] = ()) -> tuple[ClassFile, ...]:
    """Read every class file that ships with blankfield and in the user's folders, in order of file name.

    Raises
    ------
    FactError
        Naming file, key, value and what is allowed; also when two files claim one id.
    """
    found: dict[str, ClassFile] = {}
    for folder in (SHIPPED, *map(Path, extra_folders)):
        if not folder.is_dir():
            raise FactError(f"no class folder at {folder}; give a folder that holds class files (*.toml)")
        for path in sorted(folder.glob("*.toml")):
            one = read_class(path)
            if one.id in found:
                raise FactError(f"{path}: id = {one.id!r} is taken by {found[one.id].path}; every class needs its own id")
            found[one.id] = one
    return tuple(found.values())


def read_class(path: str | Path) -> ClassFile:
    """Read and check one class file.

    Raises
    ------
    FactError
        Naming file, key, value and what is allowed.
    """
    path = Path(path)
    try:
        content = tomllib.loads(path.read_text(encoding="utf-8"))
    except (tomllib.TOMLDecodeError, UnicodeDecodeError) as fault:
        raise FactError(f"{path}: not readable as TOML ({fault}); mend that line") from None
    _known(path, "", content, TOP_KEYS)
    class_id = _text(path, "", content, "id")
    if class_id != path.stem:
        raise FactError(f"{path}: id = {class_id!r} is not allowed; it must be the file's name, {path.stem!r}")
    tests = content.get("tests", [])
    if not isinstance(tests, list):
        raise FactError(f"{path}: tests = {tests!r} is not allowed; write [[tests]]")
    return ClassFile(
        id=class_id,
        title=_text(path, "", content, "title"),
        summary=_text(path, "", content, "summary"),
        source=_text(path, "", content, "source"),
        would_overturn=_text(path, "", content, "would_overturn"),
        tests=tuple(_prediction(path, f"tests[{i}]", item) for i, item in enumerate(tests)),
        path=str(path),
    )


def _prediction(path: Path, where: str, content: dict[str, Any]) -> Prediction:
    kind = content.get("kind")
    if kind not in NUMBERS:
        raise FactError(f"{path}: {where}.kind = {kind!r} is not allowed; there are {', '.join(NUMBERS)}")
    numbers, words = NUMBERS[kind], WORDS.get(kind, ())
    more = ("types", "bands") if kind == "companion magnitudes" else ()
    _known(path, where, content, (*COMMON_KEYS, *numbers, *words, *more))
    _one_of(path, where, content, "flux_kind", FLUX_KINDS)
    _one_of(path, where, content, "solid_angle", SOLID_ANGLES)
    _text(path, where, content, "unit")
    types: tuple[StarType, ...] = ()
    bands: list[str] = []
    if more:
        bands = content.get("bands", [])
        if not isinstance(bands, list) or not bands or not all(isinstance(band, str) for band in bands):
            raise FactError(f"{path}: {where}.bands = {bands!r} is not allowed; list 'catalog band' names")
        types = tuple(_star(path, f"{where}.types[{i}]", row, bands) for i, row in enumerate(content.get("types", [])))
        if not types:
            raise FactError(f"{path}: {where}.types is empty; list at least one spectral type with its magnitudes")
    return Prediction(
        kind=kind,
        name=_text(path, where, content, "name"),
        numbers={key: _number(path, where, content, key) for key in numbers},
        words={key: _text(path, where, content, key) for key in (*words, "unit", "flux_kind", "solid_angle")},
        types=types,
        source=_text(path, where, content, "source"),
    )


def _star(path: Path, where: str, row: object, bands: list[str]) -> StarType:
    good = (
        isinstance(row, list)
        and len(row) == len(bands) + 1
        and isinstance(row[0], str)
        and all(isinstance(v, int | float) and not isinstance(v, bool) for v in row[1:])
    )
    if not good or not isinstance(row, list):
        raise FactError(f"{path}: {where} = {row!r} is not allowed; give a type name and {len(bands)} absolute magnitudes")
    return StarType(str(row[0]), {band: float(value) for band, value in zip(bands, row[1:], strict=True)})


def _known(path: Path, where: str, content: object, known: Sequence[str]) -> None:
    if not isinstance(content, dict):
        raise FactError(f"{path}: {where} = {content!r} is not allowed; this must be a table of keys")
    for key in content:
        if key not in known:
            place = f"{where}.{key}".lstrip(".")
            raise FactError(f"{path}: {place} = {content[key]!r} is not allowed; known keys are {', '.join(known)}")


def _text(path: Path, where: str, content: dict[str, Any], key: str) -> str:
    value = content.get(key)
    if not isinstance(value, str) or not value.strip():
        raise FactError(f"{path}: {f'{where}.{key}'.lstrip('.')} = {value!r} is not allowed; a non-empty text is needed")
    return value


def _number(path: Path, where: str, content: dict[str, Any], key: str) -> float:
    value = content.get(key)
    if isinstance(value, bool) or not isinstance(value, int | float) or value != value:
        raise FactError(f"{path}: {where}.{key} = {value!r} is not allowed; a number is needed")
    return float(value)


def _one_of(path: Path, where: str, content: dict[str, Any], key: str, allowed: Sequence[str]) -> None:
    if content.get(key) not in allowed:
        raise FactError(
            f"{path}: {where}.{key} = {content.get(key)!r} is not allowed; one of {', '.join(allowed)} is needed"
        )
