"""All pairs of sites to one file, cell by cell as they come: CSV rows, or NumPy arrays."""

from collections.abc import Callable, Iterator
from contextlib import contextmanager
from pathlib import Path
from typing import TextIO
from zipfile import ZipFile

import numpy as np
import pandas as pd

from morphotone.night.results import atomic, atomic_bytes
from morphotone.questions.pair_table import Pairs
from morphotone.questions.survey import cell_name
from morphotone.showing.tables import LINE_END

#: Takes a file's name and its pairs.
Writer = Callable[[str, Pairs], None]


@contextmanager
def pairs_file(into: Path, kind: str) -> Iterator[Writer]:
    """Open ``pairs.csv`` (kind "csv") or ``pairs.npz`` ("npy"), which takes its place when all is written."""
    if kind == "csv":
        with atomic(into / "pairs.csv") as stream:
            yield _rows_to(stream)
    else:
        with atomic_bytes(into / "pairs.npz") as binary, ZipFile(binary, "w") as archive:
            yield _arrays_to(archive)


def _rows_to(stream: TextIO) -> Writer:
    """Return what writes one row per pair, the header before the first."""

    def write(file: str, pairs: Pairs) -> None:
        rows = pd.DataFrame({"file": file, "cell": cell_name(file)} | pairs.table())
        rows.to_csv(stream, index=False, header=not stream.tell(), lineterminator=LINE_END)

    return write


def _arrays_to(archive: ZipFile) -> Writer:
    """Return what writes arrays as `numpy.load` reads them, each named by file, a slash and its quantity."""

    def write(file: str, pairs: Pairs) -> None:
        labels = {name: getattr(pairs, name).astype(np.str_) for name in ("site", "other_site")}
        for name, array in {**labels, **pairs.matrices}.items():
            with archive.open(f"{file}/{name}.npy", "w", force_zip64=True) as entry:
                np.lib.format.write_array(entry, array, allow_pickle=False)

    return write
