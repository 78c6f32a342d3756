"""The answers of all files put together: the whole ranking, held against the rows of the file of sites."""

from collections.abc import Sequence
from dataclasses import asdict, dataclass, fields

import numpy as np
import pandas as pd

from morphotone.questions.pair_table import Pairs
from morphotone.questions.ranking import in_order, orders
from morphotone.questions.site_answers import SiteAnswer
from morphotone.questions.survey import cell_name
from morphotone.reading.sites import SitesFile, TurnedAwaySite

TURNED_AWAY_COLUMNS = tuple(field.name for field in fields(TurnedAwaySite))


@dataclass(frozen=True, eq=False)
class Ranking:
    """The sites in order, as tables; columns as in README.

    Attributes
    ----------
    ranking : DataFrame
        One row per site, cell by cell, in order within each.
    orders, movers : DataFrame
        How far orders by different keys agree; which sites change place most.
    turned_away : DataFrame
        One row per site that is not ranked.
    together, veto, clamp : DataFrame or None
        None unless asked for.
    pairs : dict of str to Pairs
        By file; empty unless asked for, and where they went to a file.
    counts : dict of str to int
        ``sites`` = ``ranked`` + ``turned_away``; ``files`` found, ``cells`` with a ranked site.
    """

    ranking: pd.DataFrame
    orders: pd.DataFrame
    movers: pd.DataFrame
    turned_away: pd.DataFrame
    together: pd.DataFrame | None
    veto: pd.DataFrame | None
    clamp: pd.DataFrame | None
    pairs: dict[str, Pairs]
    counts: dict[str, int]


def collected(
    file: SitesFile,
    files: int,
    answers: Sequence[SiteAnswer],
    unmatched: Sequence[TurnedAwaySite],
    by: str,
    header: dict[str, list[str]],
) -> Ranking:
    """Put the answers together, and hold them against the rows of the file of sites.

    Parameters
    ----------
    file : SitesFile
        What was to be ranked.
    files : int
        How many files were found.
    answers : sequence of SiteAnswer
        Of the files with sites.
    unmatched : sequence of TurnedAwaySite
        Sites whose cell's name stands for no file, or for several.
    by : str
        Column to rank by.
    header : dict of str to list of str
        Columns of each table, as `morphotone.questions.site_answers.headers` gives them.

    Raises
    ------
    MorphotoneError
        The sites cannot be ranked by this column.
    RuntimeError
        Some rows were lost.
    """
    tables = {name: _together(answers, name, columns) for name, columns in header.items()}
    ranked = in_order(tables.pop("ranking"), by)
    agreed, moved = orders(ranked, by)
    away = [*file.turned_away, *unmatched, *(one for answer in answers for one in answer.turned_away)]
    counts = {
        "sites": file.rows_in,
        "ranked": len(ranked),
        "turned_away": len(away),
        "files": files,
        "cells": int(ranked["file"].nunique()),
    }
    if counts["sites"] != counts["ranked"] + counts["turned_away"]:
        raise RuntimeError(f"some sites were lost, which is a fault of the program: {counts}")
    lines = sorted((asdict(one) for one in away), key=lambda row: row["line"])
    return Ranking(
        ranked,
        agreed,
        moved,
        pd.DataFrame(lines, columns=list(TURNED_AWAY_COLUMNS)),
        **{name: tables.get(name) for name in ("together", "veto", "clamp")},
        pairs={answer.name: answer.pairs for answer in answers if answer.pairs is not None},
        counts=counts,
    )


def _together(answers: Sequence[SiteAnswer], name: str, columns: Sequence[str]) -> pd.DataFrame:
    """Return one table of all cells, each row led by its file and cell."""
    filled = [answer for answer in answers if name in answer.tables]
    whole = {
        column: np.concatenate(
            [np.asarray(answer.tables[name][column]) for answer in filled] or [np.empty(0, object)]
        )
        for column in columns
    }
    rows = [len(next(iter(answer.tables[name].values()))) for answer in filled]
    files = [answer.name for answer in filled]
    leading = {"file": np.repeat(np.array(files, object), rows)}
    leading["cell"] = np.repeat(np.array([cell_name(each) for each in files], object), rows)
    return pd.DataFrame(leading | whole)
