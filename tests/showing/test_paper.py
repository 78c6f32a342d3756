"""Tables of a paper: what stands where, in Markdown and LaTeX."""

import re

import numpy as np
import pandas as pd
import pytest

from morphotone.questions.comparisons import comparisons
from morphotone.questions.groups import grouped
from morphotone.questions.summaries import Bootstrap, summary
from morphotone.questions.units import units
from morphotone.reading.groups import parse_groups
from morphotone.showing.paper import WIDEST, paper_tables
from morphotone.showing.typeset import tables_latex, tables_markdown

RNG = np.random.default_rng(3)
COLUMNS = ["R_in_MOhm", "tips", "lambda_um"]


def made(groups, **options):
    """Return units, summary, comparisons of made-up cells, by how many there are of each group."""
    names = [f"{label}, {i}" for label, count in groups.items() for i in range(count)]
    cells = pd.DataFrame(
        {
            "file": [f"{i}.swc" for i in range(len(names))],
            "R_in_MOhm": RNG.normal(150, 20, len(names)),
            "tips": RNG.integers(20, 40, len(names)).astype(float),
            "lambda_um": 300.0,
        }
    )
    cells.loc[0, "tips"] = np.nan
    lines = [f'{i},"{name.rpartition(", ")[0]}",{i % 2}' for i, name in enumerate(names)]
    table = parse_groups("\n".join(["cell,class,animal", *lines]).encode(), "g.csv")
    found = units(cells, grouped(cells, table), ["class"], COLUMNS, **options)
    return (
        found,
        summary(found.table, found.by, found.columns, Bootstrap(resamples=99)),
        comparisons(found.table, found.by, found.columns),
    )


def test_the_overview_has_quantities_down_and_groups_across():
    found, numbers, tests = made({"small": 5, "great": 7})
    overview, details, compared = paper_tables(found, numbers, tests)
    assert overview.header == ("", "small (‹n› = 5)", "great (‹n› = 7)", "‹p›", "Effect")
    assert [row[0] for row in overview.rows] == ["‹R_in› (MΩ)", "Tips", "‹λ› (µm)"]
    assert overview.rows[1][1].endswith(" (‹n› = 4)")  # one cell has no count of tips
    assert overview.rows[2] == ("‹λ› (µm)", "300 ± 0", "300 ± 0", "–", "–")
    assert "‹p›: Mann–Whitney test, corrected by Holm's method; effect: Cliff's ‹δ›" in overview.caption
    assert details.header[:3] == ("", "class", "‹n›")
    assert [row[:3] for row in details.rows[:2]] == [("‹R_in› (MΩ)", "small", "5"), ("", "great", "7")]
    assert [row[1] for row in compared.rows] == ["small – great", "small – great", "all groups"]
    assert compared.notes == ("All values equal: no test.",)
    for table in (overview, details, compared):
        assert {len(row) for row in table.rows} == {len(table.header)}


def test_one_group_has_no_tests():
    overview, details = paper_tables(*made({"only": 4}))
    assert overview.header == ("", "only (‹n› = 4)")
    assert "‹p›" not in overview.caption
    assert len(details.rows) == 3


def test_many_groups_have_no_overview_and_their_pairs_stand_in_the_csv():
    groups = {f"group {i}": 5 for i in range(WIDEST + 1)}
    details, compared = paper_tables(*made(groups))
    assert details.name == "details"
    assert [row[1] for row in compared.rows] == ["all groups"] * 3
    assert "The pairs of groups stand in comparisons.csv." in compared.notes
    assert {row[2].split(" ")[0] for row in compared.rows} == {"‹H›", "–"}


def test_means_of_animals_are_said_to_be_that():
    overview, *_ = paper_tables(*made({"small": 4, "great": 4}, mean_over="animal"))
    assert overview.caption.startswith("Electrotonic measures by class: mean ± SD of the means of animals.")
    assert overview.header[1] == "small (‹n› = 2)"


def test_names_with_markup_are_names():
    name = "a|b_ <i>50 %</i> & [x]*"
    tables = paper_tables(*made({name: 3, "other": 3}))
    in_markdown, in_latex = tables_markdown(tables), tables_latex(tables)
    assert r"| a\|b\_ \<i\>50 %\</i\> \& \[x\]\* (n = 3) |" in in_markdown
    escaped = r"a\textbar{}b\_ \textless{}i\textgreater{}50 \%\textless{}/i\textgreater{} \& {[}x{]}{*}"
    assert f"\\quad {escaped} & 3 &" in in_latex
    assert name not in in_markdown
    assert name not in in_latex


@pytest.mark.parametrize("groups", [{"a": 3}, {"a": 3, "b": 4, "c": 5}, {f"g{i}": 5 for i in range(17)}])
def test_the_rows_of_a_table_have_one_number_of_fields(groups):
    tables = paper_tables(*made(groups))
    lines = tables_markdown(tables).splitlines()
    for table in tables:
        bars = {line.count("|") for line in lines if line.startswith("|")}
        assert len(table.header) + 1 in bars
    for block in tables_latex(tables).split("\\toprule")[1:]:
        body = block.partition("\\bottomrule")[0]
        rows = [line for line in body.splitlines() if line.endswith("\\\\") and "\\multicolumn" not in line]
        assert len({line.count("&") for line in rows}) == 1


def test_latex_opens_and_closes_what_it_opens():
    text = tables_latex(paper_tables(*made({f"g{i}": 5 for i in range(17)})))
    assert "\\begin{longtable}{lrrrrrr}" in text  # so many rows do not stand on one page
    for name in ("table", "tabular", "longtable"):
        assert text.count(f"\\begin{{{name}}}") == text.count(f"\\end{{{name}}}")
    assert text.count("{") == text.count("}")
    assert text.count("\\label{") == len(re.findall(r"\\begin\{(?:table|longtable)\}", text))
    head = text.partition("\\endfirsthead")[2].partition("\\endhead")[0]
    assert "\\caption" not in head  # which stands on the first page alone
    assert "R_in" not in text


def test_where_nothing_can_be_tested_no_column_or_table_stands_empty():
    found, numbers, tests = made({"a": 3, "b": 1})
    tests = comparisons(found.table, found.by, found.columns)
    assert len(tests)
    assert tests["p"].isna().all()
    overview, details = paper_tables(found, numbers, tests)
    assert overview.header == ("", "a (‹n› = 3)", "b (‹n› = 1)")
    assert "‹p›" not in overview.caption
    assert any(note.startswith("Not tested: fewer than two groups to test") for note in details.notes)
