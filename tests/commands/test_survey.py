"""The night's run from its command line: what it writes, says and returns, and how it goes on."""

import csv
import gzip
import hashlib
import io
import json
import re
import tomllib
from functools import partial
from importlib.metadata import version

import numpy as np
import pandas as pd
import pytest

from morphotone.cable.assumptions import Assumptions, Membrane
from morphotone.commands import survey as command
from morphotone.errors import MorphotoneError, ResultsError
from morphotone.night import runner
from morphotone.questions.survey import Request, answers, headers
from tests import trees
from tests.commands.folders import (
    BROKEN,
    SMALL,
    SMALL_FOUND,
    SOUND,
    STUDY,
    UNFIT,
    called,
    examples,
    fill,
    rows,
    run,
    tables,
)
from tests.test_samples import FOUND, READ_WITHOUT_COMPLAINT, TURNED_AWAY


def surveyed(folder, into, *options):
    """Run `morphotone survey` in this process."""
    return run("survey", folder, "--into", into, "--workers", "1", *options)


@pytest.fixture
def small(tmp_path):
    return fill(tmp_path / "cells", SMALL)


@pytest.fixture
def results(tmp_path):
    return tmp_path / "results"


@pytest.fixture
def file_by_file(monkeypatch):
    """Make every file a batch of its own."""
    monkeypatch.setattr(command, "run_night", partial(runner.run, batch_bytes=1))


# ---------------------------------------------------------------- what is written


def test_small_folder_from_end_to_end(small, results, capsys):
    assert surveyed(small, results, "--hz", "100", "0.5", "--samples") == 1
    printed = capsys.readouterr()
    assert printed.out == (
        "5 files found = 3 analysed + 2 turned away\n"
        f"results: {results}\n"
        f"why files were turned away: {results / 'turned_away.csv'}\n"
    )
    assert printed.err.startswith("5/5 files")
    assert "2 turned away" in printed.err
    assert [row["file"] for row in rows(results / "cells.csv")] == ["a.swc", "b.swc", "deep/er/c.SWC"]
    assert [row["cell"] for row in rows(results / "cells.csv")] == ["a", "b", "deep/er/c"]
    assert [(row["file"], row["reason"]) for row in rows(results / "turned_away.csv")] == [
        ("deep/broken.swc", "not_a_number"),
        ("deep/unfit.swc", "unfit"),
    ]
    assert {path.name for path in results.iterdir()} == {
        *("cells.csv", "branches.csv", "findings.csv", "turned_away.csv", "samples"),
        *("assumptions.toml", "run.json", "log.txt", "ledger.sqlite"),
    }
    assert {
        path.relative_to(results / "samples").as_posix() for path in results.rglob("samples/**/*.csv")
    } == {
        *("a.swc.csv", "b.swc.csv", "deep/er/c.SWC.csv"),
    }


def test_every_number_is_read_back_as_it_was_computed(small, results):
    surveyed(small, results, "--hz", "100", "0.5", "--samples")
    request = Request(Assumptions(hz=(0.5, 100.0)), samples=True)
    names = ["a.swc", "b.swc", "deep/er/c.SWC"]
    given = answers([(name, SMALL[name].encode()) for name in names], request)
    for row, answer in zip(rows(results / "cells.csv"), given, strict=True):
        assert list(row) == ["file", "cell", *answer.cell]
        for name, value in answer.cell.items():
            assert_reads_back(row[name], value)
    branches = [row for row in rows(results / "branches.csv") if row["file"] == "a.swc"]
    assert_table_reads_back(branches, given[0].branches)
    assert_table_reads_back(rows(results / "samples" / "a.swc.csv"), given[0].by_sample)
    findings = [row for row in rows(results / "findings.csv") if row["file"] == "deep/unfit.swc"]
    (unfit,) = answers([("deep/unfit.swc", UNFIT.encode())], request)
    assert_table_reads_back(findings, unfit.findings)


def assert_table_reads_back(written, columns):
    assert len(written) == len(next(iter(columns.values()))) > 0
    for name, values in columns.items():
        for row, value in zip(written, list(values), strict=True):
            assert_reads_back(row[name], value)


def assert_reads_back(text, value):
    """A number's text is that number to the last bit; empty is None or NaN."""
    if text == "":
        assert value is None or value == "" or value != value
    elif isinstance(value, str | bool | np.bool_):
        assert text == str(value)
    else:
        assert float(text) == value


def test_the_columns_carry_their_frequencies(small, results):
    surveyed(small, results, "--hz", "100", "0.5")
    (header, *_) = (results / "cells.csv").read_text(encoding="utf-8").splitlines()
    assert [name for name in header.split(",") if name.startswith("R_in")] == [
        *("R_in_MOhm", "R_in_MOhm_0.5Hz", "R_in_MOhm_100Hz"),
    ]
    assert ",attenuation_to_soma_end_0.5Hz," in (results / "branches.csv").read_text(encoding="utf-8")


AWKWARD = [
    "comma, and more.swc",
    'say "when".swc',
    "line\nbreak.swc",
    "µm λ Zürich 細胞.swc",
    " leading space.swc",
    "#hash.swc",
    "%41.swc",
    "NA.swc",
    "1.swc",
    "-dash.swc",
]
WRITTEN = {"line\nbreak.swc": r"line\u000abreak.swc", "-dash.swc": r"\u002ddash.swc"}


def test_csv_is_rfc_4180_in_utf_8_with_one_header_whatever_the_names(tmp_path, results):
    folder = fill(tmp_path / "cells", {name: SOUND if k % 2 else BROKEN for k, name in enumerate(AWKWARD)})
    surveyed(folder, results, "--samples")
    expected = sorted((WRITTEN.get(name, name) for name in AWKWARD), key=str.encode)
    written = {"cells": expected, "turned_away": expected}
    seen = []
    for table in written:
        data = (results / f"{table}.csv").read_bytes()
        assert not data.startswith(b"\xef\xbb\xbf")
        text = data.decode("utf-8")
        outside_quotes = re.sub(r'"(?:[^"]|"")*"', "", text)
        assert outside_quotes.count("\n") == outside_quotes.count("\r\n") == outside_quotes.count("\r")
        assert text.endswith("\r\n")
        records = list(csv.reader(io.StringIO(text, newline=""), strict=True))
        assert {len(record) for record in records} == {len(records[0])}
        assert sum(record[0] == "file" for record in records) == 1
        seen += [record[0] for record in records[1:]]
    assert sorted(seen, key=str.encode) == expected
    samples = {rows(path)[0]["file"] for path in (results / "samples").rglob("*.csv")}
    assert samples == {WRITTEN.get(name, name) for name in AWKWARD[1::2]}
    back = command.survey(folder, results, samples=True)
    assert sorted([*back.cells["file"], *back.turned_away["file"]], key=str.encode) == expected
    assert set(back.samples) == samples


def test_tables_without_rows_have_their_header(tmp_path, results):
    folder = fill(tmp_path / "cells", {"x.swc": BROKEN})
    assert surveyed(folder, results) == 1
    expected = headers(Request(Assumptions()))
    for table in ("cells", "branches", "findings"):
        text = (results / f"{table}.csv").read_bytes().decode()
        assert text == ",".join(["file", "cell", *expected[table]]) + "\r\n"


def test_all_well_is_exit_code_0_and_says_nothing_of_turned_away_files(tmp_path, results, capsys):
    folder = fill(tmp_path / "cells", {"x.swc": SOUND})
    assert surveyed(folder, results) == 0
    assert capsys.readouterr().out == f"1 file found = 1 analysed + 0 turned away\nresults: {results}\n"
    assert (results / "turned_away.csv").read_bytes() == b"file,reason,sentence\r\n"


def test_packed_files_are_read_and_kept_apart(tmp_path, results):
    files = {"x.swc": SOUND, "x.swc.gz": gzip.compress(trees.ball_and_stick().encode()), "X.SWC.GZ.txt": ""}
    surveyed(fill(tmp_path / "cells", files), results)
    assert [(row["file"], row["cell"], row["samples"]) for row in rows(results / "cells.csv")] == [
        ("x.swc", "x", "12"),
        ("x.swc.gz", "x", "5"),
    ]


def test_patterns_choose_files(small, results):
    assert surveyed(small, results, "--pattern", "C.*", "a*") == 0
    assert [row["file"] for row in rows(results / "cells.csv")] == ["a.swc", "deep/er/c.SWC"]


def test_a_cell_without_cable_and_an_axon_alone_are_rows_too(tmp_path, results):
    files = {"soma.swc": "1 1 0 0 0 5 -1\n2 3 3 0 0 1 1\n", "axon.swc": "1 2 0 0 0 1 -1\n2 2 99 0 0 1 1\n"}
    assert surveyed(fill(tmp_path / "cells", files), results, "--samples") == 0
    branches, length = zip(
        *((row["branches"], row["length_um"]) for row in rows(results / "cells.csv")), strict=True
    )
    assert (branches, length) == (("1", "0"), ("99.0", "0.0"))
    assert [row["file"] for row in rows(results / "branches.csv")] == ["axon.swc"]


# ---------------------------------------------------------------- the record


def test_the_record_says_what_was_done(small, results):
    assumptions = small.parent / "night.toml"
    assumptions.write_text(
        "[membrane]\nC_m_uF_cm2 = 0.01\n[membrane.axon]\nR_i_ohm_cm = 70\n", encoding="utf-8"
    )
    surveyed(small, results, "--assume", assumptions, "--hz", "100")
    record = json.loads((results / "run.json").read_text(encoding="utf-8"))
    assert record["counts"] == {
        **{"found": 5, "analysed": 3, "turned_away": 2, "unchanged": 0},
        "samples": sum(len(trees.rows_of(SMALL[name])) for name in SMALL_FOUND if name != "deep/broken.swc"),
    }
    assert record["inputs_sha256"] == {
        name: hashlib.sha256(SMALL[name].encode()).hexdigest() for name in SMALL_FOUND
    }
    assert record["folder"] == str(small)
    assert record["patterns"] == ["*.swc", "*.swc.gz"]
    assert (record["samples"], record["keep_unfit"]) == (False, False)
    assert record["morphotone"] == record["packages"]["morphotone"] == version("morphotone")
    assert record["packages"]["numpy"] == np.__version__
    assert record["packages"]["pandas"] == pd.__version__
    assert record["started"] <= record["ended"]
    expected = Assumptions(
        Membrane(C_m_uF_cm2=0.01), {2: Membrane(C_m_uF_cm2=0.01, R_i_ohm_cm=70.0)}, hz=(100.0,)
    )
    assert Assumptions.from_dict(record["assumptions"]) == expected
    assert record["warnings"] == list(expected.warnings)
    assert "C_m_uF_cm2 = 0.01 lies outside" in record["warnings"][0]
    text = (results / "assumptions.toml").read_text(encoding="utf-8")
    assert Assumptions.from_toml(text) == expected
    assert tomllib.loads(text)["frequencies"]["hz"] == [100.0]


def test_the_written_assumptions_can_be_used_for_the_next_run(small, results, tmp_path):
    surveyed(small, results, "--hz", "100")
    surveyed(small, tmp_path / "again", "--assume", results / "assumptions.toml")
    assert tables(tmp_path / "again") == tables(results)


def test_warnings_go_to_standard_error(small, results, capsys):
    surveyed(small, results, "--hz", "1e6")
    printed = capsys.readouterr()
    assert printed.err.startswith(
        "warning: [frequencies] hz = 1000000.0 lies outside the usual 0 to 10000 Hz"
    )
    assert "warning:" not in printed.out


# ---------------------------------------------------------------- choices


def test_unfit_files_are_kept_on_request_and_flagged(small, results):
    assert surveyed(small, results, "--keep-unfit") == 1
    grades = {row["file"]: row["grade"] for row in rows(results / "cells.csv")}
    assert grades["deep/unfit.swc"] == "unfit"
    assert [row["file"] for row in rows(results / "turned_away.csv")] == ["deep/broken.swc"]


def test_the_unit_rescues_a_file_in_nanometres(tmp_path, results):
    path = STUDY / "troubles" / "nanometres.swc"
    folder = fill(tmp_path / "cells", {"nm.swc": path.read_bytes()})
    assert surveyed(folder, results) == 1
    assert rows(results / "turned_away.csv")[0]["reason"] == "unfit"
    assert surveyed(folder, tmp_path / "rescued", "--unit-um", "0.001") == 0
    (row,) = rows(tmp_path / "rescued" / "cells.csv")
    assert row["grade"] != "unfit"
    assert 10 < float(row["path_greatest_um"]) < 2000
    assert row["unit_um"] == "0.001"


def test_frequencies_and_unit_override_the_assumptions_file(small, results):
    path = small.parent / "night.toml"
    path.write_text("[frequencies]\nhz = [7]\n[geometry]\nunit_um = 3\n", encoding="utf-8")
    surveyed(small, results, "--assume", path, "--hz", "100", "10", "--unit-um", "1")
    assumptions = Assumptions.from_toml((results / "assumptions.toml").read_text(encoding="utf-8"))
    assert (assumptions.hz, assumptions.unit_um) == ((10.0, 100.0), 1.0)


def test_strict_stops_at_the_first_fault_and_leaves_no_tables(small, results, capsys):
    assert surveyed(small, results, "--strict") == 1
    error = capsys.readouterr().err.splitlines()[-1]
    assert error.startswith(
        "morphotone survey: stopped at the first file turned away (file, reason, sentence): "
    )
    assert "deep/broken.swc,not_a_number,deep/broken.swc: line 2: read '2 3 50 0 0 x 1'" in error.replace(
        '"', ""
    )
    assert not (results / "cells.csv").exists()
    assert surveyed(small, results) == 1  # what is finished is kept, and the run can go on
    assert len(rows(results / "cells.csv")) == 3


def test_strict_is_all_well_where_all_is_well(tmp_path, results):
    assert surveyed(fill(tmp_path / "cells", {"x.swc": SOUND}), results, "--strict") == 0


# ---------------------------------------------------------------- going on


@pytest.mark.usefixtures("file_by_file")
def test_an_interrupted_run_goes_on_and_ends_with_the_same_bytes(
    small, results, tmp_path, capsys, monkeypatch
):
    assert surveyed(small, tmp_path / "whole", "--samples") == 1
    true_answers, asked = command.answers, []

    def interrupted(files, request):
        asked.extend(name for name, _ in files)
        if "deep/er/c.SWC" in asked:
            raise KeyboardInterrupt
        return true_answers(files, request)

    monkeypatch.setattr(command, "answers", interrupted)
    capsys.readouterr()
    assert surveyed(small, results, "--samples") == 130
    assert capsys.readouterr().err.splitlines()[-1] == "interrupted; the same command goes on from here"
    assert not (results / "cells.csv").exists()
    monkeypatch.setattr(command, "answers", true_answers)
    assert surveyed(small, results, "--samples") == 1
    assert "(3 of them unchanged since an earlier run)" in capsys.readouterr().out
    assert tables(results) == tables(tmp_path / "whole")


def test_the_same_command_again_computes_nothing_and_leaves_the_bytes(small, results, monkeypatch, capsys):
    surveyed(small, results, "--samples")
    before = tables(results)
    asked = []
    monkeypatch.setattr(command, "answers", lambda files, request: asked.extend(files) or [])
    assert surveyed(small, results, "--samples") == 1
    assert asked == []
    assert tables(results) == before
    assert "5 files found = 3 analysed + 2 turned away (5 of them unchanged" in capsys.readouterr().out


def test_changed_new_and_vanished_files_are_told_by_their_bytes(small, results, tmp_path, monkeypatch):
    surveyed(small, results, "--samples")
    fill(small, {"a.swc": trees.star(), "deep/broken.swc": SOUND, "new.swc": trees.comb()})
    (small / "b.swc").unlink()
    true_answers, asked = command.answers, []

    def listening(files, request):
        asked.extend(name for name, _ in files)
        return true_answers(files, request)

    monkeypatch.setattr(command, "answers", listening)
    assert surveyed(small, results, "--samples") == 1
    assert asked == ["a.swc", "deep/broken.swc", "new.swc"]
    surveyed(small, tmp_path / "fresh", "--samples")
    assert tables(results) == tables(tmp_path / "fresh")
    assert "samples/b.swc.csv" not in tables(results)


def test_results_may_lie_within_the_folder_surveyed(small):
    inside = small / "results"
    assert surveyed(small, inside, "--samples") == 1
    fill(inside, {"stray.swc": SOUND})
    before = tables(inside)
    assert surveyed(small, inside, "--samples") == 1
    assert tables(inside) == before
    assert json.loads((inside / "run.json").read_text(encoding="utf-8"))["counts"]["found"] == 5


@pytest.mark.parametrize(
    ("options", "said"),
    [
        (("--hz", "100"), r"assumptions\.frequencies\.hz was \[\], is \[100\.0\]"),
        (("--unit-um", "2"), r"assumptions\.geometry\.unit_um was 1\.0, is 2\.0"),
        (("--samples",), "samples was false, is true"),
        (("--keep-unfit",), "keep_unfit was false, is true"),
    ],
)
def test_other_conditions_into_the_same_folder_are_refused(small, results, capsys, options, said):
    surveyed(small, results)
    before = tables(results)
    capsys.readouterr()
    assert surveyed(small, results, *options) == 2
    assert re.search(f"{said}; choose another folder with --into", capsys.readouterr().err)
    assert tables(results) == before
    with pytest.raises(ResultsError, match="holds results made under other conditions"):
        command.survey(small, results, assumptions=Assumptions(soma_rule="none"))


@pytest.mark.slow
def test_any_number_of_workers_writes_the_same_bytes(tmp_path, monkeypatch):
    monkeypatch.setattr(command, "run_night", partial(runner.run, batch_bytes=20_000))
    files = {f"{k % 7}/{k}.swc": trees.irregular(40 + k, k, soma=bool(k % 2)) for k in range(60)}
    folder = fill(tmp_path / "cells", SMALL | files)
    for workers in ("1", "2", "3"):
        assert run("survey", folder, "--into", tmp_path / workers, "--samples", "--workers", workers) == 1
    one = tables(tmp_path / "1")
    assert len(one) > 60
    assert tables(tmp_path / "2") == one
    assert tables(tmp_path / "3") == one


# ---------------------------------------------------------------- refusals


@pytest.mark.parametrize(
    ("files", "sentence"),
    [
        (None, "there is no such file or folder; check the spelling"),
        ({"note.txt": "x"}, r"no file named \*\.swc or \*\.swc\.gz at any depth \(1 other files seen\)"),
    ],
)
def test_a_folder_without_files_is_exit_code_2(tmp_path, results, capsys, files, sentence):
    if files is not None:
        fill(tmp_path / "cells", files)
    assert surveyed(tmp_path / "cells", results) == 2
    printed = capsys.readouterr()
    assert printed.out == ""
    assert re.search(sentence, printed.err)
    assert not results.exists()
    with pytest.raises(MorphotoneError, match=sentence):
        command.survey(tmp_path / "cells")


def test_a_file_in_the_place_of_the_folder(small, results, capsys):
    assert surveyed(small / "a.swc", results) == 2
    assert "is a file; give the folder that holds it" in capsys.readouterr().err


@pytest.mark.parametrize(
    ("content", "said"),
    [
        ("[membrane]\nR_m = 1\n", "R_m"),
        ("[membrane]\nR_m_ohm_cm2 = -1\n", "R_m_ohm_cm2"),
        ("not toml", "not valid TOML"),
        (None, "cannot be read"),
    ],
)
def test_unusable_assumptions_are_exit_code_2(small, results, capsys, content, said):
    path = small.parent / "night.toml"
    if content is not None:
        path.write_text(content, encoding="utf-8")
    assert surveyed(small, results, "--assume", path) == 2
    error = capsys.readouterr().err
    assert error.startswith(f"morphotone survey: {path}")
    assert said in error
    assert error.count("\n") == 1
    assert not results.exists()


@pytest.mark.parametrize("options", [("--hz", "-1"), ("--hz", "0"), ("--hz", "5", "5"), ("--unit-um", "0")])
def test_values_that_no_run_can_have_are_exit_code_2(small, results, capsys, options):
    assert surveyed(small, results, *options) == 2
    assert capsys.readouterr().err.startswith("morphotone survey: ")
    assert not results.exists()


@pytest.mark.parametrize(
    "words",
    [["survey"], ["survey", "x"], ["survey", "x", "--into"], ["survey", "x", "--into", "y", "--hz", "z"]],
)
def test_wrong_usage_is_exit_code_2(words, capsys):
    assert run(*words) == 2
    assert capsys.readouterr().err.startswith("usage: morphotone survey")


def test_a_folder_of_somebody_elses_tables_is_refused(small, results, capsys):
    fill(results, {"cells.csv": "mine"})
    assert surveyed(small, results) == 2
    assert "holds cells.csv but no ledger.sqlite" in capsys.readouterr().err
    assert (results / "cells.csv").read_text(encoding="utf-8") == "mine"


def test_debug_shows_where_an_error_came_from(tmp_path, results, capsys):
    assert surveyed(tmp_path / "nowhere", results, "--debug") == 2
    error = capsys.readouterr().err
    assert error.startswith("Traceback")
    assert error.splitlines()[-1].startswith("morphotone survey: ")


def test_a_fault_of_the_program_costs_one_file_and_is_called_so(small, results, monkeypatch):
    true_answers = command.answers

    def faulty(files, request):
        if any(name == "b.swc" for name, _ in files):
            raise ZeroDivisionError("on purpose")
        return true_answers(files, request)

    monkeypatch.setattr(command, "answers", faulty)
    assert surveyed(small, results) == 1
    reasons = {row["file"]: row["reason"] for row in rows(results / "turned_away.csv")}
    assert reasons == {"b.swc": "program_error", "deep/broken.swc": "not_a_number", "deep/unfit.swc": "unfit"}
    assert len(rows(results / "cells.csv")) == 2


# ---------------------------------------------------------------- from Python


def test_dataframes_are_the_csv_files(small, results):
    survey = command.survey(small, results, assumptions=Assumptions(hz=(100.0,)), samples=True)
    for name in ("cells", "branches", "findings", "turned_away"):
        whole = dict.fromkeys(("line", "sample", "count"), "Int64")
        written = pd.read_csv(results / f"{name}.csv", dtype={"domains_differ": str, **whole})
        pd.testing.assert_frame_equal(getattr(survey, name), written, check_exact=True)
    assert list(survey.samples) == ["a.swc", "b.swc", "deep/er/c.SWC"]
    written = pd.read_csv(results / "samples" / "a.swc.csv", dtype={"sample": "Int64"})
    pd.testing.assert_frame_equal(survey.samples["a.swc"], written, check_exact=True)
    assert (survey.tally.found, survey.tally.analysed, survey.tally.turned_away) == (5, 3, 2)
    assert len(survey.cells) == 3
    assert len(survey.turned_away) == 2


def test_without_a_results_folder_nothing_is_left_behind(small, tmp_path, monkeypatch):
    temporary = tmp_path / "temporary"
    temporary.mkdir()
    monkeypatch.setattr("tempfile.tempdir", str(temporary))
    before = {path: path.stat().st_mtime_ns for path in small.rglob("*")}
    survey = command.survey(str(small))
    assert len(survey.cells) == 3
    assert survey.samples == {}
    assert list(temporary.iterdir()) == []
    assert {path: path.stat().st_mtime_ns for path in small.rglob("*")} == before


def test_strict_from_python_raises(small):
    with pytest.raises(MorphotoneError, match=r"stopped at the first file turned away .*deep/broken\.swc"):
        command.survey(small, strict=True)


def test_names_that_look_like_missing_values_or_numbers_stay_text(tmp_path):
    files = {"NA.swc": SOUND, "1.swc": SOUND, "nan.swc": trees.scaled(SOUND, 1.1, 1.0)}
    swc = "1 1 0 0 0 5 -1\n2 7 55 0 0 1 1\n"
    folder = fill(tmp_path, {**files, "seven.swc": swc})
    survey = command.survey(folder, assumptions=Assumptions(domains={7: Membrane(9000.0)}), samples=True)
    assert survey.cells["cell"].tolist() == ["1", "NA", "nan", "seven"]
    assert survey.cells["domains_differ"].tolist() == ["7"] * 4
    assert survey.samples["seven.swc"]["domain"].tolist() == ["soma", "7"]


def test_other_tables_in_the_results_folder_are_left_alone(small, results):
    command.survey(small, results)
    fill(results, {"groups.csv": "cell,group\n"})
    assert len(command.survey(small, results).cells) == 3
    assert (results / "groups.csv").exists()


def test_a_file_that_vanishes_between_listing_and_reading_is_turned_away(small, results, monkeypatch):
    true_find = command.find_files

    def find_then_lose(*words, **named):
        found = true_find(*words, **named)
        (small / "b.swc").unlink()
        return found

    monkeypatch.setattr(command, "find_files", find_then_lose)
    survey = command.survey(small, results)
    assert "b.swc" in survey.turned_away["file"].tolist()
    assert survey.tally.found == survey.tally.analysed + survey.tally.turned_away == 5


# ---------------------------------------------------------------- the samples, by the example of --help


def test_the_sample_study_by_the_example_of_help(beside_the_samples, capsys):
    (line,) = examples(capsys, "survey")
    assert called(line, capsys) == 1
    results = beside_the_samples / "results"
    files = len(list(STUDY.rglob("*.swc")))
    cells, turned_away = rows(results / "cells.csv"), rows(results / "turned_away.csv")
    assert len(cells) + len(turned_away) == files
    assert f"{files} files found = {len(cells)} analysed" in capsys.readouterr().out
    unfit = {name: "unfit" for name, (_, grade) in FOUND.items() if grade == "unfit"}
    reasons = {row["file"]: row["reason"] for row in turned_away}
    assert reasons == {f"troubles/{name}.swc": reason for name, reason in (TURNED_AWAY | unfit).items()}
    for row in turned_away:
        assert row["sentence"].startswith(f"{row['file']}: ")
        code = FOUND.get(row["file"].removeprefix("troubles/").removesuffix(".swc"), ("", ""))[0]
        assert f"({code})" in row["sentence"] or row["reason"] != "unfit"
    grades = {row["file"]: row["grade"] for row in cells}
    for name in FOUND.keys() - unfit.keys():
        assert grades[f"troubles/{name}.swc"] == FOUND[name][1]
    for name in READ_WITHOUT_COMPLAINT:
        assert grades[f"troubles/{name}.swc"] == "sound"
    for row in cells:
        assert 10 < float(row["R_in_MOhm"]) < 5000
        assert float(row["R_in_MOhm_100Hz"]) < float(row["R_in_MOhm"])
        assert float(row["attenuation_to_soma_farthest"]) >= 1
