"""What a voltage clamp at the soma, or at a site, sees of each site, and what escapes it, as columns."""

import numpy as np

from morphotone.cable.assumptions import Assumptions
from morphotone.cable.clamp import clamp, clamped_steady, clamped_synapses
from morphotone.questions.columns import Columns, hz_suffix
from morphotone.questions.synapses import Placed, spread, with_course, with_synapse


def clamp_table(
    placed: Placed, assumptions: Assumptions, series_MOhm: float, at: str | None, synapses: bool, brief: bool
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
    at : str or None
        Label of the site at which the electrode is; in cells without it, and with None, it is at the soma.
    synapses, brief : bool
        Whether there are columns for steady and for brief conductances.
    """
    hz = [0.0, *assumptions.hz]
    labels = placed.sites.site.tolist()
    electrode = int(placed.sited.node[labels.index(at)]) if at in labels else 0
    view = clamp(placed.sited.cable, assumptions, placed.sited.node, hz, series_MOhm, electrode)
    columns: Columns = {
        "line": placed.sites.line,
        "site": placed.sites.site,
        "electrode": [at if at in labels else "soma"] * len(labels),
        "series_MOhm": np.full(len(placed.sites), series_MOhm),
    }
    for case, frequency in enumerate(hz):
        columns[f"seen_fraction{hz_suffix(frequency)}"] = np.abs(view.fraction[:, case])
        columns[f"escape_MOhm{hz_suffix(frequency)}"] = np.abs(view.escape_MOhm[:, case])
    if synapses:
        columns |= _steady(placed, assumptions, series_MOhm, electrode)
    if brief:
        columns |= _brief(placed, assumptions, series_MOhm, electrode)
    return columns


def _steady(placed: Placed, assumptions: Assumptions, series_MOhm: float, electrode: int) -> Columns:
    """Return what is seen of each conductance open for good, alone."""
    sites, sited = placed.sites, placed.sited
    rows = np.flatnonzero(with_synapse(sites))
    view = clamp(sited.cable, assumptions, sited.node[rows], [0.0], series_MOhm, electrode)
    state = clamped_steady(view, sites.g_peak_nS[rows], sites.driving_force_mV[rows])
    columns = {
        "steady_current_pA": state.current_pA,
        "steady_seen_pA": state.seen_pA,
        "steady_seen_fraction": state.fraction,
        "steady_escape_mV": state.escape_mV,
    }
    return {name: spread(values, rows, len(sites)) for name, values in columns.items()}


def _brief(placed: Placed, assumptions: Assumptions, series_MOhm: float, electrode: int) -> Columns:
    """Return what is seen of each conductance with its own course, alone."""
    sites, sited = placed.sites, placed.sited
    rows = np.flatnonzero(with_course(sites))
    synapses = (
        sites.g_peak_nS[rows], sites.driving_force_mV[rows], sites.rise_ms[rows], sites.decay_ms[rows]
    )  # fmt: skip
    seen = clamped_synapses(sited.cable, assumptions, sited.node[rows], synapses, series_MOhm, electrode)
    columns = {
        "peak_seen_pA": seen.peak_seen_pA,
        "peak_seen_error_pA": seen.peak_seen_error_pA,
        "peak_seen_fraction": seen.peak_fraction,
        "time_to_peak_seen_ms": seen.time_to_peak_ms,
        "peak_escape_mV": seen.escape_mV,
        "peak_escape_error_mV": seen.escape_error_mV,
    }
    return {name: spread(values, rows, len(sites)) for name, values in columns.items()}
