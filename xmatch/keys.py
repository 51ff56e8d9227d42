"""Reading one key of a section of a target file, strictly."""

from __future__ import annotations

import json
import math
from typing import Any

from xmatch.errors import TargetError


def number(section: str, content: dict[str, Any], key: str) -> float | None:
    """A finite number, or None where the key is missing."""
    if key not in content:
        return None
    value = content[key]
    fault = TargetError(f"{section}.{key} = {str(value)[:40]!r} is not allowed; a finite number is needed")
    if isinstance(value, bool) or not isinstance(value, int | float):
        raise fault
    try:
        found = float(value)
    except OverflowError:  # TOML integers have no upper end
        raise fault from None
    if not math.isfinite(found):
        raise fault
    return found


def text(section: str, content: dict[str, Any], key: str) -> str:
    """A text without the spaces around it; empty where the key is missing."""
    value = content.get(key, "")
    if not isinstance(value, str):
        raise TargetError(f"{section}.{key} = {value!r} is not allowed; write it as text in quotes")
    return value.strip()


def toml_text(text: str) -> str:
    """A text as a TOML basic string."""
    # JSON's escapes are a subset of those of a TOML basic string; TOML alone forbids a bare DEL
    return json.dumps(text, ensure_ascii=False).replace("\x7f", "\\u007f")


def digits(value: float) -> str:
    """All digits of a number; numpy writes its own type into ``repr``, which no TOML reader takes."""
    return repr(float(value))
