"""Results that a survey left are read back, and what is no survey's is refused with the way out."""

import json

import pytest

import morphotone
from morphotone.commands.finished import read_finished
from morphotone.errors import ResultsError
from tests.commands.folders import SMALL, fill


@pytest.fixture
def results(tmp_path):
    morphotone.survey(fill(tmp_path / "cells", SMALL), tmp_path / "results")
    return tmp_path / "results"


def changed(results, **changes):
    """Write a record with some keys changed, or gone where they are None."""
    path = results / "run.json"
    record = json.loads(path.read_text(encoding="utf-8")) | changes
    kept = {key: value for key, value in record.items() if value is not None or key not in changes}
    path.write_text(json.dumps(kept), encoding="utf-8")


def test_tables_and_assumptions_are_those_written(results):
    found = read_finished(results)
    assert found.cells["file"].tolist() == ["a.swc", "b.swc", "deep/er/c.SWC"]
    assert found.turned_away["file"].tolist() == ["deep/broken.swc", "deep/unfit.swc"]
    assert set(found.findings["file"]) >= {"deep/unfit.swc"}
    assert found.assumptions == morphotone.Assumptions()
    assert found.record["counts"]["found"] == 5
    assert found.doubts == ()


def test_another_version_and_an_unfinished_survey_are_doubts(results):
    changed(results, morphotone="0.0.9", counts={"found": 7})
    first, second = read_finished(results).doubts
    assert "was written by Morphotone 0.0.9, this is" in first
    assert "has rows for 5 of 7 files: the survey is not finished" in second


@pytest.mark.parametrize("name", ["cells.csv", "findings.csv", "turned_away.csv"])
def test_a_missing_file_is_named(results, name):
    (results / name).unlink()
    with pytest.raises(ResultsError, match=rf"{name}: cannot be read"):
        read_finished(results)


def test_a_folder_of_something_else_is_refused(tmp_path):
    with pytest.raises(ResultsError, match=r"run\.json: cannot be read .* `morphotone survey FOLDER --into"):
        read_finished(tmp_path)


@pytest.mark.parametrize(
    ("text", "match"),
    [("{", "no JSON"), ("[]", "no survey's record"), ('{"morphotone": "1"}', "'python' is not in it")],
)
def test_a_record_that_is_none_is_refused(results, text, match):
    (results / "run.json").write_text(text, encoding="utf-8")
    with pytest.raises(ResultsError, match=match):
        read_finished(results)


def test_an_unfinished_survey_is_said_to_be_one(results):
    (results / "run.json").unlink()
    with pytest.raises(ResultsError, match="the survey there is not finished, so there is no"):
        read_finished(results)


def test_a_ranking_is_no_survey(results):
    changed(results, folder=None)
    with pytest.raises(ResultsError, match="no survey's record, 'folder' is not in it"):
        read_finished(results)


@pytest.mark.parametrize("packages", [[], {"numpy": "2.1"}])
def test_a_record_without_all_it_takes_is_refused(results, packages):
    changed(results, packages=packages)
    with pytest.raises(ResultsError, match=r"'packages\.(numpy|scipy)' is not in it"):
        read_finished(results)


def test_assumptions_of_another_version_are_refused(results):
    changed(results, morphotone="7.1", assumptions={"plasma": {}})
    with pytest.raises(ResultsError, match=r"by Morphotone 7\.1, .* cannot use its assumptions .*plasma"):
        read_finished(results)


@pytest.mark.parametrize(
    ("text", "match"), [("", "No columns"), ("file,grade\na,b\n", "no column 'soma_rule'")]
)
def test_a_table_of_another_version_is_refused(results, text, match):
    (results / "cells.csv").write_text(text, encoding="utf-8")
    with pytest.raises(ResultsError, match=match):
        read_finished(results)
