"""What a script has: every public name, each loaded only when it is asked for."""

import json
import subprocess
import sys
from pathlib import Path

import pytest

import morphotone
from tests import trees

HEAVY = {"numpy", "pandas", "scipy", "joblib", "sqlite3", "tqdm", "matplotlib", "trimesh"}


def loaded_after(code):
    """Return the heavy packages that a fresh process has loaded after running some code."""
    code += "\nimport json, sys; print('\\n' + json.dumps(sorted(sys.modules)))"
    done = subprocess.run([sys.executable, "-c", code], check=True, capture_output=True, text=True)
    return HEAVY & set(json.loads(done.stdout.splitlines()[-1]))


@pytest.mark.parametrize("name", morphotone.__all__)
def test_a_public_name_is_what_it_is_called(name):
    public = getattr(morphotone, name)
    assert public.__name__ == name
    assert public.__module__ == morphotone._HOMES[name]
    assert public.__doc__


def test_the_names_are_sorted_and_each_has_a_home():
    assert morphotone.__all__ == sorted(morphotone.__all__)
    assert set(morphotone.__all__) == set(morphotone._HOMES)


def test_an_unknown_name_is_refused_in_the_usual_words():
    with pytest.raises(AttributeError, match="module 'morphotone' has no attribute 'analyse'"):
        _ = morphotone.analyse


def test_importing_morphotone_loads_nothing_heavy():
    assert loaded_after("import morphotone") == set()


@pytest.mark.parametrize("word", ["--help", "--version"])
def test_help_does_not_wait_for_what_it_does_not_need(word):
    """As `python -m morphotone` runs it, but in a process that then tells what it has loaded."""
    code = f"""
import runpy, sys
sys.argv = ["morphotone", {word!r}]
try:
    runpy.run_module("morphotone", run_name="__main__")
except SystemExit as left:
    assert left.code == 0
"""
    assert loaded_after(code) == set()


def test_a_survey_does_not_wait_for_what_draws():
    assert loaded_after("import morphotone.commands.survey").isdisjoint({"matplotlib", "trimesh"})


def test_star_import_brings_the_public_names():
    assert loaded_after("from morphotone import *\nassert survey and read and Assumptions") >= {"pandas"}


def test_the_way_from_a_file_to_numbers(tmp_path):
    """The lines at the head of the package, on a ball and stick."""
    path = tmp_path / "cell.swc"
    path.write_text(trees.ball_and_stick(), encoding="utf-8")
    rec = morphotone.read(path)
    assert isinstance(rec, morphotone.Reconstruction)
    result = morphotone.solve(rec, hz=[100])
    assert isinstance(result, morphotone.Electrotonus)
    assert result.attenuation_to_soma.shape == (5, 2)
    assumptions = morphotone.Assumptions(membrane=morphotone.Membrane(R_m_ohm_cm2=15000))
    tables = morphotone.survey(tmp_path, assumptions=assumptions)
    assert isinstance(tables, morphotone.Survey)
    R_in = morphotone.solve(rec, assumptions).R_in_MOhm[0, 0]
    assert tables.cells["R_in_MOhm"].tolist() == [R_in]
    assert tables.cells["R_m_ohm_cm2"].tolist() == [15000.0]
    assert morphotone.vet(tmp_path).files["grade"].tolist() == ["sound"]
    assert list(tmp_path.iterdir()) == [path]


def test_errors_are_one_family(tmp_path):
    for error in (morphotone.ReadingError, morphotone.AssumptionError, morphotone.ResultsError):
        assert issubclass(error, morphotone.MorphotoneError)
    with pytest.raises(morphotone.ReadingError, match=r"gone\.swc"):
        morphotone.read(tmp_path / "gone.swc")
    with pytest.raises(morphotone.AssumptionError, match="R_m_ohm_cm2"):
        morphotone.Membrane(R_m_ohm_cm2=-1)


def test_types_are_shipped():
    assert (Path(morphotone.__file__).parent / "py.typed").exists()
