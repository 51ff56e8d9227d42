"""Ready-made questions: one SQL file each, whose header says what is asked, with which parameters, and what comes back.

::

    -- Title: One line for a list.
    -- Question: A sentence or more, up to the next heading.
    -- Parameter: name = 2.5 | what it means, with its unit
    -- Column: name | unit | meaning

A value in the header is the default; a number stays a number, ``?`` means that it must be given.
"""

from __future__ import annotations

import re
from collections.abc import Mapping
from dataclasses import dataclass
from pathlib import Path

from xmatch.errors import ConfigurationError, FactError
from xmatch.resources import db_path

_FIELD = re.compile(r"^-- (Title|Question|Parameter|Column): (.*)$")
Value = int | float | str | None


@dataclass(frozen=True)
class Parameter:
    """A value that a study may be given."""

    name: str
    default: Value
    meaning: str
    required: bool = False


@dataclass(frozen=True)
class OutputColumn:
    """One column of a study's answer."""

    name: str
    unit: str
    meaning: str


@dataclass(frozen=True)
class Study:
    """A ready-made question."""

    name: str
    title: str
    question: str
    parameters: tuple[Parameter, ...]
    columns: tuple[OutputColumn, ...]
    sql: str


def value_of(text: str) -> Value:
    """Read a parameter: a whole number, a number, or else text; quotes make anything text."""
    text = text.strip()
    if len(text) >= 2 and text[0] == text[-1] and text[0] in "'\"":
        return text[1:-1]
    for kind in (int, float):
        try:
            return kind(text)
        except ValueError:
            continue
    return text


def read_study(path: Path) -> Study:
    """Read one study.

    Raises
    ------
    FactError
        A heading is missing or malformed.
    """
    text = path.read_text(encoding="utf-8")
    found: dict[str, list[str]] = {"Title": [], "Question": [], "Parameter": [], "Column": []}
    last: list[str] | None = None
    for line in text.splitlines():
        if not line.startswith("--"):
            break
        field = _FIELD.match(line)
        if field:
            last = found[field[1]]
            last.append(field[2].strip())
        elif last:
            last[-1] += " " + line[2:].strip()
    if len(found["Title"]) != 1 or len(found["Question"]) != 1 or not found["Column"]:
        raise FactError(f"{path}: a study needs one '-- Title:', one '-- Question:' and its '-- Column:' lines on top")
    return Study(
        path.stem,
        found["Title"][0],
        found["Question"][0],
        tuple(_parameter(path, line) for line in found["Parameter"]),
        tuple(_column(path, line) for line in found["Column"]),
        text,
    )


def _parameter(path: Path, line: str) -> Parameter:
    head, bar, meaning = line.partition("|")
    name, equals, default = (part.strip() for part in head.partition("="))
    if not (bar and equals and name.isidentifier()):
        raise FactError(f"{path}: parameter {line!r}; write '-- Parameter: name = default | meaning'")
    return Parameter(name, value_of(default), meaning.strip(), required=default == "?")


def _column(path: Path, line: str) -> OutputColumn:
    parts = [part.strip() for part in line.split("|")]
    if len(parts) != 3:
        raise FactError(f"{path}: column {line!r}; write '-- Column: name | unit | meaning'")
    return OutputColumn(*parts)


def studies(folder: Path | None = None) -> dict[str, Study]:
    """Return all ready-made questions by name."""
    folder = folder or db_path("studies")
    return {path.stem: read_study(path) for path in sorted(folder.glob("*.sql"))}


def study(name: str) -> Study:
    """Return one ready-made question.

    Raises
    ------
    ConfigurationError
        There is none of that name.
    """
    path = db_path("studies") / f"{name}.sql"
    if not re.fullmatch(r"[a-z0-9-]+", name) or not path.is_file():
        listed = ", ".join(sorted(one.stem for one in db_path("studies").glob("*.sql")))
        raise ConfigurationError(f"no study {name!r}; there are {listed}")
    return read_study(path)


def filled(asked: Study, given: Mapping[str, Value]) -> dict[str, Value]:
    """Return the parameters of a study: as given, else its defaults.

    Raises
    ------
    ConfigurationError
        One is unknown, or must be given and is not.
    """
    known = {one.name: one for one in asked.parameters}
    for name in given:
        if name not in known:
            raise ConfigurationError(
                f"the study {asked.name} has no parameter {name!r}; it has {', '.join(known) or 'none'}"
            )
    for one in asked.parameters:
        if one.required and one.name not in given:
            raise ConfigurationError(f"the study {asked.name} needs --param {one.name}=..., {one.meaning.rstrip('.')}")
    return {name: given.get(name, one.default) for name, one in known.items()}
