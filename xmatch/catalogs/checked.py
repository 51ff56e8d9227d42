"""Checked reading of a fact file: every fault names file, key, value and what is allowed; every source is kept."""

from __future__ import annotations

from collections.abc import Iterable, Sequence
from enum import StrEnum
from pathlib import Path
from typing import Any, TypeVar

from xmatch.errors import FactError

W = TypeVar("W", bound=StrEnum)


class Checked:
    """One file being read: keeps the path for messages and collects every source."""

    def __init__(self, path: Path, content: dict[str, Any], fingerprint: str) -> None:
        self.path = path
        self.content = content
        self.fingerprint = fingerprint
        self.sources: list[str] = []

    # --- small helpers ---------------------------------------------------------------------
    def fault(self, key: str, seen: object, allowed: str) -> FactError:
        return FactError(f"{self.path}: {key} = {seen!r} is not allowed; {allowed}")

    def section(self, where: str, content: object, known: Iterable[str]) -> dict[str, Any]:
        if not isinstance(content, dict):
            raise self.fault(where, content, "this must be a table of keys")
        for key in content:
            if key not in known:
                raise self.fault(f"{where}.{key}".lstrip("."), content[key], f"known keys are {', '.join(known)}")
        source = content.get("source")
        if source is not None:
            self.source(where, source)
        return content

    def source(self, where: str, value: object) -> str:
        if not isinstance(value, str) or not value.strip():
            raise self.fault(f"{where}.source", value, "give the bibcode, the archive's page, or 'memory'")
        if value not in self.sources:
            self.sources.append(value)
        return value

    def need_source(self, where: str, content: dict[str, Any]) -> str:
        if "source" not in content:
            raise self.fault(f"{where}.source", None, "every fact needs a source: bibcode, archive page, or 'memory'")
        return str(content["source"])

    def text(self, where: str, content: dict[str, Any], key: str, default: str | None = None) -> str:
        value = content.get(key, default)
        if not isinstance(value, str) or not value.strip():
            raise self.fault(f"{where}.{key}".lstrip("."), value, "a non-empty text is needed")
        return value

    def maybe_text(self, where: str, content: dict[str, Any], key: str) -> str | None:
        return None if key not in content else self.text(where, content, key)

    def number(
        self,
        where: str,
        content: dict[str, Any],
        key: str,
        *,
        low: float | None = None,
        high: float | None = None,
        default: float | None = None,
    ) -> float:
        value = content.get(key, default)
        bounds = f"a number{'' if low is None else f' from {low:g}'}{'' if high is None else f' to {high:g}'} is needed"
        if isinstance(value, bool) or not isinstance(value, int | float):
            raise self.fault(f"{where}.{key}".lstrip("."), value, bounds)
        number = float(value)
        if number != number or (low is not None and number < low) or (high is not None and number > high):
            raise self.fault(f"{where}.{key}".lstrip("."), value, bounds)
        return number

    def maybe_number(
        self, where: str, content: dict[str, Any], key: str, low: float | None = None, high: float | None = None
    ) -> float | None:
        return None if key not in content else self.number(where, content, key, low=low, high=high)

    def choice(self, where: str, content: dict[str, Any], key: str, allowed: Sequence[str]) -> str:
        value = content.get(key)
        if value not in allowed:
            raise self.fault(f"{where}.{key}".lstrip("."), value, f"one of {', '.join(allowed)} is needed")
        return str(value)

    def word(self, where: str, content: dict[str, Any], key: str, words: type[W]) -> W:
        return words(self.choice(where, content, key, [str(word) for word in words]))

    def pair(
        self, where: str, content: dict[str, Any], key: str, low: float, high: float
    ) -> tuple[float, float] | None:
        if key not in content:
            return None
        value = content[key]
        good = (
            isinstance(value, list)
            and len(value) == 2
            and all(isinstance(v, int | float) and not isinstance(v, bool) and low <= v <= high for v in value)
        )
        if not good:
            raise self.fault(f"{where}.{key}", value, f"two numbers from {low:g} to {high:g} are needed")
        return float(value[0]), float(value[1])

    def texts(self, where: str, content: dict[str, Any], key: str) -> tuple[str, ...]:
        """A list of texts; none where there is no key."""
        value = content.get(key, [])
        if not isinstance(value, list) or not all(isinstance(text, str) and text for text in value):
            raise self.fault(f"{where}.{key}".lstrip("."), value, "a list of texts is needed")
        return tuple(value)

    def words(self, where: str, content: dict[str, Any], key: str) -> dict[str, str]:
        """A table of texts, such as units by column name."""
        value = content.get(key, {})
        if not isinstance(value, dict) or not all(isinstance(text, str) and text for text in value.values()):
            raise self.fault(f"{where}.{key}", value, "a table of texts is needed, such as { RA = 'deg' }")
        return {str(name): str(text) for name, text in value.items()}
