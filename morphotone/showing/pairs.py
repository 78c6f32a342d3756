"""All pairs of sites to one file, cell by cell as they come: CSV rows, or NumPy arrays."""

from collections.abc import Callable, Iterator
from contextlib import contextmanager
from pathlib import Path
from typing import BinaryIO
from zipfile import ZipFile

import numpy as np

from morphotone.night.outcome import csv_line
from morphotone.night.results import atomic_bytes
from morphotone.questions.pair_table import Pairs
from morphotone.questions.survey import cell_name
from morphotone.showing.tables import csv_texts

#: Takes a file's name and its pairs.
Writer = Callable[[str, Pairs], None]


@contextmanager
def pairs_file(into: Path, kind: str) -> Iterator[Writer]:
    """Open ``pairs.csv`` (kind "csv") or ``pairs.npz`` ("npy"), which takes its place when all is written."""
    if kind == "csv":
        with atomic_bytes(into / "pairs.csv") as stream:
            yield _rows_to(stream)
    else:
        with atomic_bytes(into / "pairs.npz") as stream, ZipFile(stream, "w") as archive:
            yield _arrays_to(archive)


def _rows_to(stream: BinaryIO) -> Writer:
    """Return what writes one row per pair, the header before the first."""

    def write(file: str, pairs: Pairs) -> None:
        table = pairs.table()
        if not stream.tell():
            stream.write(csv_line("file", "cell", *table).encode())
        stream.writelines(csv_texts([table], [[file, cell_name(file)]]))

    return write


def _arrays_to(archive: ZipFile) -> Writer:
    """Return what writes arrays as `numpy.load` reads them, each named by file, a slash and its quantity."""

    def write(file: str, pairs: Pairs) -> None:
        labels = {name: getattr(pairs, name).astype(np.str_) for name in ("site", "other_site")}
        for name, array in {**labels, **pairs.matrices}.items():
            with archive.open(f"{file}/{name}.npy", "w", force_zip64=True) as entry:
                np.lib.format.write_array(entry, array, allow_pickle=False)

    return write
