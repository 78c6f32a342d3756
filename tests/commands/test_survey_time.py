"""Delays, time constants and transients in the night's run: asked for, recorded, refused, read back."""

import csv
import json
import math
import os
import re
import subprocess
import sys
from functools import partial

import pytest

from morphotone.cable.assumptions import Assumptions
from morphotone.cable.synaptic import SynapticCurrent
from morphotone.commands import survey as command
from morphotone.errors import AssumptionError
from morphotone.night import runner
from morphotone.questions.survey import Request, answers
from morphotone.questions.time_axis import TimeRequest
from tests import trees
from tests.commands.folders import SMALL, fill, rows, run, tables

ASKED = ("--delays", "--time-constants", "3", "--transient", "0.3", "4")
ALL = TimeRequest(True, 3, SynapticCurrent(0.3, 4.0))
ON_THE_TIME_AXIS = re.compile(
    r"delay_|C_in_pF|tau\d+_|L_by_peeling|peeling_|peak_|time_to_peak_|rise_|half_width_|area_.*_per_pA|error_"
)


def surveyed(folder, into, *options):
    return run("survey", folder, "--into", into, "--workers", "1", *options)


@pytest.fixture
def small(tmp_path):
    return fill(tmp_path / "cells", SMALL)


@pytest.fixture
def results(tmp_path):
    return tmp_path / "results"


# ---------------------------------------------------------------- what is written


def test_every_number_is_read_back_as_it_was_computed(small, results):
    assert surveyed(small, results, *ASKED, "--samples") == 1
    names = ["a.swc", "b.swc", "deep/er/c.SWC"]
    request = Request(Assumptions(), samples=True, time=ALL)
    given = answers([(name, SMALL[name].encode()) for name in names], request)
    for row, answer in zip(rows(results / "cells.csv"), given, strict=True):
        assert list(row) == ["file", "cell", *answer.cell]
        for name in filter(ON_THE_TIME_AXIS.match, answer.cell):
            assert_reads_back(row[name], answer.cell[name])
        table = rows(results / "samples" / f"{answer.name}.csv")
        for name in filter(ON_THE_TIME_AXIS.match, answer.by_sample):
            for sample, value in zip(table, answer.by_sample[name].tolist(), strict=True):
                assert_reads_back(sample[name], value)


def assert_reads_back(text, value):
    if isinstance(value, str):
        assert text == value
    else:
        assert (text == "" and math.isnan(value)) or float(text) == value


def test_a_run_that_does_not_ask_has_no_such_column_and_the_same_text_in_all_others(small, results, tmp_path):
    surveyed(small, results, "--samples")
    surveyed(small, tmp_path / "asked", *ASKED, "--samples")
    plain, asked = tables(results), tables(tmp_path / "asked")
    assert plain.keys() == asked.keys()
    for name, content in plain.items():
        if name == "cells.csv" or name.startswith("samples/"):
            before, after = rows(results / name), rows(tmp_path / "asked" / name)
            added = [column for column in after[0] if ON_THE_TIME_AXIS.match(column)]
            assert len(added) == (38 if name == "cells.csv" else 18)
            assert [column for column in after[0] if column not in added] == list(before[0])
            assert [{k: v for k, v in row.items() if k not in added} for row in after] == before
        else:
            assert content == asked[name]


def test_sentences_on_peeling_are_one_quoted_cell(small, results):
    path = small.parent / "shunt.toml"
    path.write_text("[soma]\nshunt_nS = 1\n[membrane.axon]\nR_m_ohm_cm2 = 9000\n", encoding="utf-8")
    surveyed(small, results, "--assume", path, "--time-constants", "2")
    with (results / "cells.csv").open(encoding="utf-8", newline="") as stream:
        header, *lines = csv.reader(stream, strict=True)
    at = header.index("peeling_warnings")
    assert {len(line) for line in lines} == {len(header)}
    said = lines[0][at]
    assert int(lines[0][at - 1]) == 4
    assert said.startswith("R_m, R_i, C_m or spines differ between domains")
    assert "a shunt of 1 nS is at the soma" in said
    assert f',"{said}",' in (results / "cells.csv").read_text(encoding="utf-8")


def test_modes_that_a_cell_does_not_have_are_empty_cells(tmp_path, results):
    files = {"soma.swc": "1 1 0 0 0 5 -1\n2 3 3 0 0 1 1\n", "stick.swc": trees.ball_and_stick()}
    assert surveyed(fill(tmp_path / "cells", files), results, "--time-constants", "20") == 0
    one, stick = rows(results / "cells.csv")
    assert [one[f"tau{k}_ms"] for k in range(20)] == ["20.0", *[""] * 19]
    assert [one[f"tau{k}_modes"] for k in range(20)] == ["1", *["0"] * 19]
    assert one["tau1_amplitude_MOhm_per_ms"] == one["L_by_peeling"] == ""
    taus = [float(stick[f"tau{k}_ms"]) for k in range(20)]
    assert taus == sorted(taus, reverse=True)


# ---------------------------------------------------------------- the record, and going on


def test_the_record_says_what_was_asked_for(small, results, tmp_path):
    surveyed(small, results, "--delays", "--time-constants", "4", "--transient", "0.3", "4")
    surveyed(small, tmp_path / "plain")
    asked, plain = (
        json.loads((folder / "run.json").read_text(encoding="utf-8"))
        for folder in (results, tmp_path / "plain")
    )
    keys = ("delays", "time_constants", "transient_ms")
    assert [asked[key] for key in keys] == [True, 4, [0.3, 4.0]]
    assert [plain[key] for key in keys] == [False, 0, None]


@pytest.mark.parametrize(
    ("options", "said"),
    [
        (("--delays",), "delays was false, is true"),
        (("--time-constants", "3"), "time_constants was 0, is 3"),
        (("--transient", "0.5", "2"), r"transient_ms was null, is \[0\.5, 2\.0\]"),
    ],
)
def test_asking_for_more_into_the_same_folder_is_refused(small, results, capsys, options, said):
    surveyed(small, results)
    before = tables(results)
    capsys.readouterr()
    assert surveyed(small, results, *options) == 2
    assert re.search(f"{said}; choose another folder with --into", capsys.readouterr().err)
    assert tables(results) == before
    assert surveyed(small, results.with_name("asked"), *options) == 1
    assert surveyed(small, results.with_name("asked")) == 2  # nor less


def test_the_same_request_again_computes_nothing(small, results, monkeypatch):
    surveyed(small, results, *ASKED)
    before = tables(results)
    asked = []
    monkeypatch.setattr(command, "answers", lambda files, request: asked.extend(files) or [])
    assert surveyed(small, results, *ASKED) == 1
    assert asked == []
    assert tables(results) == before


# ---------------------------------------------------------------- refusals


@pytest.mark.parametrize(
    ("options", "sentence"),
    [
        (("--time-constants", "21"), "read 21 time constants, expected 1 to 20, or 0 for none"),
        (("--time-constants", "-1"), "read -1 time constants, expected 1 to 20, or 0 for none"),
        (("--transient", "0", "5"), "rise time 0.0 ms .*, expected a number from 1e-06 to 1e\\+06 ms"),
        (("--transient", "-1", "5"), "rise time -1.0 ms .*, expected a number from 1e-06 to 1e\\+06 ms"),
        (("--transient", "nan", "5"), "rise time nan ms .*, expected a number from 1e-06 to 1e\\+06 ms"),
        (("--transient", "1", "inf"), "decay time inf ms .*, expected a number from 1e-06 to 1e\\+06 ms"),
        (
            ("--transient", "5", "1"),
            "rise time 5.0 ms is longer than the decay time 1.0 ms, .*; exchange them",
        ),
    ],
)
def test_values_that_no_run_can_have_are_exit_code_2_and_one_sentence(
    small, results, capsys, options, sentence
):
    assert surveyed(small, results, *options) == 2
    printed = capsys.readouterr()
    assert re.fullmatch(f"morphotone survey: {sentence}.*\n", printed.err)
    assert printed.out == ""
    assert not results.exists()


@pytest.mark.parametrize(
    "options",
    [("--time-constants", "2.5"), ("--time-constants",), ("--transient", "1"), ("--transient", "a", "b")],
)
def test_wrong_usage_is_exit_code_2(small, results, capsys, options):
    assert surveyed(small, results, *options) == 2
    assert capsys.readouterr().err.startswith("usage: morphotone survey")


def test_refusals_from_python(small):
    with pytest.raises(AssumptionError, match="read 21 time constants, expected 1 to 20"):
        command.survey(small, time_constants=21)
    with pytest.raises(AssumptionError, match=r"2\.5 time constants were asked for, expected a whole number"):
        command.survey(small, time_constants=2.5)
    with pytest.raises(AssumptionError, match=r"rise time 5\.0 ms is longer than the decay time"):
        command.survey(small, transient_ms=(5.0, 1.0))


# ---------------------------------------------------------------- from Python


def test_keywords_are_the_options(small, results, tmp_path):
    surveyed(small, results, *ASKED, "--samples")
    command.survey(
        small, tmp_path / "python", samples=True, delays=True, time_constants=3, transient_ms=(0.3, 4.0)
    )
    assert tables(tmp_path / "python") == tables(results)


def test_sentences_are_text_even_where_no_cell_has_any(tmp_path):
    folder = fill(tmp_path, {"long.swc": trees.cylinder(9000.0, 4.0, 300)})
    cells = command.survey(folder, time_constants=2).cells
    assert cells["peeling_conditions_broken"].tolist() == [0]
    assert cells["peeling_warnings"].isna().all()
    assert cells["peeling_warnings"].dtype == cells["domains_differ"].dtype == cells["cell"].dtype


# ---------------------------------------------------------------- the same bytes

LARGE = trees.deep_chain(3002, 1500.0, 2.0)  # shares of its rows by threads do not end on whole fours


@pytest.mark.slow
def test_any_number_of_workers_writes_the_same_bytes(tmp_path, monkeypatch):
    monkeypatch.setattr(command, "run_night", partial(runner.run, batch_bytes=20_000))
    files = {f"{k % 7}/{k}.swc": trees.irregular(40 + k, k, soma=bool(k % 2)) for k in range(12)}
    folder = fill(tmp_path / "cells", SMALL | files | {"large.swc": LARGE})
    for workers in ("1", "2"):
        assert (
            run("survey", folder, "--into", tmp_path / workers, *ASKED, "--samples", "--workers", workers)
            == 1
        )
    one = tables(tmp_path / "1")
    assert len(one) > 15
    assert tables(tmp_path / "2") == one


@pytest.mark.slow
def test_any_number_of_threads_writes_the_same_bytes(tmp_path):
    """One worker computes in the main process, which may have as many threads as processors."""
    folder = fill(tmp_path / "cells", {"large.swc": LARGE})
    for threads in ("1", "2", "5"):
        words = ("survey", folder, "--into", tmp_path / threads, *ASKED, "--samples", "--workers", "1")
        subprocess.run(
            [sys.executable, "-m", "morphotone", *map(str, words)],
            env=os.environ | dict.fromkeys(("OPENBLAS_NUM_THREADS", "OMP_NUM_THREADS"), threads),
            capture_output=True,
            check=True,
        )
    one = tables(tmp_path / "1")
    assert tables(tmp_path / "2") == one
    assert tables(tmp_path / "5") == one
