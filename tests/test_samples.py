"""The invented study is what its page says, is drawn the same each time, and its troubles are troubles."""

import subprocess
import sys
from functools import cache
from pathlib import Path

import numpy as np
import pandas as pd
import pytest

from morphotone.cable.assumptions import Assumptions
from morphotone.cable.electrotonus import solve
from morphotone.errors import ReadingError
from morphotone.reading.reconstruction import Reconstruction, read
from morphotone.reading.vetting import vet_reconstruction

CHECKOUT = Path(__file__).resolve().parent.parent
STUDY = CHECKOUT / "sample_morphologies"
BY_HAND = {"README.md", "assumptions.toml", ".gitattributes"}
CELLS = sorted(path.stem for path in STUDY.glob("*.swc"))

#: Trouble -> the reason it is turned away when read, or the finding that vetting has to make of it.
TURNED_AWAY = {
    "columns_missing": "fields_missing",
    "coordinates_NA": "not_finite",
    "empty": "empty",
    "header_only": "empty",
    "loop": "loop",
    "numbers_twice": "number_repeated",
    "parent_absent": "parent_absent",
}
FOUND = {
    "columns_extra": ("columns_extra", "sound"),
    "commas": ("separator_odd", "sound"),
    "decimal_slipped": ("diameter_jump", "sound"),
    "diameters_coarse": ("diameter_quantised", "sound"),
    "diameters_thin": ("diameter_below_optics", "doubtful"),
    "domain_unknown": ("domain_unknown", "sound"),
    "flat": ("flat", "doubtful"),
    "nanometres": ("unit_implausible", "unfit"),
    "radii_minus_one": ("radius_minus_one", "unfit"),
    "radii_zero": ("radius_zero", "unfit"),
    "radius_negative": ("radius_negative", "doubtful"),
    "radius_placeholder": ("radius_constant", "unfit"),
    "roots_several": ("piece_apart", "doubtful"),
    "samples_coincident": ("samples_coincident", "sound"),
    "soma_absent": ("soma_absent", "doubtful"),
    "soma_not_root": ("soma_not_root", "sound"),
    "soma_outline": ("soma_outline", "sound"),
}
READ_WITHOUT_COMPLAINT = {"padded_CRLF", "unordered"}


@cache
def cell_of(name: str) -> Reconstruction:
    return read(STUDY / f"{name}.swc")


def rows_of(name: str) -> pd.DataFrame:
    return pd.read_csv(STUDY / name)


def test_drawing_again_gives_the_same_bytes(tmp_path: Path) -> None:
    script = CHECKOUT / "scripts" / "make_samples.py"
    subprocess.run([sys.executable, script, "--into", tmp_path], check=True, capture_output=True)
    drawn = {path.relative_to(tmp_path).as_posix(): path.read_bytes() for path in tmp_path.rglob("*.*")}
    kept = {
        path.relative_to(STUDY).as_posix(): path.read_bytes()
        for path in STUDY.rglob("*.*")
        if path.parent != STUDY / "pictures"  # of another script
    }
    assert drawn.keys() == kept.keys() - BY_HAND
    assert [name for name in drawn if drawn[name] != kept[name]] == []


def test_the_folder_stays_small() -> None:
    assert sum(path.stat().st_size for path in STUDY.rglob("*.*")) < 3_000_000


@pytest.mark.parametrize("path", sorted(STUDY.rglob("*.swc")), ids=lambda path: path.name)
def test_every_header_says_that_the_file_is_invented(path: Path) -> None:
    if path.name != "empty.swc":
        assert path.read_bytes().startswith(b"# Invented: ")


def test_there_are_nine_cells_in_each_of_three_classes() -> None:
    groups = rows_of("cells.csv")
    assert groups["class"].value_counts().to_dict() == {"spar": 9, "tether": 9, "bramble": 9}
    assert sorted(groups["cell"]) == sorted(rows_of("recordings.csv")["cell"]) == CELLS
    assert groups["spine_factor"].between(1.0, 2.5).all()


@pytest.mark.parametrize("name", CELLS)
def test_a_cell_is_sound_and_of_plausible_size(name: str) -> None:
    cell = cell_of(name)
    assert vet_reconstruction(cell).grade == "sound"
    assert 500 <= len(cell.number) <= 2500
    soma = cell.kind == 1
    assert 4.0 <= cell.radius[soma].max() <= 12.0
    inner = ~soma & ~soma[cell.parent]
    steps = np.linalg.norm(cell.position[inner] - cell.position[cell.parent[inner]], axis=1)
    assert 1.0 <= steps.min() <= steps.max() <= 8.0
    assert 0.17 <= cell.radius[~soma].min() <= cell.radius[~soma].max() <= 2.2


@pytest.mark.parametrize(
    ("name", "domains"), [("spar", {1, 3, 4}), ("tether", {1, 2, 3}), ("bramble", {1, 3})]
)
def test_a_class_has_its_own_domains_and_all_forms_of_soma(name: str, domains: set[int]) -> None:
    cells = [cell_of(cell) for cell in CELLS if cell.startswith(name)]
    assert all(set(cell.kind.tolist()) == domains for cell in cells)
    assert {int((cell.kind == 1).sum()) for cell in cells} == {1, 3, 5}


def test_every_trouble_is_expected_and_on_the_page() -> None:
    troubles = {path.stem for path in (STUDY / "troubles").glob("*.swc")}
    assert troubles == TURNED_AWAY.keys() | FOUND.keys() | READ_WITHOUT_COMPLAINT
    page = (STUDY / "README.md").read_text(encoding="utf-8")
    assert [name for name in troubles if f"`{name}`" not in page] == []


@pytest.mark.parametrize(("name", "reason"), TURNED_AWAY.items())
def test_a_file_that_cannot_be_read_is_turned_away(name: str, reason: str) -> None:
    with pytest.raises(ReadingError, match=f"{name}.swc") as caught:
        read(STUDY / "troubles" / f"{name}.swc")
    assert caught.value.reason == reason


@pytest.mark.parametrize(("name", "expected"), FOUND.items())
def test_a_doubt_is_found(name: str, expected: tuple[str, str]) -> None:
    code, grade = expected
    vetting = vet_reconstruction(read(STUDY / "troubles" / f"{name}.swc"))
    assert code in {finding.code for finding in vetting.findings}
    assert vetting.grade == grade


@pytest.mark.parametrize("name", sorted(READ_WITHOUT_COMPLAINT))
def test_odd_layout_alone_is_no_finding(name: str) -> None:
    assert vet_reconstruction(read(STUDY / "troubles" / f"{name}.swc")).findings == ()


def test_sites_have_one_place_each_and_a_label_of_their_own() -> None:
    sites = rows_of("sites.csv")
    assert not sites.duplicated(["cell", "site"]).any()
    ways = sites[["sample", "x_um", "branch"]].notna()
    assert (ways.sum(axis=1) == 1).all()
    assert ways.sum().to_dict() == {"sample": 63, "x_um": 18, "branch": 9}
    assert sites["fraction"].dropna().between(0, 1).all()
    assert sites[["g_peak_nS", "rise_ms", "decay_ms"]].gt(0).all(axis=None)


def test_sites_are_on_dendrites() -> None:
    sites = rows_of("sites.csv")
    for name, sample in sites[["cell", "sample"]].dropna().to_numpy():
        cell = cell_of(name)
        (kind,) = cell.kind[cell.number == sample]
        assert kind in (3, 4)
    for name, *place in sites[["cell", "x_um", "y_um", "z_um"]].dropna().to_numpy():
        apart = np.linalg.norm(cell_of(name).position - np.array(place, float), axis=1)
        assert apart.min() < 2.5


def test_recordings_are_within_what_such_cells_show() -> None:
    recordings = rows_of("recordings.csv")
    assert recordings["R_in_MOhm"].between(30, 400).all()
    assert recordings["tau0_ms"].between(5, 30).all()
    assert recordings["temperature_C"].between(30, 37).all()


def test_each_recording_is_near_its_own_cell() -> None:
    assumptions = Assumptions.from_toml((STUDY / "assumptions.toml").read_text(encoding="utf-8"))
    for name, recorded in rows_of("recordings.csv")[["cell", "R_in_MOhm"]].to_numpy():
        R_in = solve(cell_of(name), assumptions).R_in_MOhm[0, 0]
        assert 0.6 < R_in / recorded < 1.6, name


def test_the_assumptions_file_reads_without_a_warning() -> None:
    assumptions = Assumptions.from_toml((STUDY / "assumptions.toml").read_text(encoding="utf-8"))
    assert assumptions.warnings == ()
    assert assumptions.of(4).spine_factor == 1.8
    assert assumptions.of(1).spine_factor == 1.0
    assert assumptions.hz == (10.0, 100.0)
