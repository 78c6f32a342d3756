"""How groups were summarised and compared, as a paper tells it; marks as in `methods`."""

from collections.abc import Iterator

import pandas as pd

from morphotone.questions.comparisons import DEALS, KRUSKAL_WALLIS, MANN_WHITNEY, Family
from morphotone.questions.summaries import Bootstrap, groups_of
from morphotone.questions.units import Units
from morphotone.showing.methods import listed, named

_SHOWN = 6  # groups that are named
_P_BY = {
    "exact": "exact ‹p›",
    "normal": "‹p› by the normal approximation with ties' correction",
    "χ²": "‹p› by the χ² approximation",
    "permutation": f"‹p› by {DEALS:,} random permutations",
}


def statistics(
    units: Units, summary: pd.DataFrame, comparisons: pd.DataFrame, how: Bootstrap, family: Family
) -> str:
    """Tell what the tables' numbers are.

    Parameters
    ----------
    units : Units
        What was summarised.
    summary, comparisons : DataFrame
        The groups' numbers, and the tests made.
    how : Bootstrap
        Of the intervals of means and medians.
    family : {"table", "quantity"}
        As the tests were corrected.
    """
    return " ".join([*_groups(units), *_values(summary, how), *_tests(units, comparisons, how, family)])


def _groups(units: Units) -> Iterator[str]:
    groups = groups_of(units.table, units.by)
    shown = [f"{named(', '.join(names))} (‹n› = {len(rows):,})" for names, rows in groups]
    told = f": {listed(shown)}" if len(shown) <= _SHOWN else ""
    by = listed([named(name) for name in units.by])
    unit = ""
    if units.averaged:
        unit = f", the unit being {units.source_words} (the mean over the cells that each had in a group)"
    yield f"{'Groups were' if len(shown) > 1 else 'One group was'} formed by {by}{unit}{told}."
    if units.nested:
        yield (
            f"The {units.cells:,} cells came from {units.sources:,} {units.source_words} and were "
            "taken as independent, which makes intervals too narrow and ‹p› values too small ⟨Lazic2010⟩."
        )
    if units.shared:
        yield (
            f"Groups were taken as independent, although {units.shared:,} of {units.sources:,} "
            f"{units.source_words} had cells in more than one group."
        )


def _values(summary: pd.DataFrame, how: Bootstrap) -> Iterator[str]:
    yield ("Values are mean ± SD, medians and quartiles (linear between order statistics ⟨HyndmanFan1996⟩).")
    methods = set(summary["mean_interval"]) | set(summary["median_interval"])
    if methods & {"BCa", "percentile"}:
        others = ", of percentiles where that does not exist" if "percentile" in methods else ""
        yield (
            f"Intervals of means and medians are {_percent(how)} bootstrap intervals, bias-corrected and "
            f"accelerated ⟨Efron1987⟩{others} ({how.resamples:,} resamples, seed {how.seed})."
        )


def _percent(how: Bootstrap) -> str:
    return f"{100 * how.level:.12g} %"


def _tests(units: Units, comparisons: pd.DataFrame, how: Bootstrap, family: Family) -> Iterator[str]:
    made = comparisons[comparisons["p"].notna()]
    many, pairs = (made[made["test"] == test] for test in (KRUSKAL_WALLIS, MANN_WHITNEY))
    if made.empty:
        return
    by_pairs = f"the two-sided Mann–Whitney test ⟨MannWhitney1947⟩ ({_by(pairs)})"
    of_pairs = f"Cliff's ‹δ› ⟨Cliff1993⟩ with Newcombe's {_percent(how)} interval (method 5 ⟨Newcombe2006⟩)"
    if len(many):
        and_pairs = f" and in pairs with {by_pairs}" if len(pairs) else ""
        yield (
            f"Groups were compared with the Kruskal–Wallis test ⟨KruskalWallis1952⟩ ({_by(many)}){and_pairs}."
        )
        effect = (
            f"‹ε›² = ‹H›/(‹n› − 1) ⟨TomczakTomczak2014⟩ with the {_percent(how)} interval of a noncentral χ² "
            f"distribution ⟨Andrews1954 Steiger2004⟩{', for pairs ' if len(pairs) else ''}"
        )
    else:
        enough = " with enough values" if len(groups_of(units.table, units.by)) > 2 else ""
        yield f"The two groups{enough} were compared with {by_pairs}."
        effect = ""
    yield f"‹p› values were corrected by Holm's method ⟨Holm1979⟩ {_family(many, pairs, family)}."
    yield f"Effect sizes are {effect}{of_pairs if len(pairs) else ''}."


def _by(tests: pd.DataFrame) -> str:
    return " or ".join(words for p_by, words in _P_BY.items() if p_by in set(tests["p_by"]))


def _family(many: pd.DataFrame, pairs: pd.DataFrame, family: Family) -> str:
    if family == "quantity":
        return "over the pairs of groups of each quantity" if len(many) else "within each quantity"
    if len(many):
        one = "the Kruskal–Wallis test" if len(many) == 1 else f"all {len(many):,} Kruskal–Wallis tests"
        return f"over {one}" + (f", and over all {len(pairs):,} tests of pairs" if len(pairs) else "")
    return "over one test" if len(pairs) == 1 else f"over all {len(pairs):,} tests"
