"""Columns of numbers as real files write them."""

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from yieldsim.config import tables
from yieldsim.config.tables import parse_table, read_table
from yieldsim.errors import InputError

EXPECTED = np.array([[300.5, 0.42], [310.0, 0.5], [320.0, -1e-3]])


@pytest.mark.parametrize(
    "text",
    [
        "300.5,0.42\n310,0.5\n320,-1e-3\n",
        "wavelength (nm),EQE\n300.5,0.42\n310,0.5\n320,-1e-3\n",
        "300,5;0,42\n310;0,5\n320;-1e-3\n",
        "300,5\t0,42\n310\t0,5\n320\t-1E-3\n",
        "  300.5   0.42\n  310  .5\n  320  -0.001",
        "300,5 0,42\n310 0,5\n320 -0,001\n",
        "# made yesterday\r\nλ;QE\r\n300.5;0.42\r\n\r\n% half way\r\n310;0.5;noted\r\n320;-1e-3;\r\n",
        '"nm","QE"\n"300.5","0.42"\n"310","0.5"\n"320","-0.001"\n',
        "Instrument 7, serial 3\nlamp: xenon\nnm, %\n300.5, 0.42%\n310, 0.5 \n320, -1e-3\n",
    ],
    ids=["plain", "head", "decimal comma", "tabs", "blanks", "blanks and commas", "comments", "quotes", "instrument"],
)
def test_one_table_in_many_hands(text):
    table = parse_table(text, "t.csv")
    assert np.array_equal(table.values, EXPECTED)
    assert table.skipped == 0


def test_the_head_is_kept_for_its_units():
    assert parse_table("nm, EQE (%)\n300,1\n310,2", "t").head == ("nm", "EQE (%)")
    assert parse_table("300,1\n310,2", "t").head == ()


def test_rows_are_lines_of_the_file():
    table = parse_table("# note\nnm;y\n\n300;1\n310;2", "t.csv")
    assert list(table.rows) == [4, 5]
    assert str(table.problem(1, "wavelength", "x", "y")) == "t.csv:5: wavelength: found x; allowed: y"


def test_rows_without_a_value_are_left_out_and_counted():
    table = parse_table("nm,y\n300,1\n310,\n320,NaN\n330\n340,2\n", "t")
    assert np.array_equal(table.values, [[300, 1], [340, 2]])
    assert list(table.rows) == [2, 6]
    assert table.skipped == 3


def test_further_columns_are_taken_where_they_are():
    text = "nm,alpha,n,by\n300,1,3.5,me\n310,2,3.4,you\n"
    assert parse_table(text, "t").values.shape == (2, 2)
    assert parse_table(text, "t", extra=1).values.shape == (2, 3)
    assert parse_table(text, "t", extra=2).values.shape == (2, 3)  # `me` is no number
    assert parse_table("1,2\n3,4", "t", extra=1).values.shape == (2, 2)


def test_a_number_beyond_all_bounds_is_no_number():
    with pytest.raises(InputError, match="'1e999'"):
        parse_table("1,2\n3,1e999\n4,5", "t")


def test_text_among_numbers_is_named_by_its_row_all_at_once():
    with pytest.raises(InputError) as caught:
        parse_table("nm,y\n300,1\n310,high\n320,2\nend of file,\n", "t.csv")
    assert [(problem.line, problem.found) for problem in caught.value.problems] == [(3, "'high'"), (5, "'end of file'")]


@pytest.mark.parametrize(
    ("text", "found"),
    [
        ("", "nothing"),
        ("Dear all,\nsee you tomorrow.\n", "no row of numbers"),
        ("300\n310\n", "no row of numbers"),
        ("300,1\n", "1 rows of numbers"),
        ("\n" + "x\n" * 300 + "300,1\n310,2\n", "no row of numbers"),
    ],
)
def test_what_is_no_table_is_refused(text, found):
    with pytest.raises(InputError) as caught:
        parse_table(text, "t.csv")
    assert caught.value.problems[0].found == found


def test_too_many_rows(monkeypatch):
    monkeypatch.setattr(tables, "MAX_ROWS", 10)
    with pytest.raises(InputError, match="at most 10"):
        parse_table("1,2\n" * (11 + tables.MAX_HEAD), "t")


@pytest.mark.parametrize("encoding", ["utf-8", "utf-8-sig", "cp1252", "utf-16"])
def test_encodings_of_instruments(tmp_path, encoding):
    file = tmp_path / "eqe.csv"
    file.write_bytes("µm;QE\n0,3;1\n0,4;2\n".encode(encoding))
    table = read_table(file, "eqe.csv")
    assert table.head == ("µm", "QE")
    assert np.array_equal(table.values, [[0.3, 1], [0.4, 2]])


@pytest.mark.parametrize("content", [b"\x00\x01\x02\x03", b"1,2\n3,4\n\x00"])
def test_binary_is_refused(tmp_path, content):
    file = tmp_path / "x.csv"
    file.write_bytes(content)
    with pytest.raises(InputError, match="not text"):
        read_table(file, "x.csv")


@given(st.binary(max_size=400))
@settings(deadline=None)
def test_any_bytes_are_a_table_or_refused(tmp_path_factory, content):
    file = tmp_path_factory.getbasetemp() / "fuzzed.csv"
    file.write_bytes(content)
    try:
        table = read_table(file, "fuzzed.csv")
    except InputError as error:
        assert "fuzzed.csv" in str(error)  # noqa: PT017 - both ways out are right
    else:
        assert np.all(np.isfinite(table.values))
