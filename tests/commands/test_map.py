"""`morphotone map` from its command line: what it writes, says and returns, and how it goes on."""

import json
import subprocess
import sys
import time
from importlib.metadata import version

import pytest
from matplotlib.image import imread

import morphotone
from morphotone.errors import MorphotoneError, ReadingError, ResultsError
from morphotone.showing.map_files import AREAS
from tests import trees
from tests.commands.folders import SMALL, STUDY, called, examples, fill, rows, run

DRAWN_BY = ("matplotlib", "pillow", "trimesh")
SITES = """\
cell,site,sample,x_um,y_um,z_um
b,near,2,,,
b,far,4,,,
b,nowhere,,9000,0,0
a,other,3,,,
zz,unknown,1,,,
"""


def mapped(path, into, *options):
    """Run `morphotone map` in this process."""
    return run("map", path, "--into", into, "--workers", "1", *options)


@pytest.fixture
def small(tmp_path):
    return fill(tmp_path / "cells", SMALL)


@pytest.fixture
def maps(tmp_path):
    return tmp_path / "maps"


def files(folder):
    """Return the paths below a folder of all files but the record, the log and the ledger."""
    apart = ("run.json", "log.txt", "ledger.sqlite", "assumptions.toml")
    return {path.relative_to(folder).as_posix() for path in folder.rglob("*") if path.is_file()} - set(apart)


def test_the_example_of_the_help_works(beside_the_samples, capsys):
    (line,) = examples(capsys, "map")
    assert called(line, capsys) == 0
    assert capsys.readouterr().out == (
        "1 file found = 1 drawn + 0 turned away\n"
        "90 sites = 10 marked + 0 turned away + 80 of other cells\n"
        "maps: maps\n"
    )


def test_a_folder_gives_one_of_each_per_cell(small, maps, capsys):
    assert mapped(small, maps, "--mesh", "ply", "--figure", "svg", "pdf") == 1
    assert capsys.readouterr().out == (
        f"5 files found = 3 drawn + 2 turned away\nmaps: {maps}\n"
        f"why files were turned away: {maps / 'turned_away.csv'}\n"
    )
    drawn = ["a.swc", "b.swc", "deep/er/c.SWC"]
    table = rows(maps / "maps.csv")
    areas = [{column: row.pop(column) for column in AREAS} for row in table]
    assert table == [
        {
            "file": name,
            "cell": name[:-4],
            "figure": f"figures/{name}.svg",
            "thumbnail": f"thumbnails/{name}.png",
            "mesh": f"meshes/{name}.ply",
            "colour_bar": f"meshes/{name}.scale.png",
            "table": f"samples/{name}.csv",
        }
        for name in drawn
    ]
    for area in areas:
        assert float(area["mesh_area_um2"]) == pytest.approx(float(area["cable_area_um2"]), rel=0.02)
        assert 0 <= float(area["facet_error"]) < 0.02
        assert area["area_agrees"] == "True"
    named = {path for row in table for path in list(row.values())[2:]}
    assert files(maps) == named | {f"figures/{name}.pdf" for name in drawn} | {"maps.csv", "turned_away.csv"}
    assert [row["reason"] for row in rows(maps / "turned_away.csv")] == ["not_a_number", "unfit"]
    record = json.loads((maps / "run.json").read_text(encoding="utf-8"))
    assert record["counts"].items() >= {"found": 5, "analysed": 3, "turned_away": 2}.items()
    assert record["figure"] == ["svg", "pdf"]
    assert {name: record["packages"][name] for name in DRAWN_BY} == {name: version(name) for name in DRAWN_BY}
    (sitting,) = record["sittings"]
    assert (sitting["how"], sitting["entered"]) == ("ended", {"analysed": 3, "turned_away": 2})
    assert "ended: 3 analysed, 2 turned away" in (maps / "log.txt").read_text(encoding="utf-8")


def test_a_mesh_of_another_area_than_its_cable_is_said(small, maps, capsys, monkeypatch):
    monkeypatch.setattr("morphotone.showing.mesh.BEND_ERROR", -1.0)
    assert mapped(small / "a.swc", maps, "--mesh", "ply") == 0
    assert (
        "note: 1 mesh has another area than the cable, by more than facet_error and 0.5% of it; "
        f"area_agrees in {maps / 'maps.csv'} says which\n"
    ) in capsys.readouterr().out
    assert [row["area_agrees"] for row in rows(maps / "maps.csv")] == ["False"]
    made = morphotone.draw_maps(small / "b.swc", maps, shown=morphotone.MapRequest(mesh="ply"))
    assert made.maps["area_agrees"].tolist() == [False, False]
    assert made.maps["mesh_area_um2"].dtype == "float64"


def test_without_a_mesh_there_are_no_areas(small, maps):
    made = morphotone.draw_maps(small / "a.swc", maps)
    assert made.maps[list(AREAS)].isna().all(axis=None)


def test_samples_in_one_place_without_a_soma_are_turned_away(tmp_path, maps, capsys):
    place = "1 3 0 0 0 1 -1\n2 3 0 0 0 1 1\n3 3 0 0 0 1 2\n"
    path = fill(tmp_path / "cells", {"point.swc": place}) / "point.swc"
    assert mapped(path, maps, "--keep-unfit") == 1
    (row,) = rows(maps / "turned_away.csv")
    assert row["reason"] == "nothing_to_draw"
    assert row["sentence"].startswith(
        "point.swc: read samples in one place and no soma, expected cable of some"
    )
    with pytest.raises(ReadingError, match="one place and no soma"):
        morphotone.draw_map(path, keep_unfit=True)


@pytest.mark.parametrize(
    "swc",
    {
        "only an axon": "1 2 0 0 0 1 -1\n2 2 10 0 0 1 1\n3 2 20 5 0 1 2\n",
        "no soma": "1 3 0 0 0 1 -1\n2 3 10 0 0 1 1\n3 3 20 5 0 1 1\n",
        "no cable of any length": "1 1 0 0 0 5 -1\n2 3 5 0 0 1 1\n3 3 5 0 0 1 2\n",
        "across the plane": "1 1 0 0 0 5 -1\n2 3 0 0 5 1 1\n3 3 0 0 105 1 2\n",
    }.values(),
)
def test_odd_cells_are_drawn(tmp_path, maps, swc):
    cells = fill(tmp_path / "cells", {"odd.swc": swc})
    assert mapped(cells, maps, "--keep-unfit", "--mesh", "glb", "--colour", "lambda_um") == 0


def test_why_a_single_file_is_turned_away_is_said_at_once(small, maps, capsys):
    assert mapped(small / "deep/broken.swc", maps) == 1
    assert f"maps: {maps}\n  broken.swc: line 2: read " in capsys.readouterr().out


def test_the_folder_of_a_survey_is_refused(small, tmp_path, capsys):
    run("survey", small, "--into", tmp_path / "results", "--workers", "1")
    assert mapped(small, tmp_path / "results") == 2
    assert "results holds what another command, or another version of" in capsys.readouterr().err


def test_the_table_is_the_surveys(small, maps, tmp_path):
    mapped(small, maps, "--hz", "100")
    run("survey", small, "--into", tmp_path / "results", "--samples", "--hz", "100", "--workers", "1")
    for name in ("a.swc", "deep/er/c.SWC"):
        table = f"samples/{name}.csv"
        assert (maps / table).read_bytes() == (tmp_path / "results" / table).read_bytes()


def test_the_same_command_goes_on_and_draws_what_is_missing(small, maps, capsys):
    mapped(small, maps)
    before = {path: (maps / path).stat().st_mtime_ns for path in files(maps)}
    (maps / "figures/b.swc.png").unlink()
    (small / "a.swc").write_text(trees.soma_chain(), encoding="utf-8")
    (small / "deep/er/c.SWC").unlink()
    capsys.readouterr()
    assert mapped(small, maps) == 1
    assert "4 files found = 2 drawn + 2 turned away (2 of them unchanged" in capsys.readouterr().out
    assert [row["file"] for row in rows(maps / "maps.csv")] == ["a.swc", "b.swc"]
    assert files(maps) == {path for path in before if "c.SWC" not in path}
    changed = {path for path in files(maps) if (maps / path).stat().st_mtime_ns != before[path]}
    assert {"figures/a.swc.png", "figures/b.swc.png"} <= changed
    assert mapped(small, maps) == 1
    assert "(4 of them unchanged" in capsys.readouterr().out


@pytest.mark.slow
def test_any_number_of_workers_gives_the_same_bytes(small, tmp_path):
    contents = []
    for workers in ("1", "2"):
        into = tmp_path / workers
        mapped(small, into, "--mesh", "obj", "--figure", "pdf", "--workers", workers)
        contents.append({path: (into / path).read_bytes() for path in files(into)})
    assert contents[0] == contents[1]


@pytest.mark.slow
def test_a_run_that_is_killed_goes_on_to_the_same_maps(small, tmp_path):
    (small / "a.swc").unlink()
    words = ["map", str(small), "--workers", "2", "--into"]
    killed, undisturbed = tmp_path / "killed", tmp_path / "undisturbed"
    process = subprocess.Popen(
        [sys.executable, "-m", "morphotone", *words, str(killed)], stderr=subprocess.DEVNULL
    )
    while process.poll() is None and not list(killed.glob("figures/**/*.png")):
        time.sleep(0.01)
    process.kill()
    assert process.wait() < 0
    assert not (killed / "maps.csv").exists()
    time.sleep(2.0)  # its workers end by themselves
    for into in (killed, undisturbed):
        assert run(*words, into) == 1
    assert files(killed) == files(undisturbed)
    assert all((killed / path).read_bytes() == (undisturbed / path).read_bytes() for path in files(killed))


def test_single_cells_stand_beside_each_other(small, maps):
    assert mapped(small / "a.swc", maps) == 0
    assert mapped(small / "b.swc", maps) == 0
    assert [row["file"] for row in rows(maps / "maps.csv")] == ["a.swc", "b.swc"]
    assert len(imread(maps / "figures/a.swc.png")) > 100
    assert mapped(small / "deep/broken.swc", maps) == 1
    assert [row["file"] for row in rows(maps / "turned_away.csv")] == ["broken.swc"]


@pytest.mark.parametrize(
    ("options", "said"),
    [
        (["--width", "85"], "width_mm was 175, is 85"),
        (["--hz", "50"], "shown_hz was 0.0, is 50.0"),
        (["--colour", "X"], 'colour was null, is "X"'),
        (["--keep-unfit"], "keep_unfit was false, is true"),
    ],
)
def test_maps_made_otherwise_are_refused_with_the_difference(small, maps, capsys, options, said):
    mapped(small / "b.swc", maps)
    assert mapped(small / "b.swc", maps, *options) == 2
    assert said in capsys.readouterr().err


def test_a_folder_of_other_tables_is_refused(small, capsys):
    fill(small, {"results/mine.csv": "a,b\n"})
    assert mapped(small, small / "results") == 2
    assert "holds mine.csv but no ledger.sqlite" in capsys.readouterr().err


@pytest.mark.parametrize("column", ["domain", "attenuation_to_soma_100Hz", "shoe_size"])
def test_a_column_that_cannot_colour_is_refused_before_any_work(small, maps, capsys, column):
    assert mapped(small, maps, "--colour", column) == 2
    said = capsys.readouterr().err
    assert f"no numeric column '{column}'" in said
    assert "path_um, straight_um, lambda_um, X" in said
    assert not maps.exists()


def test_what_is_asked_of_the_time_axis_may_colour(small, maps):
    options = ["--delays", "--transient", "0.3", "2", "--colour", "delay_total_ms", "--hz", "100"]
    assert mapped(small / "b.swc", maps, *options) == 0
    (_, *table) = rows(maps / "samples/b.swc.csv")
    assert {"delay_total_ms", "peak_soma_mV_per_pA", "attenuation_to_soma_100Hz"} <= table[0].keys()
    assert all(float(row["delay_total_ms"]) > 0 for row in table)


@pytest.mark.parametrize("workers", ["1", pytest.param("2", marks=pytest.mark.slow)])
def test_every_site_is_accounted_for(small, maps, tmp_path, capsys, workers):
    sites = tmp_path / "sites.csv"
    sites.write_text(SITES, encoding="utf-8")
    assert mapped(small, maps, "--synapses", sites, "--workers", workers) == 1
    assert "5 sites = 3 marked + 2 turned away\n" in capsys.readouterr().out
    away = rows(maps / "turned_away_sites.csv")
    assert [(row["line"], row["site"], row["reason"]) for row in away] == [
        ("4", "nowhere", "too_far"),
        ("6", "unknown", "cell_unknown"),
    ]
    fill(small, {"b.swc": "1 1 0 0 0 x -1\n"})
    assert mapped(small, maps, "--synapses", sites, "--workers", workers) == 1
    assert "5 sites = 1 marked + 4 turned away\n" in capsys.readouterr().out


def test_beside_a_single_cell_sites_of_others_are_nobodys_fault(small, maps, tmp_path, capsys):
    sites = tmp_path / "sites.csv"
    sites.write_text(SITES, encoding="utf-8")
    assert mapped(small / "a.swc", maps, "--synapses", sites) == 0
    assert "5 sites = 1 marked + 0 turned away + 4 of other cells\n" in capsys.readouterr().out


def test_what_the_disk_refuses_is_said_and_tried_again(small, maps, capsys):
    fill(maps, {"thumbnails": "a file in the place of a folder"})
    assert mapped(small / "b.swc", maps) == 1
    (away,) = rows(maps / "turned_away.csv")
    assert (away["file"], away["reason"]) == ("b.swc", "not_written")
    assert "cannot be written" in away["sentence"]
    (maps / "thumbnails").unlink()
    assert mapped(small / "b.swc", maps) == 0
    assert rows(maps / "turned_away.csv") == []


def test_strict_stops_at_the_first_file_turned_away(small, maps, capsys):
    assert mapped(small, maps, "--strict") == 1
    assert "deep/broken.swc,not_a_number" in capsys.readouterr().err


def test_from_python(small, maps):
    made = morphotone.draw_maps(small, maps, shown=morphotone.MapRequest(formats=("svg",), width_mm=85))
    assert isinstance(made, morphotone.Maps)
    assert made.maps["figure"].tolist()[0] == "figures/a.swc.svg"
    assert made.turned_away["file"].tolist() == ["deep/broken.swc", "deep/unfit.swc"]
    assert (made.sites, made.tally.analysed) == ({}, 3)
    with pytest.raises(ResultsError, match="other conditions"):
        morphotone.draw_maps(small, maps)
    with pytest.raises(MorphotoneError, match="no such file or folder"):
        morphotone.draw_maps(small / "gone", maps)


def test_one_map_from_python(small):
    figure = morphotone.draw_map(STUDY / "spar_01.swc", synapses=STUDY / "sites.csv", hz=100.0)
    assert "at 100 Hz" in " ".join(text.get_text() for text in figure.texts)
    with pytest.raises(ReadingError, match="expected a number"):
        morphotone.draw_map(small / "deep/broken.swc")
    with pytest.raises(ReadingError, match="unfit"):
        morphotone.draw_map(small / "deep/unfit.swc")
    with pytest.raises(ReadingError, match=r"gone\.swc"):
        morphotone.draw_map(small / "gone.swc")


@pytest.mark.parametrize(
    ("asked", "said"),
    [
        ({"formats": ("gif",)}, r"read formats = \('gif',\), expected png or svg or pdf"),
        ({"formats": ()}, "read formats"),
        ({"width_mm": 90}, "read width_mm = 90, expected 85 or 175"),
        ({"plane": "zx"}, "read plane = 'zx', expected xy or xz or yz"),
        ({"mesh": "stl"}, "read mesh = 'stl', expected glb or ply or obj"),
    ],
)
def test_what_cannot_be_drawn_is_refused(asked, said):
    with pytest.raises(MorphotoneError, match=said):
        morphotone.MapRequest(**asked)
