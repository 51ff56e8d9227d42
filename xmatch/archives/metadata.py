"""What a service says of its own columns: TAP_SCHEMA where there is one, else the head of an answer."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, replace

from xmatch.archives import tap
from xmatch.archives.bundle import Job, single
from xmatch.archives.fleet import run_jobs
from xmatch.archives.reading import heads
from xmatch.archives.structure import FieldHead
from xmatch.archives.transport import Transport
from xmatch.records import Question, Reply, ReplyStatus, WantedColumn

ALL_COLUMNS = {"vizier": (WantedColumn("**", required=False),)}
"""How a protocol is asked for every column; a cone search gives all of them anyway."""
MOST_COLUMNS = 5000
_SCHEMA = tuple(WantedColumn(name) for name in ("column_name", "unit", "ucd", "datatype"))


@dataclass(frozen=True)
class Description:
    """The columns that a service declares for one table; none where it gave no usable answer."""

    question: Question
    reply: Reply
    fields: tuple[FieldHead, ...]


def describe(questions: Sequence[Question], transport: Transport) -> dict[Question, Description]:
    """Ask services what columns their tables have.

    Parameters
    ----------
    questions : sequence of Question
        One per table, at a position where it holds rows; their wanted columns are not asked for.
    transport : Transport
        How they are asked: together, politely.

    Returns
    -------
    dict of Question to Description
        One for each, in no order. A table that TAP_SCHEMA does not know has no fields, and its reply says so.
    """
    jobs = [_job(question) for question in questions]
    asked = {job.questions[0]: question for job, question in zip(jobs, questions, strict=True)}
    found = {}
    for reply in run_jobs(jobs, transport, keep_body=True):
        question = asked[reply.question]
        found[question] = Description(question, reply, _fields(reply))
    return found


def _job(question: Question) -> Job:
    if question.protocol in ("tap", "simbad"):
        name = question.remote_table.replace("'", "''")
        query = f"SELECT column_name, unit, ucd, datatype FROM TAP_SCHEMA.columns WHERE table_name = '{name}'"
        asked = replace(question, protocol="tap", mode="sync", columns=_SCHEMA, row_limit=MOST_COLUMNS, geometry="box")
        # the answer is about columns, not about a place: any radius covers it
        asked = replace(asked, radius_arcsec=180.0 * 3600.0)
        return Job((asked,), tap.form(question.address, query, MOST_COLUMNS + 1))
    row_limit = question.row_limit if question.protocol == "file" else 1
    columns = ALL_COLUMNS.get(question.protocol, ())
    # a glance at the head need not be the whole list
    at_least = question.rows_at_least if question.protocol == "file" else 0
    return single(replace(question, columns=columns, row_limit=row_limit, rows_at_least=at_least))


def _fields(reply: Reply) -> tuple[FieldHead, ...]:
    if reply.status not in (ReplyStatus.WHOLE, ReplyStatus.TRUNCATED) or reply.columns is None:
        return ()
    if reply.question.columns == _SCHEMA:
        values = [[str(value).strip() for value in reply.columns[column.name].values] for column in _SCHEMA]
        return tuple(
            FieldHead(name.strip('"'), datatype, unit or None, ucd, None, "")
            for name, unit, ucd, datatype in zip(*values, strict=True)
        )
    if reply.body is None or (reply.question.protocol == "file" and reply.question.format != "votable"):
        return tuple(FieldHead(name, "", column.unit, "", None, "") for name, column in reply.columns.items())
    return heads(reply.body, reply.question)
