"""CSV tables of the user's, and that they come back from our own writer as they went."""

import pandas as pd
import pytest
from hypothesis import given
from hypothesis import strategies as st

from planner.errors import InputError
from planner.export.contacts import neutral, table_csv
from planner.mission.table import read_table

COLUMNS = ("name", "value")


def written(tmp_path, content):
    path = tmp_path / "table.csv"
    path.write_bytes(content if isinstance(content, bytes) else content.encode())
    return path


@pytest.mark.parametrize(
    ("content", "message"),
    [
        ("name;value\na;1,5\n", "line 1: columns must be separated by commas, got semicolons;"
         " save as comma-separated CSV with decimal points"),
        ("name,value\na,1,5\n", "line 2: must have 2 cells, got 3; are there decimal commas?"),
        ("name,value\na\n", "line 2: must have 2 cells, got 1"),
        ("name,valu\na,1\n", "line 1: column 'value' is required; did you mean \"valu\"?"),
        ("name,value,name\na,1,b\n", "line 1: column names must differ, got ['name', 'value', 'name']"),
        ('name,value\n"a,1\n', "line 2: must be CSV: unexpected end of data"),
        ('name,value\n"a"b,1\n', "line 2: must be CSV: ',' expected after '\"'"),
        (b"name,value\n\xe9,1\n", "must be UTF-8 text, byte 11 is 0xe9"),
        ("name\tvalue\n", "line 1: columns must be separated by commas, got tabs;"
         " save as comma-separated CSV with decimal points"),
        ("name,v\x1balue\n", "line 1: column 'value' is required"),
    ],
)  # fmt: skip
def test_what_is_no_such_table(tmp_path, content, message):
    path = written(tmp_path, content)
    with pytest.raises(InputError) as caught:
        read_table(path, COLUMNS)
    assert caught.value.faults[0] == f"{path}: {message}"


def test_more_columns_than_any_table_has(tmp_path):
    path = written(tmp_path, "," * 5000)
    with pytest.raises(InputError) as caught:
        read_table(path, COLUMNS)
    assert str(caught.value) == f"{path}: line 1: column 'name' is required\n{path}: line 1: column 'value' is required"
    path = written(tmp_path, "a," * 5000)
    with pytest.raises(InputError) as caught:
        read_table(path, COLUMNS)
    assert str(caught.value) == f"{path}: line 1: must have at most 1000 columns, got 5001"


def test_an_empty_file_lacks_every_column(tmp_path):
    path = written(tmp_path, "")
    with pytest.raises(InputError) as caught:
        read_table(path, COLUMNS)
    assert caught.value.faults == tuple(f"{path}: line 1: column {name!r} is required" for name in COLUMNS)


@pytest.mark.parametrize("end", ["\n", "\r\n"])
def test_byte_order_mark_line_ends_blank_rows_and_further_columns(tmp_path, end):
    path = written(tmp_path, "\ufeff" + end.join(["more, value ,name", "x,1,a", ",,", "", "y,2,b"]) + end)
    assert [(line, row["name"], row["value"]) for line, row in read_table(path, COLUMNS)] == [
        (2, "a", "1"), (5, "b", "2"),
    ]  # fmt: skip


@pytest.mark.parametrize(
    ("cell", "read"),
    [("'=1+1", "=1+1"), ("''=1", "'=1"), ("'quoted'", "'quoted'"), ("'", "'"), (" a ", " a "), ("-3", "-3")],
)
def test_one_apostrophe_of_the_writers_is_undone_and_nothing_else(tmp_path, cell, read):
    path = written(tmp_path, f"name,value\n{cell},1\n")
    assert read_table(path, COLUMNS)[0][1]["name"] == read


@given(st.text(st.characters(codec="utf-8", exclude_categories=("Cc", "Cs", "Zl", "Zp")), min_size=1, max_size=20))
def test_every_name_comes_back_from_the_file_it_was_written_to(tmp_path_factory, name):
    path = tmp_path_factory.getbasetemp() / "names.csv"
    path.write_bytes(table_csv(pd.DataFrame({"name": [name], "value": [1]})))
    if name.strip():
        assert read_table(path, COLUMNS)[0][1] == {"name": name, "value": "1"}


@given(st.text("'=+-@\t\ra", max_size=6))
def test_neutral_text_comes_back(tmp_path_factory, text):
    path = tmp_path_factory.getbasetemp() / "neutral.csv"
    path.write_bytes(b"name,value\n" + f'"{neutral(text)}",1\n'.encode())
    assert read_table(path, COLUMNS)[0][1]["name"] == text
