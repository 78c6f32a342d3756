"""What a voltage clamp at the soma sees of each site, and what escapes it, as columns."""

import numpy as np

from morphotone.cable.assumptions import Assumptions
from morphotone.cable.clamp import clamp, clamped_brief, clamped_steady
from morphotone.cable.synaptic import SynapticCurrent
from morphotone.questions.columns import Columns, hz_suffix
from morphotone.questions.synapses import Placed, spread, with_course, with_synapse


def clamp_table(
    placed: Placed, assumptions: Assumptions, series_MOhm: float, synapses: bool, brief: bool
) -> Columns:
    """Return the columns of ``clamp.csv`` that one cell gives, one row per site; README explains them.

    Parameters
    ----------
    placed : Placed
        The sites.
    assumptions : Assumptions
        Passive constants and frequencies.
    series_MOhm : float
        Series resistance, MΩ.
    synapses, brief : bool
        Whether there are columns for steady conductances, and for brief currents.
    """
    hz = [0.0, *assumptions.hz]
    view = clamp(placed.sited.cable, assumptions, placed.sited.node, hz, series_MOhm)
    columns: Columns = {
        "line": placed.sites.line,
        "site": placed.sites.site,
        "series_MOhm": np.full(len(placed.sites), series_MOhm),
    }
    for case, frequency in enumerate(hz):
        columns[f"seen_fraction{hz_suffix(frequency)}"] = np.abs(view.fraction[:, case])
        columns[f"escape_MOhm{hz_suffix(frequency)}"] = np.abs(view.escape_MOhm[:, case])
    if synapses:
        columns |= _steady(placed, assumptions, series_MOhm)
    if brief:
        columns |= _brief(placed, assumptions, series_MOhm)
    return columns


def _steady(placed: Placed, assumptions: Assumptions, series_MOhm: float) -> Columns:
    """Return what is seen of each conductance open for good, alone."""
    sites, sited = placed.sites, placed.sited
    rows = np.flatnonzero(with_synapse(sites))
    view = clamp(sited.cable, assumptions, sited.node[rows], [0.0], series_MOhm)
    state = clamped_steady(view, sites.g_peak_nS[rows], sites.driving_force_mV[rows])
    columns = {
        "steady_current_pA": state.current_pA,
        "steady_seen_pA": state.seen_pA,
        "steady_seen_fraction": state.fraction,
        "steady_escape_mV": state.escape_mV,
    }
    return {name: spread(values, rows, len(sites)) for name, values in columns.items()}


def _brief(placed: Placed, assumptions: Assumptions, series_MOhm: float) -> Columns:
    """Return what is seen of a brief current with each synapse's rise and decay; alike ones at once."""
    sites, sited = placed.sites, placed.sited
    columns = {
        name: np.full(len(sites), np.nan)
        for name in ("peak_seen_fraction", "time_to_peak_seen_ms", "peak_escape_mV_per_pA")
    }
    timed = np.flatnonzero(with_course(sites))
    courses = np.stack((sites.rise_ms[timed], sites.decay_ms[timed]), axis=1)
    kinds, of = np.unique(courses, axis=0, return_inverse=True)
    for kind, (rise_ms, decay_ms) in enumerate(kinds.tolist()):
        rows = timed[of == kind]
        current = SynapticCurrent(rise_ms, decay_ms)
        seen = clamped_brief(sited.cable, assumptions, sited.node[rows], current, series_MOhm)
        columns["peak_seen_fraction"][rows] = seen.peak_fraction
        columns["time_to_peak_seen_ms"][rows] = seen.time_to_peak_ms
        columns["peak_escape_mV_per_pA"][rows] = seen.escape_mV_per_pA
    return columns
