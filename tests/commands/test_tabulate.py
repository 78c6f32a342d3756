"""`morphotone tabulate` from its command line and from Python: files, words on the screen, refusals."""

import csv
import json
import shutil

import pandas as pd
import pytest

import morphotone
from morphotone.commands import tabulate as command
from morphotone.errors import MorphotoneError, ReadingError, ResultsError
from morphotone.questions.comparisons import COMPARISON_COLUMNS
from morphotone.questions.summaries import SUMMARY_COLUMNS
from morphotone.questions.units import REPORTED
from tests.commands.folders import DOUBTFUL, SOUND, STUDY, UNFIT, called, examples, fill, rows, run

GROUPS = STUDY / "cells.csv"
FEW = ["--columns", "R_in_MOhm", "lambda_um"]
FILES = {
    *("summary.csv", "comparisons.csv", "missing.csv", "tables.md", "tables.tex"),
    *("methods.md", "methods.tex", "references.bib", "run.json"),
}


@pytest.fixture(scope="module")
def study(tmp_path_factory):
    """The sample study's 27 cells, surveyed."""
    folder = tmp_path_factory.mktemp("study")
    for path in STUDY.glob("*.swc"):
        shutil.copy(path, folder)
    assumptions = morphotone.Assumptions.from_toml((STUDY / "assumptions.toml").read_text(encoding="utf-8"))
    morphotone.survey(folder, folder / "results", assumptions=assumptions)
    return folder / "results"


def groups_file(tmp_path, lines):
    path = tmp_path / "groups.csv"
    path.write_text("\n".join(["cell,class,animal", *lines]) + "\n", encoding="utf-8")
    return path


def test_the_study_is_tabulated_and_written(study, tmp_path, capsys):
    into = tmp_path / "tables"
    assert run("tabulate", study, "--groups", GROUPS, "--by", "class", "--into", into) == 0
    shown = capsys.readouterr()
    assert shown.out == f"27 cells in 3 groups by class\ntables: {into}\n"
    assert shown.err.startswith("note: 27 cells come from 4 animals;")
    assert {path.name for path in into.iterdir()} == FILES
    numbers = rows(into / "summary.csv")
    assert list(numbers[0]) == ["class", *SUMMARY_COLUMNS]
    assert [row["column"] for row in numbers[::3]] == list(REPORTED)
    assert [row["class"] for row in numbers[:3]] == ["spar", "tether", "bramble"]
    tests = rows(into / "comparisons.csv")
    assert list(tests[0]) == list(COMPARISON_COLUMNS)
    assert len(tests) == 10 * (1 + 3)
    assert rows(into / "missing.csv") == []


def test_the_numbers_are_those_of_the_survey_in_full(study, tmp_path):
    into = tmp_path / "tables"
    run("tabulate", study, "--groups", GROUPS, "--by", "class", "--columns", "R_in_MOhm", "--into", into)
    cells = pd.read_csv(study / "cells.csv")
    spar = cells.loc[cells["cell"].str.startswith("spar"), "R_in_MOhm"]
    (row,) = [row for row in rows(into / "summary.csv") if row["class"] == "spar"]
    assert float(row["mean"]) == pytest.approx(spar.mean(), rel=1e-14)
    assert float(row["sd"]) == pytest.approx(spar.std(), rel=1e-12)
    assert float(row["median"]) == spar.median()
    assert (row["n"], row["cells"], row["sources"]) == ("9", "9", "4")


def test_the_same_call_writes_the_same_bytes(study, tmp_path):
    for name in ("first", "second"):
        run("tabulate", study, "--groups", GROUPS, "--by", "class", *FEW, "--into", tmp_path / name)
    for name in FILES - {"run.json"}:
        assert (tmp_path / "first" / name).read_bytes() == (tmp_path / "second" / name).read_bytes()


def test_the_record_says_what_was_asked_and_drawn(study, tmp_path):
    words = ["--by", "class", "layer", *FEW, "--family", "quantity"]
    run("tabulate", study, "--groups", GROUPS, *words, "--into", tmp_path)
    record = json.loads((tmp_path / "run.json").read_text(encoding="utf-8"))
    assert record["by"] == ["class", "layer"]
    assert record["columns"] == FEW[1:]
    assert (record["source"], record["mean_over"], record["family"]) == ("animal", None, "quantity")
    assert record["bootstrap"] == {"level": 0.95, "resamples": 9999, "seed": 1}
    assert record["counts"] == {"cells": 27, "used": 27, "missing": 0}
    assert set(record["inputs_sha256"]) == {"run.json", "cells.csv", str(GROUPS)}


def test_methods_cite_what_the_bibliography_holds(study, tmp_path):
    run("tabulate", study, "--groups", GROUPS, "--by", "class", *FEW, "--into", tmp_path)
    methods = (tmp_path / "methods.md").read_text(encoding="utf-8")
    assert "R_m = 15,000 Ω cm²" in methods
    assert "1.5 for basal dendrites and 1.8 for apical dendrites" in methods
    assert "All results hold under the passive model" in methods
    assert "- 27 cells come from 4 animals" in methods
    cited = {key for part in methods.split("[@")[1:] for key in part.partition("]")[0].split("; @")}
    held = (tmp_path / "references.bib").read_text(encoding="utf-8")
    assert {line.split("{")[1].rstrip(",") for line in held.splitlines() if line.startswith("@")} == cited
    in_latex = (tmp_path / "methods.tex").read_text(encoding="utf-8")
    assert in_latex.startswith("% For the authors, not for print:\n% - 27 cells come")


def test_cells_in_one_table_only_are_named(study, tmp_path, capsys):
    lines = ["spar_01,a,x", "spar_02.swc,a,x", "spar_03,b,y", "spar_04,,y", "nobody,b,y", "tether_01,b,y"]
    lines += ["tether_01,a,y"]
    into = tmp_path / "tables"
    assert (
        run("tabulate", study, "--groups", groups_file(tmp_path, lines), "--by", "class", "--into", into) == 1
    )
    out = capsys.readouterr().out
    assert "3 cells in 2 groups by class\n" in out
    assert "not in the tables: 26 (" in out
    assert "  spar_04.swc has an empty field in column 'class'" in out
    assert out.endswith("  …\n")
    missing = rows(into / "missing.csv")
    told = {row["cell"]: (row["line"], row["reason"]) for row in missing}
    assert len(missing) == 26
    assert told["nobody"] == ("6", "cell_unknown")
    assert told["spar_04"] == ("5", "group_empty")
    assert told["tether_01"] == ("8", "cell_twice")
    assert told["bramble_09"] == ("", "group_absent")


def test_tables_lie_beside_the_survey_unless_told_otherwise(study):
    assert run("tabulate", study, "--groups", GROUPS, "--by", "class", *FEW) == 0
    assert {path.name for path in (study / "paper").iterdir()} == FILES


def test_a_spreadsheet_runs_no_groups_name(study, tmp_path):
    lines = [f"spar_0{i},=1+{i % 2},x" for i in range(1, 7)]
    run(
        "tabulate", study, "--groups", groups_file(tmp_path, lines), "--by", "class", *FEW, "--into", tmp_path
    )
    assert {row["class"] for row in rows(tmp_path / "summary.csv")} == {"'=1+0", "'=1+1"}
    for name in ("summary", "comparisons", "missing"):
        with (tmp_path / f"{name}.csv").open(encoding="utf-8", newline="") as stream:
            assert not any(cell.startswith(("=", "+", "@")) for row in csv.reader(stream) for cell in row)


@pytest.mark.parametrize(
    ("words", "sentence"),
    [
        (["--by", "clas"], "no column 'clas'; the nearest is class"),
        (["--by", "class", "--columns", "R_in"], "no column 'R_in'; the nearest is R_in_MOhm"),
        (["--by", "class", "--mean-over", "litter"], "no column 'litter'"),
    ],
)
def test_what_cannot_be_answered_is_wrong_usage(study, tmp_path, capsys, words, sentence):
    assert run("tabulate", study, "--groups", GROUPS, *words, "--into", tmp_path / "tables") == 2
    assert sentence in capsys.readouterr().err
    assert not (tmp_path / "tables").exists()


def test_a_table_of_groups_that_is_none_is_wrong_usage(study, tmp_path, capsys):
    path = tmp_path / "groups.csv"
    path.write_text("name,class\na,b\n", encoding="utf-8")
    assert run("tabulate", study, "--groups", path, "--by", "class") == 2
    assert "expected one named cell or file" in capsys.readouterr().err
    assert run("tabulate", tmp_path, "--groups", GROUPS, "--by", "class") == 2
    assert "expected a folder that `morphotone survey" in capsys.readouterr().err


def test_a_survey_is_not_written_over(study):
    with pytest.raises(ResultsError, match="holds a survey"):
        morphotone.tabulate(study, GROUPS, "class", study)


def test_from_python_nothing_is_written(study):
    before = {path: path.read_bytes() for path in study.iterdir() if path.is_file()}
    made = morphotone.tabulate(study, GROUPS, by=["class"], columns=["R_in_MOhm"], mean_over="animal")
    assert isinstance(made, morphotone.Tabulated)
    assert made.summary["n"].tolist() == [4, 4, 4]
    assert made.summary["cells"].tolist() == [9, 9, 9]
    assert made.comparisons["p_by"].tolist() == ["permutation", *["exact"] * 3]
    assert made.missing.empty
    assert "The unit" not in made.methods
    assert "the unit being animals" in made.methods
    assert made.remarks == (
        "4 of 4 animals have cells in more than one group, and the tests take groups to be independent",
    )
    assert {path: path.read_bytes() for path in study.iterdir() if path.is_file()} == before


def test_groups_may_be_a_dataframe(study):
    table = pd.read_csv(GROUPS)
    made = morphotone.tabulate(study, table, "class", columns=["X_tips_mean"])
    assert made.summary.equals(morphotone.tabulate(study, GROUPS, "class", columns=["X_tips_mean"]).summary)
    with pytest.raises(ReadingError, match="the table of groups: read the columns 'class,"):
        morphotone.tabulate(study, table.drop(columns="cell"), "class")
    with pytest.raises(MorphotoneError, match="no column 'zzz'"):
        morphotone.tabulate(study, table, "zzz")


def test_values_outside_published_ranges_are_remarked(tmp_path):
    for path in STUDY.glob("spar_0[12].swc"):
        shutil.copy(path, tmp_path)
    odd = morphotone.Assumptions(membrane=morphotone.Membrane(R_m_ohm_cm2=1e6))
    morphotone.survey(tmp_path, tmp_path / "results", assumptions=odd)
    made = morphotone.tabulate(tmp_path / "results", GROUPS, "class", columns=["X_tips_mean"])
    assert any("R_m_ohm_cm2 = 1000000.0 lies outside" in remark for remark in made.remarks)


def test_cells_to_be_doubted_are_remarked(tmp_path):
    fill(tmp_path / "cells", {"a.swc": SOUND, "b.swc": DOUBTFUL, "c.swc": UNFIT})
    morphotone.survey(tmp_path / "cells", tmp_path / "results", keep_unfit=True)
    groups = groups_file(tmp_path, ["a,x,", "b,x,", "c,x,"])
    made = morphotone.tabulate(tmp_path / "results", groups, "class", columns=["tips"])
    assert made.remarks == tuple(
        f"1 of 3 cells is of grade {grade}; findings.csv says why" for grade in ("doubtful", "unfit")
    )
    assert "graded 1 sound, 1 doubtful and 1 unfit." in made.methods


def test_the_example_in_the_help_runs(tmp_path, monkeypatch, capsys):
    (tmp_path / "sample_morphologies").symlink_to(STUDY)
    monkeypatch.chdir(tmp_path)
    codes = [called(line, capsys) for line in examples(capsys, command.NAME)]
    assert codes == [1, 1]  # the study's folder of troubles is turned away, or has no groups
    assert (tmp_path / "results" / command.FOLDER / "tables.tex").exists()
