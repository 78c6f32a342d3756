"""`morphotone rank` from its command line and from Python: files written, refusals, nothing lost."""

import json
from dataclasses import asdict

import numpy as np
import pandas as pd
import pytest

import morphotone
from morphotone.cable.assumptions import Assumptions
from morphotone.commands import rank as command
from morphotone.errors import AssumptionError, MorphotoneError, ReadingError, ResultsError
from morphotone.night.progress import Silent
from tests import trees
from tests.commands.folders import SMALL, called, examples, fill, rows, run

HEADER = "cell,site,sample,fraction,x_um,y_um,z_um,branch,along_um,group"
SITES = [
    HEADER,
    "b,tip,5,,,,,,,far",
    "b,mid,4,0.5,,,,,,far",
    "b,again,4,0.5,,,,,,near",
    "a,basal,3,,,,,,,near",
    "deep/er/c,stem,,,,,,1,10,",
]
BAD = {
    "nobody,s1,3,,,,,,,": "cell_unknown",
    "b,s2,99,,,,,,,": "sample_unknown",
    "b,s3,,,5000,0,0,,,": "too_far",
    "b,s4,,,,,,9,1,": "branch_unknown",
    "b,s5,,,,,,1,9000,": "beyond_branch",
    "broken,s6,2,,,,,,,": "not_a_number",
    "unfit,s7,2,,,,,,,": "unfit",
}


@pytest.fixture
def cells(tmp_path):
    return fill(tmp_path / "cells", SMALL)


def sites_file(tmp_path, lines=SITES):
    path = tmp_path / "sites.csv"
    path.write_text("\n".join(lines) + "\n", encoding="utf-8")
    return path


def test_sites_are_ranked_and_written(tmp_path, cells, capsys):
    into = tmp_path / "ranked"
    assert run("rank", "--synapses", sites_file(tmp_path), cells, "--into", into) == 0
    said = capsys.readouterr().out
    assert said == f"5 sites = 5 ranked + 0 turned away, on 3 of 5 files\nresults: {into}\n"
    names = {
        "ranking.csv",
        "orders.csv",
        "movers.csv",
        "turned_away_sites.csv",
        "run.json",
        "assumptions.toml",
    }
    assert {path.name for path in into.iterdir()} == names
    table = rows(into / "ranking.csv")
    assert [row["site"] for row in table] == ["basal", "tip", "mid", "again", "stem"]
    assert [row["rank_in_cell"] for row in table] == ["1", "1", "2", "2", "1"]
    assert [row["tied_in_cell"] for row in table] == ["0", "0", "1", "1", "0"]
    assert [row["cell"] for row in table] == ["a", "b", "b", "b", "deep/er/c"]
    assert table[-1]["rank_in_group"] == ""
    assert "attenuation_to_soma_100Hz" in table[0]
    assert rows(into / "turned_away_sites.csv") == []


def test_no_label_or_header_is_run_by_a_spreadsheet(tmp_path, cells):
    lines = [f"{HEADER},=note", "b,=1+1,5,,,,,,,-x,@y", "b,-3,4,,,,,,,+1,h", "nobody,@z,3,,,,,,,,"]
    into = tmp_path / "ranked"
    path = sites_file(tmp_path, lines)
    assert run("rank", "--synapses", path, cells, "--into", into, "--pairs", "csv", "--together") == 1
    ranked = {row["site"]: (row["group"], row["'=note"]) for row in rows(into / "ranking.csv")}
    assert ranked == {"'=1+1": ("'-x", "'@y"), "-3": ("+1", "h")}
    assert {row["other_site"] for row in rows(into / "pairs.csv")} == set(ranked)
    assert [row["site"] for row in rows(into / "turned_away_sites.csv")] == ["'@z"]


def test_what_is_wrong_with_a_row_costs_that_row(tmp_path, cells, capsys):
    into = tmp_path / "ranked"
    path = sites_file(tmp_path, [*SITES, *BAD, "b,no_place,,,,,,,,", "b,nan,5,nan,,,,,,"])
    assert run("rank", "--synapses", path, cells, "--into", into) == 1
    said = capsys.readouterr().out
    assert said.startswith("14 sites = 5 ranked + 9 turned away, on 3 of 5 files\n")
    assert said.endswith(f"why sites were turned away: {into / 'turned_away_sites.csv'}\n")
    away = rows(into / "turned_away_sites.csv")
    assert [(int(row["line"]), row["reason"]) for row in away[:7]] == [
        (line, reason) for line, reason in enumerate(BAD.values(), 7)
    ]
    assert [int(row["line"]) for row in away[7:]] == [14, 15]
    for row in away:
        assert row["sentence"].startswith(f"{path}: line {row['line']}: ")
    good = rows(into / "ranking.csv")
    assert len(good) == 5
    counts = json.loads((into / "run.json").read_text())["counts"]
    assert counts == {"sites": 14, "ranked": 5, "turned_away": 9, "files": 5, "cells": 3}


def test_the_record_names_inputs_and_what_was_asked(tmp_path, cells):
    path = sites_file(tmp_path)
    morphotone.rank([cells / "a.swc", cells / "b.swc"], path, tmp_path / "out", by="X", farthest_um=2.0)
    record = json.loads((tmp_path / "out" / "run.json").read_text())
    assert record["by"] == "X"
    assert record["farthest_um"] == 2.0
    assert record["paths"] == [str(cells / "a.swc"), str(cells / "b.swc")]
    assert set(record["inputs_sha256"]) == {str(path), *record["paths"]}
    assert all(record["inputs_sha256"].values())
    assert record["assumptions"]["frequencies"]["hz"] == [100.0]


def test_python_gives_what_the_files_hold(tmp_path, cells):
    path = sites_file(tmp_path, [*SITES, *BAD])
    given = morphotone.rank(cells, path, tmp_path / "out")
    written = rows(tmp_path / "out" / "ranking.csv")
    assert list(written[0]) == list(given.ranking)
    read_back = [float(row["attenuation_to_soma"]) for row in written]
    assert read_back == given.ranking["attenuation_to_soma"].tolist()
    assert given.turned_away["reason"].tolist() == list(BAD.values())
    assert given.counts["sites"] == 5 + len(BAD)
    assert given.together is given.veto is None
    assert given.pairs == {}
    without = morphotone.rank(cells, path)
    pd.testing.assert_frame_equal(without.ranking, given.ranking)


def test_frequencies_of_the_assumptions_or_the_option_go_before_100_hz(tmp_path, cells):
    path = sites_file(tmp_path)
    given = morphotone.rank(cells, path, assumptions=Assumptions(hz=(20.0,)))
    assert "X" in given.ranking
    assert [name for name in given.ranking if "Hz" in name and name.startswith("R_in")] == ["R_in_MOhm_20Hz"]
    assert run("rank", "--synapses", path, cells, "--into", tmp_path / "o", "--hz", "5", "40") == 0
    header = rows(tmp_path / "o" / "ranking.csv")[0]
    assert {"R_in_MOhm_5Hz", "R_in_MOhm_40Hz"} <= set(header)
    assert "R_in_MOhm_100Hz" not in header


def test_any_numeric_column_ranks_further_ones_too(tmp_path, cells):
    lines = [f"{HEADER},depth,layer", *(f"{line},{n},L{n}" for n, line in enumerate(SITES[1:]))]
    path = sites_file(tmp_path, lines)
    given = morphotone.rank(cells, path, by="depth")
    assert given.ranking["rank_in_set"].tolist() == [2, 3, 4, 5, 1]
    assert set(given.ranking["ranked_by"]) == {"depth"}
    with pytest.raises(
        MorphotoneError, match=r"column 'layer' cannot be ranked by: read 'L0', expected a number"
    ):
        morphotone.rank(cells, path, by="layer")
    path = sites_file(tmp_path, [f"{HEADER},X", *(f"{line},{n}0" for n, line in enumerate(SITES[1:]))])
    assert morphotone.rank(cells, path, by="X").ranking["X"].max() < 9
    given = morphotone.rank(cells, path, by="X_as_given")
    assert given.ranking["rank_in_set"].tolist() == [2, 3, 4, 5, 1]


def test_a_column_that_is_not_there_is_refused_before_any_work(tmp_path, cells, capsys, monkeypatch):
    monkeypatch.setattr(command, "files_of", lambda paths: pytest.fail("work had begun"))
    words = ("rank", "--synapses", sites_file(tmp_path), cells, "--into", tmp_path / "o", "--by", "distance")
    assert run(*words) == 2
    said = capsys.readouterr().err
    assert "there is no column 'distance' to rank by; numeric columns here are" in said
    assert "attenuation_to_soma_100Hz" in said
    assert not (tmp_path / "o").exists()


def test_what_cannot_be_run_at_all_is_refused(tmp_path, cells):
    path = sites_file(tmp_path)
    with pytest.raises(MorphotoneError, match=r"gone: there is no such file or folder"):
        morphotone.rank(tmp_path / "gone", path)
    with pytest.raises(ReadingError, match=r"gone\.csv"):
        morphotone.rank(cells, tmp_path / "gone.csv")
    with pytest.raises(AssumptionError, match="greatest distance from the cable -1"):
        morphotone.rank(cells, path, farthest_um=-1)
    (tmp_path / "no_columns.csv").write_text("a,b\n1,2\n")
    with pytest.raises(ReadingError, match="expected cell, site, and sample"):
        morphotone.rank(cells, tmp_path / "no_columns.csv")


def test_a_survey_in_the_folder_is_left_alone(tmp_path, cells, capsys):
    into = tmp_path / "results"
    run("survey", cells, "--into", into, "--workers", "1")
    before = {path: path.read_bytes() for path in into.iterdir()}
    assert run("rank", "--synapses", sites_file(tmp_path), cells, "--into", into) == 2
    assert "holds a survey, whose run.json would be lost; choose another --into" in capsys.readouterr().err
    assert {path: path.read_bytes() for path in into.iterdir()} == before
    with pytest.raises(ResultsError, match="holds a survey"):
        morphotone.rank(cells, sites_file(tmp_path), into)


def test_unfit_files_are_ranked_on_request(tmp_path, cells):
    path = sites_file(tmp_path, [HEADER, "unfit,s,2,,,,,,,"])
    assert morphotone.rank(cells, path).counts["ranked"] == 0
    assert morphotone.rank(cells, path, keep_unfit=True).counts["ranked"] == 1


def test_nothing_ranked_still_gives_whole_tables(tmp_path, cells):
    path = sites_file(tmp_path, [HEADER, "nobody,s,2,,,,,,,"])
    assert (
        run("rank", "--synapses", path, cells, "--into", tmp_path / "o", "--together", "--pairs", "csv") == 1
    )
    header = (tmp_path / "o" / "ranking.csv").read_text().splitlines()
    assert len(header) == 1
    whole = morphotone.rank(cells, sites_file(tmp_path), tmp_path / "p").ranking
    assert header[0].split(",") == list(whole)


def test_pairs_as_rows_and_as_arrays(tmp_path, cells):
    path = sites_file(tmp_path)
    for kind in ("csv", "npy"):
        assert run("rank", "--synapses", path, cells, "--into", tmp_path / kind, "--pairs", kind) == 0
    table = rows(tmp_path / "csv" / "pairs.csv")
    assert len(table) == 9 + 1 + 1
    with np.load(tmp_path / "npy" / "pairs.npz") as arrays:
        assert arrays["b.swc/site"].tolist() == ["tip", "mid", "again"]
        R = arrays["b.swc/R_transfer_MOhm"]
        np.testing.assert_array_equal(R, R.T)
        of_b = [float(row["R_transfer_MOhm"]) for row in table if row["file"] == "b.swc"]
        assert of_b == R.ravel().tolist()
    assert not (tmp_path / "npy" / "pairs.csv").exists()


def test_pairs_between_two_groups(tmp_path, cells):
    path = sites_file(tmp_path)
    whole = morphotone.rank(cells, path, pairs="csv").pairs["b.swc"]
    some = morphotone.rank(cells, path, pairs="csv", between=("far", "near")).pairs["b.swc"]
    assert some.site.tolist() == ["tip", "mid"]
    assert some.other_site.tolist() == ["again"]
    for name, matrix in some.matrices.items():
        np.testing.assert_array_equal(matrix, whole.matrices[name][:2, 2:])
    with pytest.raises(MorphotoneError, match="no site is of the group 'fur'; the groups are far, near"):
        morphotone.rank(cells, path, pairs="csv", between=("far", "fur"))
    with pytest.raises(
        MorphotoneError, match="read the groups far and near, expected two, together with pairs"
    ):
        morphotone.rank(cells, path, between=("far", "near"))
    with pytest.raises(MorphotoneError, match="read pairs = 'xls', expected csv or npy"):
        morphotone.rank(cells, path, pairs="xls")


def test_a_clamp_at_a_site(tmp_path, cells):
    path = sites_file(tmp_path)
    command_line = ("rank", cells, "--synapses", path, "--into", tmp_path / "out", "--clamp-MOhm", "5")
    run(*command_line, "--clamp-at", "tip")
    clamp = pd.read_csv(tmp_path / "out" / "clamp.csv")
    assert set(clamp["electrode"][clamp["file"] == "b.swc"]) == {"tip"}
    with pytest.raises(MorphotoneError, match="a clamp at site 'tip' without a series resistance"):
        morphotone.rank(cells, path, clamp_at="tip")
    with pytest.raises(MorphotoneError, match="there is no site 'nobody' to clamp"):
        morphotone.rank(cells, path, clamp_MOhm=5.0, clamp_at="nobody")


def test_a_fault_of_the_program_costs_the_sites_of_one_file(tmp_path, cells, monkeypatch):
    honest = command.site_answers

    def faulty(files, request):
        if any(file.name == "b.swc" for file in files):
            raise ZeroDivisionError("nothing to divide by")
        return honest(files, request)

    monkeypatch.setattr(command, "site_answers", faulty)
    given = morphotone.rank(cells, sites_file(tmp_path))
    assert given.counts["ranked"] == 2
    assert given.turned_away["reason"].tolist() == ["program_error"] * 3
    assert "ZeroDivisionError: nothing to divide by" in given.turned_away["sentence"][0]
    assert "b.swc" in given.turned_away["sentence"][0]


def test_sites_that_get_lost_are_noticed(tmp_path, cells, monkeypatch):
    monkeypatch.setattr(command, "_answers", lambda *args: iter(()))
    with pytest.raises(RuntimeError, match=r"some sites were lost.*'sites': 5, 'ranked': 0"):
        morphotone.rank(cells, sites_file(tmp_path))


def test_batches_hold_every_file_once(monkeypatch, tmp_path, cells):
    whole = morphotone.rank(cells, sites_file(tmp_path)).ranking
    monkeypatch.setattr(command, "_BATCH_BYTES", 1)
    pd.testing.assert_frame_equal(morphotone.rank(cells, sites_file(tmp_path)).ranking, whole)


def test_mirrored_tips_are_tied_whatever_their_last_bits(tmp_path):
    """Six equal trees obeying Rall's 3/2 law: all tips share rank 1, all stems' ends the last."""
    fill(tmp_path / "cells", {"rall.swc": trees.rall_neuron(trees=6, orders=3)})
    rec = morphotone.read(tmp_path / "cells" / "rall.swc")
    parents = set(rec.parent.tolist())
    tips = [int(rec.number[k]) for k in range(len(rec.number)) if k not in parents]
    stems = [int(rec.number[k]) for k in range(1, len(rec.number)) if rec.parent[k] == 0]
    lines = ["cell,site,sample", *(f"rall,s{number},{number}" for number in [*stems, *tips])]
    table = morphotone.rank(tmp_path / "cells", sites_file(tmp_path, lines), keep_unfit=True).ranking
    assert len(stems) == 6
    assert table["rank_in_cell"].tolist() == [1] * len(tips) + [len(tips) + 1] * 6
    assert table["tied_in_cell"].tolist() == [len(tips) - 1] * len(tips) + [5] * 6


def test_a_file_given_twice_is_one_file(tmp_path, cells):
    given = morphotone.rank([cells, cells / "b.swc"], sites_file(tmp_path))
    assert (given.counts["files"], given.counts["ranked"]) == (5, 5)


def test_progress_is_told_of_files_with_sites(tmp_path, cells):
    class Listening(Silent):
        def __init__(self):
            self.told = []

        def begin(self, files, size):
            self.told.append(files)

        def advance(self, step):
            self.told.append(asdict(step))

        def end(self):
            self.told.append("end")

    listening = Listening()
    morphotone.rank(cells, sites_file(tmp_path, [*SITES, *BAD]), progress=listening)
    assert listening.told[0] == 5
    assert listening.told[-1] == "end"
    assert sum(step["files"] for step in listening.told[1:-1]) == 5
    assert sum(step["turned_away"] for step in listening.told[1:-1]) == 2


def test_the_sample_study_by_the_example_of_help(beside_the_samples, capsys):
    """90 sites placed in three ways; what excites depolarises, and orders by path and attenuation differ."""
    (line,) = examples(capsys, "rank")
    assert called(line, capsys) == 0
    assert capsys.readouterr().out.startswith("90 sites = 90 ranked + 0 turned away, on 9 of 53 files\n")
    table, orders, veto = (
        pd.read_csv(beside_the_samples / "ranked" / f"{name}.csv") for name in ("ranking", "orders", "veto")
    )
    assert (table.groupby("cell").size() == 10).all()
    assert table["moved_um"].max() < 5
    assert (table.groupby("cell")["attenuation_to_soma"].diff().dropna() <= 0).all()
    assert sorted(table["rank_in_set"]) == list(range(1, 91))
    excites = table["group"] != "warden"
    assert (table["peak_soma_mV"][excites] > 0).all()
    assert (table["peak_soma_mV"][~excites] < 0).all()
    assert (table["peak_soma_mV"].abs() < table["steady_soma_mV"].abs()).all()
    assert (table["peak_soma_error_mV"] / table["peak_soma_mV"].abs()).max() < 1e-3
    of_set = orders[orders["within"] == "set"].set_index(["by_first", "by_second"])["tau_b"]
    assert 0.6 < of_set["path_um", "attenuation_to_soma"] < 0.7
    assert set(veto["cell"]) == set(table["cell"])
