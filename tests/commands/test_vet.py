"""Vetting from its command line: the table on the screen, the files it writes, the explanations."""

import numpy as np
import pandas as pd
import pytest

from morphotone.cable.assumptions import Assumptions
from morphotone.commands.vet import NOT_READ, Trust, explanation, screen, vet
from morphotone.errors import MorphotoneError
from morphotone.night.progress import Silent
from morphotone.reading.findings import CATALOGUE
from morphotone.reading.thresholds import Thresholds
from tests.commands.folders import BROKEN, DOUBTFUL, SOUND, STUDY, UNFIT, fill, rows, run
from tests.test_samples import FOUND, READ_WITHOUT_COMPLAINT, TURNED_AWAY

FILES = {"a.swc": SOUND, "b.swc": DOUBTFUL, "deep/c.swc": UNFIT, "deep/d.swc": BROKEN, "e.txt": "no"}


@pytest.fixture
def folder(tmp_path):
    return fill(tmp_path / "cells", FILES)


def test_every_file_of_a_folder_has_a_grade(folder):
    trust = vet(folder)
    assert trust.files["file"].tolist() == ["a.swc", "b.swc", "deep/c.swc", "deep/d.swc"]
    assert trust.files["cell"].tolist() == ["a", "b", "deep/c", "deep/d"]
    assert trust.files["grade"].tolist() == ["sound", "doubtful", "unfit", NOT_READ]
    assert trust.files["samples"].tolist() == [12, 2, 60, 0]
    assert trust.files["reason"].tolist() == ["", "", "", "not_a_number"]
    assert trust.files["sentence"][3].startswith("deep/d.swc: line 2: read '2 3 50 0 0 x 1', expected")
    assert trust.files["findings"][1].split() == ["soma_absent"]


def test_findings_are_a_row_each(folder):
    findings = vet(folder).findings
    assert list(findings) == [
        *("file", "cell", "grade", "code", "severity", "line", "sample", "count", "sentence", "effect")
    ]
    absent = findings[findings["code"] == "soma_absent"].iloc[0]
    assert (absent["file"], absent["cell"], absent["grade"]) == ("b.swc", "b", "doubtful")
    assert absent["effect"] == CATALOGUE["soma_absent"].effect
    assert "unit_implausible" in findings.loc[findings["file"] == "deep/c.swc", "code"].tolist()
    assert (findings[["line", "sample", "count"]].dtypes == "Int64").all()
    assert "deep/d.swc" not in findings["file"].tolist()


def test_nothing_seen_still_has_every_column(tmp_path):
    (tmp_path / "a.swc").write_text(SOUND, encoding="utf-8")
    trust = vet(tmp_path)
    assert trust.findings.shape == (0, 10)
    assert trust.files["findings"].tolist() == [""]


def test_files_are_vetted_whatever_their_names_and_folders_searched(folder):
    fill(folder, {"plain.txt": SOUND})
    trust = vet([folder / "plain.txt", str(folder / "deep"), folder / "a.swc"])
    assert trust.files["file"].tolist() == [
        *(str(folder / name) for name in ("plain.txt", "deep/c.swc", "deep/d.swc", "a.swc"))
    ]
    assert vet(str(folder / "a.swc")).files["grade"].tolist() == ["sound"]


def test_unit_and_thresholds_are_those_assumed(folder):
    in_nm = vet(folder / "deep" / "c.swc", Assumptions(unit_um=0.001)).files["findings"][0]
    assert "unit_implausible" not in in_nm
    strict = Assumptions(thresholds=Thresholds(soma_most_um=3.0))
    assert vet(folder / "a.swc").files["findings"][0] == ""
    assert "soma_odd" in vet(folder / "a.swc", strict).files["findings"][0]


def test_progress_is_told_of_every_file(folder):
    class Listening(Silent):
        def __init__(self):
            self.told = []

        def begin(self, files, size):
            self.told.append((files, size))

        def advance(self, step):
            self.told.append((step.files, step.samples, step.turned_away))

        def end(self):
            self.told.append("end")

    listening = Listening()
    vet(folder, progress=listening)
    size = sum(len(FILES[name]) for name in FILES if name.endswith(".swc"))
    assert listening.told == [(4, size), (1, 12, 0), (1, 2, 0), (1, 60, 1), (1, 0, 1), "end"]


@pytest.mark.parametrize(
    ("paths", "sentence"),
    [
        ([], "nothing to vet: read no path, expected files or folders"),
        ("nowhere", "nowhere: there is no such file or folder; check the spelling"),
        (["deep", "nowhere"], "nowhere: there is no such file or folder"),
        ("empty", r"empty: no file named \*\.swc"),
    ],
)
def test_what_is_not_there_is_said(folder, monkeypatch, paths, sentence):
    (folder / "empty").mkdir()
    monkeypatch.chdir(folder)
    with pytest.raises(MorphotoneError, match=sentence):
        vet(paths)


# ---------------------------------------------------------------- the screen


def trust_of(*files, codes=()):
    columns = ["file", "cell", "grade", "samples", "findings", "reason", "sentence"]
    return Trust(pd.DataFrame(files, columns=columns), pd.DataFrame({"code": list(codes)}))


def test_the_table_as_it_is_printed():
    trust = trust_of(
        ("a.swc", "a", "sound", 1234, "", "", ""),
        ("long/b.swc", "long/b", "doubtful", 7, "flat soma_absent", "", ""),
        ("c.swc", "c", "not read", 0, "", "empty", "c.swc: read an empty file"),
        codes=["flat", "soma_absent"],
    )
    assert screen(trust) == (
        "file        grade       samples  findings\n"
        "a.swc       sound         1,234\n"
        "long/b.swc  doubtful          7  flat soma_absent\n"
        "c.swc       not read          0  read an empty file\n"
        "\n"
        "3 files: 1 sound, 1 doubtful, 0 unfit, 1 not read\n"
        "morphotone vet --explain flat: what such a finding means"
    )


def test_one_sound_file_on_the_screen():
    """A column is never narrower than its heading."""
    assert screen(trust_of(("a", "a", "sound", 2, "", "", ""))).splitlines()[:2] == [
        "file  grade       samples  findings",
        "a     sound             2",
    ]


def test_long_names_are_cut_at_their_beginning():
    name = "folder/" * 20 + "cell.swc"
    line = screen(trust_of((name, name[:-4], "sound", 2, "", "", ""))).splitlines()[1]
    shown = line.split()[0]
    assert len(shown) == 60
    assert shown[0] == "…"
    assert name.endswith(shown[1:])


# ---------------------------------------------------------------- the command


@pytest.mark.parametrize(
    ("names", "code"), [(["a.swc"], 0), (["a.swc", "b.swc"], 0), (["deep/c.swc"], 1), (["deep/d.swc"], 1)]
)
def test_exit_code_1_where_something_cannot_be_used(folder, capsys, names, code):
    assert run("vet", *(folder / name for name in names)) == code
    printed = capsys.readouterr()
    assert printed.out == screen(vet([folder / name for name in names])) + "\n"
    assert printed.err == ""


def test_into_refuses_the_folder_of_a_survey(folder, tmp_path, capsys):
    (tmp_path / "ledger.sqlite").touch()
    assert run("vet", folder, "--into", tmp_path) == 2
    assert "holds a survey, whose findings.csv would be lost" in capsys.readouterr().err
    assert [path.name for path in tmp_path.glob("*.csv")] == []


def test_into_writes_what_python_returns(folder, tmp_path):
    assert run("vet", folder, "--into", tmp_path / "new" / "vetted") == 1
    trust = vet(folder)
    assert {path.name for path in (tmp_path / "new" / "vetted").iterdir()} == {"findings.csv", "grades.csv"}
    for name, table in (("findings", trust.findings), ("grades", trust.files)):
        path = tmp_path / "new" / "vetted" / f"{name}.csv"
        assert path.read_bytes().count(b"\r\n") == len(table) + 1
        written = rows(path)
        for column in table:
            expected = ["" if value is pd.NA else str(value) for value in table[column].tolist()]
            assert [row[column] for row in written] == expected


def test_the_unit_on_the_command_line(folder, capsys):
    assert run("vet", folder / "deep" / "c.swc", "--unit-um", "0.001") == 0
    assert "unit_implausible" not in capsys.readouterr().out


def test_an_unusable_assumptions_file_is_exit_code_2(folder, tmp_path, capsys):
    path = tmp_path / "bad.toml"
    path.write_text("[vetting]\nflatness = 1\n", encoding="utf-8")
    assert run("vet", folder, "--assume", path) == 2
    assert capsys.readouterr().err.startswith(f"morphotone vet: {path}: [vetting] flatness")


def test_a_missing_path_is_exit_code_2_and_one_sentence(tmp_path, capsys):
    assert run("vet", tmp_path / "nowhere") == 2
    assert capsys.readouterr().err == (
        f"morphotone vet: {tmp_path / 'nowhere'}: there is no such file or folder; check the spelling\n"
    )


def test_nothing_to_vet_is_exit_code_2(capsys):
    assert run("vet") == 2
    assert capsys.readouterr().err.startswith("usage: morphotone vet")


@pytest.mark.parametrize("code", CATALOGUE)
def test_every_finding_can_be_explained(code, capsys):
    assert run("vet", "--explain", code) == 0
    printed = capsys.readouterr().out
    kind, text = CATALOGUE[code], " ".join(printed.split())
    assert text.startswith(f"{code}: {kind.title} (usually {kind.severity}) ")
    assert kind.explanation in text
    assert text.endswith(f"Effect: {kind.effect}")
    assert max(map(len, printed.splitlines())) <= 96


def test_an_unknown_code_is_exit_code_2_and_names_those_there_are(capsys):
    assert run("vet", "--explain", "flatt") == 2
    error = capsys.readouterr().err
    assert "no finding has the code 'flatt'; the codes are axon_only, columns_extra" in error
    with pytest.raises(MorphotoneError, match="no finding has the code 'flatt'"):
        explanation("flatt")


def test_the_troubles_of_the_sample_study():
    trust = vet(STUDY / "troubles").files.set_index("cell")
    expected = dict.fromkeys(TURNED_AWAY, NOT_READ) | dict.fromkeys(READ_WITHOUT_COMPLAINT, "sound")
    expected |= {name: grade for name, (_, grade) in FOUND.items()}
    assert trust["grade"].to_dict() == expected
    for name, reason in TURNED_AWAY.items():
        assert trust.loc[name, "reason"] == reason
    for name, (code, _) in FOUND.items():
        assert code in trust.loc[name, "findings"].split()
    assert np.all(trust["samples"][list(FOUND)] > 1)
