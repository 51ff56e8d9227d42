"""The whole answer as JSON: every field of :class:`xmatch.records.Look`, units in the key names."""

from __future__ import annotations

import dataclasses
import math
from collections.abc import Mapping
from enum import Enum

import numpy as np

from xmatch.records import Look, Outcome
from xmatch.report.words import answer, gone

FORMAT = "blankfield look"
FORMAT_VERSION = 1
"""Raised when a key changes its meaning or goes away; new keys do not raise it."""


def to_json(look: Look) -> dict[str, object]:
    """Return the answer as plain values.

    Enums become their words, ``nan`` and infinities become null, numbers are not rounded. The order of keys is that of the
    records, so that two files can be compared line by line.
    """
    body = plain(look)
    assert isinstance(body, dict)
    return {
        "format": FORMAT,
        "format_version": FORMAT_VERSION,
        "answer": answer(look),
        "standing": gone(look),
        "failed": [
            f.catalog_id for f in look.findings if f.outcome in (Outcome.UNANSWERED, Outcome.MISREAD, Outcome.TRUNCATED)
        ],
        **body,
    }


def plain(value: object) -> object:
    """Turn records into dictionaries, lists, texts and finite numbers."""
    if isinstance(value, np.generic | np.ndarray):
        return plain(value.tolist())  # numpy's own types are no JSON
    if isinstance(value, Enum):
        return str(value)
    if dataclasses.is_dataclass(value) and not isinstance(value, type):
        return {field.name: plain(getattr(value, field.name)) for field in dataclasses.fields(value)}
    if isinstance(value, Mapping):
        return {str(key): plain(item) for key, item in value.items()}
    if isinstance(value, tuple | list):
        return [plain(item) for item in value]
    if isinstance(value, float):
        return value if math.isfinite(value) else None
    return value
