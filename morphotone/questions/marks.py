"""Sites of one cell as a figure marks them: placed and ranked as `rank` does."""

import numpy as np

from morphotone.cable.assumptions import Assumptions
from morphotone.cable.electrotonus import cases_of, solve_cables
from morphotone.questions.order import ranks
from morphotone.questions.placing import FARTHEST_UM, placed_on
from morphotone.questions.portrait import Distances, Marks, distances_of
from morphotone.questions.survey import Prepared
from morphotone.reading.sites import Sites, TurnedAwaySite


def marks_of(
    prepared: Prepared,
    sites: Sites,
    assumptions: Assumptions,
    hz: float = 0.0,
    farthest_um: float = FARTHEST_UM,
) -> tuple[Marks, tuple[TurnedAwaySite, ...]]:
    """Return the sites that have a place on a cell, ranked by attenuation toward the soma, and the others.

    Parameters
    ----------
    prepared : Prepared
        The cell, built under the assumptions.
    sites : Sites
        Rows of this cell.
    assumptions : Assumptions
        Their frequencies are the cases; `hz` is 0 or one of them.
    hz : float
        The frequency at which they are ranked.
    farthest_um : float
        A site in space farther than this from the cable's surface is turned away, µm.
    """
    placed, away = placed_on(prepared, sites, assumptions, farthest_um)
    sited = placed.sited
    (known,) = solve_cables([(sited.cable,)], cases_of([assumptions]))
    distances = Distances(*(values[sited.node] for values in distances_of(known, hz)))
    rank = ranks(np.exp(distances.to_soma))["rank"].to_numpy(np.int64)
    return Marks(placed.sites.site, rank, placed.position, distances), away
