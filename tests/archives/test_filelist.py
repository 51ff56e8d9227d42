"""Lists as files: exact ids, text kept, units stated by the catalog file, cuts noticed."""

from __future__ import annotations

import pytest

from xmatch.archives.filelist import read_list
from xmatch.errors import MisreadError

CSV = b'\xef\xbb\xbfName,id,RA,Flux,Note\n"A, b",9007199254740993,10.5,1.5e-12,x\nC,12,11,-,\n'


def test_numbers_text_ids_and_missing_values(question):
    columns = read_list(CSV, question("file csv", units={"RA": "deg"}))
    assert columns["Name"].values.tolist() == ["A, b", "C"]
    assert columns["id"].values.tolist() == [2**53 + 1, 12]
    assert columns["RA"].values.tolist() == [10.5, 11.0]
    assert columns["RA"].unit == "deg"
    assert columns["Flux"].missing.tolist() == [False, True]
    assert columns["Note"].missing.tolist() == [False, True]


def test_text_that_looks_like_numbers_in_part_stays_text(question):
    columns = read_list(b"a,b\n12 34 56,<0.1\n01 02 03,0.2\n", question("file csv"))
    assert columns["a"].values.tolist() == ["12 34 56", "01 02 03"]
    assert columns["b"].values.tolist() == ["<0.1", "0.2"]


@pytest.mark.parametrize(
    ("raw", "words"),
    [
        (b"a,b\n1,2\n3", "row 3 of the list has 1 cells where 2"),
        (b'a,b\n1,"2', "no CSV"),
        (b"just text", "no head with column names"),
        (b"", "no head with column names"),
        (b"a,b\n1,\xff\n", "not UTF-8"),
    ],
)
def test_what_is_no_whole_csv_is_misread(question, raw, words):
    with pytest.raises(MisreadError, match=words):
        read_list(raw, question("file csv"))


@pytest.mark.parametrize("form", ["fits", "ecsv"])
def test_what_is_no_table_of_its_format_is_misread(question, form):
    with pytest.raises(MisreadError, match=f"cannot be read as {form}"):
        read_list(b"SIMPLE  =                    T", question(f"file {form}"))


def test_two_columns_of_one_name_stay_two(question):
    columns = read_list(b"a,a\n1,2\n", question("file csv"))
    assert {name: column.values.tolist() for name, column in columns.items()} == {"a": [1], "a (2)": [2]}
