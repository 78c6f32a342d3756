"""The file of sites that `morphotone map` marks: what of it lies where, and what is turned away."""

import csv
import io
import os
from collections.abc import Mapping, Sequence
from dataclasses import astuple, dataclass
from typing import Any

import pandas as pd

from morphotone.commands.drawing import SITES_TABLE
from morphotone.night.folder import Found
from morphotone.night.ledger import Ledger
from morphotone.questions.collected import TURNED_AWAY_COLUMNS
from morphotone.questions.matching import matched
from morphotone.reading.sites import Sites, SitesFile, TurnedAwaySite, read_sites


@dataclass(frozen=True, eq=False)
class SitesOn:
    """A file of sites, if there is one, and on which files of this run its rows lie.

    Attributes
    ----------
    file : SitesFile or None
        As read.
    per_file : dict of str to Sites
        The rows of each file that has any.
    unmatched : tuple of TurnedAwaySite
        Rows whose cell is none of the files, or can be several.
    elsewhere : int
        Rows of other cells than the single one that is drawn; 0 for a folder.
    """

    file: SitesFile | None
    per_file: Mapping[str, Sites]
    unmatched: tuple[TurnedAwaySite, ...]
    elsewhere: int

    @property
    def sha256(self) -> str | None:
        """Of the file."""
        return self.file.sha256 if self.file else None

    def turned_away(self, ledger: Ledger, listed: Sequence[str]) -> pd.DataFrame:
        """Return the sites that are not marked, by line of their file."""
        rows: list[Sequence[Any]] = []
        if self.file:
            rows = [astuple(site) for site in (*self.file.turned_away, *self.unmatched)]
            for _, text in ledger.rows(SITES_TABLE, listed):
                rows += list(csv.reader(io.StringIO(text.decode(), newline="")))
        table = pd.DataFrame(rows, columns=list(TURNED_AWAY_COLUMNS)).astype({"line": "int64"})
        return table.sort_values("line", kind="stable", ignore_index=True)

    def counts(self, away: pd.DataFrame) -> dict[str, int]:
        """Return what became of the rows: sites = marked + turned_away + elsewhere."""
        if not self.file:
            return {}
        # Beside a single cell the table has rows of cells drawn before, which this run counts as elsewhere.
        lines = {line for sites in self.per_file.values() for line in sites.line.tolist()}
        lines |= {site.line for site in (*self.file.turned_away, *self.unmatched)}
        turned_away = int(away["line"].isin(lines).sum())
        marked = self.file.rows_in - turned_away - self.elsewhere
        return {
            "sites": self.file.rows_in,
            "marked": marked,
            "turned_away": turned_away,
            "elsewhere": self.elsewhere,
        }


def sites_on(found: Sequence[Found], synapses: str | os.PathLike[str] | None, alone: bool) -> SitesOn:
    """Read the file of sites and find its cells.

    Parameters
    ----------
    found : sequence of Found
        The files of the run.
    synapses : path or None
        The file of sites, if there is one.
    alone : bool
        Whether the run is about a single cell: rows of others are then nobody's fault.

    Raises
    ------
    ReadingError
        The file of sites cannot be read as such.
    """
    if synapses is None:
        return SitesOn(None, {}, (), 0)
    file = read_sites(synapses)
    per_file, unmatched = matched(file.sites, [(each.name, each.path) for each in found])
    others = [site for site in unmatched if alone and site.reason == "cell_unknown"]
    return SitesOn(file, per_file, tuple(s for s in unmatched if s not in others), len(others))
