"""The benchmark measures what it says it does; the figures themselves are the machine's."""

import json
import subprocess
import sys
from pathlib import Path

import pytest

from morphotone.reading.reconstruction import read
from morphotone.reading.vetting import vet_reconstruction

SCRIPTS = Path(__file__).resolve().parent.parent / "scripts"
TINY = ["--cells", "3", "--samples", "90", "--most-samples", "400", "--most-cells", "20", "--most-cases", "2"]
IN_ONE_PROCESS = ["runs", "stages", "time", "sites", "growth"]
IN_OTHERS = ["workers", "start", "memory", "limits"]
STAGES = {"read", "vet", "build", "solve", "tables", "ledger", "export", "rest"}


def measured(folder, *arguments):
    """Run the script; return what it printed and the figures it wrote."""
    written = folder / "benchmark.json"
    command = [sys.executable, str(SCRIPTS / "benchmark.py"), *TINY, *arguments, "--json", str(written)]
    done = subprocess.run(command, capture_output=True, text=True, check=False)
    assert done.returncode == 0, done.stderr
    return done.stdout, json.loads(written.read_text(encoding="utf-8"))


@pytest.fixture(scope="module")
def tiny(tmp_path_factory):
    return measured(tmp_path_factory.mktemp("tiny"), "--repeats", "2", "--parts", *IN_ONE_PROCESS)


@pytest.fixture
def scripts(monkeypatch):
    """Let the scripts be imported as they import each other."""
    monkeypatch.syspath_prepend(SCRIPTS)


def names_of(figures, part):
    return [row["name"] for row in figures["rows"] if row["part"] == part]


def assert_whole(printed, figures, parts):
    assert list(dict.fromkeys(row["part"] for row in figures["rows"])) == parts
    assert all(row["name"] in printed for row in figures["rows"])
    assert "3 files = 3 analysed + 0 turned away, 270 samples" in printed


def test_parts_are_measured_and_printed(tiny):
    assert_whole(*tiny, IN_ONE_PROCESS)


@pytest.mark.slow
def test_parts_with_processes_of_their_own_are_measured(tmp_path):
    printed, figures = measured(tmp_path, "--repeats", "1", "--parts", *IN_OTHERS)
    assert_whole(printed, figures, IN_OTHERS)
    assert len(names_of(figures, "memory")) == 5


def test_median_lies_between_least_and_greatest(tiny):
    rows = tiny[1]["rows"]
    assert all(row["least"] <= row["median"] <= row["greatest"] for row in rows)
    timed = [row for row in rows if row["unit"] and row["part"] != "stages"]
    assert all(row["least"] > 0 for row in timed)  # an exponent has no unit, and any sign


def test_stages_are_those_of_the_record(tiny):
    figures = tiny[1]
    stages = {row["name"]: row["median"] for row in figures["rows"] if row["part"] == "stages"}
    assert set(stages) == STAGES
    assert stages["read"] > 0  # the others may be over within the record's millisecond


def test_the_time_axis_stands_in_sweeps_beside_its_targets(tiny):
    printed, figures = tiny
    rows = {row["name"]: row for row in figures["rows"] if row["part"] == "time"}
    case = rows.pop("one case, at 0 Hz")
    assert (case["unit"], case["target"]) == ("ms", None)
    assert {row["unit"] for row in rows.values()} == {"sweeps"}
    targets = {name: row["target"] for name, row in rows.items() if row["target"] is not None}
    assert targets == {
        "all delays": 2.0,
        "three time constants": 60.0,
        "peak and half-width, all samples": 150.0,
    }
    for name, target in targets.items():
        (line,) = (line for line in printed.splitlines() if line.startswith(f"  {name} "))
        assert line.endswith(f" sweeps (target: at most {target:.0f})")
    assert rows["41 frequencies"]["target"] is None
    assert "two frequencies and delays" in printed


def test_growth_names_each_size_and_an_exponent(tiny):
    names = names_of(tiny[1], "growth")
    for size in ("samples in one cell: 4", "samples in one cell: 400", "solving at 0 Hz, assumptions: 2"):
        assert size in names
    assert sum(name.endswith(": exponent") for name in names) == 4


def test_a_given_folder_is_measured_without_being_written_to(scripts, tmp_path, capsys):
    import benchmark

    branch = [f"{n} 3 {9.3 * n} 0 {n % 3} {0.8 - n / 50} {n - 1}" for n in range(2, 9)]
    (tmp_path / "sound.swc").write_text("\n".join(["1 1 0 0 0 5 -1", *branch]), encoding="ascii")
    (tmp_path / "broken.swc").write_text("1 1 0 0\n", encoding="ascii")
    assert benchmark.main([str(tmp_path), "--parts", "runs", "--repeats", "1"]) == 0
    assert "2 files = 1 analysed + 1 turned away" in capsys.readouterr().out
    assert sorted(path.name for path in tmp_path.iterdir()) == ["broken.swc", "sound.swc"]


def test_a_folder_without_reconstructions_is_refused(scripts, tmp_path, capsys):
    import benchmark

    assert benchmark.main([str(tmp_path), "--parts", "runs"]) == 2
    assert str(tmp_path) in capsys.readouterr().err


@pytest.mark.parametrize("arguments", [["--repeats", "0"], ["--most-cells", "1"], ["--samples", "many"]])
def test_numbers_that_measure_nothing_are_refused(scripts, capsys, arguments):
    import benchmark

    with pytest.raises(SystemExit, match="2"):
        benchmark.main(arguments)
    assert f"read '{arguments[1]}', expected a whole number" in capsys.readouterr().err


@pytest.mark.parametrize("samples", [2, 3, 61, 95, 2000])
def test_drawn_cells_have_their_samples_and_are_sound(scripts, tmp_path, samples):
    from benchmark_cells import draw_folder

    folder = draw_folder(tmp_path / "drawn", 2, samples)
    recs = [read(path) for path in sorted(folder.iterdir())]
    assert [len(rec.number) for rec in recs] == [samples, samples]
    assert [vet_reconstruction(rec).grade for rec in recs] == ["sound", "sound"]
    assert recs[0].sha256 != recs[1].sha256


def test_drawn_cells_are_the_same_each_time(scripts, tmp_path):
    from benchmark_cells import draw_folder

    few, more = (draw_folder(tmp_path / name, count, 200) for name, count in (("few", 1), ("more", 2)))
    assert (few / "drawn_00000.swc").read_bytes() == (more / "drawn_00000.swc").read_bytes()


def test_exponent_is_the_slope_of_the_logarithms(scripts):
    """Seconds that grow as n^1.5, hand-made, give 1.5 whatever the constant."""
    from benchmark_growth import grown

    exponent = list(grown("things", {n: [2.0 * n**1.5, 5.0 * n**1.5] for n in (1, 10, 1000)}))[-1]
    assert exponent.median == pytest.approx(1.5)
