"""Reading SQL scripts."""

from __future__ import annotations

import sqlite3


def statements(script: str) -> list[str]:
    """Split an SQL script into its statements."""
    found, pending = [], ""
    for line in script.splitlines(keepends=True):
        pending += line
        if sqlite3.complete_statement(pending):
            found.append(pending.strip())
            pending = ""
    return found
