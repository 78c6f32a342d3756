"""Cells beside a table of groups: each has one, or is named with the reason."""

import pandas as pd
import pytest

from morphotone.questions.groups import grouped
from morphotone.reading.groups import parse_groups

CELLS = pd.DataFrame(
    {"file": ["a.swc", "deep/b.swc", "deep/c.swc", "other/c.swc", "d.SWC"], "R_in_MOhm": range(5)},
    index=[10, 11, 12, 13, 14],
)
AWAY = pd.DataFrame({"file": ["deep/bad.swc"], "reason": ["loop"]})


def join(*lines, header="cell,class"):
    return grouped(CELLS, parse_groups("\n".join([header, *lines]).encode(), "g.csv"), AWAY, "night/cells")


def test_every_cell_gets_its_row_whatever_its_order_and_spelling():
    found = join("d,x", "night/cells/deep/c.swc,z", "b.swc,y", "other/c,w", "a,x")
    assert found.missing == ()
    assert found.groups["class"].to_dict() == {10: "x", 11: "y", 12: "z", 13: "w", 14: "x"}
    assert found.has_group.all()
    assert list(found.groups) == ["class"]


def test_who_is_missing_is_named_with_the_reason():
    found = join("a,x", "bad,y", "c,z", "deep/bb,w", "other/c,")
    assert found.groups["class"].tolist() == ["x", "", "", "", ""]
    assert found.has_group.tolist() == [True, False, False, True, False]
    told = [(one.cell, one.line, one.reason) for one in found.missing]
    assert told == [
        ("bad", 3, "turned_away"),
        ("c", 4, "cell_ambiguous"),
        ("deep/bb", 5, "cell_unknown"),
        ("deep/b", None, "group_absent"),
        ("deep/c", None, "group_absent"),
        ("d", None, "group_absent"),
    ]
    sentences = [one.sentence for one in found.missing]
    assert "deep/bad.swc was turned away by the survey (loop)" in sentences[0]
    assert "any of 2 files (deep/c.swc, other/c.swc)" in sentences[1]
    assert sentences[2].endswith("; the nearest is deep/b")
    assert "deep/b.swc was analysed and has no row in the table of groups" in sentences[3]


def test_rows_that_say_the_same_count_as_one_and_those_that_contradict_not_at_all():
    found = join("a,x", "a.swc,x", "d,x", "d.SWC,y", "b,y", "deep/c,y", "other/c,y")
    assert found.groups["class"].tolist() == ["x", "y", "y", "y", ""]
    assert [(one.cell, one.line, one.reason) for one in found.missing] == [
        ("d", 4, "cell_twice"),
        ("d.SWC", 5, "cell_twice"),
    ]
    assert found.missing[0].sentence.startswith("lines 4, 5 say different things of one cell")


@pytest.mark.parametrize("header", ["file,class", "cell,class,file"])
def test_the_cell_column_goes_before_the_file_column(header):
    found = join("a,x,nobody", header=header) if header.endswith("file") else join("a,x", header=header)
    assert found.has_group.tolist() == [True, False, False, False, False]


def test_a_survey_that_turned_nothing_away():
    found = grouped(CELLS.head(1), parse_groups(b"cell\na\n", "g.csv"))
    assert found.has_group.tolist() == [True]
    assert found.groups.shape == (1, 0)
