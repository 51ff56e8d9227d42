"""What archives do wrong, on purpose: each kind was seen in the wild, and none may ever pass for an empty answer."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass, replace

from xmatch.errors import ConfigurationError

KINDS = {
    "delay": "answers after some seconds",
    "drip": "sends a byte now and then, so that no read ever times out",
    "drip headers": "the same, before the first line is complete",
    "error status": "puts an error status into a VOTable with HTTP 200",
    "overflow": "says that the answer was cut by a limit",
    "cut notice": "says so in a warning of VizieR's form",
    "html": "sends a web page with HTTP 200",
    "bad gateway": "sends a web page with HTTP 502",
    "cut stream": "declares the whole length, sends a part and closes",
    "cut file": "sends a part of the file as if it were all",
    "empty body": "sends nothing with HTTP 200",
    "unavailable": "HTTP 503, with Retry-After when `seconds` is given",
    "too many": "HTTP 429, with Retry-After when `seconds` is given",
    "forbidden": "HTTP 403",
    "not found": "HTTP 404",
    "server error": "HTTP 500 whose body is a VOTable",
    "closed": "closes the connection without a word",
    "no table": "sends a VOTable without a table, as for a name it does not know",
    "only metadata": "describes the table instead of answering",
    "renamed column": "serves a column under another name",
    "changed unit": "serves a column in another unit",
    "out of range": "multiplies a column",
    "wrong content type": "calls the VOTable text/html",
    "huge body": "sends more bytes than anyone should read",
    "entity bomb": "declares XML entities that grow",
    "moved": "redirects to another address",
    "missing cells": "leaves the last cell off every row",
    "cut list": "sends the first rows of a plain list as if they were all",
    "refuses format": "wants its format named",
    "job error": "a job ends in an error",
    "job aborted": "a job is ended by the archive",
    "job stuck": "a job never ends",
    "unknown element": "puts the rows into an element of its own making",
}

PLACES = ("before", "resource", "after", "table", "definitions", "end")
"""Where a status may stand: before or after all resources, in the resource before or after the table, in the
table, in DEFINITIONS."""


@dataclass(frozen=True)
class Fault:
    """One way to misbehave.

    Parameters
    ----------
    kind : str
        One of :data:`KINDS`.
    seconds : float
        How long a delay lasts, the time between two drops of a drip, or the Retry-After of a refusal.
    retry_after : str, optional
        The Retry-After header as text, where ``seconds`` would not do.
    place, element, name, value : str
        Where a status stands (:data:`PLACES`) and how it is spelt.
    column, to : str
        The column concerned, and its new name or unit.
    factor : float
        What a column is multiplied by.
    fraction : float
        How much of the body a cut leaves.
    size : int
        Bytes of a huge body.

    Raises
    ------
    ConfigurationError
        When the kind or the place is not known.
    """

    kind: str
    seconds: float = 0.0
    retry_after: str | None = None
    place: str = "resource"
    element: str = "INFO"
    name: str = "QUERY_STATUS"
    value: str = "ERROR"
    column: str = ""
    to: str = ""
    factor: float = 1.0
    fraction: float = 0.5
    size: int = 8 * 2**20

    def __post_init__(self) -> None:
        if self.kind not in KINDS:
            raise ConfigurationError(f"fault {self.kind!r} is not known; use one of {', '.join(KINDS)}")
        if self.place not in PLACES:
            raise ConfigurationError(f"place {self.place!r} is not known; use one of {', '.join(PLACES)}")

    @property
    def asked_wait(self) -> str | None:
        """The Retry-After header, if any."""
        if self.retry_after is not None:
            return self.retry_after
        return f"{self.seconds:g}" if self.seconds else None


HTML_PAGE = b"""<!DOCTYPE html>
<html><head><title>Service under maintenance</title></head>
<body><h1>We are moving</h1><p>The archive will be back soon.</p></body></html>
"""

ENTITY_BOMB = b"""<?xml version="1.0"?>
<!DOCTYPE VOTABLE [<!ENTITY a "aaaaaaaaaa"><!ENTITY b "&a;&a;&a;&a;&a;&a;&a;&a;">]>
<VOTABLE version="1.4"><DESCRIPTION>&b;&b;&b;</DESCRIPTION></VOTABLE>
"""

NO_TABLE = b"""<?xml version="1.0" encoding="UTF-8"?>
<VOTABLE version="1.4" xmlns="http://www.ivoa.net/xml/VOTable/v1.3">
<DESCRIPTION>Embedded archive</DESCRIPTION>
<INFO name="Warning" value="no catalog or table of this name"/>
</VOTABLE>
"""


def spoil(body: bytes, fault: Fault) -> bytes:
    """Change the bytes of a good answer as a fault says; kinds that do not touch the body leave it alone."""
    change = _CHANGES.get(fault.kind)
    return body if change is None else change(body, fault)


def _with_status(body: bytes, fault: Fault) -> bytes:
    extra = ' datatype="char" arraysize="*"' if fault.element == "PARAM" else ""
    status = f'<{fault.element} name="{fault.name}"{extra} value="{fault.value}"/>\n'.encode()
    if fault.place == "definitions":
        status = b"<DEFINITIONS>" + status + b"</DEFINITIONS>\n"
    mark, after = {
        "before": (b"<RESOURCE", False),
        "definitions": (b"<RESOURCE", False),
        "resource": (b"<TABLE ", False),
        "table": (b"<FIELD ", False),
        "after": (b"</TABLE>", True),
        "end": (b"</RESOURCE>", True),
    }[fault.place]
    at = body.rfind(mark) if after else body.find(mark)
    at += len(mark) if after else 0
    return body[:at] + status + body[at:]


def _overflow(body: bytes, fault: Fault) -> bytes:
    return _with_status(body, replace(fault, value="OVERFLOW"))


def _cut_notice(body: bytes, fault: Fault) -> bytes:
    notice = b'</TABLE><INFO name="Warning" value="truncated result (maxtup=5)"/>'
    return body.replace(b"</TABLE>", notice)


def _no_last_cell(body: bytes, fault: Fault) -> bytes:
    rows = []
    for line in body.split(b"\n"):
        if line.startswith(b"<TR>"):
            line = line[: line.rfind(b"<TD>")] + b"</TR>"
        rows.append(line)
    return b"\n".join(rows)


def _own_element(body: bytes, fault: Fault) -> bytes:
    return body.replace(b"<TR>", b"<ROW>").replace(b"</TR>", b"</ROW>")


_CHANGES: dict[str, Callable[[bytes, Fault], bytes]] = {
    "error status": _with_status,
    "server error": _with_status,
    "overflow": _overflow,
    "cut notice": _cut_notice,
    "html": lambda body, fault: HTML_PAGE,
    "bad gateway": lambda body, fault: HTML_PAGE,
    "cut list": lambda body, fault: b"".join(body.splitlines(keepends=True)[: max(1, fault.size)]),
    "cut file": lambda body, fault: body[: int(len(body) * fault.fraction)],
    "empty body": lambda body, fault: b"",
    "unavailable": lambda body, fault: b"down for maintenance\n",
    "too many": lambda body, fault: b"slow down\n",
    "forbidden": lambda body, fault: b"your address was blocked\n",
    "not found": lambda body, fault: b"no such resource\n",
    "no table": lambda body, fault: NO_TABLE,
    "only metadata": lambda body, fault: body.replace(b'type="results"', b'type="meta"'),
    "huge body": lambda body, fault: body + b" " * fault.size,
    "entity bomb": lambda body, fault: ENTITY_BOMB,
    "missing cells": _no_last_cell,
    "unknown element": _own_element,
}
HTTP_STATUS = {
    "bad gateway": 502, "unavailable": 503, "too many": 429, "forbidden": 403, "not found": 404,
    "server error": 500, "moved": 302,
}  # fmt: skip
"""HTTP statuses of the faults that have one; the others answer 200."""
