"""Which file each site belongs to, from the cell's name as the file of sites has it."""

from collections.abc import Sequence
from pathlib import PurePath

import numpy as np
from numpy.typing import NDArray

from morphotone.questions.survey import cell_name
from morphotone.reading.sites import Sites, TurnedAwaySite

_SHOWN = 3  # files that a sentence names


def matched(
    sites: Sites, files: Sequence[tuple[str, PurePath]]
) -> tuple[dict[str, Sites], tuple[TurnedAwaySite, ...]]:
    """Return the sites of each file that has any, in the order of the files, and those turned away.

    A cell may be named by its file's name or path, or the last parts of the path, with or without its
    ending. The whole name goes before a part of another one's. Of rows that give one label twice in a
    cell, which a file of sites can hide behind two spellings of the cell, none is taken.

    Parameters
    ----------
    sites : Sites
        As read.
    files : sequence of (str, path)
        Name and place of each file found.
    """
    verdicts: dict[int, tuple[str, str]] = {}
    at = np.full(len(sites), -1)
    cells = sites.cell.tolist()
    for row, (cell, possible) in enumerate(zip(cells, candidates(cells, files), strict=True)):
        if len(possible) == 1:
            at[row] = possible[0]
        else:
            verdicts[row] = _verdict(cell, [files[index][0] for index in possible])
    for row in _labelled_twice(at, sites):
        at[row] = -1
        verdicts[row] = (
            "label_twice",
            f"read site {sites.site[row]!r} of cell {sites.cell[row]!r}, a label that the cell has twice, "
            "expected labels unique in a cell; rename one",
        )
    per_file = {files[index][0]: sites.at(at == index) for index in np.unique(at[at >= 0]).tolist()}
    away = np.flatnonzero(at < 0)
    reasons, sentences = ([verdicts[row][part] for row in away.tolist()] for part in (0, 1))
    return per_file, sites.at(away).turned_away(reasons, sentences)


def candidates(cells: Sequence[str], files: Sequence[tuple[str, PurePath]]) -> list[list[int]]:
    """Return for each cell's name the files it can stand for, by their index: one where all is well.

    Parameters
    ----------
    cells : sequence of str
        Names as read; see `matched` for how a cell may be named.
    files : sequence of (str, path)
        Name and place of each file.
    """
    whole, parts = _spellings(files)
    return [whole.get(cell) or parts.get(cell) or [] for cell in cells]


def several(names: Sequence[str]) -> str:
    """Return the first few names for a sentence."""
    return ", ".join(names[:_SHOWN]) + (", …" if len(names) > _SHOWN else "")


def _spellings(files: Sequence[tuple[str, PurePath]]) -> tuple[dict[str, list[int]], dict[str, list[int]]]:
    """Return the files that whole names stand for, and those that the last parts of a path do."""
    whole: dict[str, list[int]] = {}
    parts: dict[str, list[int]] = {}
    for index, (name, path) in enumerate(files):
        for spelling in {name, cell_name(name), path.as_posix(), cell_name(path.as_posix())}:
            whole.setdefault(spelling, []).append(index)
        tails = ["/".join(path.parts[first:]) for first in range(len(path.parts))]
        for spelling in {*tails, *map(cell_name, tails)}:
            parts.setdefault(spelling, []).append(index)
    return whole, parts


def _verdict(cell: str, possible: Sequence[str]) -> tuple[str, str]:
    """Return reason and sentence for a cell's name that does not stand for one file."""
    if not possible:
        return (
            "cell_unknown",
            f"read cell {cell!r}, expected the name of one of the files, with or without folder and ending; "
            "check the spelling, or give the folder that holds the file",
        )
    return (
        "cell_ambiguous",
        f"read cell {cell!r}, which can be any of {len(possible)} files ({several(possible)}), expected one; "
        "write the folder too",
    )


def _labelled_twice(at: NDArray[np.int64], sites: Sites) -> list[int]:
    """Return the rows whose label another row of the same file has."""
    rows: dict[tuple[int, str], list[int]] = {}
    for row in np.flatnonzero(at >= 0).tolist():
        rows.setdefault((int(at[row]), str(sites.site[row])), []).append(row)
    return [row for alike in rows.values() if len(alike) > 1 for row in alike]
