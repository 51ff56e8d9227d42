"""What ``db/README.md`` tells of tables and views, for whoever shows them to people."""

from __future__ import annotations

import re
from dataclasses import dataclass

from xmatch.resources import db_path

_HEADING = re.compile(r"^### (\w+)$", re.MULTILINE)


@dataclass(frozen=True)
class Told:
    """One table or view: what it is, and its columns with unit and meaning."""

    meaning: str
    columns: dict[str, tuple[str, str]]


def contract() -> dict[str, Told]:
    """Return what is told of every table and view, by name."""
    pieces = _HEADING.split(db_path("README.md").read_text(encoding="utf-8"))
    found = {}
    for name, body in zip(pieces[1::2], pieces[2::2], strict=True):
        lines = body.split("\n## ")[0].strip().splitlines()
        cells = [[cell.strip() for cell in line.strip("|").split("|")] for line in lines if line.startswith("|")]
        if len(cells) > 2 and cells[0] == ["column", "unit", "meaning"]:
            found[name] = Told(lines[0], {column: (unit, meaning) for column, unit, meaning in cells[2:]})
    return found
