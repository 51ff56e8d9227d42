"""The skeleton of a VOTable, read from the raw bytes: what it says of itself and how many rows it has.

Client libraries skip elements that they do not know and statuses in places where they do not look. A reply
whose rows went unseen would pass for an empty one, so here every element must be one of the standard's, in a
place where the standard allows it, every row must have as many cells as the table has fields, and every status
is collected wherever it stands.
"""

from __future__ import annotations

import base64
import binascii
from dataclasses import dataclass, field
from xml.parsers import expat

from xmatch.archives.words import seen
from xmatch.errors import MisreadError

MAX_DEPTH = 32
"""Deeper nesting than any VOTable needs (our choice)."""
_HOLD_ROWS = frozenset({"VOTABLE", "RESOURCE", "TABLE", "FIELD", "DATA", "TABLEDATA", "TR", "TD", "STREAM"})
"""Elements that must never be skipped."""

# Which elements may stand inside which: VOTable 1.5 (Dowler et al. 2025, IVOA Recommendation) and the older
# places of versions 1.0 to 1.3.
_INSIDE: dict[str, frozenset[str]] = {
    "": frozenset({"VOTABLE"}),
    "VOTABLE": frozenset({"DESCRIPTION", "DEFINITIONS", "COOSYS", "TIMESYS", "GROUP", "PARAM", "INFO", "RESOURCE"}),
    "DEFINITIONS": frozenset({"COOSYS", "PARAM", "INFO"}),
    "RESOURCE": frozenset({"DESCRIPTION", "INFO", "COOSYS", "TIMESYS", "GROUP", "PARAM", "LINK", "TABLE", "RESOURCE"}),
    # VizieR puts coordinate systems into tables that it only describes
    "TABLE": frozenset({"DESCRIPTION", "INFO", "FIELD", "PARAM", "GROUP", "LINK", "DATA", "COOSYS", "TIMESYS"}),
    "DATA": frozenset({"TABLEDATA", "BINARY", "BINARY2", "FITS", "INFO"}),
    "TABLEDATA": frozenset({"TR"}),
    "TR": frozenset({"TD"}),
    "TD": frozenset(),
    "BINARY": frozenset({"STREAM"}),
    "BINARY2": frozenset({"STREAM"}),
    "FITS": frozenset({"STREAM"}),
    "STREAM": frozenset(),
    "FIELD": frozenset({"DESCRIPTION", "VALUES", "LINK"}),
    "PARAM": frozenset({"DESCRIPTION", "VALUES", "LINK"}),
    "INFO": frozenset({"DESCRIPTION", "VALUES", "LINK"}),
    "VALUES": frozenset({"MIN", "MAX", "OPTION"}),
    "OPTION": frozenset({"OPTION"}),
    "MIN": frozenset(),
    "MAX": frozenset(),
    "GROUP": frozenset({"DESCRIPTION", "FIELDref", "PARAMref", "PARAM", "GROUP"}),
    "FIELDref": frozenset(),
    "PARAMref": frozenset(),
    "COOSYS": frozenset({"FIELDref", "PARAMref"}),
    "TIMESYS": frozenset(),
    "LINK": frozenset(),
}

_BYTES_OF = {
    "boolean": 1, "unsignedByte": 1, "short": 2, "int": 4, "long": 8, "char": 1, "unicodeChar": 2,
    "float": 4, "double": 8, "floatComplex": 8, "doubleComplex": 16,
}  # fmt: skip
"""Bytes of one value in a BINARY stream; bits are packed and counted apart (VOTable 1.5, table 1)."""
_COUNT_BYTES = 4
"""A variable-length array is preceded by its length."""


@dataclass(frozen=True)
class Info:
    """One INFO or PARAM element: something the archive says about its answer."""

    name: str
    value: str
    text: str
    element: str

    @property
    def says(self) -> str:
        """What it says, for people: the text where it adds to the value."""
        value, text = self.value.strip(), " ".join(self.text.split())
        return text if not value or (text and value.upper() in ("ERROR", "OVERFLOW")) else value


@dataclass
class FieldHead:
    """One FIELD: name, type and unit as served."""

    name: str
    datatype: str
    unit: str | None
    ucd: str
    arraysize: str | None
    xtype: str


@dataclass
class TableHead:
    """One TABLE: its fields and the number of its rows, counted."""

    name: str
    identity: str
    resource: str
    is_meta: bool
    in_results: bool
    nrows: str | None
    position: int
    """Place among all tables of the file, as astropy numbers them."""
    fields: list[FieldHead] = field(default_factory=list)
    rows: int = 0
    form: str = ""
    """TABLEDATA, BINARY, BINARY2 or FITS; empty without data."""
    infos: list[Info] = field(default_factory=list)
    begin: int = 0
    """Byte at which the element begins."""
    end: int = 0
    """Byte at which its end tag begins."""
    depth: int = 0
    """Resources around it."""
    empty_integers: list[tuple[int, int]] = field(default_factory=list)
    """Row and field of integer cells without text, which old versions of the format cannot mark as missing."""


@dataclass
class Skeleton:
    """Everything a reply says of itself, and the heads of its tables."""

    version: str
    infos: list[Info]
    tables: list[TableHead]
    body_begin: int = 0
    """Byte at which the first resource begins."""

    def infos_about(self, table: TableHead) -> list[Info]:
        """What is said of a table: beside it in its resource, or of the whole answer, but not of another table."""
        of_others = {id(info) for other in self.tables if other is not table for info in other.infos}
        return [info for info in self.infos if id(info) not in of_others]


def skeleton_of(raw: bytes) -> Skeleton:
    """Read the skeleton of a VOTable.

    Parameters
    ----------
    raw : bytes
        The whole reply.

    Returns
    -------
    Skeleton
        Statuses, notices and table heads, rows counted.

    Raises
    ------
    MisreadError
        When the reply is not well-formed XML to its last byte, declares entities, is not a VOTable, or
        holds elements or rows that are not of the standard's form.

    References
    ----------
    Dowler et al. 2025, IVOA Recommendation "VOTable Format Definition", version 1.5.
    """
    reader = _Reader()
    try:
        reader.parser.Parse(raw, True)
    except (LookupError, ValueError) as fault:  # expat asks Python for encodings that it does not know itself
        raise MisreadError(f"not XML: {fault} (begins with {seen(raw)}); ask again later") from None
    except expat.ExpatError as fault:
        words = expat.ErrorString(fault.code)
        cut = fault.code in _CUT
        raise MisreadError(
            f"{'the XML is cut' if cut else 'not XML'}: {words} in line {fault.lineno} "
            f"(begins with {seen(raw)}); ask again later"
        ) from None
    return Skeleton(reader.version, reader.infos, reader.tables, reader.body_begin)


_CUT = frozenset(
    expat.errors.codes[words]
    for words in (
        expat.errors.XML_ERROR_NO_ELEMENTS,
        expat.errors.XML_ERROR_UNCLOSED_TOKEN,
        expat.errors.XML_ERROR_UNCLOSED_CDATA_SECTION,
        expat.errors.XML_ERROR_PARTIAL_CHAR,
    )
)


class _Reader:
    """One pass over the file. Expat keeps no tree, so a large reply costs no more than its bytes."""

    def __init__(self) -> None:
        self.version = ""
        self.body_begin = 0
        self.infos: list[Info] = []
        self.tables: list[TableHead] = []
        self.path: list[str] = [""]
        self.skipping = 0
        self.namespace = ""
        self.cell_tag = "TD"
        self.text: list[str] = []
        self.open_info: tuple[str, str] | None = None
        self.resources: list[tuple[str, str]] = []
        self.table: TableHead | None = None
        self.latest: TableHead | None = None
        self.cells = 0
        self.cell_has_text = False
        self.stream_encoding = ""
        self.parser = expat.ParserCreate(namespace_separator=" ")
        self.parser.buffer_text = True
        self.parser.StartElementHandler = self.start
        self.parser.EndElementHandler = self.end
        self.parser.EntityDeclHandler = self.entity

    def entity(self, name: str, *_: object) -> None:
        raise MisreadError(
            f"the reply declares an XML entity ({name[:40]!r}), which no archive needs and which may grow without "
            "end; do not ask this address again"
        )

    def start(self, tag: str, attributes: dict[str, str]) -> None:
        if tag == self.cell_tag and self.path[-1] == "TR" and not self.skipping:
            self.path.append("TD")  # nearly every element is a cell: the short way saves half of the time
            self.start_cell()
            return
        namespace, _, name = tag.rpartition(" ")
        if self.skipping:
            self.skipping += 1
            self.refuse_hidden(name)
            return
        parent = self.path[-1]
        if parent == "" and name != "VOTABLE":
            raise MisreadError(f"the XML is not a VOTable: its first element is {name[:40]!r}; check the address")
        if name not in _INSIDE.get(parent, frozenset()):
            foreign = namespace != self.namespace and name not in _INSIDE
            if parent == "DESCRIPTION" or (parent == "RESOURCE" and foreign):
                self.skipping = 1  # markup in a text, or an annotation of another standard
                self.refuse_hidden(name)
                return
            raise MisreadError(
                f"element {name[:40]!r} stands inside {parent!r}, where the VOTable standard has no such thing; "
                "its rows cannot be trusted: ask again later"
            )
        if len(self.path) > MAX_DEPTH:
            raise MisreadError(f"the XML is nested more than {MAX_DEPTH} deep; check the address")
        self.path.append(name)
        self.note(name, namespace, attributes)

    def refuse_hidden(self, name: str) -> None:
        """What is skipped must not hold a table, or rows could vanish in it."""
        if name in _HOLD_ROWS:
            raise MisreadError(f"element {name!r} stands where no table may be, so rows could be lost; ask again later")

    def note(self, name: str, namespace: str, attributes: dict[str, str]) -> None:
        if name == "TD":
            self.start_cell()
        elif name == "TR":
            self.cells = 0
        elif name == "VOTABLE":
            self.namespace, self.version = namespace, attributes.get("version", "")
            self.cell_tag = f"{namespace} TD" if namespace else "TD"
        elif name in ("INFO", "PARAM"):
            self.open_info = (attributes.get("name") or attributes.get("ID", ""), attributes.get("value", ""))
            if name == "INFO":
                self.listen()
        elif name == "RESOURCE":
            self.body_begin = self.body_begin or self.parser.CurrentByteIndex
            self.resources.append((attributes.get("name", ""), attributes.get("type", "")))
            self.latest = None
        elif name == "TABLE":
            self.start_table(attributes)
        elif name == "FIELD" and self.table is not None:
            self.table.fields.append(
                FieldHead(
                    name=attributes.get("name") or attributes.get("ID", ""),
                    datatype=attributes.get("datatype", ""),
                    unit=attributes.get("unit", "").strip() or None,
                    ucd=attributes.get("ucd", ""),
                    arraysize=attributes.get("arraysize"),
                    xtype=attributes.get("xtype", ""),
                )
            )
        elif name in ("TABLEDATA", "BINARY", "BINARY2", "FITS") and self.table is not None:
            if self.table.form:
                raise MisreadError(f"table {self.table.name!r} holds its data twice; ask again later")
            self.table.form = name
        elif name == "STREAM":
            if attributes.get("href"):
                raise MisreadError("the rows stand in another file, which is not fetched; ask another address")
            self.stream_encoding = attributes.get("encoding", "")
            self.listen()

    def end(self, tag: str) -> None:
        if self.skipping:
            self.skipping -= 1
            return
        name = self.path.pop()
        table = self.table
        if name == "TD":
            self.end_cell()
        elif name == "TR" and table is not None:
            if self.cells != len(table.fields):
                raise MisreadError(
                    f"row {table.rows + 1} of table {table.name!r} has {self.cells} cells where {len(table.fields)} "
                    "are declared; ask again later"
                )
            table.rows += 1
        elif name in ("INFO", "PARAM") and self.open_info is not None:
            info = Info(*self.open_info, "".join(self.text), name)
            self.infos.append(info)
            # a notice that follows a table in its resource still speaks of that table
            if self.latest is not None:
                self.latest.infos.append(info)
            self.open_info = None
            self.hush()
        elif name == "STREAM" and table is not None:
            table.rows = _binary_rows("".join(self.text), self.stream_encoding, table)
            self.hush()
        elif name == "TABLE":
            if table is not None:
                table.end = self.parser.CurrentByteIndex
            self.table = None
        elif name == "RESOURCE":
            self.resources.pop()
            self.latest = None

    def start_table(self, attributes: dict[str, str]) -> None:
        kinds = [kind for _, kind in self.resources]
        self.table = TableHead(
            name=attributes.get("name", ""),
            identity=attributes.get("ID", ""),
            resource=self.resources[-1][0],
            is_meta="meta" in kinds or attributes.get("type") == "meta",
            in_results="results" in kinds,
            nrows=attributes.get("nrows"),
            position=len(self.tables),
        )
        self.table.begin, self.table.depth = self.parser.CurrentByteIndex, len(self.resources)
        self.latest = self.table
        self.tables.append(self.table)

    def start_cell(self) -> None:
        self.cells += 1
        table = self.table
        if table is None or self.cells > len(table.fields):
            return
        self.cell_has_text = False
        if table.fields[self.cells - 1].datatype in ("short", "int", "long", "unsignedByte"):
            self.parser.CharacterDataHandler = self.cell_text

    def cell_text(self, text: str) -> None:
        self.cell_has_text = self.cell_has_text or bool(text.strip())

    def end_cell(self) -> None:
        if self.parser.CharacterDataHandler is not None:
            self.parser.CharacterDataHandler = None
            if not self.cell_has_text and self.table is not None:
                self.table.empty_integers.append((self.table.rows, self.cells - 1))

    def listen(self) -> None:
        self.text = []
        self.parser.CharacterDataHandler = self.text.append

    def hush(self) -> None:
        self.text = []
        self.parser.CharacterDataHandler = None


def _binary_rows(text: str, encoding: str, table: TableHead) -> int:
    """Count the rows of a base64 stream, which must end with a whole row."""
    if encoding != "base64":
        raise MisreadError(f"a stream in encoding {encoding!r} is not read, only base64; ask another address")
    if table.form == "FITS":
        raise MisreadError("rows in FITS form are not read; ask another address")
    try:
        data = base64.b64decode("".join(text.split()), validate=True)
    except (binascii.Error, ValueError):
        raise MisreadError(f"the binary rows of table {table.name!r} are damaged; ask again later") from None
    head = (len(table.fields) + 7) // 8 if table.form == "BINARY2" else 0
    at = rows = 0
    while at < len(data):
        begin = at
        at += head
        for column in table.fields:
            at = _after_value(data, at, column)
        if at > len(data) or at == begin:
            raise MisreadError(f"the binary rows of table {table.name!r} end within a row; ask again later")
        rows += 1
    return rows


def _after_value(data: bytes, at: int, column: FieldHead) -> int:
    """Where the value that begins at ``at`` ends."""
    size = _BYTES_OF.get(column.datatype)
    if size is None and column.datatype != "bit":
        raise MisreadError(f"column {column.name!r} has the unknown type {column.datatype!r}; ask again later")
    shape = (column.arraysize or "1").split("x")
    try:
        fixed = [int(part) for part in shape if not part.endswith("*")]
    except ValueError:
        raise MisreadError(
            f"column {column.name!r} has the unknown size {column.arraysize!r}; ask again later"
        ) from None
    count = 1
    for length in fixed:
        count *= length
    if shape[-1].endswith("*"):
        # the number that precedes the values counts all of them (VOTable 1.5, section 6.2)
        count = int.from_bytes(data[at : at + _COUNT_BYTES], "big")
        at += _COUNT_BYTES
    return at + ((count + 7) // 8 if size is None else count * size)
