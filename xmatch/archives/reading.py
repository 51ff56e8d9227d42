"""Judging a reply on its raw bytes, before any convenience class sees it.

A reply is whole only when everything speaks for it: HTTP 200, a complete VOTable, no error or overflow in any
place, the table that was asked for with the columns that were asked for, in units that can be converted and with
values that can be true. Client libraries miss several of these (pyvo's cone search takes an overflow and a
late error for success; astroquery's VizieR client takes an HTML page for no rows), so none of them is asked.
"""

from __future__ import annotations

import re
from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from functools import cached_property

from xmatch.archives.structure import FieldHead, Info, Skeleton, TableHead, skeleton_of
from xmatch.archives.words import plain, seen, title_of
from xmatch.errors import MisreadError, UnansweredError
from xmatch.records import Column, Question, ReplyStatus

GOOD_STATUSES = frozenset({200, 203})
"""203 is a 200 that passed a proxy (RFC 9110, section 15.3.4)."""
CLOSED_STATUSES = frozenset({401, 403, 407, 408, 425, 429})
"""Refusals that say nothing about the question: the archive may answer another day."""
_ERROR_NAMES = frozenset({"error", "errors"})
_STATUS_NAME = "query_status"
_LIMIT_NAMES = frozenset({"maxtuples", "-out.max"})
"""Where VizieR says how many rows a table may have; it may be fewer than were asked for."""
_CUT_NOTICE = re.compile(r"truncated|overflow", re.IGNORECASE)
"""VizieR's warning beside a cut table, as in "truncated result (maxtup=5)"."""
_NO_CENTRE_NOTICE = re.compile(r"no cent(er|re) provided", re.IGNORECASE)
"""VizieR's warning that it left the position out of the search."""
_HTML_START = re.compile(rb"\s*(<\?xml[^>]*>\s*)?(<!--.*?-->\s*)*<(!doctype\s+html|html|head|body)\b", re.I | re.S)


@dataclass(frozen=True)
class Judged:
    """A reply that may be read as data, whole or cut.

    ``columns`` holds the scalar columns under the names served (the question's spelling for those it
    asked for); ``detail`` says in words what was seen.
    """

    status: ReplyStatus
    detail: str
    columns: Mapping[str, Column]
    n_rows: int


class Answer:
    """The bytes of one answer, whose skeleton is read once for all the tables in it."""

    def __init__(self, raw: bytes) -> None:
        self.raw = raw
        self.body = raw.lstrip(b"\xef\xbb\xbf \t\r\n")

    @cached_property
    def skeleton(self) -> Skeleton:
        """What the answer says of itself; raises as :func:`~xmatch.archives.structure.skeleton_of`."""
        return skeleton_of(self.body)


def judge(
    raw: bytes | Answer, http_status: int, content_type: str, question: Question, *, bundled: bool = False
) -> Judged:
    """Judge one reply and decode its columns.

    Parameters
    ----------
    raw : bytes or Answer
        The whole body; as an answer where several questions share it.
    http_status : int
        HTTP status.
    content_type : str
        As the archive declares it; only shown, because archives often declare it wrongly.
    question : Question
        What was asked: the table, its columns with unit and plausible range, and the row limit.
    bundled : bool
        Whether other tables were asked for in the same request: what is said of another table is then not said of this.

    Returns
    -------
    Judged
        Status whole or truncated, with columns.

    Raises
    ------
    UnansweredError
        The HTTP status says that the archive did not deal with the question.
    MisreadError
        Everything else that must not be read as data.
    """
    answer = raw if isinstance(raw, Answer) else Answer(raw)
    body = answer.body
    _check_http(answer.raw, http_status)
    if not body:
        raise MisreadError("the answer is empty, without even a table's head; ask again later")
    if _HTML_START.match(body[:4096]):
        raise MisreadError(
            f"a web page came instead of a table{_named(title_of(body))}; "
            "the archive may be down for maintenance, or the address has changed: ask again later"
        )
    if question.protocol == "file" and question.format != "votable":
        return _judge_list(answer.raw, question)
    if not body.startswith(b"<") and not body.startswith((b"\xff\xfe", b"\xfe\xff")):
        kind = f" ({plain(content_type, 40)})" if content_type else ""
        raise MisreadError(f"not XML{kind}: begins with {seen(body)}; ask again later")
    skeleton = answer.skeleton
    _check_statuses(skeleton, question)
    table = _table_of(skeleton, question)
    _check_declared_rows(table)
    _check_enough(table.rows, question)
    cut = _why_cut(skeleton.infos_about(table) if bundled else skeleton.infos, table, question)

    from xmatch.archives.decoding import decode

    columns, remark = decode(body, skeleton, table, question)
    n_columns = f"{len(columns)} columns"
    if cut:
        return Judged(ReplyStatus.TRUNCATED, f"{cut}; ask for a smaller cone", columns, table.rows)
    detail = f"whole: {_rows(table.rows)}, {n_columns}{remark}"
    return Judged(ReplyStatus.WHOLE, detail, columns, table.rows)


def _check_http(raw: bytes, http_status: int) -> None:
    if http_status in GOOD_STATUSES:
        return
    said = _said(raw)
    if http_status >= 500 or http_status in CLOSED_STATUSES:
        what = {401: "it wants a login", 403: "it refuses this machine", 407: "the proxy wants a login"}.get(
            http_status, "the archive has a fault" if http_status >= 500 else "not now"
        )
        raise UnansweredError(f"HTTP {http_status}: {what}{said}; ask again later", http_status=http_status)
    if 300 <= http_status < 400:
        raise MisreadError(f"HTTP {http_status}: the service has moved{said}; the catalog file needs the new address")
    if http_status >= 400:
        raise MisreadError(
            f"HTTP {http_status}: the archive does not know this table or request{said}; "
            "check the address and table in the catalog file"
        )
    raise MisreadError(f"HTTP {http_status}: only 200 is a whole answer{said}; ask again later")


def _said(raw: bytes) -> str:
    """What the body of a failure says, if it says it in a form we know."""
    try:
        for info in skeleton_of(raw.strip()).infos:
            if _is_error(info):
                return _named(plain(info.says))
    except MisreadError:
        pass
    return _named(title_of(raw))


def _named(text: str) -> str:
    return f" ({text!r})" if text else ""


def _status_value(info: Info) -> str:
    return info.value.strip().upper()


def _is_error(info: Info) -> bool:
    name = info.name.strip().lower()
    # some services put the status under a name of their own
    return name in _ERROR_NAMES or _status_value(info) == "ERROR"


def heads(raw: bytes, question: Question) -> tuple[FieldHead, ...]:
    """The fields of the table that answers a question, as declared. The reply must have been judged before."""
    return tuple(_table_of(Answer(raw).skeleton, question).fields)


def _judge_list(raw: bytes, question: Question) -> Judged:
    """A list in a format that cannot say that it was cut."""
    from xmatch.archives.decoding import check_list
    from xmatch.archives.filelist import read_list

    columns = check_list(read_list(raw, question), question)
    n_rows = max((len(column.values) for column in columns.values()), default=0)
    _check_enough(n_rows, question)
    if n_rows > question.row_limit:
        cut = f"more rows than the limit of {question.row_limit}; raise row_limit in the catalog file"
        return Judged(ReplyStatus.TRUNCATED, cut, columns, n_rows)
    return Judged(ReplyStatus.WHOLE, f"whole list: {_rows(n_rows)}, {len(columns)} columns", columns, n_rows)


def _check_enough(n_rows: int, question: Question) -> None:
    """A list fetched whole must hold what it is known to hold."""
    if n_rows < question.rows_at_least:
        raise MisreadError(
            f"the list holds {_rows(n_rows)} where at least {question.rows_at_least} are known; "
            "it was cut, or the catalog file names another table"
        )


def _check_statuses(skeleton: Skeleton, question: Question) -> None:
    for info in skeleton.infos:
        if _is_error(info):
            raise MisreadError(
                f"the archive reports an error in its answer ({info.element} {plain(info.name, 30)!r}): "
                f"{plain(info.says) or 'without words'}; ask again later"
            )
        if info.name.strip().lower() == _STATUS_NAME and _status_value(info) not in ("OK", "OVERFLOW"):
            raise MisreadError(
                f"the archive reports the status {plain(info.value, 40)!r}, which is none of OK, OVERFLOW and ERROR; "
                "ask again later"
            )
        if _NO_CENTRE_NOTICE.search(info.value) and not question.is_whole:
            raise MisreadError(
                f"the archive left the position out of the search ({plain(info.value)!r}); "
                "check how the table is asked in the catalog file"
            )


def _table_of(skeleton: Skeleton, question: Question) -> TableHead:
    """The one table that answers the question."""
    tables = [table for table in skeleton.tables if not table.is_meta]
    if not tables:
        only = " (only a description of tables)" if skeleton.tables else ""
        raise MisreadError(
            f"no table in the reply{only}{_notices(skeleton)}: not an empty answer but none, as for a table that the "
            f"archive does not know; check {question.remote_table or question.address!r} in the catalog file"
        )
    if question.protocol == "vizier":
        wanted = question.remote_table.lower()
        fitting = [t for t in tables if t.name.lower() == wanted or t.name.lower().startswith(wanted + "/")]
    else:
        fitting = tables if len(tables) == 1 else [table for table in tables if table.in_results]
    if len(fitting) != 1:
        names = ", ".join(plain(table.name, 40) or "without a name" for table in tables[:6])
        raise MisreadError(
            f"asked for table {question.remote_table or 'of this address'!r}, but the reply holds {len(tables)} "
            f"({names}), of which {len(fitting)} fit; name one table in the catalog file"
        )
    table = fitting[0]
    if not table.fields:
        raise MisreadError(f"table {plain(table.name, 40)!r} has no columns; ask again later")
    return table


def _notices(skeleton: Skeleton) -> str:
    warnings = [plain(info.value, 80) for info in skeleton.infos if info.name.strip().lower() == "warning"]
    return f" (it says {'; '.join(warnings[:3])})" if warnings else ""


def _number(text: str | None) -> int | None:
    return int(text) if text is not None and text.strip().isascii() and text.strip().isdigit() else None


def _check_declared_rows(table: TableHead) -> None:
    declared = _number(table.nrows)
    if declared is not None and declared != table.rows:
        raise MisreadError(
            f"table {plain(table.name, 40)!r} declares {declared} rows and holds {table.rows}; ask again later"
        )


def _why_cut(infos: Sequence[Info], table: TableHead, question: Question) -> str:
    """Why the reply is not all there is, or nothing."""
    for info in infos:
        name = info.name.strip().lower()
        if _status_value(info) == "OVERFLOW" or (name == "warning" and _CUT_NOTICE.search(info.value)):
            return f"cut: the archive says {plain(info.says or info.value)!r} after {_rows(table.rows)}"
        if name in _LIMIT_NAMES and (limit := _number(info.value)) is not None and table.rows >= limit > 0:
            return f"cut: the archive stopped at its own limit of {_rows(limit)}"
    for info in table.infos:
        matches = _number(info.value) if info.name.strip().lower() == "matches" else None
        if matches is not None and matches > table.rows:
            return f"cut: the archive counts {matches} matches and gives {_rows(table.rows)}"
    if table.rows > question.row_limit:
        return f"cut: more rows than the limit of {question.row_limit}"
    return ""


def _rows(n: int) -> str:
    return "1 row" if n == 1 else f"{n} rows"
