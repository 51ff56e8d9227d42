"""The one border between Python values and the store.

SQLite takes a numpy integer, a numpy bool, a float32 and a masked value for a BLOB without a word, and
drops the offset of a date. So nothing is bound to a statement that did not pass through here.

Missing is NULL, whatever it was called before: ``None``, ``nan``, masked. An infinite *measured* value is
no measurement and becomes NULL too (the row as served keeps it as text); an infinite value that *we* computed
is a fault and raises.
"""

from __future__ import annotations

import dataclasses
import json
import math
from collections.abc import Mapping
from datetime import UTC, date, datetime
from enum import Enum
from typing import Any

import numpy as np
from numpy.typing import ArrayLike

from xmatch.errors import RangeError

INT64_MIN, INT64_MAX = -(2**63), 2**63 - 1
"""What an SQLite integer holds."""


def is_missing(value: object) -> bool:
    """Whether a single value is ``None``, masked, or ``nan``."""
    if value is None:
        return True
    if isinstance(value, np.ma.MaskedArray):
        return value.ndim == 0 and bool(value.mask)
    return isinstance(value, float | np.floating) and math.isnan(value)


def measured(values: ArrayLike) -> list[float | None]:
    """Return served numbers as floats; missing and infinite ones as None.

    Parameters
    ----------
    values : array_like, shape (n,)
        Numbers of any numpy type, masked or not.
    """
    array = np.ma.filled(np.ma.asarray(values).astype(np.float64), np.nan)
    listed: list[float | None] = array.tolist()
    for gone in np.flatnonzero(~np.isfinite(array)).tolist():
        listed[gone] = None
    return listed


def computed(value: object, what: str) -> float | None:
    """Return a number of ours as float, None where there is none.

    Raises
    ------
    RangeError
        When it is infinite or not a number at all.
    """
    return None if is_missing(value) else required(value, what)


def required(value: object, what: str) -> float:
    """Return a number that must be there as float.

    Raises
    ------
    RangeError
        When it is missing, infinite or not a number at all.
    """
    if isinstance(value, int | float | np.number) and not isinstance(value, np.complexfloating):
        try:
            number = float(value)
        except OverflowError:
            number = math.inf
        if math.isfinite(number):
            return number
    raise RangeError(f"{what} is {value!r}; the store takes finite numbers only; find out where it was made")


def integer(value: object, what: str) -> int:
    """Return a whole number as int, exact up to 64 bits.

    Raises
    ------
    RangeError
        When it is not whole, or does not fit: it is never rounded.
    """
    if isinstance(value, int | np.integer | np.bool_) and INT64_MIN <= int(value) <= INT64_MAX:
        return int(value)
    raise RangeError(f"{what} is {value!r}; the store takes whole numbers of 64 bits; keep longer ones as text")


def text(value: object) -> str:
    """Return a value as text that every reader can take: no bytes, no lone surrogates, no NUL."""
    if isinstance(value, bytes | np.bytes_):
        words = bytes(value).decode("utf-8", "backslashreplace")
    elif isinstance(value, Enum):
        words = str(value.value)
    else:
        words = str(value)
    # the file format ends a text at NUL in many readers, and UTF-8 has no surrogates
    return words.encode("utf-8", "backslashreplace").decode("utf-8").replace("\x00", "\\x00")


def utc_text(moment: datetime | str, what: str = "time") -> str:
    """Return a moment as UTC, ISO 8601 with ``Z``; fractions of a second only where there are any.

    Raises
    ------
    RangeError
        When it carries no offset: it could mean any of 26 hours.
    """
    if isinstance(moment, str):
        try:
            moment = datetime.fromisoformat(moment)
        except ValueError:
            raise RangeError(f"{what} is {moment!r}; write it as 2026-12-01T12:00:00Z") from None
    if moment.utcoffset() is None:
        raise RangeError(f"{what} is {moment.isoformat()!r} without an offset; say UTC with a Z at its end")
    try:
        return moment.astimezone(UTC).replace(tzinfo=None).isoformat() + "Z"
    except OverflowError:
        raise RangeError(f"{what} is {moment.isoformat()!r}, outside the years 1 to 9999 in UTC") from None


def json_text(value: object) -> str:
    """Return any of our values as strict JSON: missing as null, infinities and huge integers as text.

    Integers up to 64 bits stay digits, so that identifiers above 2^53 are exact; longer ones become text
    because SQLite's own JSON functions would round them.
    """
    return json.dumps(_plain(value), ensure_ascii=True, allow_nan=False, separators=(",", ":"))


def bound(value: object) -> Any:
    """Return a single value as SQLite may bind it: a parameter of a statement of the user's own."""
    if is_missing(value):
        return None
    if isinstance(value, bool | int | np.integer | np.bool_):
        return integer(value, "parameter")
    if isinstance(value, float | np.floating):
        return required(value, "parameter")
    if isinstance(value, datetime):
        return utc_text(value, "parameter")
    return text(value)


def _plain(value: object) -> Any:
    # the common cases first: a wide catalog brings a million of these
    kind = type(value)
    if kind is str or value is None or kind is bool:
        return value
    if kind is int:
        return value if INT64_MIN <= value <= INT64_MAX else str(value)  # type: ignore[operator]
    if kind is float:
        return _plain_float(value)  # type: ignore[arg-type]
    if isinstance(value, Mapping):
        return {text(_plain(key)): _plain(item) for key, item in value.items()}
    if dataclasses.is_dataclass(value) and not isinstance(value, type):
        return {part.name: _plain(getattr(value, part.name)) for part in dataclasses.fields(value)}
    # a masked scalar has a number under its mask, so this comes before all numpy types
    if is_missing(value):
        return None
    if isinstance(value, np.ndarray) and value.ndim == 0:
        return _plain(value.item())
    if isinstance(value, np.ndarray | list | tuple | set | frozenset):
        return [_plain(item) for item in (sorted(value, key=repr) if isinstance(value, set | frozenset) else value)]
    if isinstance(value, Enum):
        return _plain(value.value)
    if isinstance(value, int | np.integer):
        return _plain(int(value))
    if isinstance(value, np.bool_):
        return bool(value)
    if isinstance(value, float | np.floating):
        return _plain_float(float(value))
    if isinstance(value, datetime):
        return utc_text(value)
    return value.isoformat() if isinstance(value, date) else text(value)


def _plain_float(value: float) -> float | str | None:
    if math.isfinite(value):
        return value
    return None if math.isnan(value) else str(value)
