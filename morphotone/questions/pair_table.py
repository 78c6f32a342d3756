"""All pairs of sites of a cell: matrices, and the same as rows."""

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from morphotone.cable.assumptions import Assumptions
from morphotone.cable.pairs import coupling, pair_delays
from morphotone.questions.columns import Columns, hz_suffix
from morphotone.questions.synapses import Placed

Real = NDArray[np.float64]


@dataclass(frozen=True, eq=False)
class Pairs:
    """How the sites of one cell are coupled with each other.

    Attributes
    ----------
    site, other_site : ndarray of object, shape (sites,) and (others,)
        Labels of the rows and of the columns.
    matrices : dict of str to ndarray, shape (sites, others)
        Named as the columns of ``pairs.csv``: current at the row's site, potential at the column's.
    """

    site: NDArray[np.object_]
    other_site: NDArray[np.object_]
    matrices: dict[str, Real]

    def table(self) -> Columns:
        """Return one row per pair, the others of the first site first."""
        return {
            "site": np.repeat(self.site, len(self.other_site)),
            "other_site": np.tile(self.other_site, len(self.site)),
            **{name: matrix.ravel() for name, matrix in self.matrices.items()},
        }


def pairs_of(placed: Placed, assumptions: Assumptions, between: tuple[str, str] | None = None) -> Pairs:
    """Return transfer resistance (MΩ) and attenuation at 0 Hz and each frequency, and delays (ms).

    Parameters
    ----------
    placed : Placed
        The sites of one cell.
    assumptions : Assumptions
        Passive constants and frequencies.
    between : (str, str), optional
        Two groups: rows are the sites of the first, columns those of the second; all sites unless given.
    """
    sites, sited = placed.sites, placed.sited
    rows, columns = (
        (np.flatnonzero(sites.group == group) for group in between)
        if between
        else (np.arange(len(sites)),) * 2
    )
    at, seen = sited.node[rows], sited.node[columns]
    matrices: dict[str, Real] = {}
    for hz in (0.0, *assumptions.hz):
        coupled = coupling(sited.cable, assumptions, at, hz, seen)
        matrices[f"R_transfer_MOhm{hz_suffix(hz)}"] = np.abs(coupled.Z)
        matrices[f"attenuation{hz_suffix(hz)}"] = coupled.attenuation
    lag = pair_delays(sited.cable, assumptions, at, seen)
    matrices |= {"delay_total_ms": lag.total_ms, "delay_propagation_ms": lag.propagation_ms}
    return Pairs(sites.site[rows], sites.site[columns], matrices)
