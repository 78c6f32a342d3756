"""The tables of a paper: an overview of the groups, all that was found of each, and the tests."""

from dataclasses import dataclass

import numpy as np
import pandas as pd

from morphotone.questions.comparisons import DELTA, EPSILON, KRUSKAL_WALLIS
from morphotone.questions.summaries import FEW, LEAST
from morphotone.questions.units import Units
from morphotone.showing.digits import decimals, fixed, p_value
from morphotone.showing.methods import listed, named
from morphotone.showing.titles import meaning, title

#: More groups than this do not stand side by side on a page, and their pairs would fill a book.
WIDEST = 6


@dataclass(frozen=True)
class PaperTable:
    """One table as text, symbols between ‹ and › as in `morphotone.showing.markup`.

    Attributes
    ----------
    name : str
        Of its label.
    caption : str
        A sentence or two.
    header : tuple of str
        One title a column.
    words : int
        How many of the first columns hold words; the others hold numbers.
    rows : tuple of tuple of str
        As many fields as the header has; the first is empty where the row goes on with the quantity above.
    notes : tuple of str
        Sentences below the table.
    """

    name: str
    caption: str
    header: tuple[str, ...]
    words: int
    rows: tuple[tuple[str, ...], ...]
    notes: tuple[str, ...]


def paper_tables(units: Units, summary: pd.DataFrame, comparisons: pd.DataFrame) -> list[PaperTable]:
    """Return the tables in the order of a paper: overview, details, tests; none that would be empty.

    Parameters
    ----------
    units : Units
        What was summarised.
    summary, comparisons : DataFrame
        As `morphotone.questions` has them.
    """
    groups = len(summary) // len(units.columns)
    tested = bool(comparisons["p"].notna().any())
    untested = [] if tested else comparisons["note"].drop_duplicates().tolist()
    tables = (
        [_overview(units, summary, comparisons if tested else comparisons[:0])] if groups <= WIDEST else []
    )
    tables.append(_details(units, summary, untested))
    return [*tables, _tests(comparisons, groups)] if tested else tables


def _overview(units: Units, summary: pd.DataFrame, comparisons: pd.DataFrame) -> PaperTable:
    """Quantities down, groups across: mean ± SD; then p and effect of the test of all groups."""
    groups = len(summary) // len(units.columns)
    sizes = summary["n"].to_numpy(np.int64).reshape(-1, groups).max(axis=0).tolist()
    labels = [named(", ".join(map(str, names))) for names in summary[list(units.by)].head(groups).to_numpy()]
    header = ["", *(f"{label} (‹n› = {n:,})" for label, n in zip(labels, sizes, strict=True))]
    tests = {str(row["column"]): row for _, row in comparisons.iloc[::-1].iterrows()}  # the first of each
    if tests:
        header += ["‹p›", "Effect"]
    rows = []
    for column in units.columns:
        of_column = summary[summary["column"] == column]
        cells = [_mean_sd(row, n) for (_, row), n in zip(of_column.iterrows(), sizes, strict=True)]
        tested = [p_value(tests[column]["p_holm"]), _size(tests[column])] if tests else []
        rows.append((title(column), *cells, *tested))
    notes = list(dict.fromkeys(sentence for column in units.columns if (sentence := meaning(column))))
    caption = f"Electrotonic measures by {_by(units)}: mean ± SD{_of_what(units)}."
    if tests:
        named_tests = " or ".join(sorted({str(test["test"]) for test in tests.values()}))
        effects = _effects({str(test["effect"]) for test in tests.values()})
        caption += (
            f" ‹p›: {named_tests} test, corrected by Holm's method; effect: {effects} with 95 % interval."
        )
    told = _sentences(["; ".join(notes)] if notes else [])
    return PaperTable("overview", caption, tuple(header), 1, tuple(rows), told)


def _details(units: Units, summary: pd.DataFrame, untested: list[str]) -> PaperTable:
    """One row per quantity and group: n, mean ± SD, median, quartiles, intervals; below, why no test."""
    header = (
        "",
        *map(named, units.by),
        "‹n›",
        "Mean ± SD",
        "Mean, 95 %",
        "Median",
        "Quartiles",
        "Median, 95 %",
    )
    rows = []
    for column, of_column in summary.groupby("column", sort=False):
        for at, (_, row) in enumerate(of_column.iterrows()):
            names = [named(str(row[name])) for name in units.by]
            numbers = (f"{row['n']:,}", *_around_mean(row), *_around_median(row))
            rows.append(("" if at else title(str(column)), *names, *numbers))
    caption = (
        f"Electrotonic measures by {_by(units)}{_of_what(units)}: intervals are bootstrap intervals of 95 %."
    )
    few = summary["n"].between(LEAST, FEW - 1).any()
    notes = [f"bootstrap intervals of fewer than {FEW} values are too narrow"] if few else []
    notes += [f"not tested: {named(note)}" for note in untested if note]
    return PaperTable("details", caption, header, 1 + len(units.by), tuple(rows), _sentences(notes))


def _tests(comparisons: pd.DataFrame, groups: int) -> PaperTable:
    """One row per test; the pairs of very many groups are left to the CSV."""
    shown = comparisons if groups <= WIDEST else comparisons.drop_duplicates("column")  # the first of each
    rows = []
    for column, of_column in shown.groupby("column", sort=False):
        for at, (_, row) in enumerate(of_column.iterrows()):
            who = f"{named(row['group'])} – {named(row['other_group'])}" if row["group"] else "all groups"
            numbers = (_statistic(row), p_value(row["p"]), p_value(row["p_holm"]), _size(row))
            rows.append(("" if at else title(str(column)), who, *numbers))
    effects = _effects(set(shown["effect"]))
    caption = (
        f"Comparison of groups: effect is {effects}, with 95 % interval; ‹δ› is "
        "positive where the first group has the greater values."
    )
    notes = [] if len(shown) == len(comparisons) else ["the pairs of groups stand in comparisons.csv"]
    notes += [named(note) for note in dict.fromkeys(shown["note"]) if note]
    header = ("", "Groups", "Statistic", "‹p›", "‹p›, Holm", "Effect")
    return PaperTable("tests", caption, header, 2, tuple(rows), _sentences(notes))


def _sentences(notes: list[str]) -> tuple[str, ...]:
    return tuple(f"{note[0].upper()}{note[1:]}." for note in notes)


def _by(units: Units) -> str:
    return listed([named(name) for name in units.by])


def _of_what(units: Units) -> str:
    return f" of the means of {units.source_words}" if units.averaged else ""


def _around_mean(row: pd.Series) -> tuple[str, str]:
    places = decimals(row["sd"], row["mean"])
    return _mean_sd(row, row["n"]), _range(row["mean_low"], row["mean_high"], places)


def _around_median(row: pd.Series) -> tuple[str, str, str]:
    """Return median, quartiles and interval, with digits of their own: one wide tail makes a great SD."""
    places = decimals(row["q3"] - row["q1"], row["median"], least=2)
    quartiles = _range(row["q1"], row["q3"], places) if row["n"] > 1 else ""
    return fixed(row["median"], places), quartiles, _range(row["median_low"], row["median_high"], places)


def _mean_sd(row: pd.Series, usual: int) -> str:
    """Return mean ± SD with n where it is not that of the group."""
    if not row["n"]:
        return "–"
    places = decimals(row["sd"], row["mean"])
    text = fixed(row["mean"], places)
    if row["n"] > 1:
        text += f" ± {fixed(row['sd'], places)}"
    return text if row["n"] == usual else f"{text} (‹n› = {row['n']:,})"


def _range(low: float, high: float, places: int) -> str:
    return "" if pd.isna(low) else f"{fixed(low, places)} to {fixed(high, places)}"


def _statistic(row: pd.Series) -> str:
    if pd.isna(row["statistic"]):
        return "–"
    if row["test"] == KRUSKAL_WALLIS:
        return f"‹H› = {fixed(row['statistic'], 2)}"
    return f"‹U› = {row['statistic']:.12g}"


def _size(row: pd.Series) -> str:
    if pd.isna(row["size"]):
        return "–"
    within = "" if pd.isna(row["size_low"]) else f" ({_range(row['size_low'], row['size_high'], 2)})"
    return f"{fixed(row['size'], 2)}{within}"


def _effects(found: set[str]) -> str:
    """Return what effect sizes there are, that of all groups first."""
    named_so = {EPSILON: "‹ε›²", DELTA: "Cliff's ‹δ›"}
    return " or, for pairs, ".join(words for effect, words in named_so.items() if effect in found)
