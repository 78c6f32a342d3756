"""`morphotone report` from its command line and from Python: the page, its links, refusals."""

import json
import shutil

import pandas as pd
import pytest

import morphotone
from morphotone.errors import MorphotoneError, ReadingError, ResultsError
from tests.commands.folders import SMALL, STUDY, called, examples, fill, run
from tests.showing.mornings import Parsed

GROUPS = STUDY / "cells.csv"


@pytest.fixture(scope="module")
def surveyed(tmp_path_factory):
    """Results of the small folder: 3 files analysed, 2 turned away."""
    folder = fill(tmp_path_factory.mktemp("small"), SMALL)
    assert run("survey", folder, "--into", folder / "results", "--workers", 1) == 1
    return folder / "results"


@pytest.fixture
def results(surveyed, tmp_path):
    """A copy of them to change."""
    return shutil.copytree(surveyed, tmp_path / "results")


def page_of(path):
    return Parsed(path.read_text(encoding="utf-8"))


def changed(path, **changes):
    record = json.loads(path.read_text(encoding="utf-8"))
    path.write_text(json.dumps({**record, **changes}), encoding="utf-8")


def test_the_page_stands_in_the_results(results, capsys):
    capsys.readouterr()
    assert run("report", results) == 0
    assert capsys.readouterr().out == f"page: {results / 'report.html'}\n"
    found = page_of(results / "report.html")
    assert found.faults == []
    assert "5 files found = 3 analysed + 2 turned away." in found.words
    assert "line 2: read '2 3 50 0 0 x 1'" in found.words
    links = {link["href"] for link in found.all("a")}
    assert {"cells.csv", "branches.csv", "findings.csv", "turned_away.csv"} <= links


def test_the_same_from_python_writes_nothing_unasked(results, tmp_path):
    made = morphotone.report(results)
    assert isinstance(made, morphotone.Report)
    assert not (results / "report.html").exists()
    assert run("report", results) == 0
    assert (results / "report.html").read_text(encoding="utf-8") == made.html
    morphotone.report(results, into=tmp_path / "elsewhere" / "page.html")
    links = {link["href"] for link in page_of(tmp_path / "elsewhere" / "page.html").all("a")}
    assert "../results/cells.csv" in links


def test_groups_are_on_the_page(results, tmp_path):
    table = tmp_path / "groups.csv"
    table.write_text("cell,class\na,one\nb,<two>\nghost,one\n", encoding="utf-8")
    assert run("report", results, "--groups", table, "--by", "class") == 0
    found = page_of(results / "report.html")
    assert {"one", "<two>"} <= {text for name, text in found.texts if name == "option"}
    assert "line 4: ghost" in found.words
    assert "1 analysed cell has no row in the table of groups: deep/er/c" in found.words
    frame = pd.DataFrame({"cell": ["a", "b"], "class": ["one", "two\nlines"]})
    assert "two lines" in morphotone.report(results, frame, "class").html


def test_pictures_are_linked_where_they_are(results):
    maps = results / "maps"
    fill(maps, {"figures/a%2F.png": "x", "thumbnails/a b.png": "x"})
    rows = [
        "file,cell,figure,thumbnail,mesh,colour_bar,table",
        "a.swc,a,figures/a%2F.png,thumbnails/a b.png,,,",
    ]
    rows += ["b.swc,b,javascript:alert(1),https://example.org/x.png,gone.glb,,", "odd.swc,odd,,,,,"]
    (maps / "maps.csv").write_text("\r\n".join(rows) + "\r\n", encoding="utf-8")
    made = morphotone.report(results)
    assert '["maps/figures/a%252F.png","maps/thumbnails/a%20b.png","",""]' in made.html
    assert "javascript:alert" not in made.html
    assert "https://example.org" not in made.html
    (remark,) = made.remarks
    assert remark.startswith("3 files that ")
    moved = shutil.move(maps, results.parent / "pictures")
    assert "../pictures/thumbnails/a%20b.png" in morphotone.report(results, maps=moved).html
    assert morphotone.report(results).remarks == ()


def test_results_of_another_version_are_said_to_be(results, capsys):
    changed(results / "run.json", morphotone="0.0.9")
    assert run("report", results) == 0
    assert "was written by Morphotone 0.0.9" in capsys.readouterr().err
    assert "was written by Morphotone 0.0.9" in page_of(results / "report.html").words


def test_results_without_a_column_are_refused(results):
    cells = pd.read_csv(results / "cells.csv")
    cells.drop(columns="X_tips_mean").to_csv(results / "cells.csv", index=False)
    with pytest.raises(
        ResultsError, match=r"cells\.csv: written by Morphotone .* no usable X_tips_mean in it"
    ):
        morphotone.report(results)
    cells.assign(R_in_MOhm="much").to_csv(results / "cells.csv", index=False)
    with pytest.raises(ResultsError, match="no usable R_in_MOhm in it"):
        morphotone.report(results)


def test_a_survey_in_which_nothing_was_analysed_has_a_page(tmp_path):
    folder = fill(tmp_path / "bad", {"a.swc": "nothing\n", "b.swc": ""})
    assert run("survey", folder, "--into", tmp_path / "results", "--workers", 1) == 1
    assert run("report", tmp_path / "results") == 0
    found = page_of(tmp_path / "results" / "report.html")
    assert found.faults == []
    assert "2 files found = 0 analysed + 2 turned away." in found.words


def test_what_cannot_be_used_is_refused_in_a_sentence(results, tmp_path, capsys):
    (empty := tmp_path / "empty").mkdir()
    assert run("report", empty) == 2
    assert (
        "expected a folder that `morphotone survey FOLDER --into RESULTS` has written"
        in capsys.readouterr().err
    )
    assert run("report", results, "--groups", tmp_path / "gone.csv", "--by", "class") == 2
    assert "gone.csv" in capsys.readouterr().err
    with pytest.raises(MorphotoneError, match="has no column 'layers'; the nearest is layer"):
        morphotone.report(results, GROUPS, "layers")
    for incomplete in ([GROUPS, None], [None, "class"]):
        with pytest.raises(MorphotoneError, match="--groups and --by belong together"):
            morphotone.report(results, *incomplete)
    with pytest.raises(
        ResultsError, match=r"maps\.csv: cannot be read .* the folder that `morphotone map` wrote"
    ):
        morphotone.report(results, maps=empty)
    fill(empty, {"maps.csv": "a,b\n1,2\n"})
    with pytest.raises(ResultsError, match="has no column 'file'"):
        morphotone.report(results, maps=empty)
    with pytest.raises(ReadingError, match="expected one named cell or file"):
        morphotone.report(results, pd.DataFrame({"name": ["a"]}), "name")
    assert not (results / "report.html").exists()


@pytest.mark.slow
def test_the_examples_of_its_help(beside_the_samples, capsys):
    lines = examples(capsys, "report")
    assert [called(line, capsys) for line in lines] == [1, 0]  # the sample study has troubles
    assert page_of(beside_the_samples / "results" / "report.html").faults == []
