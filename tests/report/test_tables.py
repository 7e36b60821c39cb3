import math

import numpy as np
import pandas as pd
import pytest
from hypothesis import given
from hypothesis import strategies as st
from pandas.testing import assert_frame_equal

from yieldsim.errors import InputError
from yieldsim.report import tables

HOSTILE = [
    "=1+1",
    "+49",
    "-2",
    "@SUM(A1)",
    "\tx",
    "＝1",
    "'quoted",
    "a,b",
    'say "x"',
    "two\nlines",
    "NA",
    "nan",
    "",
    "1.12",
    "سلام",
    "🌞",
]


def test_a_table_comes_back_as_it_was_written(tmp_path, full):
    files = tables.write_tables(full, tmp_path)
    assert {file.name for file in files} == {name for name, _ in full.tables()}
    for name, table in full.tables():
        back = tables.read_table(tmp_path / name)
        assert list(back.columns) == list(table.columns)
        for column in table.columns:
            if column == "gap_ev":  # text in some tables; a lone gap reads as a number
                assert [float(a) for a in back[column]] == [float(b) for b in table[column]]
            elif tables.is_text(column, table):
                assert list(back[column]) == list(table[column])
            else:
                # 12 digits are written: half a unit in the last is 5e-12 of the value
                np.testing.assert_allclose(back[column], table[column].astype(float), rtol=5e-12, atol=0)


def test_the_same_numbers_give_the_same_bytes_with_unix_line_ends(tmp_path, study):
    one, two = tmp_path / "one", tmp_path / "two"
    for folder in (one, two):
        tables.write_tables(study, folder)
    for name, _ in study.tables():
        content = (one / name).read_bytes()
        assert content == (two / name).read_bytes()
        assert b"\r" not in content
        assert content.endswith(b"\n")


def test_nothing_is_left_beside_the_files(tmp_path, study):
    tables.write_tables(study, tmp_path)
    assert {path.name for path in tmp_path.iterdir()} == {name for name, _ in study.tables()}


def test_skipped_tables_are_not_written(tmp_path, study):
    tables.write_tables(study, tmp_path, {"monthly.csv"})
    assert not (tmp_path / "monthly.csv").exists()
    assert (tmp_path / "annual.csv").exists()


@pytest.mark.parametrize(
    ("value", "text"),
    [(1 / 3, "0.333333333333"), (-0.0, "0"), (math.nan, ""), (None, ""), (8760.0, "8760"), (3, "3"), (-1.5, "-1.5"),
     (True, "1"), (1.23456789012345e-7, "1.23456789012e-07"), (np.int64(7), "7")],
)  # fmt: skip
def test_numbers_carry_twelve_digits(value, text):
    assert tables.format_number(value) == text


@pytest.mark.parametrize("name", HOSTILE)
def test_no_name_runs_as_a_formula_and_each_comes_back(tmp_path, name):
    table = pd.DataFrame({"site": [name, "b"], "energy_kwh_m2": [1.0, 2.0]})
    text = tables.to_csv(table)
    cell = text.split("\n", 1)[1].lstrip('"')
    assert not cell.startswith(("=", "+", "-", "@", "\t", "\r", "＝", "＋", "－", "＠"))
    (tmp_path / "t.csv").write_bytes(text.encode())
    assert list(tables.read_table(tmp_path / "t.csv")["site"]) == [name, "b"]


@given(st.text(alphabet=st.characters(exclude_categories=["Cs"]), max_size=20))
def test_guarding_a_text_can_be_undone(text):
    assert tables.plain_text(tables.safe_text(text)) == text


def test_half_a_character_does_not_stop_the_writing():
    assert "?" in tables.to_csv(pd.DataFrame({"site": ["bad \ud800"]}))


def test_a_stack_of_gaps_stays_text(tmp_path):
    table = pd.DataFrame({"absorber": ["tandem", "one"], "gap_ev": ["1.68/1.12", "1.12"]})
    (tmp_path / "t.csv").write_text(tables.to_csv(table))
    assert_frame_equal(tables.read_table(tmp_path / "t.csv"), table, check_dtype=False)


@pytest.mark.parametrize(
    ("content", "found"),
    [(b"", "empty"), (b"a,b\n1\n", "1 cells"), (b"a\n\xff\xfe\n", "not a table"), (b'a\n"1\n', None)],
)
def test_what_is_no_table_is_refused_by_name(tmp_path, content, found):
    path = tmp_path / "t.csv"
    path.write_bytes(content)
    if found is None:  # an open quote at the end of the file is taken as closed there
        assert len(tables.read_table(path)) == 1
        return
    with pytest.raises(InputError, match=found) as error:
        tables.read_table(path)
    assert str(path) in str(error.value)


def test_every_broken_row_is_named(tmp_path):
    path = tmp_path / "t.csv"
    path.write_text("a,b\n1\n1,2\n1,2,3\n")
    with pytest.raises(InputError) as error:
        tables.read_table(path)
    assert [problem.line for problem in error.value.problems] == [2, 4]
