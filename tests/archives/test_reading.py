"""The reader on raw bytes: values exact, statuses found, and nothing damaged ever read as no rows."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import HealthCheck, given, settings
from hypothesis import strategies as st

from xmatch.archives.reading import judge
from xmatch.archives.structure import skeleton_of
from xmatch.demo.server import VizierForm, cone_answer
from xmatch.errors import ArchiveError, MisreadError, UnansweredError
from xmatch.records import Question, ReplyStatus, WantedColumn

ROUNDS = settings(
    max_examples=150, derandomize=True, deadline=None, suppress_health_check=[HealthCheck.function_scoped_fixture]
)


def votable(fields: str, rows: str, version: str = "1.4", extra: str = "") -> bytes:
    """A table in a few words."""
    return (
        f'<VOTABLE version="{version}"><RESOURCE><TABLE name="t">{fields}<DATA><TABLEDATA>{rows}'
        f"</TABLEDATA></DATA></TABLE>{extra}</RESOURCE></VOTABLE>"
    ).encode()


def asked(*columns: WantedColumn, **changes: object) -> Question:
    facts = {
        "catalog_id": "c", "release": "1", "table": "t", "protocol": "cone", "address": "https://a.example/scs",
        "remote_table": "", "ra_deg": 10.0, "dec_deg": 0.0, "radius_arcsec": 60.0, "columns": columns, "row_limit": 9,
    }  # fmt: skip
    return Question(**(facts | changes))  # type: ignore[arg-type]


def test_identifiers_above_2_to_53_are_exact(table, question):
    judged = judge(cone_answer(table, {"RA": ["0"], "DEC": ["-20"], "SR": ["1"]}), 200, "text/xml", question("cone"))
    assert judged.columns["Source"].values.dtype == np.int64
    assert set(judged.columns["Source"].values.tolist()) == set(table.rows["Source"].tolist())


def test_missing_values_are_marked_and_text_is_unescaped(table, question):
    judged = judge(cone_answer(table, {"RA": ["0"], "DEC": ["-20"], "SR": ["1"]}), 200, "text/xml", question("cone"))
    order = np.argsort(judged.columns["Source"].values)
    magnitudes, flags, numbers = (judged.columns[name] for name in ("Gmag", "Qflg", "Nobs"))
    assert np.flatnonzero(magnitudes.missing[order]).tolist() == [1, 4, 7]
    assert np.isnan(magnitudes.values[magnitudes.missing]).all()
    assert np.flatnonzero(numbers.missing[order]).tolist() == [2, 5, 8, 11]
    assert flags.values[order][:3].tolist() == ["A & B", "", "<C>"]
    assert flags.missing[order][:3].tolist() == [False, True, False]


def test_an_empty_integer_cell_is_missing_in_old_versions_of_the_format_too():
    fields = '<FIELD name="n" datatype="int"/><FIELD name="k" datatype="int"/>'
    rows = "<TR><TD>7</TD><TD>1</TD></TR><TR><TD></TD><TD> 2 </TD></TR>"
    columns = judge(votable(fields, rows, version="1.2"), 200, "", asked(WantedColumn("n"))).columns
    assert columns["n"].missing.tolist() == [False, True]
    assert columns["k"].missing.tolist() == [False, False]
    assert columns["k"].values.tolist() == [1, 2]


def test_names_are_found_in_any_case_and_the_wanted_one_wins():
    fields = '<FIELD name="b_AV" datatype="double"/><FIELD name="B_AV" datatype="double"/>'
    raw = votable(fields, "<TR><TD>1.5</TD><TD>2.5</TD></TR>")
    judged = judge(raw, 200, "", asked(WantedColumn("B_AV")))
    assert judged.columns["B_AV"].values.tolist() == [2.5]
    # what is left over must not shadow it for a reader that ignores case
    assert sorted(name.lower() for name in judged.columns) == ["b_av", "b_av (2)"]
    with pytest.raises(MisreadError, match="'b_av' comes 2 times"):
        judge(raw, 200, "", asked(WantedColumn("b_av")))


def test_a_column_that_may_be_absent_is_not_asked_back():
    raw = votable('<FIELD name="a" datatype="int"/>', "<TR><TD>1</TD></TR>")
    assert judge(raw, 200, "", asked(WantedColumn("z", required=False))).status is ReplyStatus.WHOLE
    with pytest.raises(MisreadError, match="column 'z' not in the reply, which holds a; "):
        judge(raw, 200, "", asked(WantedColumn("z")))


@pytest.mark.parametrize(
    ("served", "wanted"),
    [("mW/m2", "erg s-1 cm-2"), ("mas", "arcsec"), ("mag", "mag"), ("0.1nm", "um"), ("h:m:s", None), ("mJy", "Jy")],
)
def test_units_that_can_be_converted_are_let_through_as_served(served, wanted):
    raw = votable(f'<FIELD name="a" datatype="double" unit="{served}"/>', "<TR><TD>1.0</TD></TR>")
    assert judge(raw, 200, "", asked(WantedColumn("a", wanted))).columns["a"].unit == served


@pytest.mark.parametrize("served", ["Jy/beam", "furlong", "deg", "[mJy]", "---"])
def test_units_that_cannot_be_converted_are_refused(served):
    raw = votable(f'<FIELD name="a" datatype="double" unit="{served}"/>', "<TR><TD>1.0</TD></TR>")
    with pytest.raises(MisreadError, match=r"'a' comes in .*cannot be converted to mJy"):
        judge(raw, 200, "", asked(WantedColumn("a", "mJy")))


def test_sexagesimal_text_is_not_degrees():
    raw = votable('<FIELD name="ra" datatype="char" arraysize="*" unit="h:m:s"/>', "<TR><TD>12 34 56</TD></TR>")
    with pytest.raises(MisreadError, match="'ra' comes as text in h:m:s"):
        judge(raw, 200, "", asked(WantedColumn("ra", "deg")))


def test_the_standard_fixes_degrees_for_the_main_position_of_a_cone_search_only():
    raw = votable('<FIELD name="ra" datatype="double" ucd="POS_EQ_RA_MAIN"/>', "<TR><TD>10.0</TD></TR>")
    wanted = WantedColumn("ra", "deg")
    assert judge(raw, 200, "", asked(wanted)).columns["ra"].unit == "deg"
    with pytest.raises(MisreadError, match="no unit"):
        judge(raw, 200, "", asked(wanted, protocol="vizier", remote_table="t"))


POSITION = (WantedColumn("ra", "deg", low=0.0, high=360.0), WantedColumn("dec", "deg", low=-90.0, high=90.0))


def placed(*positions: tuple[float, float]) -> bytes:
    rows = "".join(f"<TR><TD>{ra}</TD><TD>{dec}</TD></TR>" for ra, dec in positions)
    return votable(
        '<FIELD name="ra" datatype="double" unit="deg"/><FIELD name="dec" datatype="double" unit="deg"/>', rows
    )


def test_rows_from_elsewhere_are_no_answer():
    assert judge(placed((10.01, 0.0)), 200, "", asked(*POSITION)).n_rows == 1
    with pytest.raises(MisreadError, match="1 of 1 rows lie outside the cone"):
        judge(placed((10.0 / 15.0, 0.0)), 200, "", asked(*POSITION))  # hours, called degrees
    # across RA 0 and at the pole, near is near
    assert judge(placed((359.99, 0.0)), 200, "", asked(*POSITION, ra_deg=0.01)).n_rows == 1
    assert judge(placed((200.0, 89.99)), 200, "", asked(*POSITION, ra_deg=20.0, dec_deg=89.99)).n_rows == 1


def test_a_few_implausible_values_are_let_through_many_are_not():
    field = '<FIELD name="g" datatype="double" unit="mag"/>'
    wanted = WantedColumn("g", "mag", low=0.0, high=30.0)
    good, bad = "<TR><TD>15.0</TD></TR>", "<TR><TD>99.9</TD></TR>"
    assert judge(votable(field, 19 * good + bad), 200, "", asked(wanted, row_limit=30)).n_rows == 20
    with pytest.raises(MisreadError, match=r"2 of 20 values, such as 99\.9, lie outside 0 to 30 mag"):
        judge(votable(field, 18 * good + 2 * bad), 200, "", asked(wanted, row_limit=30))


@pytest.mark.parametrize(
    ("datatype", "text"), [("double", "faint"), ("int", "faint"), ("short", "70000"), ("long", "9223372036854775808")]
)
def test_a_value_that_does_not_fit_its_type_is_misread(datatype, text):
    raw = votable(f'<FIELD name="g" datatype="{datatype}"/>', f"<TR><TD>{text}</TD></TR>")
    with pytest.raises(MisreadError, match=r"cannot be read|does not fit"):
        judge(raw, 200, "", asked())


@pytest.mark.parametrize("text", ["", "-", "NaN", "null", "--"])
def test_a_float_cell_without_a_number_is_missing(text):
    raw = votable('<FIELD name="g" datatype="double"/>', f"<TR><TD>{text}</TD></TR>")
    assert judge(raw, 200, "", asked()).columns["g"].missing.tolist() == [True]


@pytest.mark.parametrize("text", ["+Inf", "-Inf"])
def test_infinite_values_are_never_plausible(text):
    raw = votable('<FIELD name="g" datatype="double" unit="mag"/>', f"<TR><TD>{text}</TD></TR>")
    with pytest.raises(MisreadError, match="lie outside"):
        judge(raw, 200, "", asked(WantedColumn("g", "mag", low=-5.0)))


def test_a_table_that_declares_more_rows_than_it_holds_is_misread():
    raw = votable('<FIELD name="n" datatype="int"/>', "<TR><TD>1</TD></TR>").replace(b'name="t"', b'name="t" nrows="3"')
    with pytest.raises(MisreadError, match="declares 3 rows and holds 1"):
        judge(raw, 200, "", asked())


@pytest.mark.parametrize(
    ("notice", "words"),
    [
        ('<INFO name="matches" value="8"/>', "counts 8 matches and gives 1 row"),
        ('<INFO ID="MaxTuples" name="-out.max" value="1"/>', "stopped at its own limit of 1 row"),
        ('<INFO name="STATUS" value="OVERFLOW">row limit</INFO>', "'row limit'"),
    ],
)
def test_an_archive_that_says_there_is_more_gives_a_cut_answer(notice, words):
    raw = votable('<FIELD name="n" datatype="int"/>', "<TR><TD>1</TD></TR>", extra=notice)
    judged = judge(raw, 200, "", asked())
    assert judged.status is ReplyStatus.TRUNCATED
    assert words in judged.detail


def test_an_archive_that_left_the_position_out_gives_no_answer():
    notice = '<INFO name="Warning" value="No center provided++++"/>'
    raw = votable('<FIELD name="n" datatype="int"/>', "<TR><TD>1</TD></TR>", extra=notice)
    with pytest.raises(MisreadError, match="left the position out"):
        judge(raw, 200, "", asked())


def test_a_reply_with_two_tables_does_not_say_which_one_answers():
    raw = votable('<FIELD name="n" datatype="int"/>', "").replace(b"</RESOURCE>", b'<TABLE name="u"/></RESOURCE>')
    with pytest.raises(MisreadError, match=r"the reply holds 2 \(t, u\), of which 0 fit"):
        judge(raw, 200, "", asked())


def test_rows_in_another_file_are_not_taken_for_no_rows():
    raw = votable('<FIELD name="n" datatype="int"/>', "")
    raw = raw.replace(b"<TABLEDATA></TABLEDATA>", b'<BINARY><STREAM href="http://b.example/rows"/></BINARY>')
    with pytest.raises(MisreadError, match="stand in another file"):
        judge(raw, 200, "", asked())


@pytest.mark.parametrize("stream", ["AAAAAQAA", "AAAAA", "AAA*AQ=="])
def test_a_binary_stream_must_end_with_a_whole_row(stream):
    raw = votable('<FIELD name="n" datatype="int"/>', "")
    raw = raw.replace(
        b"<TABLEDATA></TABLEDATA>", f'<BINARY><STREAM encoding="base64">{stream}</STREAM></BINARY>'.encode()
    )
    with pytest.raises(MisreadError, match=r"within a row|damaged"):
        judge(raw, 200, "", asked())


def test_control_characters_of_a_hostile_reply_never_reach_the_terminal():
    with pytest.raises(MisreadError) as fault:
        judge(b"\x1b[2J\x1b]0;owned\x07plain text", 200, "text/plain", asked())
    assert str(fault.value).isprintable()


@pytest.mark.parametrize(
    ("status", "kind", "words"),
    [
        (204, MisreadError, "only 200 is a whole answer"),
        (206, MisreadError, "only 200 is a whole answer"),
        (301, MisreadError, "has moved"),
        (400, MisreadError, "does not know"),
        (401, UnansweredError, "wants a login"),
        (410, MisreadError, "does not know"),
        (504, UnansweredError, "has a fault"),
    ],
)
def test_a_status_other_than_200_is_never_data(status, kind, words):
    raw = votable('<FIELD name="n" datatype="int"/>', "<TR><TD>1</TD></TR>")
    with pytest.raises(kind, match=words):
        judge(raw, status, "text/xml", asked())


def test_an_annotation_of_another_standard_is_passed_over_unless_rows_stand_in_it():
    note = '<a:MAP xmlns:a="http://a.example"><a:ITEM/>{}</a:MAP>'
    raw = votable('<FIELD name="n" datatype="int"/>', "<TR><TD>1</TD></TR>", extra=note.format("<a:SUB>x</a:SUB>"))
    assert judge(raw, 200, "", asked()).n_rows == 1
    raw = votable('<FIELD name="n" datatype="int"/>', "", extra=note.format("<a:SUB><TR><TD>1</TD></TR></a:SUB>"))
    with pytest.raises(MisreadError, match="'TR' stands where no table may be"):
        judge(raw, 200, "", asked())


def test_deep_nesting_is_refused():
    raw = b"<VOTABLE>" + 100 * b"<RESOURCE>" + 100 * b"</RESOURCE>" + b"</VOTABLE>"
    with pytest.raises(MisreadError, match="nested more than 32 deep"):
        skeleton_of(raw)


# ------------------------------------------------------------------------------------------------
# damage of any kind
# ------------------------------------------------------------------------------------------------
@pytest.fixture(scope="session")
def replies(table, question):
    """The same twelve rows by both protocols, and empty answers of both."""
    form = VizierForm.of("-source=I/999/main\n-out=Source,RA_ICRS,DE_ICRS,Gmag,Qflg,Nobs\n-c=0.0-20.0\n-c.rs=300")
    nothing = VizierForm.of("-source=I/999/main\n-out=Source,RA_ICRS,DE_ICRS,Gmag,Qflg,Nobs\n-c=0.0+20.0\n-c.rs=300")
    return {
        ("cone", 12): cone_answer(table, {"RA": ["0"], "DEC": ["-20"], "SR": ["0.1"]}),
        ("vizier", 12): form.answer([table]),
        ("cone", 0): cone_answer(table, {"RA": ["0"], "DEC": ["20"], "SR": ["0.1"]}),
        ("vizier", 0): nothing.answer([table]),
    }


def claims_no_rows(raw: bytes, question: Question) -> bool:
    """Whether a reply is read as whole and empty."""
    try:
        judged = judge(raw, 200, "text/xml", question)
    except ArchiveError:
        return False
    return judged.status is ReplyStatus.WHOLE and judged.n_rows == 0


def test_the_undamaged_replies_are_whole(replies, question):
    for (protocol, rows), raw in replies.items():
        judged = judge(raw, 200, "text/xml", question(protocol))
        assert (judged.status, judged.n_rows) == (ReplyStatus.WHOLE, rows)


@pytest.mark.parametrize("protocol", ["cone", "vizier"])
@pytest.mark.parametrize("rows", [12, 0])
@ROUNDS
@given(data=st.data())
def test_a_reply_cut_anywhere_is_never_read(protocol, rows, replies, question, data):
    raw = replies[protocol, rows]
    at = data.draw(st.integers(0, raw.rindex(b">")))
    with pytest.raises(MisreadError):
        judge(raw[:at], 200, "text/xml", question(protocol))


@pytest.mark.parametrize("protocol", ["cone", "vizier"])
@ROUNDS
@given(data=st.data())
def test_flipped_bytes_never_make_rows_vanish(protocol, replies, question, data):
    raw = bytearray(replies[protocol, 12])
    for _ in range(data.draw(st.integers(1, 4))):
        raw[data.draw(st.integers(0, len(raw) - 1))] ^= data.draw(st.integers(1, 255))
    assert not claims_no_rows(bytes(raw), question(protocol))


@pytest.mark.parametrize("protocol", ["cone", "vizier"])
@pytest.mark.parametrize("tag", ["VOTABLE", "RESOURCE", "TABLE", "FIELD", "DATA", "TABLEDATA", "TR", "TD", "INFO"])
@ROUNDS
@given(name=st.sampled_from(["ROW", "tr", "DESCRIPTION", "GROUP", "PARAM", "RESOURCE", "TABLE", "DATA", "TD", "TR"]))
def test_renamed_elements_never_make_rows_vanish(protocol, tag, replies, question, name):
    raw = replies[protocol, 12]
    for form in (f"<{tag}>", f"<{tag} ", f"</{tag}>"):
        raw = raw.replace(form.encode(), form.replace(tag, name).encode())
    assert not claims_no_rows(raw, question(protocol))


@pytest.mark.parametrize("protocol", ["cone", "vizier"])
@ROUNDS
@given(data=st.data())
def test_a_piece_lost_from_the_middle_never_makes_rows_vanish(protocol, replies, question, data):
    raw = replies[protocol, 12]
    begin = data.draw(st.integers(0, len(raw) - 2))
    end = data.draw(st.integers(begin + 1, min(len(raw), begin + 400)))
    assert not claims_no_rows(raw[:begin] + raw[end:], question(protocol))
