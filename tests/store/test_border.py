"""The border: whatever comes in, SQLite gets integers, floats, text or NULL, and nothing is rounded."""

from __future__ import annotations

import json
import math
import sqlite3
from datetime import UTC, datetime, timedelta, timezone
from typing import Any

import numpy as np
import pytest
from hypothesis import example, given
from hypothesis import strategies as st
from hypothesis.extra import numpy as npst

from xmatch.errors import RangeError
from xmatch.records import Outcome
from xmatch.store.border import bound, computed, integer, json_text, measured, required, text, utc_text

SCALARS = st.one_of(
    npst.from_dtype(np.dtype("int16")),
    npst.from_dtype(np.dtype("int64")),
    npst.from_dtype(np.dtype("bool")),
    npst.from_dtype(np.dtype("float32"), allow_infinity=False),
    npst.from_dtype(np.dtype("float64"), allow_infinity=False),
    npst.from_dtype(np.dtype("S5")),
    st.none(),
    st.just(np.ma.masked),
    st.text(),
    st.integers(-(2**63), 2**63 - 1),
    st.booleans(),
    st.datetimes(timezones=st.timezones()),
    st.sampled_from(Outcome),
)


def through_sqlite(value: object) -> tuple[str, Any]:
    connection = sqlite3.connect(":memory:")
    try:
        kind, back = connection.execute("SELECT typeof(?1), ?1", (value,)).fetchone()
    finally:
        connection.close()
    return kind, back


@given(SCALARS)
@example(np.int64(2**53 + 1))
@example(np.float32(0.1))
@example("\ud800 lone")
@example("nul\x00inside")
@example(datetime(1, 1, 1, 12, tzinfo=timezone(timedelta(hours=-3))))
def test_nothing_reaches_sqlite_as_a_blob_and_numbers_are_exact(value: Any) -> None:
    try:
        sent = bound(value)
    except RangeError:
        # a moment of year 1 or 9999 whose UTC lies outside the calendar
        assert isinstance(value, datetime)
        return
    kind, back = through_sqlite(sent)
    assert kind in ("integer", "real", "text", "null")
    if isinstance(value, int | float | np.number) and not (
        isinstance(value, float | np.floating) and math.isnan(value)
    ):
        assert back == value


@given(st.integers(2**53, 2**63 - 1))
def test_identifiers_above_two_to_the_53_are_exact_in_json(number: int) -> None:
    for given_as in (number, np.int64(number), np.uint64(number)):
        written = json_text({"id": given_as})
        assert json.loads(written)["id"] == number
        # SQLite's own JSON functions must agree
        assert through_sqlite(written) == ("text", written)
        connection = sqlite3.connect(":memory:")
        assert connection.execute("SELECT json_extract(?, '$.id')", (written,)).fetchone() == (number,)
        connection.close()


def test_integers_beyond_64_bits_become_text_in_json_and_are_refused_as_integers() -> None:
    assert json_text([2**63, np.uint64(2**64 - 1)]) == '["9223372036854775808","18446744073709551615"]'
    with pytest.raises(RangeError, match="64 bits"):
        integer(2**63, "an id")


@given(npst.arrays(st.sampled_from(["f4", "f8", "i2", "i8", "u1"]), st.integers(0, 20)))
def test_served_numbers_become_floats_or_none(values: np.ndarray[Any, Any]) -> None:
    listed = measured(values)
    assert len(listed) == len(values)
    for got, was in zip(listed, values, strict=True):
        if np.isfinite(was):
            assert type(got) is float and got == np.float64(was)
        else:
            assert got is None


def test_masked_numbers_are_missing_whatever_lies_under_the_mask() -> None:
    assert measured(np.ma.MaskedArray([1.0, 2.0, 3.0], mask=[False, True, False])) == [1.0, None, 3.0]
    assert measured(np.ma.MaskedArray([1, 2], mask=[True, False])) == [None, 2.0]
    assert json_text({"a": np.ma.masked, "b": np.nan, "c": np.float32(0.5)}) == '{"a":null,"b":null,"c":0.5}'


def test_an_infinite_served_value_is_missing_but_stays_as_text_in_the_row_as_served() -> None:
    assert measured([np.inf, -np.inf, 1.0]) == [None, None, 1.0]
    assert json_text({"f": np.inf, "g": float("-inf")}) == '{"f":"inf","g":"-inf"}'


@pytest.mark.parametrize("value", [np.inf, -np.inf, np.float32("inf"), 10**400, "5", 1j, [1.0]])
def test_a_computed_number_that_is_none_is_a_fault(value: Any) -> None:
    with pytest.raises(RangeError, match=r"a limit is .*finite"):
        computed(value, "a limit")


def test_a_number_that_must_be_there_is_missed() -> None:
    assert computed(np.nan, "a limit") is None
    assert computed(None, "a limit") is None
    for nothing in (None, np.nan, np.ma.masked):
        with pytest.raises(RangeError):
            required(nothing, "a limit")


@pytest.mark.parametrize("value", [1.0, np.float64(2.0), "3", None, np.nan])
def test_a_float_is_never_taken_for_a_whole_number(value: Any) -> None:
    with pytest.raises(RangeError, match="whole"):
        integer(value, "a count")


@given(st.datetimes(timezones=st.timezones(), min_value=datetime(2, 1, 1), max_value=datetime(9998, 1, 1)))
@example(datetime(2026, 12, 1, 0, 0, tzinfo=timezone(timedelta(hours=5))))
def test_a_moment_keeps_its_instant(moment: datetime) -> None:
    written = utc_text(moment)
    assert written.endswith("Z")
    assert datetime.fromisoformat(written) == moment
    # and once written it is left alone
    assert utc_text(written) == written


def test_an_offset_is_not_dropped() -> None:
    assert utc_text("2026-12-01T00:00:00+05:00") == "2026-11-30T19:00:00Z"


@pytest.mark.parametrize("moment", [datetime(2026, 12, 1), "2026-12-01T00:00:00", "yesterday", ""])
def test_a_moment_without_an_offset_is_refused(moment: Any) -> None:
    with pytest.raises(RangeError, match="Z"):
        utc_text(moment, "time of asking")


@given(st.one_of(st.text(), st.binary()))
def test_any_text_can_be_stored_and_has_no_nul(value: str | bytes) -> None:
    kind, back = through_sqlite(text(value))
    assert kind == "text"
    assert back == text(value)
    assert "\x00" not in back


def test_common_text_is_left_alone() -> None:
    assert text("Ångström 5°, 10 µJy") == "Ångström 5°, 10 µJy"
    assert text(b"NVSS J1738") == "NVSS J1738"
    assert text(Outcome.NOT_COVERED) == "not covered"


TREES = st.recursive(
    st.one_of(st.none(), st.booleans(), st.floats(), st.integers(), st.text(), st.binary(), SCALARS),
    lambda inner: st.one_of(st.lists(inner, max_size=4), st.dictionaries(st.text(), inner, max_size=4)),
    max_leaves=12,
)


@given(TREES)
def test_everything_becomes_strict_json(value: Any) -> None:
    try:
        written = json_text(value)
    except RangeError:
        # only a moment outside the calendar is refused
        return
    written.encode("ascii")

    def refuse(word: str) -> None:
        raise AssertionError(f"{word} is not JSON")

    json.loads(written, parse_constant=refuse)


def test_arrays_dates_and_records_become_json() -> None:
    written = json_text({"when": datetime(2026, 12, 1, tzinfo=UTC), "v": np.array([1.5, np.nan]), "s": {"b", "a"}})
    assert json.loads(written) == {"when": "2026-12-01T00:00:00Z", "v": [1.5, None], "s": ["a", "b"]}
