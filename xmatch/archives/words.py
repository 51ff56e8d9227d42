"""Showing what an archive sent without trusting it: short, printable, on one line."""

from __future__ import annotations

import re

SHOWN = 120
"""How much of a strange reply is shown."""
_TITLE = re.compile(rb"<title[^>]*>(.*?)</title", re.IGNORECASE | re.DOTALL)


def plain(text: str, length: int = SHOWN) -> str:
    """One line of printable text; control characters of a hostile reply never reach a terminal."""
    line = " ".join("".join(c if c.isprintable() else " " for c in text).split())
    return line if len(line) <= length else line[: length - 1] + "…"


def seen(raw: bytes) -> str:
    """The beginning of a reply, quoted."""
    return repr(plain(raw[: 4 * SHOWN].decode("utf-8", "replace"), 60))


def title_of(raw: bytes) -> str:
    """Title of an HTML page, or nothing."""
    found = _TITLE.search(raw[:65_536])
    return plain(found.group(1).decode("utf-8", "replace")) if found else ""
