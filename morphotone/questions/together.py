"""What groups of synapses of a cell do when all are active at once, and which inhibitory one vetoes which."""

from collections.abc import Iterator

import numpy as np
from numpy.typing import NDArray

from morphotone.cable.assumptions import Assumptions
from morphotone.cable.circuit import steady, veto
from morphotone.cable.pairs import Coupling, coupling
from morphotone.questions.columns import Columns
from morphotone.questions.synapses import Placed, with_synapse

Index = NDArray[np.int64]
Mask = NDArray[np.bool_]

ALL = "all"  # stands for every synapse of the cell at once


def with_soma(placed: Placed, assumptions: Assumptions) -> Coupling:
    """Return how the sites of a cell are coupled at rest; the last row and column is the soma."""
    return coupling(placed.sited.cable, assumptions, np.append(placed.sited.node, 0))


def together_table(placed: Placed, between: Coupling) -> Columns:
    """Return the columns of ``together.csv`` that one cell gives; README explains them.

    One row per synapse for each group it is active with: its own, if it has one, and all of the cell.
    """
    parts = [_active(placed, between, name, rows) for name, rows in _groups(placed)]
    return {name: np.concatenate([np.asarray(part[name]) for part in parts]) for name in parts[0]}


def veto_table(placed: Placed, between: Coupling) -> Columns:
    """Return the columns of ``veto.csv``: one row per inhibitory and excitatory synapse of the cell.

    Inhibitory are those with a driving force of 0 or less (Koch, Poggio & Torre 1983).
    """
    sites, rows = placed.sites, np.flatnonzero(with_synapse(placed.sites))
    R, to_soma = between.Z[np.ix_(rows, rows)], between.Z[rows, -1]
    given = veto(R, to_soma, sites.g_peak_nS[rows], sites.driving_force_mV[rows])
    inhibitory, excitatory = rows[given.inhibitory], rows[given.excitatory]
    shape = (len(inhibitory), len(excitatory))
    labels = sites.site[inhibitory][:, None], sites.site[excitatory][None, :]
    return {
        "site_inhibitory": np.broadcast_to(labels[0], shape).ravel(),
        "site_excitatory": np.broadcast_to(labels[1], shape).ravel(),
        "on_path": between.on_path[np.ix_(inhibitory, excitatory)].ravel(),
        "vetoed": given.vetoed.ravel(),
        "shunted": given.shunted.ravel(),
    }


def _groups(placed: Placed) -> Iterator[tuple[str, Index]]:
    """Yield name and rows of each group of synapses, then of all."""
    there = with_synapse(placed.sites)
    for name in sorted(set(placed.sites.group[there]) - {""}):
        yield name, np.flatnonzero(there & (placed.sites.group == name))
    yield ALL, np.flatnonzero(there)


def _active(placed: Placed, between: Coupling, name: str, rows: Index) -> Columns:
    """Return one row per synapse of a group whose conductances are all in the circuit."""
    sites = placed.sites
    R, to_soma = between.Z[np.ix_(rows, rows)], between.Z[rows, -1]
    at_once = steady(R, to_soma, sites.g_peak_nS[rows], sites.driving_force_mV[rows])
    count = len(rows)
    return {
        "active": np.full(count, name, object),
        "site": sites.site[rows],
        "synapses": np.full(count, count),
        "soma_mV": np.full(count, at_once.soma_mV),
        "soma_sum_mV": np.full(count, at_once.soma_sum_mV),
        "soma_ratio": np.full(count, at_once.soma_ratio),
        "local_mV": at_once.local_mV,
        "local_sum_mV": at_once.local_sum_mV,
        "local_ratio": at_once.local_ratio,
        "current_pA": at_once.current_pA,
        "current_lost": at_once.current_lost,
        "contribution_mV": at_once.contribution_mV,
        "soma_lost_mV": at_once.soma_lost_mV,
    }
