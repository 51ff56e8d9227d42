"""Reading the published check values: one ECSV per room, each row with its source."""

from __future__ import annotations

import json
from pathlib import Path
from typing import Any

from astropy.table import Table

FOLDER = Path(__file__).parent.parent / "fixtures" / "published"


def rows(room: str) -> list[dict[str, Any]]:
    """The check values of one room; ``inputs`` and ``expected`` are JSON, decoded here."""
    table = Table.read(FOLDER / f"{room}.ecsv")
    listed = [dict(zip(table.colnames, row, strict=True)) for row in table.iterrows()]
    for row in listed:
        assert row["source"], row["id"]
        row["inputs"] = json.loads(row["inputs"])
        if isinstance(row["expected"], str):
            row["expected"] = json.loads(row["expected"])
    return listed


def tolerance(text: str) -> dict[str, float]:
    """``1e-6 rel`` or ``0.01`` (absolute) as arguments of ``pytest.approx``."""
    number, *kind = text.split()
    return {"rel": float(number)} if kind == ["rel"] else {"abs": float(number), "rel": 0.0}
