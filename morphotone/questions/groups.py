"""Which group each analysed cell is of: a survey's cells beside a table of groups, nobody lost in silence."""

from collections.abc import Sequence
from dataclasses import dataclass
from pathlib import PurePath
from typing import NamedTuple

import pandas as pd

from morphotone.cable.kinds import nearest
from morphotone.questions.matching import candidates, several
from morphotone.questions.survey import cell_name
from morphotone.reading.groups import CELL_COLUMNS

_SHOWN = 3  # lines that a sentence names


class Missing(NamedTuple):
    """One cell that stands in one of the two tables only, or whose group cannot be told."""

    cell: str  #: as its table names it
    line: int | None  #: of the table of groups; None for a cell that is not in it
    reason: str  #: group_absent, turned_away, cell_unknown, cell_ambiguous or cell_twice
    sentence: str  #: what was read, what was expected, the way out


@dataclass(frozen=True, eq=False)
class Grouped:
    """A survey's cells with their groups.

    Attributes
    ----------
    groups : DataFrame
        One row per analysed cell, index and order of the cells' table: the columns of the table of groups but
        the cell's name, as text, empty where the cell has no group.
    line : Series of Int64
        Line of the table of groups; missing where the cell has no row there; same index.
    table : DataFrame
        The table of groups as read, whose rows tell in what order groups are shown.
    missing : tuple of Missing
        First the rows of the table of groups that are of no use, then the analysed cells without a group.
    """

    groups: pd.DataFrame
    line: pd.Series
    table: pd.DataFrame
    missing: tuple[Missing, ...]

    @property
    def has_group(self) -> pd.Series:
        """Whether each cell has a row in the table of groups."""
        return self.line.notna()


def grouped(
    cells: pd.DataFrame, groups: pd.DataFrame, turned_away: pd.DataFrame | None = None, folder: str = ""
) -> Grouped:
    """Give each analysed cell its row of a table of groups.

    A cell may be named by its file's name or path, or the last parts of the path, with or without its
    ending. Rows that say the same of one cell count as one; of rows that contradict each other none is taken.

    Parameters
    ----------
    cells : DataFrame
        The survey's ``cells.csv``: column ``file``.
    groups : DataFrame
        As `morphotone.reading.groups.read_groups` gives it: text, with a column ``cell`` or ``file``.
    turned_away : DataFrame, optional
        The survey's ``turned_away.csv``: columns ``file``, ``reason``.
    folder : str
        The folder surveyed, so that a cell may be named by a path through it.
    """
    away = {} if turned_away is None else dict(zip(turned_away["file"], turned_away["reason"], strict=True))
    analysed = cells["file"].astype(str).tolist()
    files = [*analysed, *map(str, away)]
    named_by = next(name for name in CELL_COLUMNS if name in groups)
    names = groups[named_by].astype(str).tolist()
    possible = candidates(names, [(file, PurePath(folder, file)) for file in files])
    missing: list[Missing] = []
    rows_of: dict[int, list[int]] = {}
    for row, (name, found) in enumerate(zip(names, possible, strict=True)):
        if len(found) == 1 and found[0] < len(analysed):
            rows_of.setdefault(found[0], []).append(row)
        else:
            reason, sentence = _no_cell(name, [files[index] for index in found], away, files)
            missing.append(Missing(name, int(groups.index[row]), reason, sentence))
    text = groups.drop(columns=named_by)
    contradictory = {cell for cell, rows in rows_of.items() if len(text.iloc[rows].drop_duplicates()) > 1}
    for cell in sorted(contradictory):
        missing += _twice(rows_of.pop(cell), names, groups.index)
    without = [file for index, file in enumerate(analysed) if index not in {*rows_of, *contradictory}]
    row_of = [rows_of.get(index, [-1])[0] for index in range(len(analysed))]
    taken = text.reset_index(drop=True).reindex(row_of, fill_value="").set_axis(cells.index)
    return Grouped(
        taken,
        pd.Series([groups.index[row] if row >= 0 else pd.NA for row in row_of], cells.index, dtype="Int64"),
        groups,
        (*sorted(missing, key=lambda one: one.line or 0), *map(_no_group, without)),
    )


def _no_group(file: str) -> Missing:
    cell = cell_name(file)
    return Missing(
        cell,
        None,
        "group_absent",
        f"{file} was analysed and has no row in the table of groups; add one if it belongs to the study",
    )


def _no_cell(name: str, found: Sequence[str], away: dict[str, str], files: Sequence[str]) -> tuple[str, str]:
    """Return reason and sentence for a row of the table of groups that stands for no analysed cell."""
    if len(found) == 1:
        return "turned_away", f"{found[0]} was turned away by the survey ({away[found[0]]})"
    if found:
        return (
            "cell_ambiguous",
            f"read cell {name!r}, which can be any of {len(found)} files ({several(found)}), expected one; "
            "write the folder or the ending too",
        )
    return (
        "cell_unknown",
        f"read cell {name!r}, expected the name of a file of the survey, with or without folder and "
        f"ending{nearest(name, map(cell_name, files))}",
    )


def _twice(rows: Sequence[int], names: Sequence[str], lines: pd.Index) -> list[Missing]:
    """Return one entry per row of a cell whose rows contradict each other."""
    told = ", ".join(str(lines[row]) for row in rows[:_SHOWN]) + (", …" if len(rows) > _SHOWN else "")
    sentence = (
        f"lines {told} say different things of one cell, expected one row a cell; none of them was used, so "
        "delete all but one"
    )
    return [Missing(names[row], int(lines[row]), "cell_twice", sentence) for row in rows]
