"""Holding a catalog file against what its service really serves. Pure: what was served is handed in."""

from __future__ import annotations

import difflib
from collections.abc import Iterable, Sequence
from dataclasses import dataclass

from xmatch.catalogs.model import BY_UCD, Catalog
from xmatch.records import WantedColumn
from xmatch.units import unit_factor

SHOWN = 12
"""Candidates that a message names."""


@dataclass(frozen=True)
class Served:
    """One column as a service describes it."""

    name: str
    unit: str | None
    ucd: str
    datatype: str


@dataclass(frozen=True)
class Compared:
    """What a comparison found: names for columns known by UCD only, and everything that does not fit."""

    resolved: dict[str, str]
    problems: tuple[str, ...]


def compare(catalog: Catalog, wanted: Iterable[WantedColumn], served: Sequence[Served]) -> Compared:
    """Find each wanted column among those served.

    Parameters
    ----------
    catalog : Catalog
        The catalog file; its ``units`` stand in where the service gives none.
    wanted : iterable of WantedColumn
        Columns of the catalog or of its observation log.
    served : sequence of Served
        What the service describes. Computed columns of VizieR, which begin with an underscore, need no description.

    Returns
    -------
    Compared
        Problems name the column, what was found and what may be meant.
    """
    resolved: dict[str, str] = {}
    problems = []
    by_name = {column.name.lower(): column for column in served}
    for column in wanted:
        if not column.required or (column.name.startswith("_") and column.name.lower() not in by_name):
            continue
        if column.name.startswith(BY_UCD):
            fitting = [one for one in served if _same_ucd(one.ucd, column.name.removeprefix(BY_UCD))]
            if len(fitting) != 1:
                names = ", ".join(one.name for one in fitting[:SHOWN]) or "none"
                problems.append(
                    f"UCD {column.name.removeprefix(BY_UCD)!r} fits {len(fitting)} columns ({names}): name one in the file"
                )
                continue
            resolved[column.name] = fitting[0].name
            found = fitting[0]
        elif column.name.lower() in by_name:
            found = by_name[column.name.lower()]
        else:
            near = difflib.get_close_matches(column.name, [one.name for one in served], n=3, cutoff=0.5)
            hint = f"; near it: {', '.join(near)}" if near else ""
            problems.append(f"column {column.name!r} is not served{hint}")
            continue
        problem = _unit_problem(catalog, column, found)
        if problem:
            problems.append(problem)
    return Compared(resolved, tuple(problems))


def _unit_problem(catalog: Catalog, wanted: WantedColumn, found: Served) -> str:
    if wanted.unit is None:
        return ""
    unit = found.unit or catalog.units.get(found.name)
    if unit_factor(unit, wanted.unit) is not None:
        return ""
    return f"column {found.name!r} comes in {unit or 'no unit'}, which cannot be converted to {wanted.unit}"


def _same_ucd(served: str, wanted: str) -> bool:
    """Words of a UCD in any order after the first (IVOA UCD1+, version 1.5)."""
    first, *rest = [word.strip() for word in served.lower().split(";")]
    wanted_first, *wanted_rest = [word.strip() for word in wanted.lower().split(";")]
    return first == wanted_first and set(rest) == set(wanted_rest)
