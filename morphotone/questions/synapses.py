"""One row per site of a cell: where it is, how it is coupled to the soma, and what its synapse does."""

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from morphotone.cable.assumptions import Assumptions
from morphotone.cable.brief import brief
from morphotone.cable.circuit import alone
from morphotone.cable.delays import Delays, delays_in
from morphotone.cable.electrotonus import Electrotonus, cases_of, solve_forest
from morphotone.cable.sites import Sited
from morphotone.cable.spectrum import forest_of
from morphotone.cable.tree import Cable
from morphotone.questions.branches import Branches, branches_of
from morphotone.questions.columns import Columns, case_suffixes
from morphotone.reading.reconstruction import domain_name
from morphotone.reading.sites import Sites

Index = NDArray[np.int64]
Real = NDArray[np.float64]


@dataclass(frozen=True, eq=False)
class Placed:
    """The sites of one cell that have a place on its cable.

    Attributes
    ----------
    sites : Sites
        Their rows.
    sited : Sited
        The cell with a node at each.
    moved_um, straight_um : ndarray, shape (sites,)
        How far a site in space was moved to the cable's surface, 0 for the others; straight distance from
        the soma's centre; µm.
    position : ndarray, shape (sites, 3)
        Where they lie on the axis, µm, in the frame of ``sited.cable.traced``.
    """

    sites: Sites
    sited: Sited
    moved_um: Real
    straight_um: Real
    position: Real


@dataclass(frozen=True, eq=False)
class Solved:
    """Placed sites with what the engine knows of their cell, by node."""

    placed: Placed
    electrotonus: Electrotonus
    delays: Delays


def solved(cells: Sequence[Placed], assumptions: Assumptions) -> list[Solved]:
    """Solve cells with sites as one forest, each exactly as if it were alone."""
    if not cells:
        return []
    forest = forest_of([placed.sited.cable for placed in cells], assumptions)
    electrotonus = solve_forest(forest, cases_of([assumptions]))
    return [Solved(*one) for one in zip(cells, electrotonus, delays_in(forest), strict=True)]


def with_synapse(sites: Sites) -> NDArray[np.bool_]:
    """Return which sites have a conductance and its driving force, shape (sites,)."""
    there: NDArray[np.bool_] = ~(np.isnan(sites.g_peak_nS) | np.isnan(sites.driving_force_mV))
    return there


def with_course(sites: Sites) -> NDArray[np.bool_]:
    """Return which of these have rise and decay times too, shape (sites,)."""
    course: NDArray[np.bool_] = with_synapse(sites) & ~np.isnan(sites.rise_ms + sites.decay_ms)
    return course


def site_table(cell: Solved) -> Columns:
    """Return the columns of ``ranking.csv`` that one cell gives, one row per site; README explains them."""
    placed, node = cell.placed, cell.placed.sited.node
    cable, known, lags = placed.sited.cable, cell.electrotonus.at(node), cell.delays.at(node)
    branches = branches_of(cable.parent)
    of = branches.of_node[node]
    columns: Columns = {
        "line": placed.sites.line,
        "site": placed.sites.site,
        "group": placed.sites.group,
        "domain": [domain_name(kind) for kind in cable.kind[node].tolist()],
        "branch": of + 1,
        "order": np.append(branches.order, 0)[of],
        "moved_um": placed.moved_um,
        "path_um": known.path_um[:, 0],
        "straight_um": placed.straight_um,
        "diameter_um": np.where(node > 0, 2.0 * cable.r_end[node], _diameter_at_root(cable)),
        "lambda_um": known.lambda_um[:, 0],
        "X": known.X[:, 0],
        "L_to_tip": _farthest_beyond(branches, cell.electrotonus.X[:, 0])[of] - known.X[:, 0],
    }
    for case, suffix in enumerate(case_suffixes(known)):
        from_soma = known.log_attenuation_from_soma[:, case]
        columns |= {
            f"R_in_MOhm{suffix}": np.abs(known.Z_in[:, case]),
            f"R_transfer_MOhm{suffix}": np.abs(known.Z_transfer[:, case]),
            f"attenuation_to_soma{suffix}": np.exp(known.log_attenuation_to_soma[:, case]),
            f"attenuation_from_soma{suffix}": np.exp(from_soma),
            f"charge_to_soma{suffix}": np.exp(-from_soma),
        }
    for name in ("total", "local", "propagation", "net"):
        columns[f"delay_{name}_ms"] = getattr(lags, f"{name}_ms")
    return columns


def _diameter_at_root(cable: Cable) -> float:
    """Return the diameter at node 0, µm: that of the root sample, NaN where a soma is."""
    traced = cable.traced
    return np.nan if len(traced.soma.members) else 2.0 * float(traced.radius[traced.root])


def steady_columns(cell: Solved) -> Columns:
    """Return the synapses as given, and the steady state of each alone, mV; NaN at sites without one."""
    sites, node = cell.placed.sites, cell.placed.sited.node
    columns: Columns = {
        name: getattr(sites, name) for name in ("g_peak_nS", "driving_force_mV", "rise_ms", "decay_ms")
    }
    rows = np.flatnonzero(with_synapse(sites))
    at = node[rows]
    R_in, to_soma = (Z[at, 0].real for Z in (cell.electrotonus.Z_in, cell.electrotonus.Z_transfer))
    state = alone(R_in, to_soma, sites.g_peak_nS[rows], sites.driving_force_mV[rows])
    for name, values in (("steady_site_mV", state.local_mV), ("steady_soma_mV", state.soma_mV)):
        columns[name] = spread(values, rows, len(node))
    return columns


def brief_columns(cell: Solved, assumptions: Assumptions) -> Columns:
    """Return what each synapse does as a brief conductance, alone; NaN where rise or decay is not given.

    Each value has beside it what halving the steps of its Volterra equation changes.
    """
    sites, sited = cell.placed.sites, cell.placed.sited
    rows = np.flatnonzero(with_course(sites))
    synapse = (sites.g_peak_nS, sites.driving_force_mV, sites.rise_ms, sites.decay_ms)
    given = brief(sited.cable, assumptions, sited.node[rows], *(values[rows] for values in synapse))
    columns: Columns = {}
    for where in ("site", "soma"):
        seen, error = getattr(given, f"at_{where}"), getattr(given, f"at_{where}_error")
        columns |= {
            f"peak_{where}_mV": seen.peak_mV,
            f"peak_{where}_error_mV": error.peak_mV,
            f"time_to_peak_{where}_ms": seen.time_to_peak_ms,
            f"half_width_{where}_ms": seen.half_width_ms,
            f"half_width_{where}_error_ms": error.half_width_ms,
        }
    return {name: spread(values, rows, len(sites)) for name, values in columns.items()}


def spread(values: Real, rows: Index, count: int) -> Real:
    """Return values of some rows in a column of all, NaN elsewhere."""
    column = np.full(count, np.nan)
    column[rows] = values
    return column


def _farthest_beyond(branches: Branches, X: Real) -> Real:
    """Return X of the farthest tip at or beyond each branch, and last, for the soma, of the whole cell."""
    X_tip = X[branches.end].tolist()
    for branch in range(len(X_tip) - 1, -1, -1):
        above = int(branches.parent[branch])
        if above >= 0:
            X_tip[above] = max(X_tip[above], X_tip[branch])
    return np.append(X_tip, max(X_tip, default=0.0))
