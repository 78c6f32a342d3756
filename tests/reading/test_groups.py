"""A table of groups: text by column with its lines, and each way it can be no such table."""

import pytest

from morphotone.errors import ReadingError
from morphotone.reading.groups import parse_groups, read_groups
from tests.commands.folders import STUDY


def test_text_is_kept_as_written_but_for_white_space_around_it():
    text = '\ufeff cell ,class,age\r\n\r\na, NA ,007\r\n"b, c",spar\r\n,,\r\n'
    table = parse_groups(text.encode(), "g.csv")
    assert table.columns.tolist() == ["cell", "class", "age"]
    assert table.to_numpy().tolist() == [["a", "NA", "007"], ["b, c", "spar", ""]]
    assert (table.index.name, table.index.tolist()) == ("line", [3, 4])


def test_the_cell_may_be_named_by_its_file():
    assert parse_groups(b"file,class\na.swc,spar\n", "g.csv")["file"].tolist() == ["a.swc"]


@pytest.mark.parametrize(
    ("data", "reason", "match"),
    [
        (b"", "empty", "g.csv: read no line with text"),
        (b"cell,class\n\xff,a\n", "not_utf8", "g.csv: line 2: read the byte 0xff"),
        (b'cell,class\n"a,b\n', "quotes", "g.csv: line 2: .* quotation marks in pairs"),
        (b"cell;class\na;b\n", "columns_missing", "line 1: read the columns 'cell;class', expected"),
        (b"cell,class,class\na,b,c\n", "columns_twice", "rename the column class"),
        (b"cell,class\na,b,c\n", "fields_extra", "line 2: read more than 2 fields, expected 2"),
    ],
)
def test_what_is_no_such_table_is_refused(data, reason, match):
    with pytest.raises(ReadingError, match=match) as refusal:
        parse_groups(data, "g.csv")
    assert refusal.value.reason == reason


def test_an_absent_file_is_refused(tmp_path):
    with pytest.raises(ReadingError, match=r"gone\.csv"):
        read_groups(tmp_path / "gone.csv")


def test_the_sample_study_is_read():
    table = read_groups(STUDY / "cells.csv")
    assert len(table) == 27
    assert table["class"].value_counts().to_dict() == {"spar": 9, "tether": 9, "bramble": 9}
