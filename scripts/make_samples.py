"""Draws the invented study in sample_morphologies: cells, groups, synapse sites, recordings, troubles.

    python scripts/make_samples.py [--into FOLDER]

The animal, its brain and every number are invented. Running it again gives the same bytes.
"""

from __future__ import annotations

import argparse
import csv
import io
from collections.abc import Iterable, Sequence
from dataclasses import dataclass
from pathlib import Path

import numpy as np
from numpy.random import Generator
from sample_growth import APICAL, AXON, BASAL, Arbor, Range, Sample, draw_soma, grow, input_resistance
from sample_troubles import draw_troubles, plain, rows_of

FOLDER = Path(__file__).resolve().parent.parent / "sample_morphologies"
INVENTED = "Invented: drawn by scripts/make_samples.py, no animal was studied and no tissue was seen."
STUDY = "harbour nucleus of the reed vole, an invented animal"
SOMA_FORMS = ("one point", "three-point", "chain")
ANIMALS = ("Alder", "Birch", "Cedar", "Damson")
CELLS_PER_CLASS = 9
CELLS_WITH_SITES = 3
SITES_PER_CELL = 10
R_I_OHM_CM = 150.0


@dataclass(frozen=True)
class CellClass:
    """One invented class of neurons."""

    name: str
    layer: str
    soma_radius: Range  #: um
    arbors: tuple[Arbor, ...]
    spine_factor: float  #: typical of the class's dendrites
    R_m: float  #: behind the recordings, ohm cm2
    C_m: float  #: behind the recordings, uF/cm2


@dataclass(frozen=True)
class Cell:
    """One drawn cell."""

    name: str
    of: CellClass
    soma: str
    samples: list[Sample]
    spine_factor: float
    animal: str
    age_days: int


SPAR = CellClass(
    name="spar",
    layer="deep",
    soma_radius=(7.0, 10.0),
    arbors=(
        Arbor(
            kind=BASAL,
            stems=(4, 6),
            stem_diameter=(1.4, 2.4),
            tip_diameter=(0.5, 0.8),
            between_forks=(20.0, 60.0),
            last_branch=(60.0, 150.0),
            reach=(160.0, 260.0),
            forks=4,
            share=(0.5, 0.75),
            step=4.5,
            wander=0.14,
            heading=(0.0, -0.6, 0.0),
        ),
        Arbor(
            kind=APICAL,
            stems=(1, 1),
            stem_diameter=(3.2, 4.0),
            tip_diameter=(0.5, 0.8),
            between_forks=(35.0, 85.0),
            last_branch=(70.0, 170.0),
            reach=(520.0, 690.0),
            forks=8,
            share=(0.78, 0.92),
            step=4.5,
            wander=0.12,
            drift=(0.0, 0.06, 0.0),
            heading=(0.0, 8.0, 0.0),
        ),
    ),
    spine_factor=1.8,
    R_m=18000.0,
    C_m=0.9,
)
TETHER = CellClass(
    name="tether",
    layer="middle",
    soma_radius=(8.0, 12.0),
    arbors=(
        Arbor(
            kind=AXON,
            stems=(1, 1),
            stem_diameter=(1.2, 1.8),
            tip_diameter=(0.4, 0.6),
            between_forks=(60.0, 130.0),
            last_branch=(100.0, 220.0),
            reach=(450.0, 700.0),
            forks=7,
            share=(0.68, 0.88),
            step=5.5,
            wander=0.1,
            drift=(0.02, -0.03, 0.0),
            heading=(0.0, -6.0, 0.0),
        ),
        Arbor(
            kind=BASAL,
            stems=(4, 5),
            stem_diameter=(2.2, 3.6),
            tip_diameter=(0.5, 0.8),
            between_forks=(30.0, 90.0),
            last_branch=(80.0, 180.0),
            reach=(250.0, 400.0),
            forks=5,
            share=(0.55, 0.8),
            step=5.0,
            wander=0.12,
        ),
    ),
    spine_factor=1.4,
    R_m=14000.0,
    C_m=0.95,
)
BRAMBLE = CellClass(
    name="bramble",
    layer="upper",
    soma_radius=(4.0, 6.0),
    arbors=(
        Arbor(
            kind=BASAL,
            stems=(5, 8),
            stem_diameter=(1.2, 2.2),
            tip_diameter=(0.4, 0.65),
            between_forks=(12.0, 35.0),
            last_branch=(40.0, 85.0),
            reach=(120.0, 180.0),
            forks=6,
            share=(0.55, 0.82),
            step=1.9,
            wander=0.2,
        ),
    ),
    spine_factor=1.05,
    R_m=9000.0,
    C_m=1.0,
)
CLASSES = (SPAR, TETHER, BRAMBLE)

#: group, peak conductance nS, driving force mV, rise ms, decay ms
INPUTS = (
    ("ferry", (0.3, 0.9), 70.0, (0.2, 0.4), (1.5, 3.0)),
    ("heron", (0.2, 0.6), 70.0, (0.4, 0.8), (3.0, 6.0)),
    ("warden", (0.5, 1.5), -8.0, (0.5, 0.9), (7.0, 12.0)),
)


def draw_cell(class_number: int, number: int) -> Cell:
    """Return one cell; its random numbers depend on nothing but the two numbers."""
    rng = np.random.default_rng([class_number, number])
    of = CLASSES[class_number]
    form = SOMA_FORMS[(class_number + number) % len(SOMA_FORMS)]
    centre = [round(float(rng.uniform(*span)), 2) for span in ((100, 900), (100, 900), (40, 90))]
    samples, bases = draw_soma(rng, form, round(float(rng.uniform(*of.soma_radius)), 1), centre)
    for arbor in of.arbors:
        grow(rng, arbor, samples, bases[arbor.kind])
    return Cell(
        name=f"{of.name}_{number + 1:02d}",
        of=of,
        soma=form,
        samples=samples,
        spine_factor=round(max(1.0, float(of.spine_factor + 0.06 * rng.normal())), 2),
        animal=ANIMALS[number % len(ANIMALS)],
        age_days=24 + 3 * (number % len(ANIMALS)),
    )


def swc(cell: Cell) -> bytes:
    """Return a cell's file."""
    header = (
        INVENTED,
        f"Study: {STUDY}. Class {cell.of.name}, cell {cell.name}, animal {cell.animal}.",
        f"Soma: {cell.soma}. Spines were not traced; the groups table gives a spine factor.",
        "Columns: number, type, x, y, z, radius, parent; micrometres.",
    )
    return ("".join(f"# {line}\n" for line in header) + plain(rows_of(cell.samples))).encode("ascii")


def table(columns: Sequence[str], rows: Iterable[Sequence[object]]) -> bytes:
    """Return a CSV file."""
    text = io.StringIO()
    writer = csv.writer(text, lineterminator="\n")
    writer.writerow(columns)
    writer.writerows(rows)
    return text.getvalue().encode("utf-8")


def groups(cells: Sequence[Cell]) -> bytes:
    """Return the groups table."""
    return table(
        ("cell", "class", "animal", "layer", "age_days", "spine_factor"),
        ((c.name, c.of.name, c.animal, c.of.layer, c.age_days, c.spine_factor) for c in cells),
    )


def recordings(cells: Sequence[Cell]) -> bytes:
    """Return what whole-cell recordings of these cells might have shown."""
    columns = ("cell", "R_in_MOhm", "tau0_ms", "temperature_C")
    return table(columns, (recording(cell, number) for number, cell in enumerate(cells)))


def recording(cell: Cell, number: int) -> tuple[str, str, str, str]:
    """Return one invented recording: the cell's own passive answer, R_m varied and noise added."""
    rng = np.random.default_rng([31, number])
    R_m = cell.of.R_m * np.exp(0.1 * rng.normal())
    R_in = input_resistance(cell.samples, R_m, R_I_OHM_CM, cell.spine_factor)
    tau0_ms = 1e-3 * R_m * cell.of.C_m * np.exp(0.03 * rng.normal())
    R_in *= np.exp(0.05 * rng.normal())
    return cell.name, f"{R_in:.1f}", f"{tau0_ms:.1f}", f"{rng.uniform(32.0, 35.0):.1f}"


def sites(cells: Sequence[Cell]) -> bytes:
    """Return synapse sites on the first few cells of each class."""
    chosen = [cell for cell in cells if int(cell.name[-2:]) <= CELLS_WITH_SITES]
    columns = (
        *("cell", "site", "sample", "fraction", "x_um", "y_um", "z_um", "branch", "along_um"),
        *("g_peak_nS", "driving_force_mV", "rise_ms", "decay_ms", "group"),
    )
    return table(columns, (row for number, cell in enumerate(chosen) for row in sites_of(cell, number)))


def sites_of(cell: Cell, number: int) -> Iterable[tuple[object, ...]]:
    """Yield one cell's sites: seven by sample, two by coordinates, one by branch."""
    rng = np.random.default_rng([47, number])
    dendrites = [row for row, sample in enumerate(cell.samples) if sample.kind in (BASAL, APICAL)]
    rows = sorted(int(row) for row in rng.choice(dendrites, SITES_PER_CELL, replace=False))
    for label, row in enumerate(rows, 1):
        group, conductance, force, rise, decay = INPUTS[label % len(INPUTS)]
        times = (f"{rng.uniform(*span):.2f}" for span in (conductance, rise, decay))
        g_peak, rise_ms, decay_ms = times
        place = place_of(rng, cell.samples[row], row, label)
        yield (cell.name, f"s{label:02d}", *place, g_peak, force, rise_ms, decay_ms, group)


def place_of(rng: Generator, sample: Sample, row: int, label: int) -> tuple[str, ...]:
    """Return sample, fraction, x, y, z, branch and path along it; what is not used stays empty."""
    if label == SITES_PER_CELL:
        return ("", "", "", "", "", "2", f"{rng.uniform(2.0, 8.0):.1f}")
    if label in (4, 8):
        beside = sample.place + 0.4 * rng.normal(size=3)
        return ("", "", *(f"{value:.2f}" for value in beside), "", "")
    fraction = "" if label % 2 else f"{rng.uniform(0.1, 0.9):.2f}"
    return (str(row + 1), fraction, "", "", "", "", "")


def draw_study() -> dict[str, bytes]:
    """Return every drawn file: path below the folder -> bytes."""
    cells = [draw_cell(of, number) for of in range(len(CLASSES)) for number in range(CELLS_PER_CLASS)]
    files = {f"{cell.name}.swc": swc(cell) for cell in cells}
    files |= {"cells.csv": groups(cells), "sites.csv": sites(cells), "recordings.csv": recordings(cells)}
    return files | {f"troubles/{name}": data for name, data in draw_troubles(INVENTED).items()}


def main(argv: Sequence[str] | None = None) -> int:
    """Write the study's files."""
    parser = argparse.ArgumentParser(description=__doc__.splitlines()[0])
    parser.add_argument("--into", type=Path, default=FOLDER, help="folder (default: %(default)s)")
    folder = parser.parse_args(argv).into
    files = draw_study()
    for name, data in files.items():
        path = folder / name
        path.parent.mkdir(parents=True, exist_ok=True)
        path.write_bytes(data)
    print(f"{len(files)} files in {folder}")
    return 0


if __name__ == "__main__":
    raise SystemExit(main())
