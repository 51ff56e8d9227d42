"""SIMBAD: its TAP service, with the main table joined to those that a column's name points to."""

from __future__ import annotations

from dataclasses import replace

from xmatch.archives import adql, tap
from xmatch.archives.transport import Request
from xmatch.records import Question

MAIN = "basic"
KEYS = {"allfluxes": "oidref", "flux": "oidref", "ident": "oidref", "otypes": "oidref", "alltypes": "oidref"}
"""How other tables point to an object of the main one (SIMBAD TAP schema)."""


def request(question: Question) -> Request:
    """Build the POST request of one cone at SIMBAD.

    Parameters
    ----------
    question : Question
        Columns are those of ``basic``; one named ``table.column`` is taken from another table of SIMBAD, joined so that
        objects without an entry there stay in.

    Returns
    -------
    Request
        A form for ``/sync``. SIMBAD's own client asks the service for its limits first, so it is not used; the pace and
        the number of questions at a time are the transport's.
    """
    others = sorted({c.name.split(".", 1)[0] for c in question.columns if "." in c.name})
    names = [f'{c.name} AS "{c.name}"' if "." in c.name else f"{MAIN}.{adql.quoted(c.name)}" for c in question.columns]
    joins = "".join(f" LEFT OUTER JOIN {other} ON {MAIN}.oid = {other}.{KEYS.get(other, 'oidref')}" for other in others)
    query = adql.select(_qualified(question), columns=names, source=f"{MAIN}{joins}")
    return tap.form(question.address, query, question.row_limit + 1)


def _qualified(question: Question) -> Question:
    """Position columns with their table's name, so that a join leaves no doubt."""
    return replace(
        question,
        columns=tuple(
            replace(c, name=f"{MAIN}.{c.name}") if c.unit == "deg" and c.low is not None else c
            for c in question.columns
        ),
    )
