"""Cells of a study as units: groups in the author's order, animals, and what cannot be used."""

import numpy as np
import pandas as pd
import pytest

from morphotone.errors import MorphotoneError
from morphotone.questions.groups import grouped
from morphotone.questions.units import units
from morphotone.reading.groups import parse_groups

CELLS = pd.DataFrame(
    {
        "file": [f"{name}.swc" for name in "abcdef"],
        "grade": "sound",
        "R_in_MOhm": [100.0, 200.0, 300.0, 400.0, 500.0, 600.0],
        "X": [1.0, 2.0, np.nan, 4.0, 5.0, 6.0],
    }
)
LINES = ["a,small,Ada", "b,small,Ada", "c,small,Bob", "d,great,Bob", "e,great,Cy", "f,great,Cy"]


def made(*by, lines=LINES, header="cell,class,animal", columns=("R_in_MOhm", "X"), cells=CELLS, **options):
    table = parse_groups("\n".join([header, *lines]).encode(), "g.csv")
    return units(cells, grouped(cells, table), by or ["class"], columns, **options)


def test_groups_stand_in_the_order_of_the_authors_table():
    found = made(lines=LINES[::-1])
    assert found.table["class"].cat.categories.tolist() == ["great", "small"]
    assert found.files == tuple(CELLS["file"])
    assert found.table["R_in_MOhm"].tolist() == CELLS["R_in_MOhm"].tolist()


def test_cells_of_one_animal_are_doubted():
    found = made()
    assert (found.source, found.averaged, found.nested) == ("animal", False, True)
    first, second = found.doubts
    assert first.startswith("6 cells come from 3 animals; cells of one source are not independent")
    assert "--mean-over animal" in first
    assert (
        second
        == "1 of 3 animals have cells in more than one group, and the tests take groups to be independent"
    )


def test_the_animals_mean_may_be_the_unit():
    found = made(mean_over="animal")
    assert not found.nested
    assert found.doubts == made().doubts[1:]
    rows = found.table[["class", "sources", "cells", "R_in_MOhm", "X"]].to_numpy().tolist()
    assert rows[0] == ["small", ("Ada",), 2, 150.0, 1.5]
    assert rows[1][:4] == ["small", ("Bob",), 1, 300.0]
    assert rows[2:] == [["great", ("Bob",), 1, 400.0, 4.0], ["great", ("Cy",), 2, 550.0, 5.5]]
    assert found.files == tuple(CELLS["file"])


def test_any_column_may_name_the_animal():
    header = "cell,class,litter"
    assert made(header=header).source is None
    assert made(header=header).doubts == []
    assert (
        made(header=header, nested="litter")
        .doubts[0]
        .startswith("6 cells come from 3 sources (column litter);")
    )


def test_one_cell_an_animal_is_not_doubted():
    lines = [f"{cell},{'small' if cell < 'd' else 'great'},{cell}" for cell in "abcdef"]
    assert made(lines=lines).doubts == []


def test_a_column_that_makes_the_groups_is_no_source():
    assert made("animal").source is None


def test_cells_without_a_group_are_named_and_left_out():
    found = made("class", "animal", lines=["a,small,Ada", "b,,Ada", "c,small,", "x,small,Ada"])
    assert found.files == ("a.swc",)
    told = [(one.cell, one.line, one.reason) for one in found.missing]
    assert told == [
        ("b", 3, "group_empty"),
        ("c", 4, "group_empty"),
        ("x", 5, "cell_unknown"),
        *((name, None, "group_absent") for name in "def"),
    ]
    assert "b.swc has an empty field in column 'class'" in found.missing[0].sentence


def test_an_animal_must_be_named_only_where_its_mean_is_taken():
    lines = ["a,small,Ada", "b,small,"]
    assert len(made(lines=lines).files) == 2
    assert made(lines=lines).sources == 1
    assert len(made(lines=lines, mean_over="animal").files) == 1


def test_what_differs_by_rounding_is_tied():
    cells = CELLS.assign(X=[0.3, 0.1 + 0.2, 0.3 * (1 + 1e-11), 5.0, 5.0, np.nan])
    values = made(cells=cells).table["X"].tolist()
    assert values[0] == values[1] != values[2]
    assert np.isnan(values[5])


def test_a_groups_column_with_a_name_of_ours_is_marked():
    found = made("n", "R_in_MOhm", lines=["a,x,y"], header="cell,n,R_in_MOhm")
    assert found.by == ("n_as_given", "R_in_MOhm_as_given")
    assert found.table["R_in_MOhm"].tolist() == [100.0]


def test_a_survey_without_cells_is_refused():
    with pytest.raises(MorphotoneError, match=r"analysed no cell; its turned_away\.csv says why"):
        made(cells=CELLS[:0])


@pytest.mark.parametrize(
    ("by", "options", "match"),
    [
        (["clas"], {}, "no column 'clas'; the nearest is class"),
        (["zzz"], {}, "no column 'zzz'; it has class, animal"),
        (["class", "class"], {}, "column 'class' is named twice"),
        (["class"], {"nested": "litter"}, "the table of groups has no column 'litter'"),
        (["class"], {"mean_over": "class"}, "'class' cannot both make the groups and lie within them"),
        (["class"], {"columns": ["R_in"]}, "the survey has no column 'R_in'; the nearest is R_in_MOhm"),
        (["class"], {"columns": ["R_in_MOhm", "R_in_MOhm"]}, "column 'R_in_MOhm' is named twice"),
        (["class"], {"columns": ["grade"]}, "column 'grade' holds 'sound', expected numbers"),
        (["class"], {"lines": ["x,y,z"]}, r"no analysed cell has a group \(6 cells, 1 rows of groups\)"),
    ],
)
def test_what_cannot_be_used_is_refused(by, options, match):
    with pytest.raises(MorphotoneError, match=match):
        made(*by, **options)
