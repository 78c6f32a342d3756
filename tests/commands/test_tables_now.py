"""Tables on request: from a run at work, from one that has stopped, and where there is none."""

import re
import threading
from functools import partial

import pytest

from morphotone.commands import survey as command
from morphotone.night import runner
from morphotone.night.request import tables_asked_for
from tests.commands.folders import SMALL, fill, rows, run, tables


@pytest.fixture
def small(tmp_path):
    return fill(tmp_path / "cells", SMALL)


def asked(folder, results, *options):
    return run("survey", folder, "--into", results, "--samples", "--workers", "1", *options)


def test_a_run_at_work_writes_the_tables_of_what_is_finished(small, tmp_path, monkeypatch, capsys):
    """The second command stands in another thread; the first is at its third file when it asks."""
    results, true_answers, answers_of_other = tmp_path / "results", command.answers, []
    monkeypatch.setattr(command, "run_night", partial(runner.run, batch_bytes=1))
    other = threading.Thread(target=lambda: answers_of_other.append(asked(small, results, "--tables-now")))
    seen = []

    def watched(files, request):
        if [name for name, _ in files] == ["deep/broken.swc"]:
            other.start()
            while not tables_asked_for(results):
                threading.Event().wait(0.01)
        if [name for name, _ in files] == ["deep/er/c.SWC"]:
            seen.extend(row["file"] for row in rows(results / "cells.csv"))
            assert not tables_asked_for(results)
        return true_answers(files, request)

    monkeypatch.setattr(command, "answers", watched)
    assert asked(small, results) == 1
    other.join(timeout=30)
    assert answers_of_other == [0]
    assert seen == ["a.swc", "b.swc"]
    assert "was asked for its tables; waiting" in capsys.readouterr().err
    log = (results / "log.txt").read_text(encoding="utf-8")
    assert "tables written on request: 3 of 5 files finished" in log
    assert len(rows(results / "cells.csv")) == 3


def test_without_a_run_at_work_they_come_from_the_ledger(small, tmp_path, capsys):
    results = tmp_path / "results"
    assert asked(small, results) == 1
    before = tables(results)
    for path in results.rglob("*.csv"):
        path.unlink()
    assert asked(small, results, "--tables-now") == 0
    after = tables(results)
    assert {name: data for name, data in before.items() if name in after} == after
    assert len(after) == len(before)
    assert f"tables of what is finished by now: {results}\n" in capsys.readouterr().out


def test_where_no_survey_has_begun_it_is_said(small, tmp_path, capsys):
    assert asked(small, tmp_path / "results", "--tables-now") == 2
    assert re.search(r"no survey has begun there; check --into", capsys.readouterr().err)
    assert not (tmp_path / "results").exists()


def test_other_conditions_are_refused(small, tmp_path, capsys):
    asked(small, tmp_path / "results")
    assert asked(small, tmp_path / "results", "--tables-now", "--hz", "5") == 2
    assert "made under other conditions" in capsys.readouterr().err


@pytest.mark.parametrize("value", ["0", "-1", "nan", "inf", "x"])
def test_a_limit_is_a_number_greater_than_0(small, tmp_path, value, capsys):
    assert asked(small, tmp_path / "results", "--minutes-per-cell", value) == 2
    assert "--minutes-per-cell" in capsys.readouterr().err
