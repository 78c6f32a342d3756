"""What is counted once: the cells of a study with their groups, or the mean of each animal's cells."""

from collections.abc import Iterable, Sequence
from dataclasses import dataclass

import pandas as pd

from morphotone.cable.kinds import nearest
from morphotone.errors import MorphotoneError
from morphotone.questions.groups import Grouped, Missing
from morphotone.questions.order import levels
from morphotone.questions.summaries import SUMMARY_COLUMNS
from morphotone.questions.survey import cell_name

#: What papers report of a cell, in the order of their tables.
REPORTED = (
    *("stems", "tips", "length_um", "path_greatest_um", "area_um2", "R_in_MOhm", "lambda_um", "X_tips_mean"),
    *("attenuation_to_soma_farthest", "attenuation_from_soma_farthest"),
)
#: Names of columns that say which cells are of one source, and what several sources are called.
SOURCES = {
    "animal": "animals",
    "animal_id": "animals",
    "subject": "subjects",
    "donor": "donors",
    "mouse": "mice",
    "rat": "rats",
}


@dataclass(frozen=True, eq=False)
class Units:
    """The units of a study, ready for `summary` and `comparisons`.

    Attributes
    ----------
    table : DataFrame
        One row per unit: the columns of ``by`` as ordered categories, ``cells`` (their number behind the
        unit), ``sources`` (tuple of the sources' names), and the numbers of ``columns``.
    files : tuple of str
        The files of the cells behind the units.
    by, columns : tuple of str
        As asked; a name of ours among the former as ``name_as_given``.
    source : str or None
        The column that says which cells are of one source.
    averaged : bool
        Whether a unit is the mean of a source's cells in a group.
    cells : int
        Cells of a named source.
    sources : int
        How many sources they come from; 0 where nothing says.
    shared : int
        How many of those have cells in more than one group.
    missing : tuple of Missing
        Cells and rows of no use, those of the table of groups first.
    """

    table: pd.DataFrame
    files: tuple[str, ...]
    by: tuple[str, ...]
    columns: tuple[str, ...]
    source: str | None
    averaged: bool
    cells: int
    sources: int
    shared: int
    missing: tuple[Missing, ...]

    @property
    def source_words(self) -> str:
        """What the sources are called, in the plural; empty where nothing says which they are."""
        return SOURCES.get(self.source, f"sources (column {self.source})") if self.source else ""

    @property
    def nested(self) -> bool:
        """Whether several cells of one source are counted as if independent."""
        return not self.averaged and 0 < self.sources < self.cells

    @property
    def doubts(self) -> list[str]:
        """One sentence for each way in which the units are not independent."""
        doubts = []
        if self.nested:
            doubts.append(
                f"{self.cells} cells come from {self.sources} {self.source_words}; cells of one source are "
                "not independent, so intervals are too narrow and p values too small: --mean-over "
                f"{self.source} takes the mean of each as one value"
            )
        if self.shared:
            doubts.append(
                f"{self.shared} of {self.sources} {self.source_words} have cells in more than one group, and "
                "the tests take groups to be independent"
            )
        return doubts


def units(
    cells: pd.DataFrame,
    grouped: Grouped,
    by: Sequence[str],
    columns: Sequence[str] = REPORTED,
    *,
    nested: str | None = None,
    mean_over: str | None = None,
) -> Units:
    """Put the cells that have a group beside their numbers.

    Parameters
    ----------
    cells : DataFrame
        The survey's ``cells.csv``.
    grouped : Grouped
        The same cells with their groups.
    by : sequence of str
        Columns of the table of groups that make the groups.
    columns : sequence of str
        Numeric columns of ``cells``.
    nested : str, optional
        Column of the table of groups that says which cells are of one source; one of `SOURCES` unless given.
    mean_over : str, optional
        The same, and the mean of a source's cells in a group is the unit.

    Raises
    ------
    MorphotoneError
        A column is not there, is no number, or is named twice; or no cell has a group.
    """
    source = mean_over or nested or next((s for s in SOURCES if s in grouped.groups and s not in by), None)
    check_groups([*by, *filter(None, (nested, mean_over))], grouped.groups)
    _check_numbers(columns, cells)
    _refuse_twice(by)
    _refuse_twice(columns)
    if source in by:
        raise MorphotoneError(f"column {source!r} cannot both make the groups and lie within them")
    needed = [*by, *([mean_over] if mean_over else [])]
    given = (grouped.groups[needed] != "").all(axis=1)
    usable = grouped.has_group & given
    missing = (*_without_text(cells, grouped, needed, grouped.has_group & ~given), *grouped.missing)
    if cells.empty:
        raise MorphotoneError("the survey analysed no cell; its turned_away.csv says why")
    if not usable.any():
        raise MorphotoneError(
            f"no analysed cell has a group ({len(cells)} cells, {len(grouped.table)} rows of groups); the "
            "names in the table's column cell must be those of the surveyed files"
        )
    names = [_own(name, columns) for name in by]
    table = grouped.groups.loc[usable, list(by)].set_axis(names, axis=1).assign(cells=1)
    table["sources"] = [(name,) if name else () for name in _sources(grouped, source, usable)]
    table[list(columns)] = cells.loc[usable, list(columns)].astype("float64")
    for name, asked in zip(names, by, strict=True):
        order = [text for text in grouped.table[asked].unique() if text]
        table[name] = pd.Categorical(table[name], order, ordered=True)
    named = table[table["sources"].map(bool)]
    groups_of = named.drop_duplicates(["sources", *names])["sources"].value_counts()
    if mean_over:
        table = _means(table, names, columns)
    for column in columns:  # what differs by rounding alone is tied
        table[column] = table[column].groupby(levels(table[column])).transform("min")
    files = tuple(cells.loc[usable, "file"].astype(str))
    return Units(
        table,
        files,
        tuple(names),
        tuple(columns),
        source,
        averaged=bool(mean_over),
        cells=len(named),
        sources=len(groups_of),
        shared=int((groups_of > 1).sum()),
        missing=missing,
    )


def _own(name: str, columns: Sequence[str]) -> str:
    """Return a column of the table of groups so that it is no column of ours."""
    return f"{name}_as_given" if name in {*SUMMARY_COLUMNS, *columns} else name


def check_groups(names: Sequence[str], groups: pd.DataFrame) -> None:
    """Raise MorphotoneError unless a table of groups has all these columns."""
    for name in names:
        if name not in groups:
            raise MorphotoneError(
                f"the table of groups has no column {name!r}{_instead(name, map(str, groups))}"
            )


def _check_numbers(names: Sequence[str], cells: pd.DataFrame) -> None:
    numeric = [str(name) for name in cells if pd.api.types.is_numeric_dtype(cells[name])]
    for name in names:
        if name not in cells:
            raise MorphotoneError(f"the survey has no column {name!r}{_instead(name, numeric)}")
        if name not in numeric and cells[name].notna().any():
            raise MorphotoneError(
                f"column {name!r} holds {cells[name].dropna().iloc[0]!r}, expected numbers; choose others"
            )


def _instead(name: str, known: Iterable[str]) -> str:
    """Return a phrase with the nearest names, or all there are."""
    names = list(known)
    return nearest(name, names) or f"; it has {', '.join(names) or 'none but the name of the cell'}"


def _refuse_twice(names: Sequence[str]) -> None:
    twice = [name for name in dict.fromkeys(names) if list(names).count(name) > 1]
    if twice:
        raise MorphotoneError(f"column {twice[0]!r} is named twice; name it once")


def _sources(grouped: Grouped, source: str | None, usable: pd.Series) -> list[str]:
    return grouped.groups.loc[usable, source].tolist() if source else [""] * int(usable.sum())


def _without_text(
    cells: pd.DataFrame, grouped: Grouped, needed: Sequence[str], which: pd.Series
) -> list[Missing]:
    """Return one entry per cell whose row says nothing in a column that is needed."""
    found = []
    for at in which.index[which]:
        file = str(cells.loc[at, "file"])
        empty = next(name for name in needed if not grouped.groups.loc[at, name])
        sentence = f"{file} has an empty field in column {empty!r} of the table of groups; fill it"
        found.append(Missing(cell_name(file), int(grouped.line[at]), "group_empty", sentence))
    return found


def _means(table: pd.DataFrame, by: Sequence[str], columns: Sequence[str]) -> pd.DataFrame:
    """Return the means over each source's cells in a group."""
    within = table.groupby([*by, "sources"], observed=True, sort=True)
    means = within[list(columns)].mean()
    means.insert(0, "cells", within["cells"].sum())
    return means.reset_index()
