"""The store as it was at a past moment: views of a session that hide what came later, under the same names."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from datetime import UTC, date, datetime, time

from xmatch.errors import ConfigurationError

UNDATED = frozenset({"band", "catalog_band", "assumptions", "schema_revision"})
"""Facts and choices that are only ever added and mean the same at any time."""
# the plus keeps the planner from coming in by search where a question comes in by position
_SEARCH = "+search_id IN (SELECT search_id FROM {past}.search WHERE asked_at <= '{moment}')"
_FINDING = (
    "finding_id IN (SELECT finding_id FROM {past}.finding WHERE run_id IN "
    "(SELECT run_id FROM {past}.run WHERE answered_at <= '{moment}'))"
)
_ANSWERED = "run_id IN (SELECT run_id FROM {past}.run WHERE answered_at <= '{moment}')"
_LIMIT = "limit_id IN (SELECT limit_id FROM {past}.flux_limit WHERE " + _FINDING + ")"
WAS_THERE = {
    "target": "first_seen_at <= '{moment}'",
    "catalog": "first_seen_at <= '{moment}'",
    "run": "started_at <= '{moment}'",
    "search": "asked_at <= '{moment}'",
    "list_copy": "asked_at <= '{moment}'",
    "list_row": "list_id IN (SELECT list_id FROM {past}.list_copy WHERE asked_at <= '{moment}')",
    "footprint": "asked_at <= '{moment}'",
    "catalog_check": "checked_at <= '{moment}'",
    "pointing": _SEARCH,
    "row": _SEARCH,
    "flux": _SEARCH,
    "finding": _ANSWERED,
    "finding_search": _FINDING,
    "match": _FINDING,
    "flux_limit": _FINDING,
    "limit_search": _LIMIT,
    "luminosity_limit": _LIMIT,
    "standing": _ANSWERED,
    "class_test": "standing_id IN (SELECT standing_id FROM {past}.standing WHERE " + _ANSWERED + ")",
}
"""For each table, which of its lines were there at a moment. A new table needs its line here or in ``UNDATED``."""
_LATER = {
    "finished_at": "finished_at",
    **dict.fromkeys(
        ("answered_at", "assumptions_digest", "n_asked", "n_from_store", "offline", "expected_chance", "spin",
         "remarks", "answer_digest"),
        "answered_at",
    ),
}  # fmt: skip
"""Columns of a run that are filled in after it began, and when."""


def moment_of(text: str) -> str:
    """Return a moment as the store writes it; a date alone means its end, in UTC.

    Raises
    ------
    ConfigurationError
        When it is neither a date nor a time with an offset.
    """
    try:
        if len(text) == len("2026-12-01"):
            moment = datetime.combine(date.fromisoformat(text), time(23, 59, 59, 999999), UTC)
        else:
            moment = datetime.fromisoformat(text)
            if moment.utcoffset() is None:
                raise ValueError
        return moment.astimezone(UTC).replace(tzinfo=None).isoformat() + "Z"
    except (ValueError, OverflowError):
        raise ConfigurationError(
            f"the date is {text!r}; write 2026-12-01, which means the end of that day in UTC, or 2026-12-01T12:00:00Z"
        ) from None


def past_views(moment: str, columns: Mapping[str, Sequence[str]], views: Sequence[str], past: str) -> list[str]:
    """Return the statements that put the past in place of the present, for one session.

    Parameters
    ----------
    moment : str
        From :func:`moment_of`.
    columns : mapping of str to sequence of str
        Columns of each table.
    views : sequence of str
        The ``CREATE VIEW`` statements of the store.
    past : str
        Name of the schema that holds the tables.
    """
    made = []
    for table, condition in WAS_THERE.items():
        listed = ", ".join(
            f"CASE WHEN {_LATER[name]} <= '{moment}' THEN {name} END AS {name}"
            if table == "run" and name in _LATER
            else f'"{name}"'
            for name in columns[table]
        )
        where = condition.format(past=past, moment=moment)
        made.append(f'CREATE TEMPORARY VIEW "{table}" AS SELECT {listed} FROM {past}."{table}" WHERE {where}')
    for statement in views:
        made.append("CREATE TEMPORARY VIEW " + statement[statement.index("CREATE VIEW ") + len("CREATE VIEW ") :])
    return made
