"""All pairs of sites of a cell: matrices, and the same as rows."""

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from morphotone.cable.assumptions import Assumptions
from morphotone.cable.pairs import coupling, pair_delays
from morphotone.cable.sites import Sited
from morphotone.questions.columns import Columns, hz_suffix

Real = NDArray[np.float64]


@dataclass(frozen=True, eq=False)
class Pairs:
    """How the sites of one cell are coupled with each other.

    Attributes
    ----------
    site : ndarray of object, shape (sites,)
        Labels, the order of rows and columns.
    matrices : dict of str to ndarray, shape (sites, sites)
        Named as the columns of ``pairs.csv``: current at the row's site, potential at the column's.
    """

    site: NDArray[np.object_]
    matrices: dict[str, Real]

    def table(self) -> Columns:
        """Return one row per ordered pair, a site with itself included."""
        count = len(self.site)
        return {
            "site": np.repeat(self.site, count),
            "other_site": np.tile(self.site, count),
            **{name: matrix.ravel() for name, matrix in self.matrices.items()},
        }


def pairs_of(site: NDArray[np.object_], sited: Sited, assumptions: Assumptions) -> Pairs:
    """Return transfer resistance (MΩ) and attenuation at 0 Hz and each frequency, and delays (ms)."""
    matrices: dict[str, Real] = {}
    for hz in (0.0, *assumptions.hz):
        between = coupling(sited.cable, assumptions, sited.node, hz)
        matrices[f"R_transfer_MOhm{hz_suffix(hz)}"] = np.abs(between.Z)
        matrices[f"attenuation{hz_suffix(hz)}"] = between.attenuation
    lag = pair_delays(sited.cable, assumptions, sited.node)
    return Pairs(
        site,
        matrices | {"delay_total_ms": lag.total_ms, "delay_propagation_ms": lag.propagation_ms},
    )
